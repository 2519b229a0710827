"""First come, first served: of points that come one after another, which can be taken together."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from .grid import Grid


def candidates(grid: Grid, stream: NDArray[np.integer]) -> tuple[NDArray[np.integer], NDArray[np.integer]]:
    """Return the points of a stream that can be taken together outside the calibration region, in order.

    A point is passed over when it came before, when the grid does not allow it, and, where conjugates are
    skipped, when its partner -k came before.

    Parameters
    ----------
    grid : Grid
    stream : ndarray of int
        Flat indices into the grid; -1 for none. A point may come several times.

    Returns
    -------
    points : ndarray of int
        Flat indices.
    places : ndarray of int
        Where in the stream each of them is.

    Examples
    --------
    >>> candidates(Grid((8,), calibration=1), np.array([0, 4, 0, -1, 7]))
    (array([0, 7]), array([0, 4]))
    """
    open_points = (grid.allowed() & ~grid.calibration_region()).reshape(-1)
    places = np.flatnonzero((stream >= 0) & open_points[stream])
    points = stream[places]
    # a point and its partner have one name between them: whoever comes first has it
    names = np.minimum(points, rivals(grid)[points])
    first = np.sort(np.unique(names, return_index=True)[1])
    return points[first], places[first]


def rivals(grid: Grid) -> NDArray[np.int64]:
    """Return for each point the one that cannot be taken beside it: -k where conjugates are skipped.

    Returns
    -------
    ndarray of int64
        Flat, of flat indices; a point without a rival names itself.

    Examples
    --------
    >>> rivals(Grid((4,), skip_conjugates=True))
    array([0, 3, 2, 1])
    """
    own = np.arange(grid.size)
    if not grid.skip_conjugates:
        return own
    partner = grid.partner().reshape(-1)
    return np.where(partner >= 0, partner, own)
