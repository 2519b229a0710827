"""The local pivotal method: a random sample that is spread evenly, each point with its inclusion probability.

Where neighbours decide between themselves which of them is taken, samples neither cluster nor leave holes.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from .. import InputError
from .pivotal import checked


def local_pivotal_draw(probabilities: NDArray[np.float64], rng: np.random.Generator) -> NDArray[np.bool_]:
    """Draw a sample that is spread over the grid, whose size is the sum of the inclusion probabilities.

    As in the pivotal method two undecided points duel, and each duel decides one of them. Here the first is
    chosen at random and the second is its nearest undecided neighbour, chosen at random among equally near
    ones; distances are in points of the grid. This is the second variant of the method in the paper.

    The search looks at rings around the point. The fewer points are undecided, the wider it looks, so that
    the time grows as N log N with the number of points N.

    Parameters
    ----------
    probabilities : ndarray of float64
        Inclusion probabilities between 0 and 1, on one or two axes, whose sum is a whole number.
    rng : numpy.random.Generator
        The only source of randomness; the same state gives the same sample.

    Returns
    -------
    ndarray of bool
        Which points are taken, of the shape of the probabilities.

    Raises
    ------
    InputError
        When a probability is not between 0 and 1, the sum is not a whole number, or there are not one or two
        axes.

    References
    ----------
    Grafstrom, Lundstrom & Schelin, Biometrics 68 (2012) 514.

    Examples
    --------
    A quarter of the plane gets close to a quarter of the samples:

    >>> import numpy as np
    >>> taken = local_pivotal_draw(np.full((32, 32), 0.25), np.random.default_rng(1))
    >>> int(taken.sum()), int(taken[:16, :16].sum())
    (256, 62)
    """
    probabilities = checked(probabilities)
    if probabilities.ndim not in (1, 2):
        raise InputError(f"inclusion probabilities: expected one or two axes, got {probabilities.ndim}")
    taken = probabilities == 1
    undecided = np.flatnonzero((probabilities > 0) & ~taken)
    # Numpy's uniforms, drawn beforehand: the sample does not depend on numba's generator.
    uniforms = rng.random((undecided.size, 3))
    rows = probabilities if probabilities.ndim == 2 else probabilities[np.newaxis]
    _duels(rows.copy(), undecided, uniforms, taken.reshape(rows.shape))
    return taken


@njit(nogil=True, cache=True)
def _duels(p, undecided, uniforms, taken):
    """Decide the points one duel at a time; `taken` starts with the certain points."""
    n = p.shape[1]
    left = undecided.size
    place = np.full(
        p.size, -1, np.int64
    )  # where an undecided point stands in the list; -1 when it is decided
    for k in range(left):
        place[undecided[k]] = k
    step = 0
    while left > 1:
        a = undecided[int(uniforms[step, 0] * left)]
        b = _nearest(place, p.shape[0], n, a, uniforms[step, 1])
        pa, pb = p[a // n, a % n], p[b // n, b % n]
        total, u = pa + pb, uniforms[step, 2]
        if total < 1:
            # one is left; the other goes on with both probabilities
            winner, loser = (b, a) if u * total < pb else (a, b)
            p[winner // n, winner % n] = total
            decided = loser
        else:
            # one is taken; the other goes on with what is above 1
            winner, loser = (a, b) if u * (2 - total) < 1 - pb else (b, a)
            taken[winner // n, winner % n] = True
            p[loser // n, loser % n] = total - 1
            decided = winner
        left -= 1
        last = undecided[left]
        undecided[place[decided]] = last
        place[last] = place[decided]
        place[decided] = -1
        step += 1
    if left == 1:
        # The sum is a whole number, so that the last one is decided too, but for rounding.
        a = undecided[0]
        taken[a // n, a % n] = p[a // n, a % n] > 0.5


@njit(nogil=True, cache=True)
def _nearest(place, m, n, a, uniform):
    """Return the undecided point nearest to `a`, one of the equally near ones at random."""
    y, x = a // n, a % n
    nearest, ties, found = -1, 0, -1
    for sweep in range(2):  # find the distance and count the points that have it, then pick one of these
        chosen = int(uniform * ties)
        seen = 0
        ring = 1
        while ring <= max(m, n) and (nearest < 0 or ring * ring <= nearest):
            for i in range(max(y - ring, 0), min(y + ring, m - 1) + 1):
                whole_row = i == y - ring or i == y + ring
                step = 1 if whole_row else 2 * ring
                for j in range(x - ring, min(x + ring, n - 1) + 1, step):
                    if j < 0 or place[i * n + j] < 0:
                        continue
                    distance = (i - y) ** 2 + (j - x) ** 2
                    if sweep == 0:
                        if nearest < 0 or distance < nearest:
                            nearest, ties = distance, 0
                        ties += distance == nearest
                    elif distance == nearest:
                        if seen == chosen:
                            return i * n + j
                        seen += 1
                        found = i * n + j
            ring += 1
    return found
