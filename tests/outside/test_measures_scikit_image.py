"""Measures against scikit-image, which nobody here wrote."""

from typing import Any

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter
from skimage import metrics

from skipline.recon.measures import NRMSE, NRMSE_OVERALL, PSNR, PSNR_OVERALL, SSIM, SSIM_OVERALL

structural_similarity: Any = metrics.structural_similarity  # its types do not say what it returns


def volume(dtype) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """A smooth complex object in a dark background; a blurred and noisy copy; the object's support."""
    rng = np.random.default_rng(11)
    x, y, z = np.mgrid[-1:1:40j, -1:1:36j, -1:1:3j]
    support = x**2 + y**2 < 0.6
    texture = gaussian_filter(rng.standard_normal(x.shape), (1.5, 1.5, 0))
    reference = support * (0.7 + texture) * np.exp(1j * (x + z))
    noise = rng.standard_normal(x.shape) + 1j * rng.standard_normal(x.shape)
    blurred = gaussian_filter(reference, (1, 1, 0))
    return reference.astype(dtype), (blurred + 0.03 * noise).astype(dtype), support


@pytest.mark.parametrize("dtype", [np.complex64, np.complex128])
def test_overall_ssim_is_the_mean_of_scikit_image_over_slices(dtype):
    # source: skimage.metrics.structural_similarity, with the settings that its documentation gives to match
    # the implementation of Wang et al. 2004
    reference, image, support = volume(dtype)
    r, x = abs(reference.astype(complex)), abs(image.astype(complex))
    wang = {"gaussian_weights": True, "sigma": 1.5, "use_sample_covariance": False, "data_range": r.max()}
    slices = [structural_similarity(r[:, :, z], x[:, :, z], **wang) for z in range(r.shape[2])]
    assert SSIM_OVERALL.compute(reference, image, support) == pytest.approx(np.mean(slices), rel=1e-12)
    for z, expected in enumerate(slices):  # a slice as bright as the volume's brightest gives skimage's own
        one = slice(z, z + 1)
        r_one = r[:, :, z] * (r.max() / r[:, :, z].max())
        x_one = x[:, :, z] * (r.max() / r[:, :, z].max())
        alone = structural_similarity(r_one, x_one, **wang)
        got = SSIM_OVERALL.compute(reference[:, :, one], image[:, :, one], support[:, :, one])
        assert got == pytest.approx(alone, rel=1e-9)
        assert 0.1 < expected < 0.99


def test_ssim_inside_is_the_mean_of_the_map_of_scikit_image():
    reference, image, support = volume(np.complex128)
    r, x = abs(reference), abs(image)
    wang = {"gaussian_weights": True, "sigma": 1.5, "use_sample_covariance": False, "data_range": r.max()}
    maps = [structural_similarity(r[:, :, z], x[:, :, z], full=True, **wang)[1] for z in range(r.shape[2])]
    expected = np.stack(maps, axis=2)[support].mean()
    assert SSIM.compute(reference, image, support) == pytest.approx(expected, rel=1e-12)
    assert SSIM.compute(reference, image, support) != pytest.approx(
        SSIM_OVERALL.compute(reference, image, support), rel=0.01
    )


def test_psnr_is_that_of_scikit_image():
    # source: skimage.metrics.peak_signal_noise_ratio
    reference, image, support = volume(np.complex128)
    r, x = abs(reference), abs(image)
    overall = metrics.peak_signal_noise_ratio(r, x, data_range=r.max())
    assert PSNR_OVERALL.compute(reference, image, support) == pytest.approx(overall, rel=1e-12)
    inside = metrics.peak_signal_noise_ratio(r[support], x[support], data_range=r[support].max())
    assert PSNR.compute(reference, image, support) == pytest.approx(inside, rel=1e-12)


def test_nrmse_is_the_euclidean_one_of_scikit_image():
    # source: skimage.metrics.normalized_root_mse
    reference, image, support = volume(np.complex128)
    r, x = abs(reference), abs(image)
    overall = metrics.normalized_root_mse(r, x, normalization="euclidean")
    assert NRMSE_OVERALL.compute(reference, image, support) == pytest.approx(overall, rel=1e-12)
    inside = metrics.normalized_root_mse(r[support], x[support], normalization="euclidean")
    assert NRMSE.compute(reference, image, support) == pytest.approx(inside, rel=1e-12)


def test_error_of_weak_complex_noise_is_that_of_its_real_part():
    # source: Gudbjartsson & Patz 1995, from memory: far above the noise the magnitude's noise is Gaussian,
    # with the standard deviation of one part
    rng = np.random.default_rng(4)
    shape, sigma = (256, 256, 1), 0.01
    noise = sigma * (rng.standard_normal(shape) + 1j * rng.standard_normal(shape))
    everywhere = np.ones(shape, bool)
    assert NRMSE.compute(np.ones(shape), 1 + noise, everywhere) == pytest.approx(sigma, rel=0.01)
    assert PSNR.compute(np.ones(shape), 1 + noise, everywhere) == pytest.approx(40, abs=0.1)
