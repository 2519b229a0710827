"""Patterns of phase-encode points, for two phase-encode axes."""

from __future__ import annotations

from typing import ClassVar

import numpy as np
from pydantic import BaseModel, ConfigDict, Field

from .grid import Grid


class VariableDensityPoints(BaseModel):
    """Random points of two phase-encode axes, denser towards the centre of k-space.

    The inclusion probability of a point at the distance ``r`` from the centre is proportional to
    ``(1 - r)^power``; points of the calibration region are certain.

    Source: Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> mask = VariableDensityPoints().draw(Grid((32, 24), 6), 6, np.random.default_rng(0))
    >>> int(mask.sum()), bool(mask[13:19, 9:15].all())
    (128, True)
    """

    model_config = ConfigDict(frozen=True, extra="forbid")
    name: ClassVar[str] = "variable-density-points"
    axes: ClassVar[int] = 2
    random: ClassVar[bool] = True

    power: float = Field(3.0, ge=0, description="exponent of the density (1 - r)^power; 0 is uniform")

    def draw(self, grid: Grid, acceleration: float, rng: np.random.Generator) -> np.ndarray:
        """Return a mask, bool of the grid's shape, with ``grid.samples(acceleration)`` samples."""
        from .variable_density import draw_power_law

        return draw_power_law(grid, acceleration, self.power, rng)
