"""Patterns of lines along one phase-encode axis."""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar

from .pattern import Pattern
from .variable_density import VariableDensity

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from .grid import Grid


class VariableDensityLines(VariableDensity):
    """Random lines, denser towards the centre: the density falls as (1 - r)^power.

    Source: Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> pattern, grid = VariableDensityLines(power=1), Grid((8,), 2)
    >>> pattern.density(grid, 2).round(2)
    array([0.  , 0.22, 0.44, 1.  , 1.  , 0.67, 0.44, 0.22])
    >>> int(pattern.draw(grid, 2, np.random.default_rng(1)).sum())
    4
    """

    name: ClassVar[str] = "variable-density-lines"
    axes: ClassVar[int] = 1


class RegularLines(Pattern):
    """Evenly spaced lines outside the calibration region; the same in every draw.

    They divide the rest of k-space, which is taken as periodic, from one side of the calibration region to
    the other. Two spacings differ by at most one line, so that any R is met to the nearest line. Without a
    calibration region the line k = 0 stands in for it: when R is a whole number that divides the number of
    lines, the mask is every R-th line through k = 0, exactly.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> RegularLines().draw(Grid((16,)), 4, np.random.default_rng()).nonzero()[0]
    array([ 0,  4,  8, 12])
    >>> RegularLines().draw(Grid((16,), 4), 2, np.random.default_rng()).nonzero()[0]
    array([ 1,  3,  6,  7,  8,  9, 12, 14])
    """

    name: ClassVar[str] = "regular-lines"
    axes: ClassVar[int] = 1
    random: ClassVar[bool] = False

    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        import numpy as np

        mask = grid.calibration_region()
        centre = max(int(mask.sum()), 1)
        last = grid.size // 2 - centre // 2 + centre - 1
        # from the last line of the centre, past the end of k-space, to its first one
        span = grid.size - centre + 1
        intervals = samples - centre + 1
        j = np.arange(intervals)  # line j is the one nearest to last + j span / intervals
        mask[(last + (2 * j * span + intervals) // (2 * intervals)) % grid.size] = (
            True  # nearest to j span / intervals
        )
        return mask
