"""The line-pair slab: a resolution, low-contrast and edge phantom of our own.

A uniform slab (value 1) for a field of view of 240 mm, all within the disc inscribed in it. Places are (x, y)
in mm from the centre, x to the right and y up in the picture.

=====================  =====================================================================================
part                   dimensions in mm, and value
=====================  =====================================================================================
slab                   180 x 150, centred; value 1
bar groups, upper row  y = 56; 5 vertical bars each, 14 long, gaps as wide as the bars: they resolve x.
                       Widths from left to right 0.6 0.7 0.8 0.9 1.0 1.2 1.5 2.0 2.5; 8 between groups.
                       Bars are voids: value 0
bar groups, lower row  y = 30; the same, with horizontal bars: they resolve y; 5 between groups
low-contrast discs     diameters 12 9 6 4.5 3 in columns at x = -76 -56 -38 -22 -10;
                       2.5 5 10 20 % below the slab in rows at y = -61 -43 -25 -7
square with edges      38 x 38 at (62, -36), turned by 5 degrees counter-clockwise; value 0.5.
                       Its left edge measures the resolution along x, its upper edge along y
uniform patch          28 x 64 at (17, -34): slab and nothing else, for noise and uniformity
=====================  =====================================================================================

Bars of width w form a pattern of 1/(2 w) line pairs per mm. A matrix of 256 (pixels of 0.94 mm) can show the
bars from 1.0 mm on; one of 512 shows all. Where things are is data (`BAR_GROUPS`, `DISCS`, `EDGES`,
`UNIFORM_PATCH`), and the phantom is built from these data.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import accumulate
from math import cos, radians, sin

from .object import Phantom
from .shapes import Ellipse, Point, Rectangle

BAR_WIDTHS_MM = (0.6, 0.7, 0.8, 0.9, 1.0, 1.2, 1.5, 2.0, 2.5)


@dataclass(frozen=True)
class BarGroup:
    """Parallel bars with gaps as wide as the bars.

    Parameters
    ----------
    centre_mm : tuple of float
        Centre of the group (x, y) in mm.
    width_mm : float
        Width of a bar, and of a gap.
    length_mm : float
        Length of a bar.
    bars : int
        Number of bars.
    axis : int
        Array axis along which the bars follow each other, which is the axis they resolve: 0 for x, 1 for y.
    amplitude : float
        Value added to the slab's in the bars.

    Examples
    --------
    >>> group = BarGroup((0.0, 0.0), width_mm=1.0, length_mm=14.0, bars=3, axis=0)
    >>> [bar.centre_mm[0] for bar in group.shapes()]
    [-2.0, 0.0, 2.0]
    """

    centre_mm: Point
    width_mm: float
    length_mm: float
    bars: int
    axis: int
    amplitude: float = -1.0

    def shapes(self) -> tuple[Rectangle, ...]:
        """Return the bars as shapes, in the order of their places along `axis`.

        Examples
        --------
        >>> len(BAR_GROUPS[0].shapes())
        5
        """
        x, y = self.centre_mm
        steps = [2 * self.width_mm * (bar - (self.bars - 1) / 2) for bar in range(self.bars)]
        if self.axis == 0:
            size = (self.width_mm, self.length_mm)
            return tuple(Rectangle((x + step, y), size, amplitude=self.amplitude) for step in steps)
        size = (self.length_mm, self.width_mm)
        return tuple(Rectangle((x, y + step), size, amplitude=self.amplitude) for step in steps)


@dataclass(frozen=True)
class Disc:
    """A low-contrast disc.

    Parameters
    ----------
    centre_mm : tuple of float
        Centre (x, y) in mm.
    diameter_mm : float
        Diameter.
    contrast : float
        Value inside less the slab's, as a fraction of the slab's.

    Examples
    --------
    >>> Disc((0.0, 0.0), diameter_mm=6.0, contrast=-0.1).shape().semi_axes_mm
    (3.0, 3.0)
    """

    centre_mm: Point
    diameter_mm: float
    contrast: float

    def shape(self) -> Ellipse:
        """Return the disc as a shape.

        Examples
        --------
        >>> DISCS[0].shape().amplitude == DISCS[0].contrast
        True
        """
        radius = self.diameter_mm / 2
        return Ellipse(self.centre_mm, (radius, radius), amplitude=self.contrast)


@dataclass(frozen=True)
class Edge:
    """A straight slanted edge between two uniform areas, the slab's on one side.

    Parameters
    ----------
    centre_mm : tuple of float
        Middle of the edge (x, y) in mm.
    length_mm : float
        Length of the edge.
    normal_degrees : float
        Direction across the edge, from the slab's side, counter-clockwise from x.
    axis : int
        Array axis that is nearly across the edge, along which it measures the resolution: 0 for x, 1 for y.
    values : tuple of float
        Value on the slab's side and on the other.

    Examples
    --------
    >>> [round(edge.normal_degrees) for edge in EDGES]
    [5, -85]
    """

    centre_mm: Point
    length_mm: float
    normal_degrees: float
    axis: int
    values: tuple[float, float]


def _row_of_groups(y: float, axis: int, length_mm: float, between_mm: float) -> tuple[BarGroup, ...]:
    """One group for each width, side by side, centred on x = 0."""
    bars = 5
    sizes = [(2 * bars - 1) * width if axis == 0 else length_mm for width in BAR_WIDTHS_MM]
    starts = list(accumulate((size + between_mm for size in sizes), initial=0.0))
    left = -(starts[-1] - between_mm) / 2
    return tuple(
        BarGroup((left + start + size / 2, y), width, length_mm, bars, axis)
        for width, size, start in zip(BAR_WIDTHS_MM, sizes, starts, strict=False)
    )


def _edge_of(square: Rectangle, axis: int, normal_degrees: float) -> Edge:
    """Edge of the turned square that is entered in the direction `normal_degrees`."""
    side = square.size_mm[0]
    x = square.centre_mm[0] - side / 2 * cos(radians(normal_degrees))
    y = square.centre_mm[1] - side / 2 * sin(radians(normal_degrees))
    return Edge((x, y), side, normal_degrees, axis, (SLAB.amplitude, SLAB.amplitude + square.amplitude))


SLAB = Rectangle((0.0, 0.0), (180.0, 150.0))
SQUARE = Rectangle((62.0, -36.0), (38.0, 38.0), angle_degrees=5.0, amplitude=-0.5)
UNIFORM_PATCH = Rectangle((17.0, -34.0), (28.0, 64.0))

BAR_GROUPS = (
    *_row_of_groups(y=56.0, axis=0, length_mm=14.0, between_mm=8.0),
    *_row_of_groups(y=30.0, axis=1, length_mm=14.0, between_mm=5.0),
)
DISCS = tuple(
    Disc((x, y), diameter, contrast)
    for y, contrast in ((-61.0, -0.025), (-43.0, -0.05), (-25.0, -0.1), (-7.0, -0.2))
    for x, diameter in ((-76.0, 12.0), (-56.0, 9.0), (-38.0, 6.0), (-22.0, 4.5), (-10.0, 3.0))
)
EDGES = (
    _edge_of(SQUARE, axis=0, normal_degrees=SQUARE.angle_degrees),
    _edge_of(SQUARE, axis=1, normal_degrees=SQUARE.angle_degrees - 90.0),
)


def line_pair_slab_phantom() -> Phantom:
    """Line-pair slab: bar groups of 0.6 to 2.5 mm, low-contrast discs, slanted edges (field of view 240 mm).

    The dimensions are in the table at the head of this module, and as data in `BAR_GROUPS`, `DISCS`, `EDGES`
    and `UNIFORM_PATCH`.

    Returns
    -------
    Phantom
        Named `line-pair-slab`.

    Examples
    --------
    >>> slab = line_pair_slab_phantom()
    >>> slab.field_of_view_mm
    (240.0, 240.0)
    """
    bars = (bar for group in BAR_GROUPS for bar in group.shapes())
    discs = (disc.shape() for disc in DISCS)
    title = "Uniform slab with bar groups of 0.6 to 2.5 mm, low-contrast discs and slanted edges"
    return Phantom("line-pair-slab", title, (SLAB, *bars, *discs, SQUARE), (240.0, 240.0))
