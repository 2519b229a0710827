"""Density laws and the inclusion probabilities made of them."""

from pathlib import Path
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
    adaptive_law,
    gaussian_law,
    grid_probabilities,
    inclusion_probabilities,
    power_law,
    read_law,
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


def test_gaussian_law() -> None:
    k = np.arange(8) - 4
    np.testing.assert_allclose(gaussian_law(Grid((8,)), 0.3), np.exp(-((k / 4) ** 2) / (2 * 0.3**2)))
    assert gaussian_law(Grid((9, 9)), 0.5)[4, 0] == pytest.approx(np.exp(-0.5 / (2 * 0.25)))


@given(st.data(), st.integers(0, 2**32 - 1))
def test_partners_share_at_most_1_in_proportion_to_the_law(data: st.DataObject, seed: int) -> None:
    shape = tuple(data.draw(st.lists(st.integers(1, 9), min_size=1, max_size=2)))
    grid = Grid(
        shape,
        data.draw(st.integers(0, min(shape) // 3)),
        shutter=data.draw(st.booleans()),
        skip_conjugates=True,
        partial_fourier=data.draw(st.sampled_from([1.0, 0.8])),
    )
    rng = np.random.default_rng(seed)
    law = rng.random(shape) * (rng.random(shape) < 0.7) + 1e-3 * (rng.random() < 0.5)
    assume(law.any())
    samples = data.draw(st.sampled_from(grid.counts()))
    assume(samples > grid.calibration_region().sum())
    p = grid_probabilities(grid, law, samples)
    assert p.sum() == pytest.approx(samples, abs=1e-9)
    assert (p[grid.calibration_region()] == 1).all()
    assert (p[~grid.allowed()] == 0).all()
    free, partner = grid.allowed() & ~grid.calibration_region(), grid.partner()
    paired = free & (partner >= 0) & free.ravel()[partner]
    q, other = p.ravel()[partner], law.ravel()[partner]
    assert (p + q)[paired].max(initial=0) <= 1 + 1e-12
    np.testing.assert_allclose((p * other)[paired], (q * law)[paired], atol=1e-12)
    # c law for all units that are not certain, with one c
    unit, size = np.where(paired, p + q, p)[free], np.where(paired, law + other, law)[free]
    open_units = (unit < 1 - 1e-9) & (size > 0)
    if open_units.any() and (law[free] > 0).any() and (unit[size == 0] == 0).all():
        c = (unit / np.where(size > 0, size, 1))[open_units]
        np.testing.assert_allclose(c, c.mean(), rtol=1e-6)
        assert (size[unit >= 1 - 1e-9] >= 0.999999 / c.mean()).all()


@given(st.integers(0, 2**32 - 1), st.sampled_from([(0,), (1,), (0, 1), (1, 0), (1, 2)]))
def test_adaptive_law_is_the_mean_power_spectrum(seed: int, axes: tuple[int, ...]) -> None:
    rng = np.random.default_rng(seed)
    images = [rng.normal(size=(6, 5, 4)) + 1j * rng.normal(size=(6, 5, 4)) for _ in range(3)]
    # by Parseval the transform of all axes gives the same, here by matrices: the definition
    expected = 0
    for image in images:
        kspace = image
        for axis, n in enumerate(image.shape):
            k = np.arange(n) - n // 2
            matrix = np.exp(-2j * np.pi * np.outer(k, k) / n)
            kspace = np.moveaxis(np.tensordot(matrix, kspace, axes=(1, axis)), 0, axis)
        power = np.transpose(abs(kspace) ** 2, (*axes, *(a for a in range(3) if a not in axes)))
        power = power.reshape(*power.shape[: len(axes)], -1).sum(axis=-1)
        expected = expected + power / power.sum() / 3
    np.testing.assert_allclose(adaptive_law(images, axes), expected, rtol=1e-9)
    scaled = [1e-9 * images[0], images[1], 1e9 * images[2]]
    np.testing.assert_allclose(adaptive_law(scaled, axes), expected, rtol=1e-9)
    np.testing.assert_allclose(adaptive_law(images[0], axes), adaptive_law([images[0]], axes))


def test_a_law_from_a_file(tmp_path: Path) -> None:
    law = np.random.default_rng(1).random((6, 4)).round(6)
    np.save(tmp_path / "law.npy", law)
    np.savetxt(tmp_path / "law.csv", law, delimiter=", ", header="relative density")
    np.savetxt(tmp_path / "column.txt", law[:, 0])
    np.savetxt(tmp_path / "row.txt", law[:1, :])
    np.testing.assert_array_equal(read_law(tmp_path / "law.npy", Grid((6, 4))), law)
    np.testing.assert_array_equal(read_law(tmp_path / "law.csv", Grid((6, 4))), law)
    np.testing.assert_array_equal(read_law(tmp_path / "column.txt", Grid((6,))), law[:, 0])
    np.testing.assert_array_equal(read_law(tmp_path / "row.txt", Grid((4,))), law[0])
    pattern = VariableDensityPoints(law=str(tmp_path / "law.npy"))
    np.testing.assert_array_equal(
        pattern.density(Grid((6, 4), 2), 3), grid_probabilities(Grid((6, 4), 2), law, 8)
    )


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (None, "there is no such file"),
        ("1 2 x 4", "expected rows of numbers of equal length"),
        ("1 2\n3", "expected rows of numbers of equal length"),
        ("", r"expected the shape of the grid, \(4,\), got"),
        ("1 2 3", r"expected the shape of the grid, \(4,\), got \(3,\)"),
        ("1 2 3 -4", "finite numbers of at least 0"),
        ("1 2 3 nan", "finite numbers of at least 0"),
        ("0 0 0 0", "zero everywhere"),
    ],
)
def test_refused_files(tmp_path: Path, content: str | None, says: str) -> None:
    path = tmp_path / "law.txt"
    if content is not None:
        path.write_text(content)
    with pytest.raises(InputError, match=says) as refusal:
        VariableDensityLines(law=str(path)).draw(Grid((4,)), 2, np.random.default_rng(1))
    assert "law.txt" in str(refusal.value)
    assert "\n" not in str(refusal.value)


def test_refused_arrays_in_files(tmp_path: Path) -> None:
    path = tmp_path / "law.npy"
    for array in (np.ones(4) * 1j, np.array(["a"] * 4), np.array([{}] * 4, dtype=object)):
        np.save(path, array, allow_pickle=True)
        with pytest.raises(InputError, match=r"law\.npy: expected"):
            read_law(path, Grid((4,)))
    path.write_bytes(b"")
    with pytest.raises(InputError, match=r"law\.npy: expected"):
        read_law(path, Grid((4,)))


ONES: Any = np.ones(4)


@pytest.mark.parametrize(
    ("call", "says"),
    [
        (lambda: power_law(Grid((8,)), -1), "power -1: expected a number of at least 0"),
        (lambda: power_law(Grid((8,)), float("nan")), "power nan"),
        (lambda: gaussian_law(Grid((8,)), 0), "width 0: expected a number above 0"),
        (lambda: gaussian_law(Grid((8,)), float("inf")), "width inf"),
        (lambda: adaptive_law([], [0]), "at least one reference image"),
        (lambda: adaptive_law(np.zeros((4, 4)), [0]), "zero everywhere"),
        (lambda: adaptive_law(np.full((4, 4), np.nan), [0]), "not finite"),
        (lambda: adaptive_law(np.ones((4, 4)), [2]), "not those of an image"),
        (lambda: adaptive_law(np.ones((4, 4)), [0, 0]), "one or two different axes"),
        (lambda: adaptive_law([np.ones((4, 4)), np.ones((5, 4))], [0]), r"equal size .* \(4,\) and \(5,\)"),
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
