"""Point-spread function and sidelobes."""

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import (
    Grid,
    RegularLines,
    VariableDensityLines,
    VariableDensityPoints,
    point_spread,
    sidelobes,
)

masks = st.tuples(
    st.lists(st.integers(1, 12), min_size=1, max_size=3), st.integers(0, 2**32 - 1), st.floats(0, 1)
).map(lambda a: _with_a_sample(np.random.default_rng(a[1]).random(a[0]) < a[2]))


def _with_a_sample(mask: np.ndarray) -> np.ndarray:
    mask[(0,) * mask.ndim] = True
    return mask


@given(masks)
def test_peak_is_1_at_the_centre_and_nothing_is_higher(mask: np.ndarray) -> None:
    spread = point_spread(mask)
    assert spread.shape == mask.shape
    assert spread.dtype == np.complex128
    assert spread[tuple(n // 2 for n in mask.shape)] == pytest.approx(1)
    assert abs(spread).max() <= 1 + 1e-12


@given(masks)
def test_point_spread_is_the_sum_over_the_samples(mask: np.ndarray) -> None:
    where = [np.arange(n) - n // 2 for n in mask.shape]
    positions = np.stack(np.meshgrid(*where, indexing="ij"), axis=-1)
    frequencies = positions[mask] / np.array(mask.shape)
    expected = np.exp(2j * np.pi * (positions @ frequencies.T)).mean(axis=-1)
    np.testing.assert_allclose(point_spread(mask), expected, atol=1e-12)


@given(masks)
def test_sidelobes_are_those_of_the_point_spread_function(mask: np.ndarray) -> None:
    found = sidelobes(mask)
    spread = abs(point_spread(mask)).ravel()
    others = np.delete(spread, np.ravel_multi_index([n // 2 for n in mask.shape], mask.shape))
    if others.size:
        assert found.peak == pytest.approx(others.max(), abs=1e-12)
        assert found.rms == pytest.approx(np.sqrt(np.mean(others**2)), abs=1e-12)
        assert found.rms == pytest.approx(found.rms_uniform, abs=1e-9)  # Parseval
    else:
        assert (found.peak, found.rms, found.rms_uniform) == (0, 0, 0)


@pytest.mark.parametrize("shape", [(1,), (64,), (8, 8)])
def test_full_sampling_has_no_sidelobes(shape: tuple[int, ...]) -> None:
    found = sidelobes(np.ones(shape, dtype=bool))
    assert found.peak == pytest.approx(0, abs=1e-12)
    assert found.rms == pytest.approx(0, abs=1e-12)
    assert found.rms_uniform == 0


def test_the_sidelobes_of_random_lines_are_lower_than_the_replicas_of_regular_lines() -> None:
    grid, rng = Grid((256,)), np.random.default_rng(1)
    assert sidelobes(RegularLines().draw(grid, 4, rng)).peak == pytest.approx(1)
    assert sidelobes(VariableDensityLines(power=0).draw(grid, 4, rng)).peak < 0.5
    assert sidelobes(VariableDensityPoints(power=0).draw(Grid((64, 64)), 4, rng)).peak < 0.15


NUMBERS: Any = np.ones(8)


@pytest.mark.parametrize(
    ("mask", "says"),
    [(np.zeros(8, dtype=bool), "it takes no sample"), (NUMBERS, "expected true and false, got .* float64")],
)
def test_refusals(mask: np.ndarray, says: str) -> None:
    for function in (point_spread, sidelobes):
        with pytest.raises(InputError, match=says) as refusal:
            function(mask)
        assert "\n" not in str(refusal.value)
