"""Evaluate a case: undersample the reference, reconstruct it, compare."""

from __future__ import annotations

import platform
import time
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import PackageNotFoundError, version
from typing import Any

import numpy as np

from ... import CAUTION, __version__
from .. import plugins
from .cases import Case
from .encoding import on_kspace, phase_encode_grid
from .machine import machine
from .references import Prepared, prepare
from .seeds import generator


@dataclass(frozen=True)
class Evaluated:
    """The result of a case.

    Attributes
    ----------
    image : complex array (x, y, z)
    error : float32 array (x, y, z)
        Magnitude of the image minus magnitude of the reference.
    mask : bool array (x, y, z)
        The sampled points of k-space.
    record : dict
        Settings, measures, convergence, seconds, versions, machine: what `case.json` says.
    """

    image: np.ndarray
    error: np.ndarray
    mask: np.ndarray
    record: dict[str, Any]


def evaluate(case: Case, threads: int = 1) -> Evaluated:
    """Evaluate a case.

    Parameters
    ----------
    case : Case
    threads : int
        Threads that the reconstruction may use; the result does not depend on it.

    Examples
    --------
    >>> from pathlib import Path
    >>> import skipline
    >>> from skipline.recon.study import load_study
    >>> study = load_study(
    ...     Path(skipline.__file__).parent / "configs" / "first-study.toml",
    ...     ["reference.matrix=[64, 64]", "sampling.calibration=8", "sampling.acceleration=2"],
    ... )
    >>> evaluated = evaluate(study.cases()[0])
    >>> evaluated.image.shape, evaluated.mask.mean().round(2)
    ((64, 64, 1), np.float64(0.5))
    """
    from ...phantoms.acquisition import acquire
    from ..acquired import Acquired

    begin = time.perf_counter()
    prepared = prepared_for(case)
    mask = draw_mask(case, prepared)
    sigma = prepared.sigma(case.acquisition.snr)
    # Without noise full data need no regularisation; of undersampled data a method finds the level itself.
    known_sigma = sigma if sigma > 0 or mask.all() else None
    kspace = acquire(prepared.kspace, mask, sigma, generator(case.seed, "noise", case.noise_draw))
    method: Any = case.method
    result = method.reconstruct(Acquired(kspace, mask, prepared.maps, known_sigma), threads=threads)
    measures = measure(prepared, result.image)
    error = _error_map(prepared.image, result.image)
    record = {
        "id": case.id,
        "seed": case.seed,
        "settings": case.settings,
        "files": dict(case.digests),
        "reference_id": case.reference_id,
        "acceleration_achieved": mask.size / int(mask.sum()),
        "measures": measures,
        "convergence": {
            "converged": bool(result.converged),
            "stopped": result.stopped,
            "iterations": int(result.iterations),
            "objective": result.objective,
            "optimality": result.optimality,
            "sigma": result.sigma,
            "sigma_source": result.sigma_source,
            "weight": result.weight,
        },
        "seconds": round(time.perf_counter() - begin, 3),
        "versions": versions(),
        "machine": machine(),
        "caution": CAUTION,
    }
    return Evaluated(result.image, error, np.broadcast_to(mask, result.image.shape), record)


def prepared_for(case: Case) -> Prepared:
    """Return the reference that a case is compared with."""
    coils = case.acquisition.coils
    assert coils is not None  # the plan fills it in
    return prepare(case.reference, coils, case.acquisition.maps, case.digests)


def draw_mask(case: Case, prepared: Prepared) -> np.ndarray:
    """Draw the mask of a case, broadcastable to (x, y, z); all methods of a draw get the same."""
    x, y, z = prepared.image.shape
    axes = case.sampling.phase_encode
    assert axes is not None  # the plan fills it in
    grid = phase_encode_grid(case.sampling, (x, y, z))
    pattern: Any = case.pattern
    mask = pattern.draw(grid, case.sampling.acceleration, generator(case.seed, "mask", case.draw))
    return on_kspace(mask, axes)


def measure(prepared: Prepared, image: np.ndarray) -> dict[str, float]:
    """Return every measure there is, by name."""
    return {
        name: float(plugins.load("measures", name).compute(prepared.image, image, prepared.support))
        for name in plugins.measures()
    }


@lru_cache(maxsize=1)
def versions() -> dict[str, str]:
    """Return the versions that a result came from."""
    found = {"skipline": __version__, "python": platform.python_version()}
    for package in ("numpy", "scipy", "numba", "PyWavelets", "scikit-image", "nibabel"):
        try:
            found[package] = version(package)
        except PackageNotFoundError:  # vendored by a distribution, without its metadata
            found[package] = "unknown"
    return found


def _error_map(reference: np.ndarray, image: np.ndarray) -> np.ndarray:
    from ..measures import error_map

    return error_map(reference, image)
