"""The pivotal draw: fixed size, certain and impossible points, reproducible, fast."""

import time
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import Grid, VariableDensityPoints, inclusion_probabilities, pivotal_draw


@given(
    st.lists(st.one_of(st.just(0.0), st.floats(1e-6, 1e3)), min_size=2, max_size=60),
    st.integers(0, 2**32 - 1),
    st.data(),
)
def test_size_is_the_sum_and_certainty_is_kept(law: list[float], seed: int, data: st.DataObject) -> None:
    samples = data.draw(st.integers(0, len(law)))
    probabilities = inclusion_probabilities(np.array([1.0, *law]), samples)
    taken = pivotal_draw(probabilities, np.random.default_rng(seed))
    assert taken.dtype == bool
    assert taken.shape == probabilities.shape
    assert taken.sum() == samples
    assert taken[probabilities == 1].all()
    assert not taken[probabilities == 0].any()


def test_size_is_exact_for_many_points_and_probabilities_of_all_sizes() -> None:
    rng = np.random.default_rng(2)
    law = 10.0 ** rng.uniform(-12, 0, size=300_000)
    for samples in (1, 1000, 150_000, 299_999):
        assert pivotal_draw(inclusion_probabilities(law, samples), rng).sum() == samples


@pytest.mark.parametrize("probabilities", [np.ones(5), np.zeros(5), np.ones((0,))])
def test_nothing_to_decide(probabilities: np.ndarray) -> None:
    taken = pivotal_draw(probabilities, np.random.default_rng(1))
    assert np.array_equal(taken, probabilities == 1)


def test_layout_in_memory_does_not_matter() -> None:
    probabilities = inclusion_probabilities(np.random.default_rng(3).random((20, 30)), 100)
    one = pivotal_draw(probabilities, np.random.default_rng(4))
    other = pivotal_draw(np.asfortranarray(probabilities), np.random.default_rng(4))
    assert np.array_equal(one, other)
    assert pivotal_draw(probabilities[:, ::-1], np.random.default_rng(4)).sum() == 100


def test_input_is_left_alone_and_the_generator_is_the_only_randomness() -> None:
    probabilities = inclusion_probabilities(np.arange(1.0, 101.0), 30)
    before = probabilities.copy()
    np.random.seed(1)  # noqa: NPY002  # the global state must not matter
    one = pivotal_draw(probabilities, np.random.default_rng(9))
    np.random.seed(2)  # noqa: NPY002
    again = pivotal_draw(probabilities, np.random.default_rng(9))
    assert one.tobytes() == again.tobytes()
    assert one.tobytes() != pivotal_draw(probabilities, np.random.default_rng(10)).tobytes()
    assert np.array_equal(probabilities, before)


def test_any_number_of_threads_draws_the_same() -> None:
    probabilities = inclusion_probabilities(np.arange(1.0, 4001.0), 999)

    def draw(seed: int) -> bytes:
        return pivotal_draw(probabilities, np.random.default_rng(seed)).tobytes()

    with ThreadPoolExecutor(8) as pool:
        assert list(pool.map(draw, range(64))) == [draw(seed) for seed in range(64)]


def test_256_x_256_takes_less_than_20_ms() -> None:
    probabilities = VariableDensityPoints().density(Grid((256, 256), 24), 4)
    rng = np.random.default_rng(1)
    pivotal_draw(probabilities, rng)  # compiles
    seconds = []
    for _ in range(10):
        begin = time.perf_counter()
        pivotal_draw(probabilities, rng)
        seconds.append(time.perf_counter() - begin)
    assert min(seconds) < 0.020  # 1.5 ms on an idle core


@pytest.mark.parametrize(
    ("probabilities", "says"),
    [
        ([0.5, 0.6], "a sum that is a whole number, got 1.1"),
        ([0.5, 1.5], "between 0 and 1"),
        ([1.5, -0.5], "between 0 and 1"),
        ([1.0, float("nan")], "between 0 and 1"),
    ],
)
def test_refusals(probabilities: list[float], says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        pivotal_draw(np.array(probabilities), np.random.default_rng(1))
    assert "\n" not in str(refusal.value)
