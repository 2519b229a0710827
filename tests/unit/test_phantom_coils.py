"""Coil arrays: shapes, evenness, symmetry, refusals."""

import numpy as np
import pytest

from skipline import InputError
from skipline.phantoms import CoilArray, ring_array


def disc(n: int) -> np.ndarray:
    x = (np.arange(n) - n // 2) / n
    return x[:, None] ** 2 + x[None, :] ** 2 <= 0.25


@pytest.mark.parametrize("coils", [1, 2, 3, 5, 7, 8, 12, 16, 32, 64])
def test_sum_of_squares_is_one_on_average_and_nearly_so_everywhere(coils: int) -> None:
    maps = ring_array(coils).maps((128, 128))[..., 0]
    power = np.sum(abs(maps.astype(complex)) ** 2, axis=0)[disc(128)]
    assert power.mean() == pytest.approx(1.0, abs=1e-3)
    assert abs(power - 1).max() < 0.05


@pytest.mark.parametrize(("radius", "width", "order"), [(0.5, 0.3, 1), (0.9, 0.1, 2), (0.75, 0.15, 5)])
def test_scale_holds_for_other_rings(radius: float, width: float, order: int) -> None:
    maps = ring_array(6, radius, width, order).maps((128, 128))[..., 0]
    assert np.sum(abs(maps) ** 2, axis=0)[disc(128)].mean() == pytest.approx(1.0, abs=3e-3)


def test_each_coil_is_strongest_on_its_side_and_differs_from_the_others() -> None:
    maps = ring_array(8).maps((64, 64))[..., 0]
    x = (np.arange(64) - 32) / 64
    for coil in range(8):
        weight = abs(maps[coil]) ** 2 * disc(64)
        centre = np.array([(weight * x[:, None]).sum(), (weight * x[None, :]).sum()]) / weight.sum()
        assert (
            np.degrees(np.arctan2(centre[1], centre[0])) % 360 == pytest.approx(45 * coil, abs=2) or coil == 0
        )
        assert np.hypot(*centre) > 0.15
    # Singular values say how many coils are independent: none is a mixture of the others.
    singular = np.linalg.svd(maps[:, disc(64)], compute_uv=False)
    assert singular[-1] > 0.02 * singular[0]


def test_ring_is_symmetric() -> None:
    # A quarter turn of the picture carries coil 0 to coil 2 of 8 (odd size: the grid is symmetric).
    maps = abs(ring_array(8).maps((63, 63))[..., 0])
    quarter = maps[0][:, ::-1].T  # value at (x, y) taken from (y, -x)
    np.testing.assert_allclose(quarter, maps[2], atol=1e-5)


def test_maps_of_volumes_are_extruded_along_z() -> None:
    maps = ring_array(4).maps((16, 24, 5))
    assert maps.shape == (4, 16, 24, 5)
    assert maps.dtype == np.complex64
    assert maps.flags.c_contiguous
    np.testing.assert_allclose(maps, np.repeat(ring_array(4).maps((16, 24, 1)), 5, axis=3), atol=1e-6)


def test_maps_are_the_fourier_series() -> None:
    rng = np.random.default_rng(6)
    coefficients = rng.standard_normal((2, 3, 5, 3)) + 1j * rng.standard_normal((2, 3, 5, 3))
    maps = CoilArray(coefficients).maps((8, 9, 4))
    x, y, z = 2 / 8, -3 / 9, 1 / 4  # of points 6, 1, 3, in fields of view
    value = 0.0
    for m in range(-1, 2):
        for n in range(-2, 3):
            for p in range(-1, 2):
                wave = np.exp(2j * np.pi * (m * x + n * y + p * z) / 2)
                value = value + coefficients[:, m + 1, n + 2, p + 1] * wave
    np.testing.assert_allclose(maps[:, 6, 1, 3], value, rtol=1e-5)


@pytest.mark.parametrize(
    ("make", "says"),
    [
        (lambda: ring_array(0), "coils: expected a whole number"),
        (lambda: ring_array(4, radius=0.0), "radius and width above 0"),
        (lambda: ring_array(4, order=0), "order from 1 to 12"),
        (lambda: CoilArray(np.ones((2, 4, 3, 1), dtype=complex)), "odd"),
        (lambda: CoilArray(np.full((1, 1, 1, 1), np.nan, dtype=complex)), "finite"),
        (lambda: ring_array(2).maps((16,)), "matrix: expected two or three"),
    ],
)
def test_refusals(make, says: str) -> None:
    with pytest.raises(InputError, match=says):
        make()
