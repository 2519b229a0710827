"""From a density law to a mask of fixed size on a grid with all its constraints."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from .density import inclusion_probabilities
from .grid import Grid


def grid_probabilities(grid: Grid, law: NDArray[np.float64], samples: int) -> NDArray[np.float64]:
    """Return the inclusion probabilities that a law has on a grid.

    Parameters
    ----------
    grid : Grid
    law : ndarray
        Relative density, at least 0, of the shape of the grid.
    samples : int
        Sum of the probabilities, calibration region included; as `Grid.samples` gives it.

    Returns
    -------
    ndarray of float64
        1 in the calibration region, 0 where nothing may be taken; of a conjugate pair that is not taken
        together, the sum is at most 1.

    Raises
    ------
    InputError
        When the law is none, or the number of samples cannot be had.

    Examples
    --------
    >>> grid_probabilities(Grid((8,), 2, partial_fourier=0.75), np.ones(8), 4)
    array([0. , 0. , 0.5, 1. , 1. , 0.5, 0.5, 0.5])
    """
    return inclusion_probabilities(
        law,
        samples,
        grid.calibration_region(),
        grid.allowed(),
        grid.partner() if grid.skip_conjugates else None,
    )


def fixed_size_draw(
    grid: Grid, probabilities: NDArray[np.float64], rng: np.random.Generator, *, spread: bool = False
) -> NDArray[np.bool_]:
    """Draw a mask of fixed size that keeps the constraints of a grid.

    Each point is taken with its inclusion probability, exactly, but where a largest gap is asked for: then
    the draw is that of `bounded_gap_draw`.

    Conjugate partners that exclude each other are one unit: first it is drawn which of the two it would be,
    in proportion to their probabilities, then whether it is taken, with the sum of them.

    Parameters
    ----------
    grid : Grid
    probabilities : ndarray of float64
        As `grid_probabilities` gives them.
    rng : numpy.random.Generator
        The only source of randomness; the same state gives the same mask.
    spread : bool
        Spread the samples evenly, by the local pivotal method. With a largest gap it changes nothing.

    Returns
    -------
    ndarray of bool

    Raises
    ------
    InputError
        When the probabilities are not between 0 and 1, or their sum is not a whole number.

    Examples
    --------
    >>> grid = Grid((16, 16), 4, shutter=True, skip_conjugates=True)
    >>> density = grid_probabilities(grid, np.ones(grid.shape), 64)
    >>> mask = fixed_size_draw(grid, density, np.random.default_rng(1), spread=True)
    >>> int(mask.sum()), grid.broken(mask) is None
    (64, True)
    """
    if grid.largest_gap is not None:
        from .bounded_gaps import bounded_gap_draw

        return bounded_gap_draw(grid, probabilities, rng)
    if grid.skip_conjugates:
        probabilities = _one_side(grid, probabilities, rng)
    if spread:
        from .local_pivotal import local_pivotal_draw

        return local_pivotal_draw(probabilities, rng)
    from .pivotal import pivotal_draw

    return pivotal_draw(probabilities, rng)


def _one_side(
    grid: Grid, probabilities: NDArray[np.float64], rng: np.random.Generator
) -> NDArray[np.float64]:
    """Give one of two partners, at random, the probability of both."""
    region, partner = grid.calibration_region().reshape(-1), grid.partner().reshape(-1)
    p = probabilities.reshape(-1).copy()
    first = np.flatnonzero(~region & (partner > np.arange(grid.size)))
    first = first[~region[partner[first]]]
    second = partner[first]
    together = np.minimum(p[first] + p[second], 1.0)
    takes_first = rng.random(first.size) * together < p[first]
    p[first], p[second] = np.where(takes_first, together, 0.0), np.where(takes_first, 0.0, together)
    return p.reshape(probabilities.shape)
