"""Time frames: each frame as a single draw would be, neighbouring frames complementary."""

from typing import Any

import numpy as np
import pytest
from hypothesis import given, reject, settings
from hypothesis import strategies as st
from scipy.stats import chi2

from skipline import InputError
from skipline.masks.frames import draw_frames
from skipline.masks.grid import Grid
from skipline.masks.lattice import RegularPoints
from skipline.masks.lines import RegularLines, VariableDensityLines
from skipline.masks.pattern import Pattern
from skipline.masks.points import VariableDensityPoints
from skipline.masks.poisson_disc import PoissonDisc
from skipline.masks.spokes import GoldenSpokes
from skipline.masks.turns import turns

LINES = VariableDensityLines(), VariableDensityLines(power=0), RegularLines()
POINTS = VariableDensityPoints(), PoissonDisc(), PoissonDisc(growth=0), RegularPoints(), GoldenSpokes()


@st.composite
def designs(draw: st.DrawFn) -> tuple[Pattern, Grid, float]:
    """A pattern, a grid with constraints and an acceleration, for which a single mask can be drawn."""
    pattern = draw(st.sampled_from([*LINES, *POINTS]))
    sizes = st.integers(8, 200) if pattern.axes == 1 else st.integers(8, 32)
    shape = tuple(draw(sizes) for _ in range(pattern.axes))
    gap = draw(st.sampled_from([None, 6, 12])) if pattern.axes == 1 else None
    try:
        grid = Grid(
            shape,
            draw(st.integers(0, min(shape) // 2)),
            shutter=draw(st.booleans()),
            partial_fourier=draw(st.sampled_from([1.0, 0.75])),
            largest_gap=gap,
            skip_conjugates=draw(st.booleans()),
            train_length=draw(st.sampled_from([None, 4])),
        )
        acceleration = draw(st.floats(1, 8))
        pattern.draw(grid, acceleration, np.random.default_rng(0))
    except InputError:
        reject()
    return pattern, grid, acceleration


@settings(max_examples=80, deadline=None)
@given(designs(), st.integers(1, 6), st.integers(0, 2**32 - 1))
def test_each_frame_meets_the_acceleration_and_the_constraints(
    design: tuple[Pattern, Grid, float], frames: int, seed: int
) -> None:
    pattern, grid, acceleration = design
    masks = draw_frames(pattern, grid, acceleration, frames, np.random.default_rng(seed))
    assert masks.shape == (frames, *grid.shape)
    assert masks.dtype == bool
    for mask in masks:
        assert mask.sum() == grid.samples(acceleration)
        assert grid.broken(mask) is None
    again = draw_frames(pattern, grid, acceleration, frames, np.random.default_rng(seed))
    assert masks.tobytes() == again.tobytes()


# Unevenness by the number of neighbouring frames, less than this part of that of independent draws. Two
# frames of an eighth of all points can hardly help being independent; the more frames, the more there is to
# gain.
LIMITS = {2: 0.95, 4: 0.85, 8: 0.75, 16: 0.7}


def unevenness(masks: np.ndarray, density: np.ndarray, window: int) -> float:
    """Rms deviation of how often a point comes in neighbouring frames from what its density says."""
    sums = np.cumsum(masks, axis=0, dtype=float)
    sums = np.concatenate([np.zeros((1, *density.shape)), sums])
    counts = sums[window:] - sums[:-window]
    return float(np.sqrt(np.mean((counts - window * density) ** 2)))


@pytest.mark.parametrize(
    ("pattern", "grid"),
    [
        (VariableDensityLines(), Grid((256,), 24)),
        (VariableDensityLines(), Grid((256,), 24, largest_gap=8)),
        (VariableDensityLines(), Grid((256,), 24, skip_conjugates=True)),
        (VariableDensityPoints(), Grid((64, 48), 8)),
        (VariableDensityPoints(power=0), Grid((64, 48), 8, shutter=True)),
        (PoissonDisc(), Grid((64, 48), 8)),
        (PoissonDisc(growth=0), Grid((64, 48), 8)),
    ],
    ids=str,
)
def test_neighbouring_frames_cover_more_evenly_than_independent_draws(pattern: Pattern, grid: Grid) -> None:
    rng = np.random.default_rng(60)
    independent = np.array([pattern.draw(grid, 4, rng) for _ in range(64)])
    masks = draw_frames(pattern, grid, 4, 64, rng)
    for window, limit in LIMITS.items():
        random = unevenness(independent, independent.mean(axis=0), window)
        assert unevenness(masks, masks.mean(axis=0), window) < limit * random


@pytest.mark.parametrize(
    ("pattern", "grid"),
    [
        (RegularLines(), Grid((240,), 20)),
        (RegularPoints(), Grid((64, 48), 8)),
        (GoldenSpokes(), Grid((64, 48), 8)),
    ],
    ids=str,
)
def test_regular_frames_cover_more_evenly_than_random_ones(pattern: Pattern, grid: Grid) -> None:
    # single draws of these are all the same; the measure is a random draw with the density of the series
    rng = np.random.default_rng(61)
    masks = draw_frames(pattern, grid, 4, 64, rng)
    density = masks.mean(axis=0)
    for window, limit in LIMITS.items():
        binomial = np.sqrt(np.mean(window * density * (1 - density)))
        assert unevenness(masks, density, window) < limit * binomial


@pytest.mark.parametrize(
    ("pattern", "grid", "acceleration"),
    [
        (RegularLines(), Grid((240,)), 5),
        (RegularLines(), Grid((244,), 24), 244 / 46.0),  # 220 lines outside, 22 of them: every tenth
        (RegularPoints(), Grid((48, 60)), 4),
        (RegularPoints(), Grid((60, 60)), 5),
        (RegularPoints(step=2, shift=1), Grid((48, 60)), 6),
    ],
)
def test_shifted_combs_cover_everything_once_in_a_period(
    pattern: Pattern, grid: Grid, acceleration: float
) -> None:
    masks = draw_frames(pattern, grid, acceleration, 40, np.random.default_rng(62))
    outside = ~grid.calibration_region()
    period = round(outside.sum() / (grid.samples(acceleration) - (~outside).sum()))
    for start in range(20):
        assert (masks[start : start + period].sum(axis=0)[outside] == 1).all()


@pytest.mark.parametrize(
    ("pattern", "grid"),
    [
        (VariableDensityLines(), Grid((96,), 8)),
        (VariableDensityLines(), Grid((96,), 8, skip_conjugates=True)),
        (VariableDensityPoints(), Grid((20, 16), 4)),
    ],
    ids=str,
)
@pytest.mark.parametrize("frame", [0, 5])
def test_each_frame_has_the_density_of_the_pattern(
    pattern: VariableDensityLines, grid: Grid, frame: int
) -> None:
    # Source, from memory: Madow, Ann. Math. Stat. 20 (1949) 333: systematic sampling keeps inclusion
    # probabilities
    # exactly. A point's count is binomial over independent series; the sum of squares of nearly normal
    # numbers.
    rng, series = np.random.default_rng(63), 1200
    counts = np.sum([draw_frames(pattern, grid, 3, frame + 1, rng)[frame] for _ in range(series)], axis=0)
    p = pattern.density(grid, 3)
    undecided = (p > 5 / series) & (p < 1 - 5 / series)
    z = (counts - series * p)[undecided] / np.sqrt(series * (p * (1 - p))[undecided])
    assert (counts[p == 1] == series).all()
    assert abs(z).max() < 4.5
    # fixed size makes counts weakly negatively correlated: the sum is near chi-square
    assert 1e-3 < chi2.sf((z**2).sum(), z.size) < 1 - 1e-3


def test_series_differ_by_seed() -> None:
    for pattern, grid in ((VariableDensityLines(), Grid((64,), 8)), (PoissonDisc(), Grid((24, 24), 4))):
        found = {draw_frames(pattern, grid, 3, 3, np.random.default_rng(s)).tobytes() for s in range(10)}
        assert len(found) == 10


def test_spokes_go_on_from_frame_to_frame() -> None:
    grid = Grid((64, 64))
    masks = draw_frames(GoldenSpokes(), grid, 8, 3, np.random.default_rng(1))
    assert np.array_equal(masks[0], GoldenSpokes().draw(grid, 8, np.random.default_rng(1)))
    assert (masks[0] & masks[1]).sum() < 0.35 * masks[0].sum()


@given(st.integers(1, 60), st.integers(0, 99))
def test_a_whole_number_of_places_is_visited_once_in_a_period(places: int, seed: int) -> None:
    hands = turns(places, 3 * places, np.random.default_rng(seed))
    assert (hands >= 0).all()
    assert (hands < 1).all()
    for start in range(places):
        assert len(set(np.round(hands[start : start + places] * places))) == places


def test_refused() -> None:
    class Lowest(Pattern):
        """The lines around the centre."""

        name = "lowest"
        axes = 1

        def _draw(self, grid: Grid, samples: int, rng: np.random.Generator) -> Any:
            return Grid(grid.shape, samples).calibration_region()

    rng = np.random.default_rng(1)
    with pytest.raises(InputError, match="lowest: this pattern makes no time frames"):
        draw_frames(Lowest(), Grid((8,)), 2, 3, rng)
    with pytest.raises(InputError, match="frames 0: expected a whole number of at least 1"):
        draw_frames(RegularLines(), Grid((8,)), 2, 0, rng)
    with pytest.raises(InputError, match="one phase-encode axis"):
        draw_frames(RegularLines(), Grid((8, 8)), 2, 2, rng)
