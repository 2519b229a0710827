"""How far apart two points of a phase-encode plane are, when its two axes have different steps."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .grid import Grid


def steps(grid: Grid, aspect: float | None = None) -> tuple[float, float]:
    """Return the length of one step along each of the two axes.

    Parameters
    ----------
    grid : Grid
        Of two axes.
    aspect : float, optional
        A step along the second axis / a step along the first, in cycles/mm both: the field of view along the
        first axis / that along the second. Without it the voxels are taken as square: both axes reach the
        same highest frequency.

    Returns
    -------
    tuple of float
        In units of the highest frequency without an aspect, else in steps of the first axis.

    Raises
    ------
    InputError
        When the grid is not of two axes, or the aspect is not positive and finite.

    Examples
    --------
    >>> steps(Grid((320, 256)))
    (0.00625, 0.0078125)
    >>> steps(Grid((320, 256)), aspect=2)
    (1.0, 2.0)
    """
    if grid.axes != 2:
        raise InputError(f"metric of a phase-encode plane: expected a grid of two axes, got {grid.shape}")
    if aspect is None:
        first, second = grid.shape
        return 1 / max(first // 2, 1), 1 / max(second // 2, 1)
    if not (np.isfinite(aspect) and aspect > 0):
        raise InputError(f"aspect {aspect:g}: expected a positive number")
    return 1.0, float(aspect)


def distance_from_centre(grid: Grid, aspect: float | None = None) -> NDArray[np.float64]:
    """Return the distance of each point from the centre of k-space, in the units of `steps`.

    Parameters
    ----------
    grid : Grid
        Of two axes.
    aspect : float, optional
        As for `steps`.

    Returns
    -------
    ndarray of float64
        Of the shape of the grid.

    Raises
    ------
    InputError
        As `steps` does.

    Examples
    --------
    >>> distance_from_centre(Grid((3, 4)), aspect=0.5)[1]
    array([1. , 0.5, 0. , 0.5])
    """
    offsets = (
        (np.arange(n) - n // 2) * step for n, step in zip(grid.shape, steps(grid, aspect), strict=True)
    )
    first, second = np.ix_(*offsets)
    return np.sqrt(first**2 + second**2)
