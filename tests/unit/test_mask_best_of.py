"""The best of many draws."""

import subprocess
import sys
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import Grid, RegularLines, VariableDensityLines, VariableDensityPoints
from skipline.masks.best_of import best_of, nth_generator
from skipline.masks.judge import judge

CRITERIA = ["sidelobe", "compensated-peak", "compensated-rms", "largest-gap"]
CASES = [
    (VariableDensityLines(), Grid((96,), 8), 4),
    (VariableDensityPoints(), Grid((24, 20), 4), 3),
    (VariableDensityLines(), Grid((96,), 8, partial_fourier=0.6), 3),
]


def _by_judging(pattern: Any, grid: Grid, acceleration: float, mask: np.ndarray, criterion: str) -> float:
    found = judge(mask, density=pattern.density(grid, acceleration), allowed=grid.allowed())
    value = {
        "sidelobe": found.sidelobes.outside_main_lobe,
        "compensated-peak": found.sidelobes.compensated_peak,
        "compensated-rms": found.sidelobes.compensated_rms,
        "largest-gap": found.largest_gap,
    }[criterion]
    assert value is not None
    return value


@pytest.mark.parametrize("criterion", CRITERIA)
@pytest.mark.parametrize(("pattern", "grid", "acceleration"), CASES)
def test_scores_are_those_of_a_judgement_and_the_lowest_wins(
    pattern: Any, grid: Grid, acceleration: float, criterion: Any
) -> None:
    best = best_of(pattern, grid, acceleration, draws=40, seed=3, criterion=criterion)
    masks = [pattern.draw(grid, acceleration, nth_generator(3, n)) for n in range(40)]
    scores = [_by_judging(pattern, grid, acceleration, mask, criterion) for mask in masks]
    np.testing.assert_allclose(best.scores, scores, atol=1e-9)
    assert best.index == int(np.argmin(np.round(scores, 9)))
    assert best.score == pytest.approx(min(scores), abs=1e-9)
    np.testing.assert_array_equal(best.mask, masks[best.index])
    assert best.score < max(scores)


@settings(max_examples=25)
@given(
    st.sampled_from(CASES),
    st.sampled_from(CRITERIA),
    st.integers(0, 2**40),
    st.integers(1, 300),
    st.integers(2, 5),
)
def test_the_number_of_threads_changes_nothing(
    case: Any, criterion: Any, seed: int, draws: int, threads: int
) -> None:
    one, many = (best_of(*case, draws=draws, seed=seed, criterion=criterion, threads=t) for t in (1, threads))
    assert one.index == many.index
    assert one.scores.tobytes() == many.scores.tobytes()
    assert one.mask.tobytes() == many.mask.tobytes()


def test_more_draws_begin_with_the_same_draws() -> None:
    few, many = (best_of(*CASES[0], draws=n, seed=5) for n in (300, 700))
    np.testing.assert_array_equal(few.scores, many.scores[:300])
    assert many.score <= few.score
    assert len(np.unique(many.scores)) > 600  # and each is a draw of its own


def test_the_winner_may_be_of_a_later_batch() -> None:
    pattern, grid, acceleration = CASES[0]
    found = ((seed, best_of(pattern, grid, acceleration, draws=600, seed=seed)) for seed in range(20))
    seed, best = next((seed, best) for seed, best in found if best.index >= 300)
    np.testing.assert_array_equal(
        best.mask, pattern.draw(grid, acceleration, nth_generator(seed, best.index))
    )


def test_the_same_in_another_process() -> None:
    program = (
        "import numpy as np; from skipline.masks import Grid, VariableDensityLines;"
        "from skipline.masks.best_of import best_of;"
        "b = best_of(VariableDensityLines(), Grid((96,), 8), 4, draws=50, seed=11, threads=2);"
        "print(b.index, b.mask.tobytes().hex())"
    )
    said = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True).stdout
    best = best_of(*CASES[0], draws=50, seed=11)
    assert said.split() == [str(best.index), best.mask.tobytes().hex()]


def test_the_seed_may_be_that_of_a_generator() -> None:
    sequence = np.random.SeedSequence(7, spawn_key=(1, 2))
    rng = np.random.default_rng(sequence)
    rng.random(10)  # what it has drawn does not matter
    best = best_of(*CASES[0], draws=20, seed=rng.bit_generator.seed_seq)  # pyright: ignore[reportArgumentType]
    again = best_of(*CASES[0], draws=20, seed=np.random.SeedSequence(7, spawn_key=(1, 2)))
    assert best.index == again.index
    assert nth_generator(sequence, 4).random() == np.random.default_rng(sequence.spawn(5)[4]).random()


def test_a_pattern_that_is_not_random_is_drawn_once() -> None:
    best = best_of(RegularLines(), Grid((64,), 8), 4, draws=1000, seed=1)
    assert (best.index, best.scores.size) == (0, 1)


def test_a_density_can_be_given() -> None:
    pattern, grid, acceleration = CASES[0]
    flat = np.full(grid.shape, 0.25)
    best = best_of(pattern, grid, acceleration, draws=30, seed=2, criterion="compensated-rms", density=flat)
    assert np.ptp(best.scores) < 1e-9  # Parseval: with equal weights all masks are alike


@pytest.mark.parametrize(
    ("more", "says"),
    [
        ({"draws": 0}, "draws 0: expected at least 1"),
        ({"criterion": "beauty"}, 'no criterion "beauty"; expected one of: sidelobe'),
        ({"criterion": "compensated-rms"}, "regular-lines has no density"),
        ({"criterion": "compensated-peak", "density": np.ones(3)}, "density: expected the shape"),
    ],
)
def test_refusals(more: dict[str, Any], says: str) -> None:
    arguments: dict[str, Any] = {"draws": 10, "seed": 1, **more}
    with pytest.raises(InputError, match=says) as refusal:
        best_of(RegularLines(), Grid((64,), 8), 4, **arguments)
    assert "\n" not in str(refusal.value)
