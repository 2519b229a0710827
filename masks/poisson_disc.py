"""Poisson-disc sampling of a phase-encode plane: random samples that keep their distance."""

from __future__ import annotations

from math import inf
from typing import TYPE_CHECKING, ClassVar

from pydantic import Field

from .. import InputError
from .pattern import Pattern

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from .grid import Grid

_EXCESS = 0.02  # largest random excess of a radius
_PACKING = 0.7  # darts in an area of one radius squared, about, when no further one fits


class PoissonDisc(Pattern):
    """Random points that keep a distance from each other, which grows from the centre of k-space outwards.

    The radius of a point is s (1 + growth d) (1 + e), where d is its distance from the centre, 1 at the
    farthest point, and e is a small random excess of at most 2%. The scale s is searched so that R is met to
    the nearest sample.

    The distance of any two samples outside the calibration region is at least the larger of their two radii.
    The distance of a sample outside from any sample in the calibration region is at least the radius of the
    one outside. All this is exact. Distances are measured along axes of different steps as `aspect` says;
    k-space is not taken as periodic.

    Distances on a grid are discrete, so the density does not follow the radius smoothly: it falls in steps,
    seen as rings, where the radius passes 1, sqrt 2, 2, ... points; near the centre by more than a half. On
    192 x 192 points at R = 6 a random excess of up to 50% would smooth them, but make the smallest radius a
    fifth shorter.

    Sources: Bridson, SIGGRAPH sketches (2007); the larger of two radii: Mitchell, Rand, Ebeida & Bajaj,
    Canadian Conf. Comput. Geom. (2012).

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> mask = PoissonDisc(growth=2).draw(Grid((96, 64), 16), 6, np.random.default_rng(1))
    >>> mask.shape, int(mask.sum()), bool(mask[40:56, 24:40].all())
    ((96, 64), 1024, True)
    """

    name: ClassVar[str] = "poisson-disc"
    axes: ClassVar[int] = 2

    growth: float = Field(
        default=3.0,
        ge=0,
        le=100,
        description="radius at the farthest point of k-space / radius at the centre, less 1; 0 is the same "
        "everywhere",
    )
    aspect: float | None = Field(
        default=None,
        gt=0,
        le=100,
        description="step along the second axis / step along the first, in cycles/mm; by default that of "
        "square voxels, where both axes reach the same frequency",
    )

    def draw_with_radii(
        self, grid: Grid, acceleration: float, rng: np.random.Generator
    ) -> tuple[NDArray[np.bool_], NDArray[np.float64]]:
        """Draw a mask as `draw` does, and say which distance the samples keep.

        Parameters
        ----------
        grid : Grid
        acceleration : float
        rng : numpy.random.Generator

        Returns
        -------
        mask : ndarray of bool
            What `draw` returns.
        radii : ndarray of float64
            Of the shape of the grid, in the units of `metric.steps`: the radius of each point.

        Raises
        ------
        InputError
            As `draw` does.

        Examples
        --------
        >>> import numpy as np
        >>> from skipline.masks import Grid
        >>> pattern = PoissonDisc(growth=0, aspect=1)
        >>> mask, radii = pattern.draw_with_radii(Grid((64, 64)), 8, np.random.default_rng(1))
        >>> bool(radii.max() < 1.02 * radii.min())
        True
        """
        return self._discs(grid, self._samples(grid, acceleration), rng)

    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        return self._discs(grid, samples, rng)[0]

    def _draw_frames(
        self, grid: Grid, samples: int, frames: int, rng: np.random.Generator
    ) -> NDArray[np.bool_]:
        """Draw frames whose darts are thrown first where one is due.

        A point is due again 1 / density after the frame that took it: the earliest deadline goes first, as in
        Liu & Layland, J. ACM 20 (1973) 46.
        """
        import numpy as np

        rate = self._law(grid) ** -2.0
        open_points = grid.allowed() & ~grid.calibration_region()
        missing = samples - np.count_nonzero(grid.calibration_region())
        total = float(rate[open_points].sum())
        interval = np.maximum(
            total / (max(missing, 1) * rate.reshape(-1)), 1.0
        )  # frames from one take to the next
        due = rng.random(grid.size) * interval
        masks = np.empty((frames, *grid.shape), dtype=bool)
        for t in range(frames):
            order = np.argsort(due, kind="stable")
            masks[t] = self._discs(grid, samples, rng, order)[0]
            taken = masks[t].reshape(-1)
            due[taken] = np.maximum(due[taken], t) + interval[taken]
        return masks

    def _law(self, grid: Grid) -> NDArray[np.float64]:
        """Return the radii, up to a factor."""
        from .metric import distance_from_centre

        distance = distance_from_centre(grid, self.aspect)
        return 1 + self.growth * distance / max(float(distance.max()), 1e-300)

    def _discs(
        self, grid: Grid, samples: int, rng: np.random.Generator, order: NDArray[np.integer] | None = None
    ) -> tuple[NDArray[np.bool_], NDArray[np.float64]]:
        """Search the scale of the radii; the darts fly in a random order unless one is given."""
        import numpy as np

        from .darts import throw
        from .first_come import rivals
        from .metric import steps

        region = grid.calibration_region()
        closed = ~grid.allowed() | region
        missing = samples - int(np.count_nonzero(region))
        if order is None:
            order = rng.permutation(grid.size)
        # Distances on a grid are discrete, so that equal radii would all pass one of them at the same scale
        # and the number of darts would leap. A random excess lets it change little by little.
        law = self._law(grid) * (1 + _EXCESS * rng.random(grid.shape))
        if missing == 0:
            return region, np.zeros(grid.shape)
        to_region = _distance_to(region, steps(grid, self.aspect))
        order, barred = order[~closed.reshape(-1)[order]], rivals(grid)

        def darts(scale: float) -> NDArray[np.bool_]:
            radii = scale * law
            return throw(order, radii, steps(grid, self.aspect), closed | (to_region < radii), barred)

        # The number of darts falls with the scale, though not at every step: enclose the scale, then bisect,
        # and keep the nearest number from above.
        step0, step1 = steps(grid, self.aspect)
        # discs so small that nothing is forbidden, whatever the rounding
        smallest = (1 - 1e-9) * min(step0, step1) / float(law.max())
        scale = max(float(_PACKING * step0 * step1 * np.sum(law[~closed] ** -2.0) / missing) ** 0.5, smallest)
        low, high, surplus = 0.0, inf, inf
        taken, radius = closed, 0.0
        while surplus > 0 and (high == inf or high - low > 1e-6 * high):
            found = darts(scale)
            excess = int(np.count_nonzero(found)) - missing
            if excess < 0:
                high = scale
            else:
                low = scale
                if excess < surplus:
                    taken, radius, surplus = found, scale, excess
            if low == 0 and scale <= smallest:
                raise InputError(
                    f"{self.name}: {missing + excess} points fit beside the calibration region, but the "
                    f"acceleration needs {missing}"
                )
            scale = 1.2 * low if high == inf else max(high / 1.2, smallest) if low == 0 else (low + high) / 2
        # the surplus goes at random: that never brings two samples closer
        extra = rng.permutation(np.flatnonzero(taken))[missing:]
        taken.reshape(-1)[extra] = False
        return taken | region, radius * law


def _distance_to(region: NDArray[np.bool_], steps: tuple[float, float]) -> NDArray[np.float64]:
    """Return how far each point is from the nearest point of a region."""
    import numpy as np
    from scipy.ndimage import distance_transform_edt

    if not region.any():
        return np.full(region.shape, inf)
    return np.asarray(distance_transform_edt(~region, sampling=steps))
