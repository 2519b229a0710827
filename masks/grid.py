"""The phase-encode grid: the points of k-space that a fully sampled scan takes one by one."""

from __future__ import annotations

from dataclasses import dataclass
from math import floor, isfinite, prod

import numpy as np
from numpy.typing import NDArray

from .. import InputError


@dataclass(frozen=True)
class Grid:
    """Phase-encode grid with a calibration region, the block around the centre that is always sampled.

    Index i of an axis of N points is the spatial frequency (i - N // 2) / FOV: the centre has index N // 2.

    Parameters
    ----------
    shape : tuple of int
        Points along the phase-encode axes: one axis for lines, two for points of a plane of k-space.
    calibration : int or tuple of int
        Sides of the calibration region in points; a single number is the side along every axis. 0 for none.

    Raises
    ------
    InputError
        When there are not one or two axes of at least one point, or the calibration region does not fit.

    Examples
    --------
    >>> grid = Grid((256, 128), calibration=24)
    >>> grid.axes, grid.size, grid.samples(4)
    (2, 32768, 8192)
    >>> Grid((16,), calibration=24)
    Traceback (most recent call last):
        ...
    skipline.InputError: calibration 24 is larger than the grid of 16 lines; at most 16 fits
    """

    shape: tuple[int, ...]
    calibration: int | tuple[int, ...] = 0

    def __post_init__(self) -> None:
        shape, sides = self.shape, self.calibration_sides
        if not _whole(shape) or len(shape) not in (1, 2) or min(shape) < 1:
            raise InputError(f"grid {shape}: expected the numbers of points along one or two axes")
        if not _whole(sides) or len(sides) != len(shape):
            expected = "a whole number" if len(shape) == 1 else "a whole number, or one for each of two axes"
            raise InputError(f"calibration {self.calibration}: expected {expected}")
        if min(sides) < 0 or (0 in sides and any(sides)):
            raise InputError(f"calibration {self.calibration}: expected at least 1 point, or 0 for none")
        if any(side > n for side, n in zip(sides, shape, strict=True)):
            largest = shape if isinstance(self.calibration, tuple) else min(shape)
            raise InputError(
                f"calibration {self.calibration} is larger than the grid of "
                f"{' x '.join(map(str, shape))} {self.unit}; at most {largest} fits"
            )

    @property
    def axes(self) -> int:
        """Number of phase-encode axes, 1 or 2."""
        return len(self.shape)

    @property
    def size(self) -> int:
        """Number of points of the grid."""
        return prod(self.shape)

    @property
    def unit(self) -> str:
        """What the samples are: ``"lines"`` on one axis, ``"points"`` on two."""
        return "lines" if self.axes == 1 else "points"

    @property
    def calibration_sides(self) -> tuple[int, ...]:
        """Sides of the calibration region in points, one for each axis."""
        return self.calibration if isinstance(self.calibration, tuple) else (self.calibration,) * self.axes

    def calibration_region(self) -> NDArray[np.bool_]:
        """Return where the calibration region is: c points from index N // 2 - c // 2 along each axis.

        Returns
        -------
        ndarray of bool
            Of the shape of the grid.

        Examples
        --------
        >>> Grid((8,), calibration=3).calibration_region().nonzero()[0]
        array([3, 4, 5])
        """
        region = np.zeros(self.shape, dtype=bool)
        starts = (n // 2 - c // 2 for n, c in zip(self.shape, self.calibration_sides, strict=True))
        block = (slice(s, s + c) for s, c in zip(starts, self.calibration_sides, strict=True))
        region[tuple(block)] = True
        return region

    def radius(self) -> NDArray[np.float64]:
        """Return the distance from the centre of k-space: 0 there, and 1 at the farthest point of the grid.

        Each axis is measured in its own highest frequency. So on two axes the curves of equal radius are
        ellipses, the ends of the axes have radius 0.707, and a corner has radius 1.

        Returns
        -------
        ndarray of float64
            Of the shape of the grid.

        Examples
        --------
        >>> Grid((8,)).radius()
        array([1.  , 0.75, 0.5 , 0.25, 0.  , 0.25, 0.5 , 0.75])
        """
        frequencies = [(np.arange(n) - n // 2) / max(n // 2, 1) for n in self.shape]
        radius = np.sqrt(sum(k**2 for k in np.ix_(*frequencies)))
        return radius / max(radius.max(), 1.0)

    def samples(self, acceleration: float) -> int:
        """Return how many samples meet an acceleration: the whole number nearest to size / R.

        Of two that are equally near it is the larger.

        Parameters
        ----------
        acceleration : float
            R: points of the grid / samples taken, calibration region included.

        Returns
        -------
        int

        Raises
        ------
        InputError
            When R is below 1, leaves no sample, or fewer than the calibration region has; the message says
            the highest R that can be had.

        Examples
        --------
        >>> Grid((256,), calibration=32).samples(3)
        85
        >>> Grid((256,), calibration=32).samples(9)  # doctest: +NORMALIZE_WHITESPACE
        Traceback (most recent call last):
            ...
        skipline.InputError: acceleration 9 needs 28 of 256 lines but the calibration region alone takes 32:
        at most R = 8 can be had
        """
        if not (isfinite(acceleration) and acceleration >= 1):
            raise InputError(f"acceleration {acceleration:g}: expected a number of at least 1, fully sampled")
        samples = max(floor(self.size / acceleration + 0.5), 1)
        calibration = prod(self.calibration_sides)
        if samples < calibration:
            highest = _two_decimals(self.size / calibration)
            raise InputError(
                f"acceleration {acceleration:g} needs {samples} of {self.size} {self.unit} but the "
                f"calibration region alone takes {calibration}: at most R = {highest} can be had"
            )
        if acceleration > self.size:
            raise InputError(
                f"acceleration {acceleration:g} leaves no sample of {self.size} {self.unit}: "
                f"at most R = {self.size} can be had"
            )
        return samples


def _whole(numbers: object) -> bool:
    """Whether this is a tuple of whole numbers."""
    return isinstance(numbers, tuple) and all(isinstance(n, int | np.integer) for n in numbers)


def _two_decimals(highest: float) -> str:
    """Write an acceleration rounded down, so that what a message offers is accepted."""
    return f"{floor(100 * highest) / 100:.10g}"
