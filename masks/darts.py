"""Dart throwing: as many points of a grid as fit, none in the disc of another."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray


def throw(
    order: NDArray[np.integer],
    radii: NDArray[np.float64],
    steps: tuple[float, float],
    closed: NDArray[np.bool_],
    rivals: NDArray[np.integer],
) -> NDArray[np.bool_]:
    """Throw one dart at each point, in the order given, and keep it unless a disc forbids it.

    A dart stays when it is in no disc of an earlier one and no earlier one is in its own disc. So the
    distance of two darts is at least the larger of their radii, and no further dart fits.

    The time grows in proportion to the number of points.

    Parameters
    ----------
    order : ndarray of int
        Flat indices into the grid.
    radii : ndarray of float64
        Of the shape of the grid: the radius of the disc of each point, in the units of the steps.
    steps : tuple of float
        Length of a step along each axis.
    closed : ndarray of bool
        Of the shape of the grid: points that take no dart.
    rivals : ndarray of int
        Flat: for each point the one that a dart closes besides, or itself.

    Returns
    -------
    ndarray of bool
        Of the shape of the grid.

    Examples
    --------
    >>> radii, closed = np.full((1, 8), 2.5), np.zeros((1, 8), dtype=bool)
    >>> throw(np.array([3, 4, 1, 0, 7, 6, 5, 2]), radii, (1.0, 1.0), closed, np.arange(8)).nonzero()[1]
    array([0, 3, 7])
    """
    closed, taken = closed.copy(), np.zeros(radii.shape, dtype=bool)
    _throw(order, radii, steps[0], steps[1], closed, rivals, taken)
    return taken


@njit(nogil=True, cache=True)
def _throw(order, radii, step0, step1, closed, rivals, taken):
    rows, columns = radii.shape
    for dart in order:
        i, j = dart // columns, dart % columns
        if closed[i, j]:
            continue
        square = radii[i, j] ** 2
        # two looks at the disc: is an earlier dart inside; if not, no later one may come
        free = True
        for looking in (True, False):
            height = int(radii[i, j] / step0)
            for a in range(max(i - height, 0), min(i + height + 1, rows)):
                rest = square - ((a - i) * step0) ** 2
                width = int(np.sqrt(max(rest, 0.0)) / step1) + 1
                for b in range(max(j - width, 0), min(j + width + 1, columns)):
                    if ((b - j) * step1) ** 2 < rest:
                        if not looking:
                            closed[a, b] = True
                        elif taken[a, b]:
                            free = False
                            break
                if not free:
                    break
            if not free:
                break
        if free:
            taken[i, j] = True
            closed[i, j] = True
            rival = rivals[dart]
            closed[rival // columns, rival % columns] = True
