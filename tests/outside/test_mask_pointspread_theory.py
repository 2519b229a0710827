"""Point-spread functions against sampling theory."""

import numpy as np
import pytest

from skipline.masks import (
    Grid,
    RegularLines,
    VariableDensityLines,
    VariableDensityPoints,
    point_spread,
    sidelobes,
)

UNIFORM = [
    (VariableDensityLines(power=0), Grid((128,)), 4),
    (VariableDensityLines(power=0), Grid((255,)), 2.5),
    (VariableDensityPoints(power=0), Grid((24, 16)), 5),
]


@pytest.mark.parametrize(("pattern", "grid", "acceleration"), UNIFORM)
def test_rms_sidelobe_of_uniform_draws(pattern, grid: Grid, acceleration: float) -> None:
    # Source: elementary sampling theory. The mean of K of N numbers drawn without replacement has the
    # variance s^2 (N - K) / (K (N - 1)), with s^2 that of all N: of exp(2 pi i k r / N) it is 1.
    rng = np.random.default_rng(30)
    n, k = grid.size, grid.samples(acceleration)
    found = [sidelobes(pattern.draw(grid, acceleration, rng)).rms for _ in range(200)]
    assert np.sqrt(np.mean(np.square(found))) == pytest.approx(np.sqrt((n - k) / (k * (n - 1))), rel=0.02)


@pytest.mark.parametrize(("pattern", "grid", "acceleration"), UNIFORM)
def test_sidelobes_of_uniform_draws_are_the_same_at_every_position(
    pattern, grid: Grid, acceleration: float
) -> None:
    # Source: as above. The mean over all positions is the same for any mask, by Parseval; only uniform draws
    # have the same mean over draws at each position.
    draws, rng = 2000, np.random.default_rng(31)
    n, k = grid.size, grid.samples(acceleration)
    power = np.mean(
        [abs(point_spread(pattern.draw(grid, acceleration, rng))) ** 2 for _ in range(draws)], axis=0
    )
    theory = (n - k) / (k * (n - 1))
    others = np.delete(power.ravel(), np.ravel_multi_index([m // 2 for m in grid.shape], grid.shape))
    # |PSF|^2 is nearly exponential, with an sd of its mean (1.4 times that where the PSF is real)
    assert abs(others / theory - 1).max() < 4.5 * 1.42 / np.sqrt(draws)


def to_image(kspace: np.ndarray) -> np.ndarray:
    return np.fft.fftshift(np.fft.ifft(np.fft.ifftshift(kspace), norm="ortho"))


def to_kspace(image: np.ndarray) -> np.ndarray:
    return np.fft.fftshift(np.fft.fft(np.fft.ifftshift(image), norm="ortho"))


@pytest.mark.parametrize(
    ("lines", "acceleration"), [(240, 2), (240, 3), (240, 5), (256, 4), (225, 3), (225, 5), (7, 7)]
)
def test_regular_lines_make_replicas_at_fov_over_r(lines: int, acceleration: int) -> None:
    # Source: Nyquist-Shannon. Sampling at R times the spacing repeats the object at FOV / R, each with 1/R
    # of its magnitude; all have the same sign when the line k = 0 is taken.
    mask = RegularLines().draw(Grid((lines,)), acceleration, np.random.default_rng())
    position = np.arange(lines) - lines // 2
    np.testing.assert_allclose(point_spread(mask), position % (lines // acceleration) == 0, atol=1e-12)

    rng = np.random.default_rng(32)
    image = rng.standard_normal(lines) + 1j * rng.standard_normal(lines)
    replicas = [np.roll(image, j * lines // acceleration) for j in range(acceleration)]
    np.testing.assert_allclose(
        to_image(mask * to_kspace(image)), np.sum(replicas, axis=0) / acceleration, atol=1e-12
    )


@pytest.mark.parametrize(
    ("pattern", "grid", "acceleration"),
    [
        (VariableDensityLines(power=1), Grid((95,), 8), 3),
        (VariableDensityPoints(power=1), Grid((17, 13), 3), 2),
    ],
)
def test_compensated_for_the_density_the_mean_point_spread_is_that_of_full_sampling(
    pattern, grid: Grid, acceleration: float
) -> None:
    # Source, from memory: Horvitz & Thompson, J. Am. Stat. Assoc. 47 (1952) 663: weighted by 1 / probability,
    # the sum over
    # a sample estimates the sum over all without bias: here that of exp(2 pi i k r / N).
    draws, rng = 4000, np.random.default_rng(33)
    density = pattern.density(grid, acceleration)
    masks = [pattern.draw(grid, acceleration, rng) for _ in range(draws)]
    found = np.array([point_spread(mask, density) * (1 / density[mask]).sum() for mask in masks]) / grid.size
    everything = point_spread(density > 0) * np.count_nonzero(density) / grid.size
    spread = found.std(axis=0) / np.sqrt(draws)
    assert (abs(found.mean(axis=0) - everything) < 5 * spread + 1e-12).all()
    plain = np.mean(
        [point_spread(mask) for mask in masks], axis=0
    )  # the density's own, with a wide main lobe
    assert abs(plain - everything).max() > 0.1
