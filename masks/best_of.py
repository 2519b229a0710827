"""The best of many draws of a pattern, by a criterion that is known before the scan."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from math import prod
from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .grid import Grid
from .judge import largest_gap
from .pattern import Pattern
from .pointspread import highest, highest_outside_main_lobe, sample_weights, spread_power

Criterion = Literal["sidelobe", "compensated-peak", "compensated-rms", "largest-gap"]
"""What makes a draw good; all are better when lower.

- ``sidelobe``: highest sidelobe of the point spread outside its main lobe (`Sidelobes.outside_main_lobe`);
- ``compensated-peak``: highest sidelobe with samples weighted by 1 / probability (Lustig 2007);
- ``compensated-rms``: their root mean square. It prefers draws with few samples of low probability;
- ``largest-gap``: largest gap between samples, in grid steps (`largest_gap`).
"""

_POINTS_AT_ONCE = 1 << 18  # of a batch; small enough for the cache, large enough to be worth a thread


@dataclass(frozen=True)
class Best:
    """The best of many draws.

    Attributes
    ----------
    mask : ndarray of bool
        The winner.
    index : int
        Number of the draw that won: `nth_generator` with it gives the same mask again.
    score : float
        Of the winner.
    scores : ndarray of float64
        Of all draws; the lowest is the best.
    criterion : str

    Examples
    --------
    >>> from skipline.masks import Grid, VariableDensityLines
    >>> best = best_of(VariableDensityLines(), Grid((64,), 8), 4, draws=50, seed=7)
    >>> best.score == best.scores.min() == best.scores[best.index]
    np.True_
    """

    mask: NDArray[np.bool_]
    index: int
    score: float
    scores: NDArray[np.float64]
    criterion: Criterion


def nth_generator(seed: int | np.random.SeedSequence, index: int) -> np.random.Generator:
    """Return the random generator of one of many draws: that of the child `index` of a seed.

    Parameters
    ----------
    seed : int or numpy.random.SeedSequence
        For a generator `rng` it is ``rng.bit_generator.seed_seq``.
    index : int
        Number of the draw, from 0.

    Returns
    -------
    numpy.random.Generator

    Examples
    --------
    The child is the one that NumPy spawns:

    >>> third = np.random.SeedSequence(7).spawn(3)[2]
    >>> nth_generator(7, 2).random() == np.random.default_rng(third).random()
    True
    """
    parent = seed if isinstance(seed, np.random.SeedSequence) else np.random.SeedSequence(seed)
    child = np.random.SeedSequence(
        parent.entropy, spawn_key=(*parent.spawn_key, index), pool_size=parent.pool_size
    )
    return np.random.default_rng(child)


def best_of(
    pattern: Pattern,
    grid: Grid,
    acceleration: float,
    *,
    draws: int,
    seed: int | np.random.SeedSequence,
    criterion: Criterion = "sidelobe",
    density: NDArray[np.float64] | None = None,
    threads: int = 1,
) -> Best:
    """Draw many masks and return the best by a criterion.

    Each draw has its own seed, so neither the masks nor the winner depend on the number of threads; draw
    number 3 is the same of 10 and of 10,000. Of equally good draws the first one wins. A pattern that does
    not draw at random is drawn once.

    Parameters
    ----------
    pattern : Pattern
    grid : Grid
    acceleration : float
        R: points of the grid / samples taken.
    draws : int
        How many to compare, at least 1.
    seed : int or numpy.random.SeedSequence
        The draws take their seeds from it, see `nth_generator`.
    criterion : {"sidelobe", "compensated-peak", "compensated-rms", "largest-gap"}
        See `Criterion`.
    density : ndarray of float64, optional
        Inclusion probabilities for the compensated criteria; those of the pattern (its method `density`)
        when not given.
    threads : int
        Threads that share the draws.

    Returns
    -------
    Best

    Raises
    ------
    InputError
        When there is no such criterion, it needs a density and the pattern has none, there are no draws, or
        the pattern cannot be drawn on the grid.

    Examples
    --------
    >>> from skipline.masks import Grid, VariableDensityLines
    >>> pattern, grid = VariableDensityLines(), Grid((256,), 24)
    >>> best = best_of(pattern, grid, 4, draws=200, seed=7, criterion="compensated-peak")
    >>> bool((pattern.draw(grid, 4, nth_generator(7, best.index)) == best.mask).all())
    True
    >>> best.score < np.median(best.scores)
    np.True_
    """
    if criterion not in get_args(Criterion):
        raise InputError(
            f'there is no criterion "{criterion}"; expected one of: {", ".join(get_args(Criterion))}'
        )
    if draws < 1:
        raise InputError(f"draws {draws}: expected at least 1")
    if criterion.startswith("compensated"):
        density = _density(pattern, grid, acceleration, criterion) if density is None else density
    score = _scoring(criterion, grid, density)
    draws = draws if pattern.random else 1
    batch = max(1, min(256, _POINTS_AT_ONCE // prod(grid.shape)))  # whatever the number of threads

    def scores_of(first: int) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
        """Return the scores of a batch of draws, and its best mask."""
        numbers = range(first, min(first + batch, draws))
        masks = np.stack([pattern.draw(grid, acceleration, nth_generator(seed, n)) for n in numbers])
        # A batch of another length may round otherwise; that must not decide between equals.
        scores = np.round(score(masks), 12)
        return scores, masks[scores.argmin()]

    firsts = range(0, draws, batch)
    if threads > 1:
        with ThreadPoolExecutor(threads) as pool:
            batches = list(pool.map(scores_of, firsts))
    else:
        batches = [scores_of(first) for first in firsts]
    scores = np.concatenate([found for found, _ in batches])
    winner = int(scores.argmin())
    return Best(
        mask=batches[winner // batch][1],
        index=winner,
        score=float(scores[winner]),
        scores=scores,
        criterion=criterion,
    )


def _density(pattern: Pattern, grid: Grid, acceleration: float, criterion: str) -> NDArray[np.float64]:
    density = getattr(pattern, "density", None)
    if not callable(density):
        raise InputError(
            f"criterion {criterion}: {pattern.name} has no density to compensate; "
            "expected sidelobe or largest-gap"
        )
    return np.asarray(density(grid, acceleration), dtype=np.float64)


def _scoring(
    criterion: Criterion, grid: Grid, density: NDArray[np.float64] | None
) -> Callable[[NDArray[np.bool_]], NDArray[np.float64]]:
    """Return the function from a stack of masks to their scores."""
    if criterion == "sidelobe":
        return lambda masks: np.sqrt(highest_outside_main_lobe(spread_power(masks)))
    if criterion == "compensated-peak":
        return lambda masks: np.sqrt(highest(spread_power(masks, density)))
    if criterion == "compensated-rms":
        return lambda masks: _compensated_rms(sample_weights(masks, density))
    allowed = grid.allowed()
    return lambda masks: np.array([largest_gap(mask, allowed) for mask in masks])


def _compensated_rms(weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """Root mean square sidelobe from the weights alone, by Parseval."""
    flat = weights.reshape(len(weights), -1)
    points = flat.shape[1]
    energy = points * (flat**2).sum(axis=1) / flat.sum(axis=1) ** 2
    return np.sqrt(np.maximum(energy - 1.0, 0.0) / max(points - 1, 1))
