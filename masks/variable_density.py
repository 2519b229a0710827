"""Random samples, denser towards the centre of k-space."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pydantic import Field

from .pattern import Pattern

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from .grid import Grid


class VariableDensity(Pattern):
    """Random samples whose inclusion probabilities follow the law (1 - r)^p.

    The number of samples is fixed, and each point is taken with exactly the probability that `density` gives.

    Examples
    --------
    >>> from skipline.masks import VariableDensityLines
    >>> issubclass(VariableDensityLines, VariableDensity)
    True
    """

    power: float = Field(
        default=2.0,
        ge=0,
        le=20,
        description="density (1 - r)^power at the distance r from the centre of k-space; 0 is uniform",
    )

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
        from .density import inclusion_probabilities, power_law

        return inclusion_probabilities(power_law(grid, self.power), samples, grid.calibration_region())

    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        from .pivotal import pivotal_draw

        return pivotal_draw(self._density(grid, samples), rng)
