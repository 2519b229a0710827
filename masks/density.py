"""Sampling densities, and the inclusion probabilities that they mean for a number of samples."""

from __future__ import annotations

import numpy as np

from .. import InputError
from .grid import Grid


def power_law(grid: Grid, power: float) -> np.ndarray:
    """Return the density ``(1 - r)^power`` of the distance ``r`` from the centre of k-space.

    So that no position is beyond reach, ``r`` reaches 1 half a position outside the grid.

    Parameters
    ----------
    grid : Grid
    power : float
        0 is uniform; larger powers put more samples near the centre.

    Returns
    -------
    float64 array of the grid's shape, positive

    Notes
    -----
    Source: Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> power_law(Grid((6,)), power=1).round(3)
    array([0.143, 0.429, 0.714, 1.   , 0.714, 0.429])
    """
    if not power >= 0:
        raise InputError(f"power is {power:g}, expected a number of at least 0")
    reach = 1 + 1 / max(grid.shape)
    return (1 - grid.radius() / reach) ** power


def inclusion_probabilities(law: np.ndarray, samples: int, certain: np.ndarray) -> np.ndarray:
    """Scale a density to inclusion probabilities: at most 1, with the number of samples as their sum.

    Positions whose probability would exceed 1 are taken for certain and the rest is scaled again.

    Parameters
    ----------
    law : float array
        Density, not negative, on any scale.
    samples : int
        Number of samples of a draw.
    certain : bool array of the same shape
        Positions that every draw takes: the calibration region.

    Returns
    -------
    float64 array of the same shape

    Raises
    ------
    InputError
        The law is negative or not finite, or too few positions have a density above zero.

    Notes
    -----
    Source: Tille, Sampling Algorithms, Springer 2006, section 2.10.

    Examples
    --------
    >>> inclusion_probabilities(np.array([4.0, 2.0, 1.0, 1.0]), 2, np.zeros(4, bool))
    array([1.  , 0.5 , 0.25, 0.25])
    """
    law = np.asarray(law, np.float64)
    if not np.isfinite(law).all() or law.min() < 0:
        raise InputError("a sampling density must be finite and not negative")
    taken = np.array(certain, bool)
    possible = int(np.count_nonzero(taken | (law > 0)))
    if not taken.sum() <= samples <= possible:
        raise InputError(
            f"{samples} samples asked for, but the calibration region takes {int(taken.sum())} and the density is "
            f"above zero at {possible} positions"
        )
    while True:
        rest = np.where(taken, 0.0, law)
        left = samples - int(taken.sum())
        if left == 0:
            return taken.astype(np.float64)
        scaled = rest * (left / rest.sum())
        above = scaled >= 1
        if not above.any():
            return np.where(taken, 1.0, scaled)
        taken |= above
