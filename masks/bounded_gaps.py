"""Random lines with no gap larger than permitted: an exact draw, by dynamic programming.

From one step to the next, all that matters is how far back the last taken line is. So the weight of all ways
to go on from there can be summed from the end, and a draw follows these sums from the beginning.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from .. import InputError
from .grid import Grid

LARGEST_TABLE = 2**24
UNLIKELY = 1e-12  # the probability of a line that is to be taken only when the gap demands it


def bounded_gap_draw(
    grid: Grid, probabilities: NDArray[np.float64], rng: np.random.Generator
) -> NDArray[np.bool_]:
    """Draw lines of a given number, with all the constraints of the grid, the largest gap among them.

    Among the masks that keep the constraints, each has a probability in proportion to the product of p / (1 -
    p) over its lines: it is the draw where each line is taken independently with its probability p, given
    that the number of lines and the constraints turn out to be met. (For conjugate partners p and q it is p /
    (1 - p - q).) Inclusion probabilities are near the ones given where the gap leaves freedom, and higher
    where it does not.

    Multiplying all odds by one factor does not change the draw given the number of lines. The factor is
    chosen so that the number is the right one on average; draws are repeated until it is right exactly, of
    the order of ten times.

    Where conjugates are skipped, steps go outwards from the centre of k-space, which is then always taken,
    and each decides about a pair. The time grows as the number of lines times the gap, with pairs times its
    square.

    Parameters
    ----------
    grid : Grid
        Of lines, with a largest gap.
    probabilities : ndarray of float64
        As `inclusion_probabilities` gives them for the grid.
    rng : numpy.random.Generator
        The only source of randomness; the same state gives the same sample.

    Returns
    -------
    ndarray of bool
        Which lines are taken.

    Raises
    ------
    InputError
        When the grid has no largest gap, no mask keeps it, or the gap is so large, with pairs, that the table
        would not fit in memory.

    References
    ----------
    Conditional Poisson sampling: Hajek, Ann. Math. Stat. 35 (1964) 1491; Tille, Sampling Algorithms (2006),
    ch. 5.

    Examples
    --------
    >>> import numpy as np
    >>> grid = Grid((16,), largest_gap=3)
    >>> taken = bounded_gap_draw(grid, np.full(16, 6 / 16), np.random.default_rng(1))
    >>> int(taken.sum()), grid.broken(taken) is None
    (6, True)
    """
    if grid.largest_gap is None:
        raise InputError("bounded gaps: expected a grid with a largest_gap")
    samples = round(float(probabilities.sum()))
    certain, allowed = grid.calibration_region(), grid.allowed()
    p = np.where(certain, 1.0, np.where(allowed, np.clip(probabilities, UNLIKELY, 1 - UNLIKELY), 0.0))
    first = int(np.flatnonzero(allowed)[0])
    start = np.zeros(
        grid.size + 1, dtype=bool
    )  # the last one stands for the line -1, which is not of the grid
    if grid.skip_conjugates:
        start[grid.size // 2] = True
        lines, chances = _outwards(grid, p, first)
    else:
        # one side only, from the first line to the last; the other is "taken" at every step
        lines = np.stack([np.arange(first, grid.size), np.full(grid.size - first, -1)])
        chances = np.stack([0 * p, 0 * p, 1 - p, p], axis=1)[first:]
    steps = lines.shape[1]
    gap = min(grid.largest_gap, steps + 1)
    states = gap, gap if grid.skip_conjugates else 1
    if (steps + 1) * states[0] * states[1] > LARGEST_TABLE:
        raise InputError(
            f"largest_gap {grid.largest_gap} and skip_conjugates on {grid.size} lines: the draw needs too "
            f"much memory; expected a largest_gap of at most {int((LARGEST_TABLE / (steps + 1)) ** 0.5)}"
        )
    counts = (lines.T >= 0).astype(np.intp) @ np.array([[0, 1, 0, 1], [0, 0, 1, 1]])
    weights, table = _tilted(chances, counts, states, samples - int(start.sum()))
    while True:
        choices = _walk(weights, table, rng.random(steps))
        taken = start.copy()
        taken[lines[0, (choices & 1) > 0]] = True
        taken[lines[1, (choices & 2) > 0]] = True
        if np.count_nonzero(taken[:-1]) == samples:
            return taken[:-1]


def _outwards(grid: Grid, p: NDArray[np.float64], first: int) -> tuple[NDArray[np.intp], NDArray[np.float64]]:
    """Return for each step from the centre the two lines, and the probability of none, left, right and both.

    A side that has come to its end is "taken" at every further step, with the line -1.
    """
    centre, last = grid.size // 2, grid.size - 1
    steps = np.arange(1, max(centre - first, last - centre) + 1)
    left, right = centre - steps, centre + steps
    left[left < first] = -1
    right[right > last] = -1
    a, b = np.where(left >= 0, p[left], 1.0), np.where(right >= 0, p[right], 1.0)
    independent = np.stack([(1 - a) * (1 - b), a * (1 - b), (1 - a) * b, a * b], axis=1)
    exclusive = np.stack([np.maximum(1 - a - b, UNLIKELY), a, b, 0 * a], axis=1)
    undecided = (a > 0) & (a < 1) & (b > 0) & (b < 1)
    return np.stack([left, right]), np.where(undecided[:, None], exclusive, independent)


def _tilted(
    chances: NDArray[np.float64], counts: NDArray[np.intp], states: tuple[int, int], samples: int
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the weights with which the number of lines is right on average, and the table of their sums."""
    table = np.empty((chances.shape[0] + 1, *states))
    low, high = -60.0, 60.0  # logarithm of the factor of the odds
    while True:
        factor = (low + high) / 2
        tilt = factor * counts
        weights = chances * np.exp(tilt - tilt.max(axis=1, keepdims=True))
        expected = _backwards(weights, counts, table)
        if not np.isfinite(expected):
            raise InputError("largest_gap: no mask keeps it together with the other constraints")
        if abs(expected - samples) < 0.1 or high - low < 1e-3:
            return weights, table
        low, high = (factor, high) if expected < samples else (low, factor)


@njit(nogil=True, cache=True)
def _backwards(weights, counts, table):
    """Sum the weights of all ways to go on, from behind the last step to the first; return the mean number.

    In the state (a, b) the last lines on the two sides were taken a + 1 and b + 1 steps before. Each step of
    the table is scaled by its largest number.
    """
    m, n = table.shape[1], table.shape[2]
    number, new_number = np.zeros((m, n)), np.zeros((m, n))
    table[-1] = 1.0
    for d in range(table.shape[0] - 2, -1, -1):
        largest = 0.0
        for a in range(m):
            for b in range(n):
                total, mean = 0.0, 0.0
                for choice in range(4):
                    i, j = 0 if choice & 1 else a + 1, 0 if choice & 2 else b + 1
                    if i < m and j < n:
                        part = weights[d, choice] * table[d + 1, i, j]
                        total += part
                        mean += part * (counts[d, choice] + number[i, j])
                table[d, a, b] = total
                new_number[a, b] = mean / total if total > 0 else 0.0
                largest = max(largest, total)
        if largest == 0:
            return np.nan
        table[d] /= largest
        number, new_number = new_number, number
    return number[0, 0] if table[0, 0, 0] > 0 else np.nan


@njit(nogil=True, cache=True)
def _walk(weights, table, uniforms):
    """Decide step by step: 0 for none, 1 for left, 2 for right, 3 for both."""
    m, n = table.shape[1], table.shape[2]
    choices = np.zeros(uniforms.size, np.int64)
    parts = np.zeros(4)
    a, b = 0, 0
    for d in range(uniforms.size):
        for choice in range(4):
            i, j = 0 if choice & 1 else a + 1, 0 if choice & 2 else b + 1
            parts[choice] = weights[d, choice] * table[d + 1, i, j] if i < m and j < n else 0.0
        rest = uniforms[d] * parts.sum()
        for choice in range(4):
            if parts[choice] > 0:
                choices[d] = choice
                rest -= parts[choice]
                if rest < 0:
                    break
        a, b = 0 if choices[d] & 1 else a + 1, 0 if choices[d] & 2 else b + 1
    return choices
