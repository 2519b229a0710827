"""Regular sampling of a phase-encode plane with shifted rows: controlled aliasing."""

from __future__ import annotations

from math import hypot, inf
from typing import TYPE_CHECKING, ClassVar, NamedTuple

from pydantic import Field

from .. import InputError
from .pattern import Pattern

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from .grid import Grid


class Lattice(NamedTuple):
    """The lattice of k-space with the basis (step, shear) and (0, spacing), in points.

    Attributes
    ----------
    step : int
        From one row to the next, along the first axis.
    spacing : float
        From one sample of a row to the next, along the second axis.
    shear : float
        How far a row is displaced from the one before, along the second axis.

    Examples
    --------
    >>> Lattice(2, 3.0, 1.0).spacing
    3.0
    """

    step: int
    spacing: float
    shear: float


class RegularPoints(Pattern):
    """Regular lattice of points with shifted rows, so that aliases fall far apart; the same in every draw.

    Every `step`-th row through k = 0 is taken, and on each the points of an even spacing, displaced by
    `shift` from one taken row to the next. The spacing follows from R: the lattice gets as much wider outside
    the calibration region as that costs, and its points are rounded to the grid. When all comes out in whole
    numbers, the mask is the exact lattice. Samples too many for R are left out farthest from the centre.
    Where conjugates are skipped, the lattice does not go through k = 0 but beside it, so that no partner -k
    is on it.

    Source: Breuer et al., Magn. Reson. Med. 55 (2006) 549.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> RegularPoints().draw(Grid((4, 8)), 4, np.random.default_rng()).astype(int)
    array([[0, 1, 0, 1, 0, 1, 0, 1],
           [0, 0, 0, 0, 0, 0, 0, 0],
           [1, 0, 1, 0, 1, 0, 1, 0],
           [0, 0, 0, 0, 0, 0, 0, 0]])
    """

    name: ClassVar[str] = "regular-points"
    axes: ClassVar[int] = 2
    random: ClassVar[bool] = False

    step: int | None = Field(
        default=None,
        ge=1,
        description="every step-th row along the first axis is taken; by default as keeps aliases farthest "
        "from the object",
    )
    shift: int | None = Field(
        default=None,
        ge=0,
        description="points along the second axis by which a taken row is displaced from the one before, "
        "stretched with a spacing that is no whole number; by default as keeps aliases farthest from the "
        "object",
    )

    def lattice(self, grid: Grid, acceleration: float) -> Lattice:
        """Return the lattice that the draw takes.

        Parameters
        ----------
        grid : Grid
        acceleration : float

        Returns
        -------
        Lattice

        Raises
        ------
        InputError
            As `draw` does.

        Examples
        --------
        >>> from skipline.masks import Grid
        >>> RegularPoints().lattice(Grid((64, 96)), 6)
        Lattice(step=2, spacing=3.0, shear=1.0)
        """
        return self._lattice(grid, self._samples(grid, acceleration), (0, 0.0))[0]

    def alias_positions(self, grid: Grid, acceleration: float) -> NDArray[np.float64]:
        """Return where the lattice repeats the object: its reciprocal lattice.

        All phases exp(2 pi i k . r) of the lattice points k are the same at these positions r. With a spacing
        that is no whole number, rounding to the grid blurs the aliases into their surroundings.

        Parameters
        ----------
        grid : Grid
        acceleration : float

        Returns
        -------
        ndarray of float64
            ``(aliases, 2)``, in voxels from the object, each coordinate from -N/2 to below N/2; the object
            itself, (0, 0), comes first, then the nearest.

        Raises
        ------
        InputError
            As `draw` does.

        References
        ----------
        Breuer et al., Magn. Reson. Med. 55 (2006) 549; Petersen & Middleton, Inf. Control 5 (1962) 279.

        Examples
        --------
        >>> from skipline.masks import Grid
        >>> RegularPoints(step=1, shift=1).alias_positions(Grid((64, 96)), 2)
        array([[  0.,   0.],
               [-32., -48.]])
        """
        import numpy as np

        lattice = self.lattice(grid, acceleration)
        # r = (u N0, v N1), with step u + shear v and spacing v whole numbers
        q = np.arange(np.ceil(-lattice.spacing / 2 - 1e-9), np.ceil(lattice.spacing / 2 - 1e-9))
        p = np.arange(lattice.step)[:, None]
        v = q / lattice.spacing
        u = (p - lattice.shear * v) / lattice.step
        u = u - np.floor(u + 0.5 + 1e-9)
        positions = np.stack([u * grid.shape[0], v * grid.shape[1] + 0 * u], axis=-1).reshape(-1, 2)
        positions = positions.round(9) + 0.0
        return positions[np.lexsort((*positions.T[::-1], np.hypot(*positions.T).round(6)))]

    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        return self._lattice(grid, samples, (0, 0.0))[1]

    def _draw_frames(
        self, grid: Grid, samples: int, frames: int, rng: np.random.Generator
    ) -> NDArray[np.bool_]:
        """Draw frames on displaced lattices, so that each point has its turn once in a period.

        Source: lattices of k-space and time, Tsao, Boesiger & Pruessmann, Magn. Reson. Med. 50 (2003) 1031.
        """
        import numpy as np

        from .turns import turns

        lattice = self._lattice(grid, samples, (0, 0.0))[0]
        masks = np.empty((frames, *grid.shape), dtype=bool)
        # row by row on the dial, and along the spacing on each
        for mask, hand in zip(masks, turns(lattice.step * lattice.spacing, frames, rng), strict=True):
            row, along = divmod(hand * lattice.step + 1e-9, 1)
            mask[:] = self._lattice(grid, samples, (int(row), along * lattice.spacing))[1]
        return masks

    def _lattice(
        self, grid: Grid, samples: int, origin: tuple[int, float]
    ) -> tuple[Lattice, NDArray[np.bool_]]:
        """Find the widest spacing that leaves enough samples, and take them from the centre outwards."""
        import numpy as np

        from .first_come import candidates

        region = grid.calibration_region()
        missing = samples - int(np.count_nonzero(region))
        free = int(np.count_nonzero(grid.allowed() & ~region))
        area = max(free / max(missing, 1), 1.0)  # points of the grid for each of the lattice

        def points(lattice: Lattice) -> NDArray[np.integer]:
            return candidates(grid, _points(grid, lattice, origin))[0]

        best, step, shift = Lattice(1, 1.0, 0.0), 1, 0
        for step, shift in self._shapes(area, 3 if grid.skip_conjugates else 1):
            best = _stretched(step, 1.0, shift)
            if points(best).size >= missing:
                break
        else:
            raise InputError(
                f"{self.name}: the rows of step {self.step} have {points(best).size} points outside the "
                f"calibration region, but the acceleration needs {missing}; expected a smaller step"
            )
        # The lattice as computed, if it has the number of samples; else enclose the spacing close by, and
        # bisect.
        narrow, wide, spacing = 0.0, inf, max(area / step, 1.0)  # 0: none found that is narrow enough
        while wide - narrow > 1e-6 and spacing < 4 * max(grid.shape):
            lattice = _stretched(step, spacing, shift)
            surplus = points(lattice).size - missing
            if surplus >= 0:
                best, narrow = lattice, spacing
            else:
                wide = spacing
            if surplus == 0:
                break
            if wide == inf:
                spacing = 1.05 * narrow
            elif narrow == 0:
                spacing = max(wide / 1.05, 1.0)
            else:
                spacing = (narrow + wide) / 2
        taken = points(best)
        region.reshape(-1)[taken[_outwards(grid, taken)[:missing]]] = True
        return best, region

    def _shapes(self, area: float, smallest: int) -> list[tuple[int, int]]:
        """Return the step and the shift of the best lattice, and of another when its rows do not suffice."""
        best = farthest_aliases(round(area), self.step, self.shift, smallest)
        return [best] if self.step else [best, farthest_aliases(round(area), 1, self.shift)]


def farthest_aliases(
    area: int, step: int | None = None, shift: int | None = None, smallest: int = 1
) -> tuple[int, int]:
    """Return the step and the shift whose aliases are farthest from the object, in fields of view.

    Of those that are equally good it is the one whose step is nearest to the square root of the area.

    Parameters
    ----------
    area : int
        Points of the grid for each point of the lattice.
    step, shift : int, optional
        Those that are given are kept.
    smallest : int
        Smallest spacing along the second axis, where the area permits it.

    Returns
    -------
    tuple of int

    References
    ----------
    The shortest vector of a lattice of two dimensions: Gauss, Disquisitiones Arithmeticae (1801), article
    171.

    Examples
    --------
    >>> farthest_aliases(4), farthest_aliases(5), farthest_aliases(8)
    ((2, 1), (1, 2), (1, 3))
    """
    ranks = []
    divisors = [n for n in range(1, area + 1) if area % n == 0 and (area // n >= smallest or n == 1)]
    for rows in [step] if step else divisors:
        spacing = max(round(area / rows), 1)
        for displaced in range(spacing) if shift is None else [shift]:
            # the reciprocal lattice of (rows, displaced), (0, spacing)
            nearest, next_ = _shortest((1 / rows, 0.0), (-displaced / (rows * spacing), 1 / spacing))
            ranks.append((-round(nearest, 9), -round(next_, 9), abs(rows - area**0.5), rows, displaced))
    return min(ranks)[3:]


def _shortest(a: tuple[float, float], b: tuple[float, float]) -> tuple[float, float]:
    """Return the lengths of the two shortest independent vectors of the lattice with the basis a, b."""
    while True:
        if hypot(*a) > hypot(*b):
            a, b = b, a
        times = round((a[0] * b[0] + a[1] * b[1]) / (a[0] ** 2 + a[1] ** 2))
        b = (b[0] - times * a[0], b[1] - times * a[1])
        if hypot(*b) >= (1 - 1e-9) * hypot(*a):  # no shorter, but for rounding
            return hypot(*a), hypot(*b)


def _stretched(step: int, spacing: float, shift: int) -> Lattice:
    """Return the lattice with a spacing; the shift is stretched with it."""
    whole = max(round(spacing), 1)
    return Lattice(step, spacing, shift % whole * spacing / whole)


def _points(grid: Grid, lattice: Lattice, origin: tuple[int, float]) -> NDArray[np.integer]:
    """Return the points of the grid nearest to those of a lattice, row by row.

    Where conjugates are skipped, the lattice is displaced by a quarter of its spacing: then -k is not on it,
    unless the spacing is small. If it is, the rows take turns in giving way to their partners.
    """
    import numpy as np

    first, second = grid.shape
    middle = first // 2 + origin[0]
    column = second // 2 + origin[1] + (round(lattice.spacing / 4 + 0.25) if grid.skip_conjugates else 0)
    rows = np.arange(middle % lattice.step, first, lattice.step)
    if grid.skip_conjugates:
        odd = (rows - middle) // lattice.step % 2 == 1
        rows = np.concatenate([rows[~odd], rows[odd][::-1]])
    starts = (column + lattice.shear * ((rows - middle) // lattice.step)) % lattice.spacing
    columns = np.arange(-1, int(second / lattice.spacing) + 1)
    places = np.floor(starts[:, None] + columns * lattice.spacing + 0.5 + 1e-9).astype(np.int64)
    inside = (places >= 0) & (places < second)
    return (rows[:, None] * second + places)[inside]


def _outwards(grid: Grid, points: NDArray[np.integer]) -> NDArray[np.intp]:
    """Return the order of points from the centre of k-space outwards."""
    import numpy as np

    return np.argsort(grid.radius().reshape(-1)[points], kind="stable")
