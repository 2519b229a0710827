"""Random samples, denser towards the centre of k-space."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pydantic import Field, field_validator

from .pattern import Pattern

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from .grid import Grid

LAWS = "power", "gaussian", "uniform"
FILES = ".npy", ".txt", ".csv", ".tsv"


class VariableDensity(Pattern):
    """Random samples whose inclusion probabilities follow a law.

    The number of samples is fixed, and each point is taken with exactly the probability that `density` gives;
    but where a largest gap is asked for, more often where the gap demands it.

    Examples
    --------
    >>> from skipline.masks import VariableDensityLines
    >>> issubclass(VariableDensityLines, VariableDensity)
    True
    """

    law: str = Field(
        default="power",
        description="density at the distance r from the centre of k-space: power, (1 - r)^power; gaussian, "
        "exp(-r^2 / (2 width^2)); uniform; or a file with a number for each point (.npy, .txt, .csv, .tsv)",
    )
    power: float = Field(
        default=2.0,
        ge=0,
        le=20,
        description="power of the power law, (1 - r)^power; 0 is uniform",
    )
    width: float = Field(
        default=0.3,
        gt=0,
        le=100,
        description="standard deviation of the gaussian law; 1 is the distance of the farthest point",
    )
    spread: bool = Field(
        default=False,
        description="let neighbours decide which of them is taken: no clusters, no holes",
    )

    @field_validator("law")
    @classmethod
    def _known(cls, law: str) -> str:
        if law in LAWS or law.endswith(FILES):
            return law
        raise ValueError(f"{law!r}: expected {', '.join(LAWS)}, or a file ({', '.join(FILES)})")

    def density(self, grid: Grid, acceleration: float) -> NDArray[np.float64]:
        """Return the inclusion probabilities.

        Parameters
        ----------
        grid : Grid
        acceleration : float

        Returns
        -------
        ndarray of float64
            Of the shape of the grid: the probability of each point to be taken, 1 in the calibration region.

        Raises
        ------
        InputError
            As `draw` does.

        Examples
        --------
        >>> from skipline.masks import Grid, VariableDensityPoints
        >>> float(VariableDensityPoints().density(Grid((64, 48), 8), 6).sum().round(9))
        512.0
        """
        return self._density(grid, self._samples(grid, acceleration))

    def _density(self, grid: Grid, samples: int) -> NDArray[np.float64]:
        from .fixed_size import grid_probabilities

        return grid_probabilities(grid, self._law(grid), samples)

    def _law(self, grid: Grid) -> NDArray[np.float64]:
        from .density import gaussian_law, power_law, read_law

        if self.law == "power":
            return power_law(grid, self.power)
        if self.law == "gaussian":
            return gaussian_law(grid, self.width)
        if self.law == "uniform":
            return power_law(grid, 0)
        return read_law(self.law, grid)

    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        from .fixed_size import fixed_size_draw

        return fixed_size_draw(grid, self._density(grid, samples), rng, spread=self.spread)
