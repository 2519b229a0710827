"""Poisson-disc masks have the spectrum of blue noise."""

from itertools import pairwise

import numpy as np
import pytest

from skipline.masks.grid import Grid
from skipline.masks.pivotal import pivotal_draw
from skipline.masks.points import VariableDensityPoints
from skipline.masks.poisson_disc import PoissonDisc


def radial_spectrum(masks: list[np.ndarray], edges: np.ndarray) -> np.ndarray:
    """Radially averaged power spectrum of masks, 1 for white noise.

    Source, from memory: Ulichney, Proc. IEEE 76 (1988) 56: the mean over annuli of the power without its
    mean, divided by
    the variance g (1 - g) of a binary pattern of density g.
    """
    first, second = (np.fft.fftfreq(n) for n in masks[0].shape)
    frequency = np.hypot(first[:, None], second)
    power = np.mean([np.abs(np.fft.fft2(m - m.mean())) ** 2 / (m.size * m.var()) for m in masks], axis=0)
    return np.array([power[(frequency > low) & (frequency <= high)].mean() for low, high in pairwise(edges)])


@pytest.mark.parametrize("acceleration", [6, 8, 12])
def test_blue_noise_hole_below_the_principal_frequency(acceleration: float) -> None:
    # Source, from memory: Ulichney (1988). Blue noise has hardly any power below the principal frequency,
    # which is the
    # square root of the density g in cycles per point, a peak there, and is flat above. White noise is flat.
    grid, rng = Grid((128, 128)), np.random.default_rng(40)
    principal = (1 / acceleration) ** 0.5
    edges = np.arange(0, 0.5, 0.1 * principal)
    blue = radial_spectrum([PoissonDisc(growth=0).draw(grid, acceleration, rng) for _ in range(10)], edges)
    white = radial_spectrum(
        [VariableDensityPoints(power=0).draw(grid, acceleration, rng) for _ in range(10)], edges
    )
    middle = (edges[:-1] + edges[1:]) / 2 / principal
    assert blue[middle < 0.6].max() < 0.3  # about 0.15 of white noise
    assert blue[middle > 1].max() > 1.3
    assert np.all(np.diff(blue[(middle > 0.5) & (middle < 1.1)]) > 0)
    assert abs(white - 1).max() < 0.25
    assert abs(white[1:] - 1).max() < 0.12


def test_the_hole_is_an_ellipse_in_the_metric_of_the_grid() -> None:
    # A minimum distance in steps of (1, 2) is an ellipse half as long along the second axis; its hole is
    # twice as wide.
    grid, rng = Grid((128, 128)), np.random.default_rng(41)
    masks = [PoissonDisc(growth=0, aspect=2).draw(grid, 12, rng) for _ in range(20)]
    power = np.mean([np.abs(np.fft.fft2(m - m.mean())) ** 2 / (m.size * m.var()) for m in masks], axis=0)
    smooth = lambda line: np.convolve(line, np.ones(5) / 5, mode="same")  # noqa: E731
    edge = [
        int(np.argmax(smooth(line[1:64]) > 0.5)) + 1
        for line in (power[:, :5].mean(axis=1), power[:5].mean(axis=0))
    ]
    assert edge[1] / edge[0] == pytest.approx(2, rel=0.2)


def test_sidelobes_near_the_peak_are_lower_than_those_of_a_random_draw_of_the_same_density() -> None:
    # Source, from memory: Ulichney (1988), for the hole; by Parseval all masks have the same energy of
    # sidelobes, so what
    # is missing near the peak is found farther out. The density of the random draws is the mean of
    # Poisson-disc masks.
    grid, acceleration, rng = Grid((96, 80), 12), 6, np.random.default_rng(42)
    region, pattern = grid.calibration_region(), PoissonDisc()
    density = np.mean([pattern.draw(grid, acceleration, rng) for _ in range(600)], axis=0)
    i, j = (np.arange(n) - n // 2 for n in grid.shape)
    from_peak = np.hypot(i[:, None], j)
    hole, beyond = (from_peak > 6) & (from_peak < 18), from_peak > 30

    def spread(mask: np.ndarray) -> np.ndarray:
        return np.abs(np.fft.fftshift(np.fft.ifft2(mask, norm="forward"))) / mask.sum()

    blue = [spread(pattern.draw(grid, acceleration, rng)) for _ in range(60)]
    white = [spread(pivotal_draw(density, rng)) for _ in range(60)]
    assert density[region].min() == 1

    def rms(spreads: list[np.ndarray], where: np.ndarray) -> float:
        return float(np.sqrt(np.mean([s[where] ** 2 for s in spreads])))

    def peak(spreads: list[np.ndarray]) -> float:
        return float(np.mean([s[hole].max() for s in spreads]))

    assert rms(blue, hole) < 0.6 * rms(white, hole)
    assert peak(blue) < 0.65 * peak(white)
    assert rms(blue, beyond) > rms(white, beyond)
