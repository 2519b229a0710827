"""A random draw under the power-law density."""

from __future__ import annotations

import numpy as np

from .density import inclusion_probabilities, power_law
from .grid import Grid
from .pivotal import pivotal_draw


def draw_power_law(grid: Grid, acceleration: float, power: float, rng: np.random.Generator) -> np.ndarray:
    """Draw positions of a grid with inclusion probabilities proportional to ``(1 - r)^power``.

    Parameters
    ----------
    grid : Grid
    acceleration : float
    power : float
    rng : numpy.random.Generator

    Returns
    -------
    bool array of the grid's shape, with ``grid.samples(acceleration)`` True

    Examples
    --------
    >>> int(draw_power_law(Grid((100,)), 4, 2.0, np.random.default_rng(0)).sum())
    25
    """
    samples = grid.samples(acceleration)
    probabilities = inclusion_probabilities(power_law(grid, power), samples, grid.calibration_region())
    return pivotal_draw(probabilities, rng)
