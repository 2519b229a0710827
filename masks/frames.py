"""Time frames: masks that complement each other, for dynamic scans.

Neighbouring frames should share as few samples as they can, so that a few of them together cover k-space
about as the pattern's density has it. How that is done, and how exactly, depends on the pattern:

- Random samples of a density: one systematic sample that turns. The probabilities are laid end to end on a
  circle of circumference 1 (Madow 1949), and frame t takes the points under the hand of a clock that turns by
  the golden ratio from frame to frame. So each frame has the right number of samples and each point its right
  probability. In any T neighbouring frames a point comes as often as T places of a Kronecker sequence fall
  into its arc: T times its probability, to an error that grows as log T; with independent draws it grows as
  the square root of T.
- Regular lines: the same with the lines in their order. That is a comb, shifted by whole lines where R
  permits.
- Lines with a largest gap, and combs that a constraint forbids: random lines whose odds grow with their lag
  behind the density. The density is met in the long run only, and not exactly.
- Regular points: displaced lattices; each point has its turn once in a period.
- Spokes: one sequence of golden angles that goes on.
- Poisson-disc: the darts are thrown first where one is due. Each frame keeps its distances; its density is
  near that of single draws, not the same.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .first_come import rivals
from .fixed_size import fixed_size_draw, grid_probabilities
from .grid import Grid
from .lines import RegularLines
from .pattern import Pattern
from .turns import GOLDEN, turns
from .variable_density import VariableDensity


def draw_frames(
    pattern: Pattern, grid: Grid, acceleration: float, frames: int, rng: np.random.Generator
) -> NDArray[np.bool_]:
    """Draw a series of masks such that any neighbouring frames together cover k-space evenly.

    Each frame meets the acceleration to the nearest sample, takes the calibration region and keeps what the
    grid demands. Variable-density frames without a largest gap have exactly the inclusion probabilities of
    the pattern; with a largest gap, and for poisson-disc, the density is only near that of single draws. A
    pattern's option to spread the samples has no effect.

    Parameters
    ----------
    pattern : Pattern
        A pattern of another package has to have `_draw_frames(grid, samples, frames, rng)`.
    grid : Grid
    acceleration : float
        R of each frame.
    frames : int
        How many.
    rng : numpy.random.Generator
        The only source of randomness.

    Returns
    -------
    ndarray of bool
        ``(frames, *grid.shape)``.

    Raises
    ------
    InputError
        As `Pattern.draw` does; when there is no frame; when the pattern cannot make frames, or not with what
        this grid demands.

    References
    ----------
    Madow, Ann. Math. Stat. 20 (1949) 333; systematic sampling in random order: Hartley & Rao, Ann. Math.
    Stat. 33 (1962) 350; Kronecker sequences: Niederreiter, Random Number Generation and Quasi-Monte Carlo
    Methods (SIAM 1992), chapter 3.

    Examples
    --------
    >>> from skipline.masks import RegularLines
    >>> masks = draw_frames(RegularLines(), Grid((12,)), 3, 6, np.random.default_rng(1))
    >>> masks.sum(axis=1)
    array([4, 4, 4, 4, 4, 4])
    >>> masks[1:4].sum(axis=0)
    array([1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1])
    """
    if not frames >= 1:
        raise InputError(f"frames {frames}: expected a whole number of at least 1")
    samples = pattern._samples(grid, acceleration)
    if hasattr(pattern, "_draw_frames"):
        masks = pattern._draw_frames(grid, samples, frames, rng)  # type: ignore[attr-defined]
    elif isinstance(pattern, VariableDensity):
        density = pattern._density(grid, samples)
        masks = (
            _lagging(grid, density, frames, rng) if grid.largest_gap else _dial(grid, density, frames, rng)
        )
    elif isinstance(pattern, RegularLines):
        density = grid_probabilities(grid, np.ones(grid.shape), samples)
        masks = _turning(density, np.arange(grid.size), turns(_places(density), frames, rng))
        if any(grid.broken(mask) for mask in masks):
            masks = _lagging(grid, density, frames, rng)
    else:
        raise InputError(
            f"{pattern.name}: this pattern makes no time frames; expected one that has _draw_frames"
        )
    for t, mask in enumerate(masks):
        if broken := grid.broken(mask):
            raise InputError(f"{pattern.name}: frame {t} would break {broken}; expected a grid without it")
    return masks


def _dial(
    grid: Grid, density: NDArray[np.float64], frames: int, rng: np.random.Generator
) -> NDArray[np.bool_]:
    """Turn a systematic sample of the points in random order."""
    # Partners follow each other: together they have an arc of at most 1, which never has two samples.
    rank = rng.permutation(grid.size)
    order = np.lexsort((rank, np.minimum(rank, rank[rivals(grid)])))
    return _turning(density, order, turns(_places(density), frames, rng))


def _lagging(
    grid: Grid, density: NDArray[np.float64], frames: int, rng: np.random.Generator
) -> NDArray[np.bool_]:
    """Draw frame by frame, with odds that grow with how far a point is behind its density."""
    samples = round(float(density.sum()))
    masks, lag = np.empty((frames, *grid.shape), dtype=bool), rng.random(grid.shape)
    for mask in masks:
        mask[:] = fixed_size_draw(grid, grid_probabilities(grid, density * np.exp(3 * lag), samples), rng)
        lag += density - mask
    return masks


def _places(density: NDArray[np.float64]) -> float:
    """Return how many points there are for each sample; no whole number if they are not equally likely."""
    undecided = density[(density > 0) & (density < 1)]
    return 1 / undecided[0] if undecided.size and np.ptp(undecided) < 1e-9 else 1 + GOLDEN


def _turning(
    density: NDArray[np.float64], order: NDArray[np.integer], hands: NDArray[np.float64]
) -> NDArray[np.bool_]:
    """Take systematic samples: the points whose stretch has a whole number, less the hand, in it."""
    stretch = density.reshape(-1)[order]
    undecided = order[(stretch > 0) & (stretch < 1)]
    ends = np.cumsum(density.reshape(-1)[undecided])
    masks = np.broadcast_to(density == 1, (hands.size, *density.shape)).copy()
    if undecided.size:
        ends *= round(ends[-1]) / ends[-1]  # whole, whatever the rounding
        ends[-1] = round(ends[-1])
    starts = np.concatenate([[0.0], ends[:-1]])
    # a hand that points exactly between two places is moved off the line, whatever the rounding
    for mask, hand in zip(masks, hands % 1 + 1e-9, strict=True):
        mask.reshape(-1)[undecided] = np.ceil(ends - hand) > np.ceil(starts - hand)
    return masks
