"""The phase-encode grid: the points of k-space that a fully sampled scan takes one by one.

With it go the constraints: which of these points a sequence may take, and which of them together.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, floor, isfinite, prod
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from .. import InputError


@dataclass(frozen=True)
class Grid:
    """Phase-encode grid, with what the sequence permits and demands.

    Index i of an axis of N points is the spatial frequency (i - N // 2) / FOV: the centre has index N // 2.
    Every constraint is a field, and they combine freely.

    Parameters
    ----------
    shape : tuple of int
        Points along the phase-encode axes: one axis for lines, two for points of a plane of k-space.
    calibration : int or tuple of int
        Sides of the calibration region in points, the part around the centre that is always taken; a single
        number is the side along every axis. 0 for none.
    calibration_shape : {"rectangle", "ellipse"}
        The whole block of these sides, or the ellipse inscribed in it. The same for lines.
    shutter : bool
        Take nothing outside the ellipse through the ends of the axes. It leaves lines as they are.
    partial_fourier : float
        Fraction f of the first axis that is taken, 0.5 < f <= 1: the indices from N - ceil(f N) on.
    largest_gap : int, optional
        Most positions from a taken line to the next; lines only. The places just before and just behind the
        range that is allowed count as taken: at most `largest_gap` - 1 neighbours are left out, also at the
        ends.
    skip_conjugates : bool
        Never take both k and -k, but where both are in the calibration region.
    train_length : int, optional
        Length of the echo trains: the number of samples is a multiple of it.

    Raises
    ------
    InputError
        When a field has no meaning, or two of them cannot be met together whatever the acceleration.

    Examples
    --------
    >>> grid = Grid((256, 128), calibration=24)
    >>> grid.axes, grid.size, grid.samples(4)
    (2, 32768, 8192)
    >>> Grid((16,), calibration=24)
    Traceback (most recent call last):
        ...
    skipline.InputError: calibration 24 is larger than the grid of 16 lines; at most 16 fits
    >>> Grid((256,), calibration=24, partial_fourier=0.52)  # doctest: +NORMALIZE_WHITESPACE
    Traceback (most recent call last):
        ...
    skipline.InputError: calibration 24 and partial_fourier 0.52 collide: part of the calibration region would
    not be taken; at most calibration 13 fits
    """

    shape: tuple[int, ...]
    calibration: int | tuple[int, ...] = 0
    calibration_shape: Literal["rectangle", "ellipse"] = "rectangle"
    shutter: bool = False
    partial_fourier: float = 1.0
    largest_gap: int | None = None
    skip_conjugates: bool = False
    train_length: int | None = None

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
        if self.calibration_shape not in ("rectangle", "ellipse"):
            raise InputError(f"calibration_shape {self.calibration_shape!r}: expected rectangle or ellipse")
        if not 0.5 < self.partial_fourier <= 1:
            raise InputError(
                f"partial_fourier {self.partial_fourier:g}: expected a fraction above 0.5, at most 1"
            )
        for name in "largest_gap", "train_length":
            value = getattr(self, name)
            if value is not None and not (_whole((value,)) and value >= 1):
                raise InputError(f"{name} {value}: expected a whole number of at least 1")
        if self.largest_gap is not None and self.axes != 1:
            raise InputError(f"largest_gap {self.largest_gap}: expected a grid of lines, got {shape}")
        self._refuse_collisions()

    def _refuse_collisions(self) -> None:
        """Refuse two constraints that cannot be met together, whatever the acceleration."""
        for name, reachable in (
            (f"partial_fourier {self.partial_fourier:g}", self._reached),
            ("shutter", self._inside_shutter),
        ):
            reached = reachable()
            if reached is not None and (self.calibration_region() & ~reached).any():
                raise InputError(
                    f"calibration {self.calibration} and {name} collide: part of the calibration region "
                    f"would not be taken; at most calibration {self._largest_calibration(reached)} fits"
                )
        if self.largest_gap == 1 and self.skip_conjugates and self._pairs():
            raise InputError(
                "largest_gap 1 and skip_conjugates collide: one takes every line, the other skips some; "
                "expected a largest_gap of at least 2"
            )
        if self.train_length is not None:
            least, most = self._least(), self._most()
            if most // self.train_length * self.train_length < least:
                others = [*self._leaving(), *(self._demanding() if most >= self.train_length else [])]
                others = others or [f"the grid of {self.size} {self.unit}"]
                raise InputError(
                    f"train_length {self.train_length} and {' and '.join(others)} collide: from {least} to "
                    f"{most} {self.unit} can be taken, and no multiple of it is among these; the nearest "
                    f"train_length is {_nearest_divisor(least, most, self.train_length)}"
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
        >>> Grid((6, 6), calibration=4, calibration_shape="ellipse").calibration_region()[1].nonzero()[0]
        array([2, 3])
        """
        return self._region(self.calibration_sides)

    def _region(self, sides: tuple[int, ...]) -> NDArray[np.bool_]:
        region = np.zeros(self.shape, dtype=bool)
        starts = (n // 2 - c // 2 for n, c in zip(self.shape, sides, strict=True))
        block = tuple(slice(s, s + c) for s, c in zip(starts, sides, strict=True))
        if self.calibration_shape == "rectangle" or 0 in sides:
            region[block] = True
        else:
            # from the middle of the block, in half sides
            places = [(2 * np.arange(c) - (c - 1)) / c for c in sides]
            region[block] = sum(x**2 for x in np.ix_(*places)) <= 1
        return region

    def allowed(self) -> NDArray[np.bool_]:
        """Return which points may be taken: those in the shutter that partial Fourier keeps.

        When conjugates are skipped, the partner of a point of the calibration region is not allowed either,
        unless it is in that region too.

        Returns
        -------
        ndarray of bool
            Of the shape of the grid; true in all of the calibration region.

        Examples
        --------
        >>> Grid((8,), partial_fourier=0.75).allowed().nonzero()[0]
        array([2, 3, 4, 5, 6, 7])
        """
        allowed = np.ones(self.shape, dtype=bool)
        for reached in (self._reached(), self._inside_shutter()):
            if reached is not None:
                allowed &= reached
        if self.skip_conjugates and any(self.calibration_sides):
            region, partner = self.calibration_region(), self.partner()
            allowed &= region | ~(region.reshape(-1)[partner] & (partner >= 0))
        return allowed

    def partner(self) -> NDArray[np.intp]:
        """Return where the conjugate partner -k of each point k is: index 2 (N // 2) - i along each axis.

        Returns
        -------
        ndarray of int
            Of the shape of the grid: the index of -k in the flattened grid, -1 where -k is outside the grid
            or k itself.

        Examples
        --------
        >>> Grid((6,)).partner()
        array([-1,  5,  4, -1,  2,  1])
        """
        mirrored = [2 * (n // 2) - np.arange(n) for n in self.shape]
        places = np.ix_(*[np.minimum(m, n - 1) for m, n in zip(mirrored, self.shape, strict=True)])
        outside = sum(m >= n for m, n in zip(np.ix_(*mirrored), self.shape, strict=True)) > 0
        flat = np.ravel_multi_index(places, self.shape)
        itself = np.arange(self.size).reshape(self.shape)
        return np.where(outside | (flat == itself), -1, flat)

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
        radius = np.sqrt(self._squared_distance())
        return radius / max(radius.max(), 1.0)

    def samples(self, acceleration: float) -> int:
        """Return how many samples meet an acceleration: the whole number nearest to size / R.

        With echo trains it is the nearest multiple of their length. Of two that are equally near it is the
        larger, if that can be had. R counts all points of the grid, also those that the shutter leaves out.

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
            When R is below 1, leaves no sample, fewer than the calibration region or the largest gap demands,
            or asks for more than the shutter, partial Fourier and conjugate skipping leave; the message says
            which, and the nearest R that can be had.

        Examples
        --------
        >>> Grid((256,), calibration=32).samples(3)
        85
        >>> Grid((256,), calibration=32, train_length=8).samples(3)
        88
        >>> Grid((256,), calibration=32).samples(9)  # doctest: +NORMALIZE_WHITESPACE
        Traceback (most recent call last):
            ...
        skipline.InputError: acceleration 9 needs 28 of 256 lines but the calibration region alone takes 32:
        at most R = 8 can be had
        """
        if not (isfinite(acceleration) and acceleration >= 1):
            raise InputError(f"acceleration {acceleration:g}: expected a number of at least 1, fully sampled")
        least, most, length = self._least(), self._most(), self.train_length or 1
        samples = self._nearest(acceleration, most)
        asked = f"acceleration {acceleration:g} needs {samples} of {self.size} {self.unit}"
        if length > 1:
            asked += f" (train_length {length})"
        if samples < least or acceleration > self.size:
            demands = self._demands()
            why = f"{asked} but {demands}"
            if not demands:
                why = f"acceleration {acceleration:g} leaves no sample of {self.size} {self.unit}"
            raise InputError(f"{why}: at most R = {self.shown(self.counts()[0])} can be had")
        if samples > most:
            leaves = self._leaves() or f"the grid has {most}"
            raise InputError(f"{asked} but {leaves}: at least R = {self.shown(self.counts()[-1])} can be had")
        return samples

    def counts(self) -> range:
        """Return the numbers of samples that can be had.

        Returns
        -------
        range
            From the fewest that the calibration region and the largest gap demand to the most that the
            shutter, partial Fourier and conjugate skipping leave, in steps of the train length.

        Examples
        --------
        >>> Grid((256,), calibration=24, partial_fourier=0.75, train_length=10).counts()
        range(30, 193, 10)
        """
        length = self.train_length or 1
        return range(ceil(self._least() / length) * length, self._most() + 1, length)

    def shown(self, samples: int) -> str:
        """Write the acceleration of a number of samples with so many digits that it gives this number.

        Parameters
        ----------
        samples : int
            One of `counts`.

        Returns
        -------
        str

        Examples
        --------
        >>> Grid((64, 64)).shown(576), Grid((64, 64)).shown(577)
        ('7.11', '7.098')
        """
        exact, most = self.size / samples, self._most()
        for digits in range(2, 12):
            # rounded down, at the least to 1
            shown = floor(10**digits * exact) / 10**digits
            if self._nearest(shown, most) == samples:
                return f"{shown:.14g}"
        return repr(exact)

    def broken(self, mask: NDArray[np.bool_]) -> str | None:
        """Return which constraint a mask breaks, or None when it keeps them all.

        Parameters
        ----------
        mask : ndarray of bool
            True where a sample is taken.

        Returns
        -------
        str or None
            One line that starts with the name of the field of the first broken constraint.

        Examples
        --------
        >>> import numpy as np
        >>> grid = Grid((8,), calibration=2, largest_gap=3)
        >>> grid.broken(np.array([0, 0, 1, 1, 1, 0, 0, 1], dtype=bool)) is None
        True
        >>> grid.broken(np.array([1, 0, 0, 1, 1, 0, 0, 0], dtype=bool))
        'largest_gap 3: 4 positions from line 4 to the end of k-space'
        """
        mask = np.asarray(mask)
        if mask.shape != self.shape or mask.dtype != bool:
            return (
                f"shape {self.shape}: the mask is {mask.dtype} of the shape {mask.shape}, not true and false"
            )
        region = self.calibration_region()
        if missing := int(np.count_nonzero(region & ~mask)):
            return f"calibration {self.calibration}: {missing} {self.unit} of the region are not taken"
        for name, reached in (
            (f"partial_fourier {self.partial_fourier:g}", self._reached()),
            ("shutter", self._inside_shutter()),
        ):
            if reached is not None and (outside := int(np.count_nonzero(mask & ~reached))):
                return f"{name}: {outside} {self.unit} outside it are taken"
        if self.largest_gap is not None:
            first = int(np.flatnonzero(self.allowed())[0])
            taken = np.concatenate([[first - 1], np.flatnonzero(mask), [self.size]])
            gaps = np.diff(taken)
            if gaps.max() > self.largest_gap:
                i = int(gaps.argmax())
                start = f"line {taken[i]}" if i else "the start of k-space"
                end = f"line {taken[i + 1]}" if i < gaps.size - 1 else "the end of k-space"
                return f"largest_gap {self.largest_gap}: {gaps[i]} positions from {start} to {end}"
        if self.skip_conjugates:
            partner = self.partner()
            both = mask & (partner >= 0) & mask.reshape(-1)[partner]
            both &= ~(region & region.reshape(-1)[partner])
            if both.any():
                return (
                    f"skip_conjugates: both of {int(np.count_nonzero(both)) // 2} conjugate pairs are taken"
                )
        samples = int(np.count_nonzero(mask))
        if self.train_length is not None and samples % self.train_length:
            return f"train_length {self.train_length}: {samples} samples are no multiple of it"
        return None

    # What bounds the number of samples, and how a message names it.

    def _least(self) -> int:
        """Return the fewest samples that meet the demands."""
        certain = int(np.count_nonzero(self.calibration_region())) if any(self.calibration_sides) else 0
        if self.largest_gap is None:
            return max(certain, 1)
        first = self.size - self._kept()
        gap = self.largest_gap
        if not certain:
            if not self.skip_conjugates:
                return max(ceil((self.size - first + 1) / gap) - 1, 1)
            certain = 1  # the line k = 0, from which the two halves of k-space are filled
        begin = self.size // 2 - certain // 2
        spans = begin - (first - 1), self.size - (begin + certain - 1)
        between = [ceil(span / gap) - 1 for span in spans]
        # Where both halves have no choice and are alike, their lines are partners: one more line gives way.
        forced = all(n and span % gap == 0 for n, span in zip(between, spans, strict=True))
        return certain + sum(between) + (self.skip_conjugates and forced and certain % 2 == 1)

    def _most(self) -> int:
        """Return the most samples that the sequence permits."""
        if self.partial_fourier == 1 and not self.shutter and not self.skip_conjugates:
            return self.size
        return int(np.count_nonzero(self.allowed())) - (self._pairs() if self.skip_conjugates else 0)

    def _pairs(self) -> int:
        """Return how many pairs k, -k are both allowed, outside the calibration region."""
        free, partner = self.allowed() & ~self.calibration_region(), self.partner()
        return int(np.count_nonzero(free & (partner >= 0) & free.reshape(-1)[partner])) // 2

    def _demanding(self) -> list[str]:
        """Name the constraints that demand samples, the one that decides first."""
        gap = [] if self.largest_gap is None else [f"largest_gap {self.largest_gap}"]
        gap += ["skip_conjugates"] if gap and self.skip_conjugates else []
        region = [f"calibration {self.calibration}"] if any(self.calibration_sides) else []
        return gap + region if self._least() > np.count_nonzero(self.calibration_region()) else region

    def _demands(self) -> str:
        """Return what demands the fewest samples, in words; empty when nothing does."""
        match self._demanding():
            case []:
                return f"train_length {self.train_length} is the fewest" if self.train_length else ""
            case [gap] if gap.startswith("largest_gap"):
                return f"{gap} takes {self._least()}"
            case [gap, *others] if gap.startswith("largest_gap"):
                return f"{gap} takes {self._least()} (with {' and '.join(others)})"
        return f"the calibration region alone takes {self._least()}"

    def _leaving(self) -> list[str]:
        """Name the constraints that leave out points of the grid."""
        names = [f"partial_fourier {self.partial_fourier:g}"] if self.partial_fourier < 1 else []
        names += ["shutter"] if self.shutter and self.axes == 2 else []
        names += ["skip_conjugates"] if self.skip_conjugates else []
        return names

    def _leaves(self) -> str:
        """Return what leaves the most samples, in words; empty when nothing does."""
        names = self._leaving()
        return f"{' and '.join(names)} leave{'s' * (len(names) == 1)} {self._most()}" if names else ""

    def _nearest(self, acceleration: float, most: int) -> int:
        """Return the multiple of the train length that is nearest to size / R, at least one."""
        length, exact = self.train_length or 1, self.size / acceleration
        samples = max(floor(exact / length + 0.5), 1) * length
        if samples > most and samples - exact == length / 2 and samples > length:
            samples -= length
        return samples

    def _squared_distance(self) -> NDArray[np.float64]:
        """Return the squared distance from the centre, each axis in its own highest frequency."""
        frequencies = [(np.arange(n) - n // 2) / max(n // 2, 1) for n in self.shape]
        return np.asarray(sum(k**2 for k in np.ix_(*frequencies)))

    def _inside_shutter(self) -> NDArray[np.bool_] | None:
        """Return what the shutter leaves; None for all."""
        return self._squared_distance() <= 1 + 1e-12 if self.shutter and self.axes == 2 else None

    def _kept(self) -> int:
        """Return how many places of the first axis partial Fourier keeps."""
        return ceil(self.partial_fourier * self.shape[0] - 1e-9)

    def _reached(self) -> NDArray[np.bool_] | None:
        """Return what partial Fourier leaves; None for all."""
        if self.partial_fourier == 1:
            return None
        reached = np.zeros(self.shape, dtype=bool)
        reached[self.shape[0] - self._kept() :] = True
        return reached

    def _largest_calibration(self, reached: NDArray[np.bool_]) -> int | tuple[int, ...]:
        """Return the largest calibration region that is reached, no side larger than asked for."""
        for side in range(max(self.calibration_sides) - 1, 0, -1):
            sides = tuple(min(side, c) for c in self.calibration_sides)
            if not (self._region(sides) & ~reached).any():
                return sides if isinstance(self.calibration, tuple) else side
        return 0


def _whole(numbers: object) -> bool:
    """Whether this is a tuple of whole numbers."""
    return isinstance(numbers, tuple) and all(
        isinstance(n, int | np.integer) and not isinstance(n, bool) for n in numbers
    )


def _nearest_divisor(least: int, most: int, length: int) -> int:
    """Return the train length nearest to the one asked for of which a multiple is from `least` to `most`."""
    candidates = (n for n in range(1, most + 1) if most // n * n >= least)
    return min(candidates, key=lambda n: abs(n - length))
