"""Measures on arrays whose answer is known without computing it the same way."""

import math
import subprocess
import sys

import hypothesis.extra.numpy as hnp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skipline import InputError
from skipline.recon import measures
from skipline.recon.measures import (
    NRMSE,
    NRMSE_OVERALL,
    PSNR,
    PSNR_OVERALL,
    SSIM,
    SSIM_OVERALL,
    Measure,
    error_map,
)

ALL = (NRMSE, NRMSE_OVERALL, PSNR, PSNR_OVERALL, SSIM, SSIM_OVERALL)


def case(seed: int, shape=(16, 14, 2)) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """A complex image with its noisy copy, and a support that is part of it."""
    rng = np.random.default_rng(seed)
    reference = rng.random(shape) * np.exp(2j * np.pi * rng.random(shape))
    image = reference + 0.1 * (rng.standard_normal(shape) + 1j * rng.standard_normal(shape))
    support = rng.random(shape) < 0.5
    support[0, 0, 0] = True
    return reference, image, support


def values(reference, image, support) -> list[float]:
    return [measure.compute(reference, image, support) for measure in ALL]


@given(seed=st.integers(0, 999), exponent=st.floats(-9, 9), other=st.floats(0.1, 10))
@settings(max_examples=25, deadline=None)
def test_a_scale_common_to_both_changes_nothing(seed, exponent, other):
    reference, image, support = case(seed)
    scale = other * 10**exponent
    scaled = values(scale * reference, scale * image, support)
    np.testing.assert_allclose(scaled, values(reference, image, support), rtol=1e-9)


@given(
    magnitude=hnp.arrays(np.float64, (12, 12, 1), elements=st.floats(0, 100, width=32)),
    phases=st.integers(0, 999),
)
@settings(max_examples=25, deadline=None)
def test_equal_magnitudes_are_perfect_whatever_their_phase(magnitude, phases):
    magnitude[0, 0] = 1
    rng = np.random.default_rng(phases)
    turned = magnitude * np.exp(2j * np.pi * rng.random(magnitude.shape))
    support = np.ones(magnitude.shape, bool)
    assert NRMSE.compute(magnitude, magnitude, support) == 0
    assert NRMSE.compute(magnitude, -magnitude, support) == 0
    assert PSNR.compute(magnitude, -magnitude, support) == math.inf
    assert SSIM.compute(magnitude, -magnitude, support) == pytest.approx(1, abs=1e-12)
    assert NRMSE.compute(magnitude, turned, support) < 1e-14
    assert SSIM.compute(magnitude, turned, support) == pytest.approx(1, abs=1e-12)


@given(
    voxel=st.tuples(st.integers(0, 11), st.integers(0, 11), st.just(0)),
    change=st.floats(1e-6, 10),
    seed=st.integers(0, 99),
)
@settings(max_examples=25, deadline=None)
def test_nrmse_is_above_zero_when_one_magnitude_differs(voxel, change, seed):
    reference = np.random.default_rng(seed).random((12, 12, 1))
    image = reference.copy()
    image[voxel] += change
    only = np.zeros(reference.shape, bool)
    only[voxel] = True
    assert NRMSE.compute(reference, image, only) == pytest.approx(change / reference[voxel])
    elsewhere = NRMSE.compute(reference, image, ~only)
    assert elsewhere == 0
    overall = NRMSE_OVERALL.compute(reference, image, only)
    assert overall == pytest.approx(change / np.sqrt((reference**2).sum()))


def test_what_lies_outside_the_object_counts_overall_only():
    reference = np.zeros((32, 32, 1))
    reference[8:24, 8:24] = 2
    support = reference > 0
    image = reference.copy()
    image[2, 2] = 1  # farther from the object than the window of ssim
    assert NRMSE.compute(reference, image, support) == 0
    assert PSNR.compute(reference, image, support) == math.inf
    assert SSIM.compute(reference, image, support) == pytest.approx(1)
    assert NRMSE_OVERALL.compute(reference, image, support) == pytest.approx(1 / 32)  # 1 / sqrt(256 * 2^2)
    assert PSNR_OVERALL.compute(reference, image, support) == pytest.approx(20 * math.log10(2 * 32))
    image[2, 2], image[10, 10] = 0, 1
    assert SSIM_OVERALL.compute(reference, image, support) < 1


def test_psnr_takes_its_peak_inside_the_object():
    reference = np.full((4, 4, 1), 10.0)
    reference[0] = 100
    support = reference < 50
    image = reference + 1
    assert PSNR.compute(reference, image, support) == pytest.approx(20)
    assert PSNR_OVERALL.compute(reference, image, support) == pytest.approx(40)


def test_all_slices_share_the_dynamic_range_of_ssim():
    rng = np.random.default_rng(3)
    bright, dim = rng.random((16, 16)), 0.01 * rng.random((16, 16))
    reference = np.stack([bright, dim], axis=2)
    image = np.stack([bright, dim[::-1]], axis=2)
    second = np.zeros(reference.shape, bool)
    second[:, :, 1] = True
    alone = SSIM.compute(reference[:, :, 1:], image[:, :, 1:], second[:, :, 1:])
    assert alone < 0.3  # structure without likeness
    assert SSIM.compute(reference, image, second) > 0.9  # and yet too dim to be seen beside the first slice


def test_ssim_of_blur_and_of_a_bias_rank_as_they_look():
    x = np.arange(64)
    reference = np.broadcast_to(1.0 + (x // 4 % 2)[:, None], (64, 64))[:, :, None]
    blurred = (np.roll(reference, 1, 0) + np.roll(reference, -1, 0)) / 2
    error = NRMSE_OVERALL.compute(reference, blurred, reference > 0)
    brighter = reference * (1 + error)
    assert NRMSE_OVERALL.compute(reference, brighter, reference > 0) == pytest.approx(error)
    assert SSIM_OVERALL.compute(reference, brighter, reference > 0) > 0.9
    assert SSIM_OVERALL.compute(reference, blurred, reference > 0) < 0.85


def test_integers_are_compared_without_overflow():
    reference = np.full((12, 12, 1), -32768, np.int16)
    image = np.full((12, 12, 1), 16384, np.int16)
    assert NRMSE.compute(reference, image, np.ones(reference.shape, bool)) == 0.5
    small = np.full((12, 12, 1), 255, np.uint8)
    assert NRMSE.compute(small, small - 255, np.ones(small.shape, bool)) == 1


def test_float32_images_are_measured_in_double_precision():
    reference = np.full((100, 100, 100), 1, np.float32)
    image = reference + np.float32(2**-20)
    assert NRMSE.compute(reference, image, reference > 0) == pytest.approx(2**-20, rel=1e-12)


def test_a_mask_of_zeros_and_ones_serves_as_support():
    reference, image, support = case(5)
    assert values(reference, image, support.astype(np.uint8)) == values(reference, image, support)


def test_error_map_has_the_sign_of_what_is_too_bright():
    reference, image, _ = case(1)
    difference = error_map(reference, image)
    assert difference.dtype == np.float32
    assert difference.shape == reference.shape
    np.testing.assert_allclose(difference, abs(image) - abs(reference), atol=1e-6)
    assert error_map(np.ones((2, 2, 1)), 3 * np.ones((2, 2, 1))).min() == 2


@pytest.mark.parametrize("measure", ALL, ids=lambda measure: measure.name)
@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda r, x, s: (r, x[:-1], s), "the image has shape"),
        (lambda r, x, s: (r[..., 0], x[..., 0], s[..., 0]), "the reference has shape .* z = 1"),
        (lambda r, x, s: (r, np.where(s, np.nan, x), s), "the image holds NaN or infinite values"),
        (lambda r, x, s: (np.where(s, np.inf, r), x, s), "the reference holds NaN or infinite values"),
        (lambda r, x, s: (0 * r, x, s), "the reference is zero everywhere"),
    ],
)
def test_what_cannot_be_compared_is_refused_in_one_line(measure, change, message):
    reference, image, support = change(*case(2))
    with pytest.raises(InputError, match=message) as refusal:
        measure.compute(reference, image, support)
    assert "\n" not in str(refusal.value)


@pytest.mark.parametrize("measure", [NRMSE, PSNR, SSIM], ids=lambda measure: measure.name)
def test_a_support_that_does_not_fit_is_refused(measure):
    reference, image, support = case(2)
    with pytest.raises(InputError, match="region has shape"):
        measure.compute(reference, image, support[:-1])
    with pytest.raises(InputError, match="region to compare in is empty"):
        measure.compute(reference, image, np.zeros_like(support))
    with pytest.raises(InputError, match="zero everywhere it is compared"):
        measure.compute(np.where(support, 0, reference), image, support)


def test_slices_smaller_than_the_window_are_refused_by_ssim():
    with pytest.raises(InputError, match="10 x 20; ssim needs at least 11 x 11"):
        SSIM.compute(np.ones((10, 20, 1)), np.ones((10, 20, 1)), np.ones((10, 20, 1), bool))
    exactly = np.ones((11, 11, 1))
    assert SSIM_OVERALL.compute(exactly, exactly, exactly > 0) == 1


def test_measures_describe_themselves():
    assert [measure.name for measure in ALL] == [
        "nrmse", "nrmse_overall", "psnr", "psnr_overall", "ssim", "ssim_overall",
    ]  # fmt: skip
    for measure in ALL:
        assert isinstance(measure, Measure)
        assert measure.better == ("lower" if measure.name.startswith("nrmse") else "higher")
        assert measure.unit == ("dB" if measure.name.startswith("psnr") else "")
        assert "\n" not in measure.description


def test_the_package_gives_what_it_lists():
    for name in measures.__all__:
        assert getattr(measures, name) is not None
    assert set(dir(measures)) == set(measures.__all__)
    with pytest.raises(AttributeError, match="no attribute 'mse'"):
        _ = measures.mse


def test_importing_measures_loads_nothing_heavy():
    program = (
        "import sys; from skipline.recon.measures import NRMSE, SSIM; "
        "heavy = 'scipy', 'skimage.metrics._structural_similarity', 'numba'; "
        "print([name for name in heavy if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
