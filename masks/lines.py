"""Patterns of phase-encode lines."""

from __future__ import annotations

from typing import ClassVar

import numpy as np
from pydantic import BaseModel, ConfigDict, Field

from .grid import Grid


class VariableDensityLines(BaseModel):
    """Random phase-encode lines, denser towards the centre of k-space.

    The inclusion probability of a line at the distance ``r`` from the centre is proportional to
    ``(1 - r)^power``; lines of the calibration region are certain.

    Source: Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> mask = VariableDensityLines().draw(Grid((64,), 8), 4, np.random.default_rng(0))
    >>> int(mask.sum()), bool(mask[28:36].all())
    (16, True)
    """

    model_config = ConfigDict(frozen=True, extra="forbid")
    name: ClassVar[str] = "variable-density-lines"
    axes: ClassVar[int] = 1
    random: ClassVar[bool] = True

    power: float = Field(3.0, ge=0, description="exponent of the density (1 - r)^power; 0 is uniform")

    def draw(self, grid: Grid, acceleration: float, rng: np.random.Generator) -> np.ndarray:
        """Return a mask, bool of the grid's shape, with ``grid.samples(acceleration)`` samples."""
        from .variable_density import draw_power_law

        return draw_power_law(grid, acceleration, self.power, rng)


class RegularLines(BaseModel):
    """Evenly spaced phase-encode lines, and all lines of the calibration region.

    Without a calibration region and with an acceleration that divides the number of lines, every R-th line is
    taken, the centre of k-space among them. Otherwise the lines outside the calibration region are spread
    evenly, as far as the grid allows, so that the acceleration is met to the nearest line.

    Source: regular undersampling, the sampling theorem (Shannon, Proc. IRE 37 (1949) 10).

    Examples
    --------
    >>> mask = RegularLines().draw(Grid((12,)), 3, np.random.default_rng(0))
    >>> mask.nonzero()[0]
    array([0, 3, 6, 9])
    """

    model_config = ConfigDict(frozen=True, extra="forbid")
    name: ClassVar[str] = "regular-lines"
    axes: ClassVar[int] = 1
    random: ClassVar[bool] = False

    def draw(self, grid: Grid, acceleration: float, rng: np.random.Generator) -> np.ndarray:
        """Return a mask, bool of the grid's shape, with ``grid.samples(acceleration)`` samples."""
        (n,) = grid.shape
        samples = grid.samples(acceleration)
        mask = grid.calibration_region()
        outside = np.flatnonzero(~mask)
        left = samples - int(mask.sum())
        if left == 0:
            return mask
        # the k-th of `left` lines, counted along those outside, such that line n // 2 belongs to the comb
        centre = np.searchsorted(outside, n // 2)
        steps = np.floor((np.arange(left) * len(outside)) / left + 0.5).astype(int)
        mask[outside[(steps + centre) % len(outside)]] = True
        return mask
