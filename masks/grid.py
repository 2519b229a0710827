"""The grid of phase-encode positions from which a sampling pattern chooses."""

from __future__ import annotations

from dataclasses import dataclass
from math import floor, prod

import numpy as np

from .. import InputError


@dataclass(frozen=True)
class Grid:
    """One or two phase-encode axes with a fully sampled region at the centre of k-space.

    Parameters
    ----------
    shape : tuple of 1 or 2 int
        Positions along each axis; index ``i`` is the frequency ``(i - N // 2) / FOV``.
    calibration : int or tuple of int
        Width of the calibration region, in positions; one number stands for every axis.

    Raises
    ------
    InputError
        A shape that is no grid, or a calibration region larger than the grid.

    Examples
    --------
    >>> grid = Grid((16,), calibration=4)
    >>> grid.calibration_region().nonzero()[0]
    array([6, 7, 8, 9])
    >>> grid.samples(acceleration=3)
    5
    """

    shape: tuple[int, ...]
    calibration: int | tuple[int, ...] = 0

    def __post_init__(self) -> None:
        if len(self.shape) not in (1, 2) or min(self.shape) < 1:
            raise InputError(f"a phase-encode grid has one or two axes, not the shape {self.shape}")
        if isinstance(self.calibration, int):
            object.__setattr__(self, "calibration", (self.calibration,) * len(self.shape))
        if len(self.widths) != len(self.shape) or min(self.widths) < 0:
            raise InputError(
                f"calibration is {self.calibration}, expected a width of at least 0 for each of {len(self.shape)} axes"
            )
        for width, length in zip(self.widths, self.shape, strict=True):
            if width > length:
                raise InputError(
                    f"the calibration region is {width} wide, but the grid has {length} positions; "
                    f"expected at most {length}"
                )

    @property
    def widths(self) -> tuple[int, ...]:
        """Width of the calibration region along each axis."""
        assert isinstance(self.calibration, tuple)
        return self.calibration

    @property
    def size(self) -> int:
        """Number of positions."""
        return prod(self.shape)

    def calibration_region(self) -> np.ndarray:
        """Return the calibration region, bool of the grid's shape: indices from ``N // 2 - width // 2`` on."""
        region = np.zeros(self.shape, bool)
        if min(self.widths) > 0:
            block = tuple(
                slice(n // 2 - width // 2, n // 2 - width // 2 + width)
                for n, width in zip(self.shape, self.widths, strict=True)
            )
            region[block] = True
        return region

    def radius(self) -> np.ndarray:
        """Return the distance from the centre of k-space, 0 there and 1 at the farthest position.

        Each axis is measured in units of its own highest frequency, so that an anisotropic grid has elliptical
        contours.
        """
        squared = np.zeros(self.shape)
        for axis, n in enumerate(self.shape):
            frequency = (np.arange(n) - n // 2) / max(n // 2, 1)
            squared += (frequency**2).reshape([-1 if a == axis else 1 for a in range(len(self.shape))])
        radius = np.sqrt(squared)
        return radius / max(radius.max(), 1e-30)

    def samples(self, acceleration: float) -> int:
        """Return the number of samples nearest to ``size / acceleration``.

        Raises
        ------
        InputError
            The acceleration is below 1, or leaves fewer samples than the calibration region needs.
        """
        if not 1 <= acceleration < float("inf"):
            raise InputError(f"acceleration is {acceleration:g}, expected a number of at least 1")
        samples = floor(self.size / acceleration + 0.5)
        certain = prod(self.widths)
        if samples < max(certain, 1):
            highest = floor(self.size / max(certain, 1) * 1000) / 1000
            why = f"the calibration region alone takes {certain}" if certain else "at least one is needed"
            raise InputError(
                f"acceleration {acceleration:g} leaves {samples} of {self.size} samples, but {why}: "
                f"at most acceleration {highest:g} can be had"
            )
        return samples
