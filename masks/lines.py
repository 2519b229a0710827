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
    """Random lines, denser towards the centre: with the probabilities of a density law.

    By default the law is (1 - r)^2. Source: Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

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

    Where that breaks a constraint, because k-space ends with partial Fourier, the two sides of the
    calibration region are divided each for itself. Where conjugates are skipped, lines alternate between
    the sides, at even steps outwards.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> RegularLines().draw(Grid((16,)), 4, np.random.default_rng()).nonzero()[0]
    array([ 0,  4,  8, 12])
    >>> RegularLines().draw(Grid((16,), 4), 2, np.random.default_rng()).nonzero()[0]
    array([ 1,  3,  6,  7,  8,  9, 12, 14])
    >>> grid = Grid((16,), 4, partial_fourier=0.75)
    >>> RegularLines().draw(grid, 2, np.random.default_rng()).nonzero()[0]
    array([ 4,  6,  7,  8,  9, 11, 13, 14])
    >>> RegularLines().draw(Grid((16,), skip_conjugates=True), 4, np.random.default_rng()).nonzero()[0]
    array([ 2,  5,  8, 12])
    """

    name: ClassVar[str] = "regular-lines"
    axes: ClassVar[int] = 1
    random: ClassVar[bool] = False

    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        mask = _around(grid, samples)
        for divide in _on_each_side, _over_the_range, _alternating:
            if mask.sum() == samples and grid.broken(mask) is None:
                break
            mask = divide(grid, samples)
        return mask


def _around(grid: Grid, samples: int) -> NDArray[np.bool_]:
    """Divide k-space as if its end were its beginning."""
    import numpy as np

    mask = grid.calibration_region()
    centre = max(int(mask.sum()), 1)
    last = grid.size // 2 - centre // 2 + centre - 1
    # from the last line of the centre, past the end of k-space, to its first one
    places = _even_places(grid.size - centre + 1, samples - centre)
    mask[(last + np.array([0, *places])) % grid.size] = True
    return mask


def _on_each_side(grid: Grid, samples: int) -> NDArray[np.bool_]:
    """Divide both sides of the centre, so that the wider of their spacings is as narrow as can be."""
    import numpy as np

    mask = grid.calibration_region()
    mask[grid.size // 2] = True
    begin, end = np.flatnonzero(mask)[[0, -1]]
    first = int(np.flatnonzero(grid.allowed())[0])
    spans = begin - (first - 1), grid.size - end
    lower = upper = 0
    for _ in range(samples - int(mask.sum())):
        if spans[0] * (upper + 1) > spans[1] * (lower + 1):
            lower += 1
        else:
            upper += 1
    mask[begin - _even_places(spans[0], lower)] = True
    mask[end + _even_places(spans[1], upper)] = True
    return mask


def _over_the_range(grid: Grid, samples: int) -> NDArray[np.bool_]:
    """Divide all that may be taken, wherever the centre is."""
    import numpy as np

    mask = grid.calibration_region()
    first = int(np.flatnonzero(grid.allowed())[0])
    mask[first - 1 + _even_places(grid.size - first + 1, samples)] = True
    return mask


def _alternating(grid: Grid, samples: int) -> NDArray[np.bool_]:
    """Go outwards from the centre in even steps, and take of each two partners the one with the wider gap."""
    import numpy as np

    from .density import inclusion_probabilities

    mask, allowed, partner = grid.calibration_region(), grid.allowed(), grid.partner()
    centre = grid.size // 2
    if samples > mask.sum():
        mask[centre] = True
    p = inclusion_probabilities(np.ones(grid.size), samples, mask, allowed, partner)
    p[mask] = 0
    last = [int(np.flatnonzero(mask)[0]), int(np.flatnonzero(mask)[-1])] if mask.any() else [centre, centre]
    due = 0.5  # half a step from the centre to the first line
    for step in range(1, centre + 1):
        pair = [i if 0 <= i < grid.size and p[i] > 0 else -1 for i in (centre - step, centre + step)]
        due += sum(p[i] for i in pair if i >= 0)
        if due >= 1 - 1e-9:
            due -= 1
            wider = pair[1] < 0 or (pair[0] >= 0 and last[0] - pair[0] > pair[1] - last[1])
            side = 0 if wider else 1
            mask[pair[side]] = True
            last[side] = pair[side]
    return mask


def _even_places(span: int, places: int) -> NDArray[np.intp]:
    """Return the places that divide a span into equal parts, each the one nearest to it."""
    import numpy as np

    parts = places + 1
    j = np.arange(1, parts)
    return (2 * j * span + parts) // (2 * parts)
