"""Spokes through the centre of a phase-encode plane, on the points of its grid."""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar

from pydantic import Field

from .pattern import Pattern

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from .grid import Grid

GOLDEN_ANGLE = 180 * (5**0.5 - 1) / 2
"""111.246 degrees: 180 degrees divided in the golden ratio."""


class GoldenSpokes(Pattern):
    """Spokes through the centre, each turned by the golden angle of 111.246 degrees; the same in every draw.

    Any number of spokes in sequence divides the half turn nearly evenly. A spoke takes the points of the grid
    nearest to it, from one side of k-space to the other. The last one is trimmed from its outer ends, so that
    R is met to the nearest sample. Where conjugates are skipped, a point gives way to a partner that came
    before.

    Source: Winkelmann, Schaeffter, Koehler, Eggers & Doessel, IEEE Trans. Med. Imaging 26 (2007) 68.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> GoldenSpokes().draw(Grid((5, 9)), 3, np.random.default_rng()).astype(int)
    array([[0, 0, 0, 0, 1, 0, 0, 0, 0],
           [0, 0, 0, 1, 1, 0, 0, 1, 1],
           [0, 0, 1, 1, 1, 1, 1, 0, 0],
           [1, 1, 0, 0, 1, 1, 0, 0, 0],
           [0, 0, 0, 0, 1, 0, 0, 0, 0]])
    """

    name: ClassVar[str] = "golden-spokes"
    axes: ClassVar[int] = 2
    random: ClassVar[bool] = False

    first_angle: float = Field(
        default=0.0,
        ge=0,
        lt=360,
        description="angle of the first spoke from the first axis, in degrees",
    )
    aspect: float | None = Field(
        default=None,
        gt=0,
        le=100,
        description="step along the second axis / step along the first, in cycles/mm; by default that of "
        "square voxels, where both axes reach the same frequency",
    )

    def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> NDArray[np.bool_]:
        return self._from(grid, samples, 0)[0]

    def _draw_frames(
        self, grid: Grid, samples: int, frames: int, rng: np.random.Generator
    ) -> NDArray[np.bool_]:
        """Draw frames of spokes in one sequence: each frame goes on where the last one stopped."""
        import numpy as np

        masks, spoke = np.empty((frames, *grid.shape), dtype=bool), 0
        for t in range(frames):
            masks[t], spoke = self._from(grid, samples, spoke)
        return masks

    def _from(self, grid: Grid, samples: int, spoke: int) -> tuple[NDArray[np.bool_], int]:
        """Return a mask that starts with the spoke of this number, and the number of the one after it."""
        import numpy as np

        from .first_come import candidates

        mask = grid.calibration_region()
        missing = samples - int(np.count_nonzero(mask))
        if missing == 0:
            return mask, spoke
        spokes = max(missing // max(grid.shape), 1)
        while True:
            spokes *= 2
            stream = self._points(grid, np.arange(spoke, spoke + spokes))
            points, at = candidates(grid, stream.reshape(-1))
            if points.size >= missing:
                break
        mask.reshape(-1)[points[:missing]] = True
        return mask, spoke + int(at[missing - 1]) // stream.shape[1] + 1

    def _points(self, grid: Grid, numbers: NDArray[np.integer]) -> NDArray[np.int64]:
        """Return the flat indices of the points of spokes, from the centre outwards; -1 outside the grid."""
        import numpy as np

        from .metric import steps

        angles = np.deg2rad((self.first_angle + numbers * GOLDEN_ANGLE) % 360)
        direction = np.stack([np.cos(angles), np.sin(angles)]) / np.array(steps(grid, self.aspect))[:, None]
        direction /= np.abs(direction).max(axis=0)  # one point for each step along the steeper axis
        outwards = np.arange(1, max(grid.shape) // 2 + 1)
        along = np.concatenate([[0], np.stack([outwards, -outwards], axis=1).reshape(-1)])
        i, j = (
            n // 2 + np.floor(d[:, None] * along + 0.5 + 1e-9).astype(np.int64)
            for n, d in zip(grid.shape, direction, strict=True)
        )
        inside = (i >= 0) & (i < grid.shape[0]) & (j >= 0) & (j < grid.shape[1])
        return np.where(inside, i * grid.shape[1] + j, -1)
