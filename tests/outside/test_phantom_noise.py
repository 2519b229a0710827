"""Noise of an acquisition against the published statistics of magnitude images."""

import numpy as np
import pytest

from skipline.phantoms import acquire, complex_noise


def test_magnitude_background_is_rayleigh() -> None:
    # Source: NEMA MS 1; Gudbjartsson & Patz, Magn. Reson. Med. 34 (1995): mean 1.253 sigma, sd 0.655 sigma.
    sigma = 0.37
    magnitude = abs(complex_noise((1000, 1000, 1), sigma, np.random.default_rng(11)))
    # Sampling errors of mean and sd over 1e6 samples are 0.0007 and 0.0005 sigma.
    assert magnitude.mean(dtype=float) / sigma == pytest.approx(1.253, abs=0.003)
    assert magnitude.std(dtype=float) / sigma == pytest.approx(0.655, abs=0.002)


def test_image_noise_has_the_sigma_of_kspace() -> None:
    # Parseval: a unitary transform keeps the standard deviation. The image is empty, and fully sampled.
    shape = (4, 256, 256, 1)
    mask = np.ones((1, 1, 1), dtype=bool)
    noisy = acquire(np.zeros(shape, dtype=np.complex64), mask, 2.0, np.random.default_rng(3))
    image = np.fft.fftshift(np.fft.ifftn(np.fft.ifftshift(noisy, (1, 2)), axes=(1, 2), norm="ortho"), (1, 2))
    assert image.real.std() == pytest.approx(2.0, rel=0.005)
    assert image.imag.std() == pytest.approx(2.0, rel=0.005)
    assert abs(np.corrcoef(image.real.ravel(), image.imag.ravel())[0, 1]) < 0.01
    assert abs(image).mean() / 2.0 == pytest.approx(1.253, abs=0.006)
