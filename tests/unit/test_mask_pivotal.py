"""The pivotal draws, local or not: fixed size, certain and impossible points, reproducible."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import (
    inclusion_probabilities,
    local_pivotal_draw,
    pivotal_draw,
)

BOTH = pytest.mark.parametrize("draw", [pivotal_draw, local_pivotal_draw])


@BOTH
@given(
    st.lists(st.one_of(st.just(0.0), st.floats(1e-6, 1e3)), min_size=2, max_size=60),
    st.integers(0, 2**32 - 1),
    st.data(),
)
def test_size_is_the_sum_and_certainty_is_kept(
    draw, law: list[float], seed: int, data: st.DataObject
) -> None:
    samples = data.draw(st.integers(0, len(law)))
    probabilities = inclusion_probabilities(np.array([1.0, *law]), samples)
    taken = draw(probabilities, np.random.default_rng(seed))
    assert taken.dtype == bool
    assert taken.shape == probabilities.shape
    assert taken.sum() == samples
    assert taken[probabilities == 1].all()
    assert not taken[probabilities == 0].any()


@BOTH
def test_size_is_exact_for_many_points_and_probabilities_of_all_sizes(draw) -> None:
    rng = np.random.default_rng(2)
    law = 10.0 ** rng.uniform(-12, 0, size=300_000)
    for samples in (1, 1000, 150_000, 299_999):
        assert draw(inclusion_probabilities(law, samples), rng).sum() == samples


@BOTH
@pytest.mark.parametrize("probabilities", [np.ones(5), np.zeros(5), np.ones((0,))])
def test_nothing_to_decide(draw, probabilities: np.ndarray) -> None:
    taken = draw(probabilities, np.random.default_rng(1))
    assert np.array_equal(taken, probabilities == 1)


@BOTH
def test_layout_in_memory_does_not_matter(draw) -> None:
    probabilities = inclusion_probabilities(np.random.default_rng(3).random((20, 30)), 100)
    one = draw(probabilities, np.random.default_rng(4))
    other = draw(np.asfortranarray(probabilities), np.random.default_rng(4))
    assert np.array_equal(one, other)
    assert draw(probabilities[:, ::-1], np.random.default_rng(4)).sum() == 100


@BOTH
def test_input_is_left_alone_and_the_generator_is_the_only_randomness(draw) -> None:
    probabilities = inclusion_probabilities(np.arange(1.0, 101.0), 30)
    before = probabilities.copy()
    np.random.seed(1)  # noqa: NPY002  # the global state must not matter
    one = draw(probabilities, np.random.default_rng(9))
    np.random.seed(2)  # noqa: NPY002
    again = draw(probabilities, np.random.default_rng(9))
    assert one.tobytes() == again.tobytes()
    assert one.tobytes() != draw(probabilities, np.random.default_rng(10)).tobytes()
    assert np.array_equal(probabilities, before)


@BOTH
def test_any_number_of_threads_draws_the_same(draw) -> None:
    probabilities = inclusion_probabilities(np.arange(1.0, 4001.0), 999)

    def bytes_of(seed: int) -> bytes:
        return draw(probabilities, np.random.default_rng(seed)).tobytes()

    with ThreadPoolExecutor(8) as pool:
        assert list(pool.map(bytes_of, range(64))) == [bytes_of(seed) for seed in range(64)]


@pytest.mark.parametrize(
    ("probabilities", "says"),
    [
        ([0.5, 0.6], "a sum that is a whole number, got 1.1"),
        ([0.5, 1.5], "between 0 and 1"),
        ([1.5, -0.5], "between 0 and 1"),
        ([1.0, float("nan")], "between 0 and 1"),
    ],
)
@BOTH
def test_refusals(draw, probabilities: list[float], says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        draw(np.array(probabilities), np.random.default_rng(1))
    assert "\n" not in str(refusal.value)


@pytest.mark.parametrize("shape", [(64,), (9, 12)])
def test_neighbours_decide_between_themselves(shape: tuple[int, ...]) -> None:
    # with the probability 1/2 each duel takes one of two nearest undecided points: clusters are rare
    rng = np.random.default_rng(1)

    def adjacent(draw) -> float:
        masks = [draw(np.full(shape, 0.5), rng) for _ in range(200)]
        return float(np.mean([np.sum(mask[1:] & mask[:-1]) for mask in masks]))

    assert adjacent(local_pivotal_draw) < 0.85 * adjacent(pivotal_draw)


def test_local_draw_of_three_axes_is_refused() -> None:
    with pytest.raises(InputError, match="expected one or two axes, got 3"):
        local_pivotal_draw(np.full((2, 2, 2), 0.5), np.random.default_rng(1))
