"""Sampling density: how likely each point of the grid is to be taken.

A law says how dense the samples shall be relative to each other. It becomes a probability for each point,
its inclusion probability, once the number of samples is known.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .grid import Grid


def power_law(grid: Grid, power: float) -> NDArray[np.float64]:
    """Return the law (1 - r)^p, with r the distance from the centre of k-space as `Grid.radius` measures it.

    Parameters
    ----------
    grid : Grid
    power : float
        p, at least 0; with 0 the law is uniform.

    Returns
    -------
    ndarray of float64
        Of the shape of the grid, 1 at the centre.

    Raises
    ------
    InputError
        When the power is negative or not finite.

    References
    ----------
    Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> power_law(Grid((8,)), 2)
    array([0.    , 0.0625, 0.25  , 0.5625, 1.    , 0.5625, 0.25  , 0.0625])
    """
    if not (np.isfinite(power) and power >= 0):
        raise InputError(f"power {power:g}: expected a number of at least 0")
    return (1.0 - grid.radius()) ** power


def inclusion_probabilities(
    law: NDArray[np.float64], samples: int, certain: NDArray[np.bool_] | None = None
) -> NDArray[np.float64]:
    """Return the probability of each point to be taken: in proportion to a law, with a given sum.

    Where a probability would be above 1 the point is certain, and the others share the samples that are
    left, again in proportion to the law, until none is above 1. Points where the law is zero are taken only
    when all others are certain, and then all alike, as if the law there were the same small number.

    Parameters
    ----------
    law : ndarray
        Relative density, at least 0, of any shape.
    samples : int
        Sum of the probabilities.
    certain : ndarray of bool, optional
        Points that are always taken, such as the calibration region. Of the shape of the law.

    Returns
    -------
    ndarray of float64
        Of the shape of the law, between 0 and 1.

    Raises
    ------
    InputError
        When the law is negative, not finite or zero everywhere, or the number of samples is below that of the
        certain points or above that of all points.

    References
    ----------
    Sampling with probabilities proportional to size: Tille, Sampling Algorithms, Springer 2006, section 2.10.

    Examples
    --------
    >>> import numpy as np
    >>> inclusion_probabilities(np.array([8.0, 1.0, 2.0, 1.0]), 2)
    array([1.  , 0.25, 0.5 , 0.25])
    """
    law = np.asarray(law, dtype=np.float64)
    certain = np.zeros(law.shape, dtype=bool) if certain is None else certain
    if certain.shape != law.shape:
        raise InputError(f"certain points: expected the shape of the law, {law.shape}, got {certain.shape}")
    if not (np.isfinite(law).all() and (law >= 0).all()):
        raise InputError("density law: expected finite numbers of at least 0")
    if not law.any():
        raise InputError("density law: it is zero everywhere; expected a point where it is not")
    fixed = int(np.count_nonzero(certain))
    if not fixed <= samples <= law.size:
        raise InputError(
            f"samples {samples}: expected {fixed}, the number of certain points, to {law.size}, that of all"
        )

    probabilities = np.ones(law.shape)
    probabilities[~certain] = _proportional(law[~certain], samples - fixed)
    return probabilities


def _proportional(law: NDArray[np.float64], samples: int) -> NDArray[np.float64]:
    """Share the samples in proportion to the law, none above 1."""
    if samples == law.size:
        return np.ones(law.size)
    decreasing = np.argsort(-law, kind="stable")
    sizes = law[decreasing]
    if sizes[0] > 0:
        sizes = sizes / sizes[0]  # no overflow, however the law is scaled
    rest = np.cumsum(sizes[::-1])[::-1]  # from each point to the end
    # When the first m are certain, the largest of the rest gets (samples - m) sizes[m] / rest[m]: m is the
    # smallest number for which that is not above 1.
    left = samples - np.arange(law.size)
    m = int(np.argmax(left * sizes <= rest))
    shares = np.ones(law.size)
    shares[m:] = left[m] * (sizes[m:] / rest[m] if rest[m] > 0 else 1.0 / (law.size - m))
    probabilities = np.empty(law.size)
    probabilities[decreasing] = np.minimum(shares, 1.0)
    return probabilities
