"""Order of the samples over echo trains."""

from itertools import pairwise, permutations
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import Grid, RegularLines, VariableDensityLines, VariableDensityPoints
from skipline.masks.order import EchoTrains, echo_trains

ORDERS = ["linear", "centre-out", "interleaved"]


@st.composite
def orders(draw: st.DrawFn, most: int = 12) -> tuple[np.ndarray, dict[str, Any]]:
    """A mask, and how to order its samples."""
    shape = draw(st.lists(st.integers(1, most), min_size=1, max_size=2))
    size = int(np.prod(shape))
    length = draw(st.integers(1, min(size, 8)))
    samples = length * draw(st.integers(1, size // length))
    seed = draw(st.integers(0, 2**32 - 1))
    mask = (np.random.default_rng(seed).permutation(size) < samples).reshape(shape)
    return mask, {
        "train_length": length,
        "order": draw(st.sampled_from(ORDERS)),
        "effective_echo": draw(st.none() | st.integers(1, length)),
        "axis": draw(st.integers(0, len(shape) - 1)),
    }


def echoes(trains: EchoTrains) -> np.ndarray:
    """(echo, train, axis): the samples of each echo, row by row."""
    return np.stack(
        [np.array(sorted(trains.index[trains.echo == e].tolist())) for e in range(1, trains.train_length + 1)]
    )


def changed(how: dict[str, Any], **more: Any) -> dict[str, Any]:
    return {**how, **more}


def largest(samples: np.ndarray) -> float:
    return float(np.sqrt((np.diff(samples, axis=0) ** 2).sum(axis=-1).max(initial=0)))


@given(orders())
def test_every_sample_has_its_echo_and_its_time(case: tuple[np.ndarray, dict[str, Any]]) -> None:
    mask, how = case
    trains = echo_trains(mask, **how, echo_spacing_ms=4.2, repetition_time_ms=700.0)
    np.testing.assert_array_equal(trains.mask, mask)
    assert len(trains.index) == mask.sum()
    assert trains.train_length == how["train_length"]
    slots = [
        (t, e) for t in range(mask.sum() // trains.train_length) for e in range(1, trains.train_length + 1)
    ]
    assert list(zip(trains.train.tolist(), trains.echo.tolist(), strict=True)) == slots
    np.testing.assert_allclose(trains.echo_time_ms, trains.echo * 4.2)
    np.testing.assert_allclose(trains.time_ms, trains.train * 700.0 + trains.echo * 4.2)
    assert (np.diff(trains.time_ms) > 0).all()


@given(orders())
def test_the_effective_echo_sits_where_asked(case: tuple[np.ndarray, dict[str, Any]]) -> None:
    mask, how = case
    trains = echo_trains(mask, **how)
    centre = np.argwhere(mask)[Grid(mask.shape).radius()[mask].argmin()]
    echo = trains.echo[(trains.index == centre).all(axis=1)][0]
    assert trains.effective_echo == echo
    if how["effective_echo"] is not None:
        assert echo == how["effective_echo"]
    elif how["order"] == "centre-out":
        assert echo == 1


@given(orders())
def test_the_largest_jump_is_no_worse_than_row_by_row(case: tuple[np.ndarray, dict[str, Any]]) -> None:
    mask, how = case
    trains = echo_trains(mask, **how)
    # The samples of each echo dealt to the trains row by row.
    assert trains.largest_jump <= largest(echoes(trains)) + 1e-9
    if how["order"] == "interleaved":
        # The plain list, row by row, cut into trains; the same effective echo.
        index = np.argwhere(mask)
        length, centre = how["train_length"], Grid(mask.shape).radius()[mask].argmin()
        effective = centre % length if how["effective_echo"] is None else how["effective_echo"] - 1
        cut = np.roll(index, effective - centre, axis=0).reshape(-1, length, mask.ndim)
        assert trains.largest_jump <= largest(cut.swapaxes(0, 1)) + 1e-9


@settings(max_examples=60)
@given(st.integers(0, 2**32 - 1), st.integers(2, 5), st.integers(2, 3), st.sampled_from(ORDERS))
def test_no_other_way_to_join_the_echoes_has_a_smaller_jump(
    seed: int, count: int, length: int, order: Any
) -> None:
    mask = (np.random.default_rng(seed).permutation(81) < count * length).reshape(9, 9)
    trains = echo_trains(mask, length, order=order)
    samples = echoes(trains)
    least = 0.0
    for a, b in pairwise(samples):
        ways = (largest(np.stack([a, b[list(way)]])) for way in permutations(range(len(b))))
        least = max(least, min(ways))
    assert trains.largest_jump == pytest.approx(least)


def test_interleaved_trains_are_no_worse_than_the_plain_list_cut_into_trains() -> None:
    # One in forty of these needs the path row by row, most of the others the path there and back.
    better = 0
    for seed in range(300):
        rng = np.random.default_rng(seed)
        shape, length = rng.integers(3, 9, 2), int(rng.integers(2, 9))
        samples = int(rng.integers(1, shape.prod() // length + 1)) * length
        mask = (rng.permutation(shape.prod()) < samples).reshape(shape)
        effective = int(rng.integers(1, length + 1))
        centre = int(Grid(mask.shape).radius()[mask].argmin())
        cut = np.roll(np.argwhere(mask), effective - 1 - centre, axis=0).reshape(-1, length, 2)
        trains = echo_trains(mask, length, order="interleaved", effective_echo=effective)
        jump = largest(cut.swapaxes(0, 1))
        assert trains.largest_jump <= jump + 1e-9
        better += trains.largest_jump < jump - 1e-9
    assert better > 100


def test_groups_of_many_trains_are_no_worse_either() -> None:
    mask = VariableDensityPoints().draw(Grid((64, 64), 8), 4, np.random.default_rng(1))
    for order in ("linear", "centre-out", "interleaved"):
        trains = echo_trains(mask, 2, order=order)  # 512 trains: two groups
        assert trains.largest_jump <= largest(echoes(trains))
        np.testing.assert_array_equal(trains.mask, mask)


@given(orders())
def test_linear_passes_k_space_along_its_axis(case: tuple[np.ndarray, dict[str, Any]]) -> None:
    mask, how = case
    trains = echo_trains(mask, **changed(how, order="linear", effective_echo=None))
    bands = [trains.index[trains.echo == e, how["axis"]] for e in range(1, how["train_length"] + 1)]
    for earlier, later in pairwise(bands):
        assert earlier.max() <= later.min()


@given(orders())
def test_linear_wraps_round_for_another_effective_echo(case: tuple[np.ndarray, dict[str, Any]]) -> None:
    mask, how = case
    how = changed(how, order="linear")
    natural = echo_trains(mask, **changed(how, effective_echo=None))
    asked = echo_trains(mask, **how)
    shift = asked.effective_echo - natural.effective_echo
    np.testing.assert_array_equal(np.roll(echoes(natural), shift, axis=0), echoes(asked))


@given(orders())
def test_centre_out_goes_outwards_with_the_distance_from_the_effective_echo(
    case: tuple[np.ndarray, dict[str, Any]],
) -> None:
    mask, how = case
    trains = echo_trains(mask, **changed(how, order="centre-out"))
    radius = Grid(mask.shape).radius()[tuple(trains.index.T)]
    away = abs(trains.echo - trains.effective_echo)
    for distance in range(away.max()):
        assert radius[away == distance].max() <= radius[away == distance + 1].min()


def test_interleaved_trains_are_runs_of_neighbours() -> None:
    mask = RegularLines().draw(Grid((64,)), 2, np.random.default_rng())
    trains = echo_trains(mask, 4, order="interleaved")
    np.testing.assert_array_equal(trains.index[:, 0], np.arange(0, 64, 2))
    assert trains.largest_jump == 2
    plane = np.ones((16, 16), bool)
    there_and_back = echo_trains(plane, 8, order="interleaved")
    assert there_and_back.largest_jump < largest(plane.nonzero()[1].reshape(-1, 8).T[..., None]) + 1
    assert there_and_back.largest_jump == 1  # row by row is so too: two trains a row
    assert echo_trains(plane, 32, order="interleaved").largest_jump == 1  # where row by row jumps back


def test_trains_follow_each_other_as_their_samples_at_the_effective_echo() -> None:
    mask = VariableDensityLines().draw(Grid((96,), 8), 3, np.random.default_rng(2))
    linear = echo_trains(mask, 4, effective_echo=2)
    assert (np.diff(linear.index[linear.echo == 2, 0]) > 0).all()
    out = echo_trains(mask, 1, order="centre-out")  # with one echo, the order is that of the trains
    assert (np.diff(abs(out.index[:, 0] - 48)) >= 0).all()


def test_the_centre_may_be_left_out() -> None:
    mask = np.zeros((8, 8), bool)
    mask[[0, 1, 5, 7], [0, 3, 4, 7]] = True
    assert echo_trains(mask, 4, effective_echo=3).effective_echo == 3


MASK = np.arange(48) % 2 == 0


@pytest.mark.parametrize(
    ("more", "says"),
    [
        (
            {"train_length": 5},
            "24 samples do not fill trains of 5 echoes: 20 or 25 samples do, or trains of 4",
        ),
        ({"train_length": 100}, "100 samples do, or trains of 24"),
        ({"train_length": 0}, "train length 0: expected at least 1"),
        ({"effective_echo": 0}, "effective echo 0: expected 1 to 4"),
        ({"effective_echo": 5}, "effective echo 5: expected 1 to 4"),
        ({"order": "spiral"}, 'no order "spiral"; expected one of: linear, centre-out, interleaved'),
        ({"axis": 1}, "axis 1: expected 0"),
        ({"repetition_time_ms": 19.0}, "a train of 4 echoes every 5 ms lasts 20 ms"),
        ({"echo_spacing_ms": 0.0}, "expected finite times"),
        ({"echo_spacing_ms": float("nan")}, "expected finite times"),
        ({"mask": np.zeros(8, bool)}, "with a sample at least"),
        ({"mask": np.ones(8)}, "true and false"),
    ],
)
def test_refusals(more: dict[str, Any], says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        echo_trains(**changed({"mask": MASK, "train_length": 4}, **more))
    assert "\n" not in str(refusal.value)
