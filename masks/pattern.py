"""What every sampling pattern offers."""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import TYPE_CHECKING, ClassVar

from pydantic import BaseModel, ConfigDict

from .. import InputError

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from .grid import Grid


class Pattern(BaseModel, ABC):
    """A way to choose the samples; its options are the fields of the model.

    A pattern gives its `name`, its number of `axes`, whether it is `random`, a docstring whose first line
    says what it does, and `_draw`.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> class LowestLines(Pattern):
    ...     '''The lines around the centre of k-space.'''
    ...     name = "lowest-lines"
    ...     axes = 1
    ...     random = False
    ...
    ...     def _draw(self, grid, samples, rng):
    ...         return Grid(grid.shape, samples).calibration_region()
    >>> LowestLines().draw(Grid((8,)), 4, np.random.default_rng(1)).nonzero()[0]
    array([3, 4])
    """

    model_config = ConfigDict(frozen=True, extra="forbid")

    name: ClassVar[str]
    axes: ClassVar[int]
    """Phase-encode axes that it undersamples: 1 for lines, 2 for points."""
    random: ClassVar[bool] = True
    """Whether draws differ."""

    def draw(self, grid: Grid, acceleration: float, rng: np.random.Generator) -> NDArray[np.bool_]:
        """Draw a mask that meets an acceleration to the nearest sample.

        Parameters
        ----------
        grid : Grid
            The phase-encode grid, with its constraints; the mask keeps them all.
        acceleration : float
            R: points of the grid / samples taken, calibration region included.
        rng : numpy.random.Generator
            The only source of randomness.

        Returns
        -------
        ndarray of bool
            Of the shape of the grid, true where a sample is taken.

        Raises
        ------
        InputError
            When the grid has another number of axes than the pattern, or cannot give the acceleration, or the
            pattern cannot keep a constraint at this acceleration; the message says which, and the nearest
            acceleration at which it can.
        """
        samples = self._samples(grid, acceleration)
        mask = self._draw(grid, samples, rng)
        broken = grid.broken(mask)
        if broken is not None:
            raise InputError(
                f"{self.name} at acceleration {acceleration:g} collides with {broken}"
                f"{self._nearest(grid, samples)}"
            )
        return mask

    @abstractmethod
    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        """Draw a mask with this number of samples, the calibration region included."""

    def _samples(self, grid: Grid, acceleration: float) -> int:
        """Return the number of samples, once the grid fits."""
        if grid.axes != self.axes:
            expected = {1: "one phase-encode axis", 2: "two phase-encode axes"}[self.axes]
            raise InputError(f"{self.name}: expected a grid of {expected}, got the shape {grid.shape}")
        return grid.samples(acceleration)

    def _nearest(self, grid: Grid, samples: int) -> str:
        """Return, in words, the nearest acceleration at which a fixed pattern keeps the constraints."""
        if self.random:
            return ""
        import numpy as np

        rng = np.random.default_rng(0)
        for n in sorted(grid.counts(), key=lambda n: abs(n - samples)):
            if grid.broken(self._draw(grid, n, rng)) is None:
                word = "most" if n > samples else "least"
                return f": at {word} R = {grid.shown(n)} can be had"
        return ": it cannot be had at any R"
