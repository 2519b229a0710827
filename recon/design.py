"""One mask, designed or brought along, judged before any scan: what `skipline mask` does."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from .. import InputError

if TYPE_CHECKING:
    from ..masks.grid import Grid
    from ..masks.judge import Judgement
    from .files import Volume
    from .study.settings import Sampling


@dataclass(frozen=True, eq=False)
class Design:
    """A mask on its phase-encode grid.

    Attributes
    ----------
    mask : bool array of the grid's shape
    grid : Grid
        With the constraints that the mask keeps.
    density : float array of the grid's shape, or None
        Inclusion probabilities, of a pattern that has them.
    draw : int
        Number of the draw that was taken, of those compared.
    score : float or None
        Of that draw, by the criterion; None when there was nothing to compare.
    """

    mask: np.ndarray
    grid: Grid
    density: np.ndarray | None = None
    draw: int = 0
    score: float | None = None

    def judgement(self) -> Judgement:
        """Return what can be said of the mask before the scan."""
        from ..masks.judge import judge

        return judge(self.mask, density=self.density, allowed=self.grid.allowed())


@dataclass(frozen=True, eq=False)
class MaskTask:
    """What a mask is wanted for.

    Attributes
    ----------
    pattern : Pattern
    sampling : Sampling
        Acceleration and constraints, with the phase-encode axes filled in.
    shape : tuple of 3 int
        Of the image.
    volume : Volume or None
        The file that the mask shall fit.
    """

    pattern: Any
    sampling: Sampling
    shape: tuple[int, int, int]
    volume: Volume | None

    @classmethod
    def of(
        cls,
        name: str,
        like: Path | None,
        matrix: tuple[int, int, int] | None,
        acceleration: float,
        phase_encode: str | None,
        constraints: Iterable[str],
        options: Iterable[str],
    ) -> MaskTask:
        """Validate what the command line was given.

        Raises
        ------
        InputError
            Names, options, constraints or files that cannot be used.
        """
        from .files import read_volume
        from .options import validated, with_options
        from .study.encoding import phase_encode_axes
        from .study.settings import Sampling

        pattern = with_options("patterns", name, options)
        if (like is None) == (matrix is None):
            raise InputError("expected either --like FILE or --matrix NX,NY,NZ")
        volume = None if like is None else read_volume(like)
        x, y, z = volume.data.shape[-3:] if volume is not None else matrix or (1, 1, 1)
        sampling = validated(
            Sampling, constraints, "--constraint", {"pattern": name, "acceleration": acceleration}
        )
        axes = phase_encode_axes(phase_encode, pattern.axes, (x, y, z))
        return cls(pattern, sampling.model_copy(update={"phase_encode": axes}), (x, y, z), volume)

    def write(self, path: Path, found: Design, sidecar: dict[str, Any]) -> None:
        """Write a mask as a NIfTI volume that fits."""
        from .files import phase_encoding, write_volume
        from .study.encoding import on_kspace

        axes = self.sampling.phase_encode or ""
        full = np.ascontiguousarray(np.broadcast_to(on_kspace(found.mask, axes), self.shape))
        described = {
            "Description": f"{self.pattern.name}, R = {sidecar['Acceleration']:g}, seed {sidecar['Seed']}",
            "Options": self.pattern.model_dump(),
        }
        affine = np.eye(4) if self.volume is None else self.volume.affine
        whole = sidecar | phase_encoding(axes) | described
        write_volume(path, full, affine, content="mask", sidecar=whole, like=self.volume)


def design(
    pattern: Any,
    sampling: Sampling,
    shape: tuple[int, int, int],
    seed: int,
    draws: int = 1,
    criterion: Any = "sidelobe",
    threads: int = 1,
) -> Design:
    """Draw a mask, or the best of several draws.

    Parameters
    ----------
    pattern : Pattern
    sampling : Sampling
        Acceleration and constraints, with the phase-encode axes filled in.
    shape : tuple of 3 int
        Of the image.
    seed, draws, criterion, threads
        As in `masks.best_of.best_of`; of one draw the mask is that of draw 0 of a study with the same seed.

    Raises
    ------
    InputError
        The pattern cannot be drawn so.

    Examples
    --------
    >>> from skipline.masks import VariableDensityLines
    >>> from skipline.recon.study.settings import Sampling
    >>> sampling = Sampling(pattern="variable-density-lines", phase_encode="y", acceleration=4, calibration=8)
    >>> found = design(VariableDensityLines(), sampling, (64, 64, 1), seed=7, draws=20)
    >>> int(found.mask.sum()), found.score < 1
    (16, True)
    """
    from ..masks.best_of import best_of
    from .study.encoding import phase_encode_grid
    from .study.seeds import generator

    grid = phase_encode_grid(sampling, shape)
    density = pattern.density(grid, sampling.acceleration) if hasattr(pattern, "density") else None
    if draws == 1:
        return Design(pattern.draw(grid, sampling.acceleration, generator(seed, "mask", 0)), grid, density)
    best = best_of(
        pattern, grid, sampling.acceleration, draws=draws, seed=seed, criterion=criterion, threads=threads
    )
    return Design(best.mask, grid, density, best.index, best.score)


def read_design(path: Path) -> Design:
    """Read a mask that was made elsewhere: NIfTI, or a sampling table (.tsv).

    Raises
    ------
    InputError
        It cannot be read, is empty, or does not leave at least one of the three axes fully sampled.
    """
    from ..masks.grid import Grid
    from ..masks.table import read_mask
    from .acquired import without_full_axes
    from .files import read_volume

    if path.suffix == ".tsv":
        mask = read_mask(path)
    else:
        data = read_volume(path, allow_zero=True).data
        if data.ndim != 3:
            raise InputError(f"{path} has {data.ndim} dimensions; expected a mask (x, y, z)")
        if not data.any():
            raise InputError(f"{path} is empty: no sample is taken")
        reduced = without_full_axes(data != 0)
        axes = [axis for axis in range(3) if reduced.shape[axis] > 1]
        if len(axes) == 3:
            raise InputError(f"{path} undersamples three axes; expected a readout that is fully sampled")
        mask = reduced.reshape([reduced.shape[axis] for axis in axes] or [1])
    return Design(mask, Grid(mask.shape))


def summary(found: Judgement) -> list[str]:
    """Return a judgement in words, a line each.

    Examples
    --------
    >>> from skipline.masks.judge import judge
    >>> print(summary(judge(np.arange(16) % 4 == 0))[0])
    4 of 16 samples, acceleration 4
    """
    lobes = found.sidelobes
    unit = "lines" if len(found.shape) == 1 else "grid steps"
    total = int(np.prod(found.shape))
    compensated = (
        [] if lobes.compensated_rms is None else [f", {lobes.compensated_rms:.3f} density-compensated"]
    )
    return [
        f"{found.samples} of {total} samples, acceleration {found.acceleration:.4g}",
        f"highest sidelobe outside the main lobe: {lobes.outside_main_lobe:.3f}",
        f"rms sidelobe: {lobes.rms:.3f}, of uniform draws {lobes.rms_uniform:.3f}" + "".join(compensated),
        f"largest gap: {found.largest_gap:.3g} {unit}",
        f"energy taken ({found.spectrum} spectrum): {found.energy:.1%}; "
        f"at the centre {found.centre_energy:.1%}",
        f"conjugate pairs taken twice: {found.conjugate_pairs}",
    ]
