"""Density laws and the inclusion probabilities made of them."""

from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import (
    Grid,
    VariableDensityLines,
    VariableDensityPoints,
    inclusion_probabilities,
    power_law,
)

laws = st.lists(
    st.one_of(st.just(0.0), st.floats(1e-9, 1e9), st.sampled_from([1.0, 2.0])), min_size=1, max_size=40
).map(np.array)


def by_bisection(law: np.ndarray, samples: int) -> np.ndarray:
    """min(1, c law), with c found by halving an interval: the definition, and not the way it is computed."""
    low, high = 0.0, samples / law[law > 0].min() + 1.0
    for _ in range(300):
        c = (low + high) / 2
        low, high = (c, high) if np.minimum(c * law, 1).sum() < samples else (low, c)
    return np.minimum(high * law, 1)


@given(laws, st.data())
def test_probabilities_are_the_law_scaled_and_cut_at_1(law: np.ndarray, data: st.DataObject) -> None:
    assume(law.any())
    samples = data.draw(st.integers(0, law.size))
    probabilities = inclusion_probabilities(law, samples)
    assert probabilities.sum() == pytest.approx(samples, abs=1e-9)
    assert probabilities.min() >= 0
    assert probabilities.max() <= 1
    positive = int((law > 0).sum())
    if samples <= positive:
        np.testing.assert_allclose(probabilities, by_bisection(law, samples), rtol=1e-7, atol=1e-12)
    else:
        # not enough points where the law is positive: the others share what is left
        np.testing.assert_array_equal(probabilities[law > 0], 1)
        np.testing.assert_allclose(probabilities[law == 0], (samples - positive) / (law.size - positive))


@given(laws, st.data())
def test_certain_points_are_certain_and_the_others_share_the_rest(
    law: np.ndarray, data: st.DataObject
) -> None:
    assume(law.any())
    certain = np.array(data.draw(st.lists(st.booleans(), min_size=law.size, max_size=law.size)))
    samples = data.draw(st.integers(int(certain.sum()), law.size))
    probabilities = inclusion_probabilities(law, samples, certain)
    np.testing.assert_array_equal(probabilities[certain], 1)
    assert probabilities.sum() == pytest.approx(samples, abs=1e-9)
    if law[~certain].any():
        alone = inclusion_probabilities(law[~certain], samples - int(certain.sum()))
        np.testing.assert_array_equal(probabilities[~certain], alone)


@pytest.mark.parametrize("scale", [1e-300, 1e-30, 1e30, 1e307])
def test_probabilities_do_not_depend_on_the_scale_of_the_law(scale: float) -> None:
    law = power_law(Grid((64, 48)), 3)
    np.testing.assert_allclose(
        inclusion_probabilities(law * scale, 700), inclusion_probabilities(law, 700), rtol=1e-9
    )


@given(
    st.sampled_from([Grid((64,)), Grid((65,), 9), Grid((256,), 24), Grid((40, 24), 6), Grid((33, 33))]),
    st.floats(1, 7),
    st.floats(0, 20),
)
def test_density_of_a_grid_is_exact_in_sum_monotone_and_certain_in_the_calibration_region(
    grid: Grid, acceleration: float, power: float
) -> None:
    pattern = (VariableDensityLines if grid.axes == 1 else VariableDensityPoints)(power=power)
    density = pattern.density(grid, acceleration)
    assert density.shape == grid.shape
    assert density.sum() == pytest.approx(grid.samples(acceleration), abs=1e-9)
    assert density.min() >= 0
    assert density.max() <= 1
    region = grid.calibration_region()
    assert (density[region] == 1).all()
    outwards = np.argsort(grid.radius()[~region], kind="stable")
    assert (np.diff(density[~region][outwards]) <= 1e-12).all()


def test_power_law() -> None:
    np.testing.assert_allclose(power_law(Grid((8,)), 3), (1 - abs(np.arange(8) - 4) / 4) ** 3)
    np.testing.assert_array_equal(power_law(Grid((8, 6)), 0), 1)
    assert power_law(Grid((9, 9)), 2)[4, 0] == pytest.approx((1 - np.sqrt(0.5)) ** 2)
    assert power_law(Grid((1,)), 2).tolist() == [1]


ONES: Any = np.ones(4)


@pytest.mark.parametrize(
    ("call", "says"),
    [
        (lambda: power_law(Grid((8,)), -1), "power -1: expected a number of at least 0"),
        (lambda: power_law(Grid((8,)), float("nan")), "power nan"),
        (lambda: inclusion_probabilities(np.array([1.0, -0.1]), 1), "at least 0"),
        (lambda: inclusion_probabilities(np.array([1.0, np.nan]), 1), "finite"),
        (lambda: inclusion_probabilities(np.array([1.0, np.inf]), 1), "finite"),
        (lambda: inclusion_probabilities(np.zeros(4), 1), "zero everywhere"),
        (lambda: inclusion_probabilities(ONES, 5), "samples 5: expected 0, .* to 4, that of all"),
        (lambda: inclusion_probabilities(ONES, 1, ONES > 0), "samples 1: expected 4, .* to 4, that of all"),
        (lambda: inclusion_probabilities(ONES, 1, np.array([True])), "shape of the law"),
    ],
)
def test_refusals(call, says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        call()
    assert "\n" not in str(refusal.value)
