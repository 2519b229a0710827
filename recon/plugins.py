"""The extension points: patterns, phantoms, methods and measures, ours and those of other packages.

A package adds its own through an entry point of the group ``skipline.patterns``, ``skipline.phantoms``,
``skipline.methods`` or ``skipline.measures``; in its pyproject.toml::

    [project.entry-points."skipline.measures"]
    lost_signal = "their_package.lost_signal:LOST_SIGNAL"

A pattern is a class as in `skipline.masks.lines`, a phantom a function without required arguments that
returns a `Phantom`, a method a class as in `skipline.recon.methods.zero_filled`, a measure a `Measure`.

Examples
--------
>>> from skipline.recon import plugins
>>> plugins.methods()
['zero-filled', 'wavelet-sparse']
>>> plugins.load("measures", "psnr").unit
'dB'
"""

from __future__ import annotations

import warnings
from collections import defaultdict
from dataclasses import dataclass
from functools import lru_cache
from importlib import import_module
from importlib.metadata import EntryPoint, entry_points
from typing import Any

from .. import InputError
from .explain import nearest

# modules are relative to the root of the package
_BUILT_IN: dict[str, dict[str, str]] = {
    "patterns": {
        "variable-density-lines": "masks.lines:VariableDensityLines",
        "variable-density-points": "masks.points:VariableDensityPoints",
        "regular-lines": "masks.lines:RegularLines",
        "poisson-disc": "masks.poisson_disc:PoissonDisc",
        "regular-points": "masks.lattice:RegularPoints",
        "golden-spokes": "masks.spokes:GoldenSpokes",
    },
    "phantoms": {
        "shepp-logan": "phantoms.shepp_logan:shepp_logan_phantom",
        "shepp-logan-high-contrast": "phantoms.shepp_logan:shepp_logan_high_contrast_phantom",
        "line-pair-slab": "phantoms.line_pair_slab:line_pair_slab_phantom",
    },
    "methods": {
        "zero-filled": "recon.methods.zero_filled:ZeroFilled",
        "wavelet-sparse": "recon.methods.wavelet_sparse:WaveletSparse",
    },
    "measures": {
        "nrmse": "recon.measures.nrmse:NRMSE",
        "psnr": "recon.measures.psnr:PSNR",
        "ssim": "recon.measures.ssim:SSIM",
        "nrmse_overall": "recon.measures.nrmse:NRMSE_OVERALL",
        "psnr_overall": "recon.measures.psnr:PSNR_OVERALL",
        "ssim_overall": "recon.measures.ssim:SSIM_OVERALL",
    },
}

KINDS = tuple(_BUILT_IN)
"""What can be added."""

# what the rest of skipline uses of each kind; a phantom needs no more than to be callable
_NEEDED = {
    "patterns": ("name", "axes", "draw", "model_fields"),
    "phantoms": ("__call__",),
    "methods": ("name", "reconstruct", "model_fields"),
    "measures": ("name", "better", "unit", "description", "compute"),
}


@dataclass(frozen=True)
class _Found:
    """What other packages add to a kind: objects by name, and why some names cannot be used."""

    objects: dict[str, Any]
    refused: dict[str, str]


def patterns() -> list[str]:
    """Return the names of the sampling patterns; ours first, then those of other packages.

    Plug-ins that cannot be used are left out, with a warning; `problems` says why.

    Examples
    --------
    >>> patterns()[:3]
    ['variable-density-lines', 'variable-density-points', 'regular-lines']
    """
    return names("patterns")


def phantoms() -> list[str]:
    """Return the names of the phantoms, as `patterns` does.

    Examples
    --------
    >>> phantoms()
    ['shepp-logan', 'shepp-logan-high-contrast', 'line-pair-slab']
    """
    return names("phantoms")


def methods() -> list[str]:
    """Return the names of the reconstruction methods, as `patterns` does.

    Examples
    --------
    >>> methods()
    ['zero-filled', 'wavelet-sparse']
    """
    return names("methods")


def measures() -> list[str]:
    """Return the names of the measures, as `patterns` does.

    Examples
    --------
    >>> measures()
    ['nrmse', 'psnr', 'ssim', 'nrmse_overall', 'psnr_overall', 'ssim_overall']
    """
    return names("measures")


def load(kind: str, name: str) -> Any:
    """Return a pattern, phantom, method or measure.

    Parameters
    ----------
    kind : str
        ``"patterns"``, ``"phantoms"``, ``"methods"`` or ``"measures"``.
    name : str

    Returns
    -------
    class, function or Measure
        What the name stands for.

    Raises
    ------
    InputError
        There is no such name (the nearest one is given), two packages claim it, or the plug-in cannot be
        loaded.

    Examples
    --------
    >>> load("methods", "zero-filled").__name__
    'ZeroFilled'
    >>> load("methods", "wavelet-spars")  # doctest: +IGNORE_EXCEPTION_DETAIL
    Traceback (most recent call last):
    ...
    InputError: there is no method "wavelet-spars"; did you mean "wavelet-sparse"?
    """
    found = _found(kind)
    if name in found.refused:
        raise InputError(found.refused[name])
    if name in found.objects:
        return found.objects[name]
    if name in _BUILT_IN[kind]:
        module, _, attribute = _BUILT_IN[kind][name].partition(":")
        return getattr(import_module(f"..{module}", __package__), attribute)
    raise InputError(f'there is no {kind[:-1]} "{name}"{nearest(name, names(kind))}')


def problems() -> list[str]:
    """Return a line for each plug-in of another package that cannot be used, with the reason.

    Examples
    --------
    >>> problems()
    []
    """
    return [reason for kind in KINDS for reason in _found(kind).refused.values()]


def names(kind: str) -> list[str]:
    """Return the names of a kind, as `patterns` does.

    Raises
    ------
    InputError
        There is no such kind; the nearest one is given.

    Examples
    --------
    >>> names("method")
    Traceback (most recent call last):
    ...
    skipline.InputError: there is no kind "method"; did you mean "methods"?
    """
    found = _found(kind)
    return [name for name in (*_BUILT_IN[kind], *sorted(found.objects)) if name not in found.refused]


@lru_cache
def _found(kind: str) -> _Found:
    """Load what other packages add; once, so that the reasons are reported once."""
    if kind not in KINDS:
        raise InputError(f'there is no kind "{kind}"{nearest(kind, KINDS)}')
    claims: dict[str, list[EntryPoint]] = defaultdict(list)
    for point in entry_points(group=f"skipline.{kind}"):
        claims[point.name].append(point)

    found = _Found({}, {})
    for name, points in claims.items():
        owners = sorted({_owner(point) for point in points})
        if name in _BUILT_IN[kind] or len(points) > 1:
            owners = ["skipline", *owners] if name in _BUILT_IN[kind] else owners
            reason = f'{kind[:-1]} "{name}" is claimed by {" and ".join(owners)}; uninstall or rename one'
        else:
            try:
                found.objects[name] = _checked(kind, points[0])
                continue
            except Exception as error:  # whatever another package does wrong, the rest must go on
                cause = " ".join(str(error).split())
                reason = (
                    f'{kind[:-1]} "{name}" of {owners[0]} cannot be used: {type(error).__name__}: {cause}'
                )
        found.refused[name] = reason
        warnings.warn(reason, stacklevel=2)
    return found


def _checked(kind: str, point: EntryPoint) -> Any:
    """Load a plug-in and see that it has what its kind needs."""
    loaded = point.load()
    missing = [needed for needed in _NEEDED[kind] if not hasattr(loaded, needed)]
    if missing:
        raise InputError(f"it has no {', '.join(missing)}")
    if getattr(loaded, "name", point.name) != point.name:
        raise InputError(f'it calls itself "{loaded.name}"')
    return loaded


def _owner(point: EntryPoint) -> str:
    return point.dist.name if point.dist else point.value
