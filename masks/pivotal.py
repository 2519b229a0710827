"""Random draws of fixed size with given inclusion probabilities."""

from __future__ import annotations

import numpy as np
from numba import njit


def pivotal_draw(probabilities: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Draw a sample of fixed size in which each position has its inclusion probability, exactly.

    Positions meet in pairs, in random order. The two share their probability: one of them ends with all or
    with none of it, at odds that leave both expectations as they were, and the other goes on to meet the
    next. (Drawing one after the other without replacement, in proportion to a density, does not have that
    density as its inclusion probabilities.)

    Parameters
    ----------
    probabilities : float array of any shape
        Between 0 and 1, with a whole number as their sum.
    rng : numpy.random.Generator

    Returns
    -------
    bool array of the same shape
        With as many True as the probabilities sum to.

    Notes
    -----
    Source: Deville & Tille, Biometrika 85 (1998) 89, the pivotal method.

    Examples
    --------
    >>> p = np.array([1.0, 0.5, 0.5, 0.0])
    >>> [int(pivotal_draw(p, np.random.default_rng(seed)).sum()) for seed in range(3)]
    [2, 2, 2]
    """
    p = np.asarray(probabilities, np.float64)
    order = rng.permutation(p.size)
    chosen = np.zeros(p.size, np.bool_)
    _duels(p.reshape(-1), order, rng.random(p.size), chosen)
    # what rounding leaves of the last duel
    missing = round(float(p.sum())) - int(chosen.sum())
    assert missing == 0, "the probabilities do not sum to a whole number"
    return chosen.reshape(p.shape)


@njit(nogil=True, cache=True)
def _duels(p, order, chance, chosen):
    certain = 1 - 1e-9
    champion = -1
    held = 0.0
    for i in order:
        if p[i] >= certain:
            chosen[i] = True
        elif p[i] > 0:
            if champion < 0:
                champion, held = i, p[i]
                continue
            total = held + p[i]
            if total < certain:
                # the loser has nothing, the winner all
                if chance[i] * total >= held:
                    champion = i
                held = total
            else:
                # the winner is chosen, the loser keeps the rest
                left = max(total - 1, 0.0)
                if chance[i] * (2 - total) < 1 - p[i]:
                    chosen[champion] = True
                    champion = i
                else:
                    chosen[i] = True
                held = left
                if held <= 1e-9:
                    champion = -1
    if champion >= 0 and held > 0.5:
        chosen[champion] = True
