"""The pivotal method: a random sample of fixed size, each point with the inclusion probability asked for.

Drawing points one after another without replacement, each time in proportion to the density of those that are
left, does not have this property: it takes too few where the density is high and too many where it is low.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from .. import InputError


def pivotal_draw(probabilities: NDArray[np.float64], rng: np.random.Generator) -> NDArray[np.bool_]:
    """Draw a sample whose size is the sum of the inclusion probabilities.

    Two undecided points duel: one gives the other all its probability, or as much as makes that one certain.
    So each duel decides a point, taken or left, and does not change any expectation. The one that is still
    undecided meets the next point. The points come in random order, so that neighbours are not kept apart.

    The time grows in proportion to the number of points.

    Parameters
    ----------
    probabilities : ndarray of float64
        Inclusion probabilities between 0 and 1, of any shape, whose sum is a whole number.
    rng : numpy.random.Generator
        The only source of randomness; the same state gives the same sample.

    Returns
    -------
    ndarray of bool
        Which points are taken, of the shape of the probabilities.

    Raises
    ------
    InputError
        When a probability is not between 0 and 1, or the sum is not a whole number.

    References
    ----------
    Deville & Tille, Biometrika 85 (1998) 89; Tille, Sampling Algorithms, Springer 2006, section 6.2.3.

    Examples
    --------
    >>> import numpy as np
    >>> taken = pivotal_draw(np.array([1.0, 0.25, 0.5, 0.25, 0.0]), np.random.default_rng(5))
    >>> int(taken.sum()), bool(taken[0]), bool(taken[4])
    (2, True, False)
    """
    probabilities = checked(probabilities)
    taken = probabilities == 1
    undecided = np.flatnonzero((probabilities > 0) & ~taken)
    order = rng.permutation(undecided)
    # Numpy's uniforms, drawn beforehand: the sample does not depend on numba's generator.
    uniforms = rng.random(order.size)
    _duels(probabilities.reshape(-1)[order], order, uniforms, taken.reshape(-1))
    return taken


def checked(probabilities: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return inclusion probabilities in C order, once a sample of fixed size can have them.

    Parameters
    ----------
    probabilities : ndarray
        Of any shape.

    Returns
    -------
    ndarray of float64

    Raises
    ------
    InputError
        When a probability is not between 0 and 1, or the sum is not a whole number.

    Examples
    --------
    >>> checked(np.array([0.5, 0.5]))
    array([0.5, 0.5])
    """
    probabilities = np.ascontiguousarray(probabilities, dtype=np.float64)
    if not ((probabilities >= 0).all() and (probabilities <= 1).all()):
        raise InputError("inclusion probabilities: expected numbers between 0 and 1")
    total = float(probabilities.sum())
    if abs(total - round(total)) > 1e-6:
        raise InputError(f"inclusion probabilities: expected a sum that is a whole number, got {total:.9g}")
    return probabilities


@njit(nogil=True, cache=True)
def _duels(probabilities, order, uniforms, taken):
    """Decide the points one duel at a time; `taken` is flat and starts with the certain points."""
    if order.size == 0:
        return
    a = order[0]
    p = probabilities[0]
    for i in range(1, order.size):
        b = order[i]
        q = probabilities[i]
        if p + q < 1:
            # one is left; the other goes on with both probabilities
            if uniforms[i] * (p + q) < q:
                a = b
            p = p + q
        else:
            # one is taken; the other goes on with what is above 1
            if uniforms[i] * (2 - p - q) < 1 - q:
                taken[a] = True
                a = b
            else:
                taken[b] = True
            p = p + q - 1
    # The sum is a whole number, so that the last one is decided too, but for rounding.
    taken[a] = p > 0.5
