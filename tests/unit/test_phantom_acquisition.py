"""Support, the definition of SNR, noise paired across masks, refusals."""

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from nilearn.datasets import load_mni152_template

from skipline import InputError
from skipline.phantoms import (
    Ellipse,
    Phantom,
    acquire,
    complex_noise,
    line_pair_slab_phantom,
    shepp_logan_high_contrast_phantom,
    shepp_logan_phantom,
    sigma_for_snr,
    support,
)


def generator(seed: int = 5) -> np.random.Generator:
    return np.random.default_rng(seed)


@pytest.mark.parametrize("head", [shepp_logan_phantom, shepp_logan_high_contrast_phantom])
def test_support_of_the_head_is_the_skull_and_all_inside(head: Callable[[], Phantom]) -> None:
    found = support(head().reference((240, 240)))
    assert found.shape == (240, 240, 1)
    x = np.arange(240) - 120.0
    radius = np.hypot(x[:, None] / (0.69 * 120), x[None, :] / (0.92 * 120))
    assert found[radius < 0.985].all()
    assert not found[radius > 1.03].any()


@pytest.mark.parametrize("part", [0.001, 0.0035, 0.01, 0.1])
def test_support_of_a_disc_is_the_disc_however_small(part: float) -> None:
    # 0.35 % of the image once got a support of 3.7 %, of ringing, and a tenth of the noise
    radius = 240 * (part / np.pi) ** 0.5
    disc = Phantom("disc", "a disc", (Ellipse((0.0, 0.0), (radius, radius)),), (240.0, 240.0))
    image = disc.reference((256, 256))
    r = np.hypot(*np.meshgrid(np.arange(256) - 128.0, np.arange(256) - 128.0)) * 240 / 256
    found = support(image)[:, :, 0]
    assert found[r < radius - 0.5].all()
    assert not found[r > radius + 1].any()
    assert sigma_for_snr(image, 30.0) == pytest.approx(1 / 30, rel=0.1)


def test_support_of_the_slab_is_the_slab() -> None:
    found = support(line_pair_slab_phantom().reference((240, 240)))
    assert found.mean() == pytest.approx(0.474, abs=0.005)


def test_support_of_a_t1_weighted_template_is_the_brain() -> None:
    image = np.asarray(load_mni152_template(resolution=2).dataobj)
    brain = image > 1e-6  # the brain alone; outside is rounding error
    found = support(image)
    assert found[brain].all()
    assert found.mean() == pytest.approx(brain.mean(), rel=0.01)  # but for filled holes


def test_a_few_very_bright_voxels_do_not_hide_the_object() -> None:
    image = shepp_logan_phantom().reference((240, 240))
    whole = support(image)
    image[120, 120] = 40.0  # twenty times the skull
    assert np.mean(support(image) != whole) < 0.001


def test_support_fills_holes_in_each_slice_and_not_across() -> None:
    image = np.zeros((12, 12, 3))
    image[2:10, 2:10] = 1.0
    image[4:8, 4:8, 1] = 0.0  # a hole: filled
    image[4:8, 0:8, 2] = 0.0  # open to the left: stays
    found = support(image)
    assert found[5, 5].tolist() == [True, True, False]
    assert np.array_equal(support(image[:, :, 1]), found[:, :, 1])


@pytest.mark.parametrize("scale", [1e-6, 1.0, 1e6])
def test_support_does_not_depend_on_scale(scale: float) -> None:
    image = shepp_logan_phantom().reference((64, 64))
    assert np.array_equal(support(image * np.float32(scale)), support(image))


def test_snr_is_mean_magnitude_in_the_support_over_sigma() -> None:
    rng = generator()
    image = np.exp(2j * np.pi * rng.random((8, 8, 1))) * 3.0
    inside = np.zeros((8, 8, 1), dtype=bool)
    inside[2:5, 2:6] = True
    image[3, 3] *= 5  # 11 pixels of 3 and one of 15: mean 4
    assert sigma_for_snr(image, 20.0, inside) == pytest.approx(4.0 / 20.0)
    assert sigma_for_snr(image * 1e-6, 20.0, inside) == pytest.approx(4.0 / 20.0 * 1e-6)
    assert sigma_for_snr(image, float("inf"), inside) == 0.0


def test_measured_snr_of_an_acquired_phantom_is_the_one_asked_for() -> None:
    phantom = shepp_logan_phantom()
    reference = phantom.reference((192, 192))
    sigma = sigma_for_snr(reference, 25.0)
    taken = acquire(phantom.kspace((192, 192)), np.ones((1, 1, 1), dtype=bool), sigma, generator())
    image = np.fft.fftshift(np.fft.ifftn(np.fft.ifftshift(taken), norm="ortho"))
    inside = support(reference)
    noise = (image - reference)[inside]
    assert abs(reference[inside]).mean() / noise.real.std() == pytest.approx(25.0, rel=0.02)
    assert abs(reference[inside]).mean() / noise.imag.std() == pytest.approx(25.0, rel=0.02)


@given(st.integers(0, 2**32 - 1))
def test_noise_is_paired_across_masks(seed: int) -> None:
    rng = np.random.default_rng(seed)
    kspace = (rng.standard_normal((2, 6, 5, 1)) + 1j * rng.standard_normal((2, 6, 5, 1))).astype(np.complex64)
    lines = rng.random(5) < 0.5
    points = rng.random((6, 5, 1)) < 0.5
    lines[0] = points[0, 0] = True
    one = acquire(kspace, lines[None, :, None], 0.3, generator(seed))
    other = acquire(kspace, points, 0.3, generator(seed))
    both = np.broadcast_to(lines[None, :, None] & points, (6, 5, 1))
    assert np.array_equal(one[:, both], other[:, both])
    full = acquire(kspace, np.ones((6, 5, 1), dtype=bool), 0.3, generator(seed))
    np.testing.assert_array_equal(full - one, np.where(lines[None, :, None], 0, full))


def test_without_noise_the_samples_are_kept_bit_for_bit() -> None:
    kspace = shepp_logan_phantom().kspace((16, 12))
    mask = generator().random((16, 12, 1)) < 0.4
    taken = acquire(kspace, mask, 0.0, generator())
    assert taken.dtype == np.complex64
    assert np.array_equal(taken[mask], kspace[mask])
    assert not taken[~mask].any()


def test_complex128_is_kept() -> None:
    kspace = np.ones((4, 4, 1), dtype=np.complex128) * (1 + 1e-12)
    taken = acquire(kspace, np.ones((4, 4, 1), dtype=bool), 0.0, generator())
    assert taken.dtype == np.complex128
    assert np.array_equal(taken, kspace)
    assert complex_noise((3,), 1.0, generator(), np.complex128).dtype == np.complex128


def test_acquire_leaves_its_input_alone() -> None:
    kspace = np.ones((4, 4, 1), dtype=np.complex64)
    acquire(kspace, np.eye(4, dtype=bool)[:, :, None], 1.0, generator())
    assert (kspace == 1).all()


IMAGE = np.ones((4, 4, 1))
NUMBERS: Any = np.ones((4, 6, 1))  # a mask of numbers
KSPACE = np.ones((2, 4, 6, 1), dtype=np.complex64)


@pytest.mark.parametrize(
    ("call", "says"),
    [
        (lambda: support(np.zeros((4, 4, 1))), "zero everywhere"),
        (lambda: support(np.full((4, 4, 1), np.nan)), "NaN or infinity"),
        (lambda: support(np.ones(4)), "expected an image"),
        (lambda: sigma_for_snr(IMAGE, 0.0), "snr: expected a number above 0"),
        (lambda: sigma_for_snr(IMAGE, float("nan")), "snr: expected a number above 0"),
        (lambda: sigma_for_snr(IMAGE, 9.0, np.zeros((4, 4, 1), dtype=bool)), "empty"),
        (lambda: sigma_for_snr(IMAGE, 9.0, np.ones((4, 5, 1), dtype=bool)), "shape of the reference"),
        (lambda: complex_noise((4,), -1.0, generator()), "sigma"),
        (lambda: acquire(KSPACE.real, np.ones((4, 6, 1), dtype=bool), 0.0, generator()), "complex samples"),
        (lambda: acquire(KSPACE, NUMBERS, 0.0, generator()), "true/false"),
        (lambda: acquire(KSPACE, np.zeros((4, 6, 1), dtype=bool), 0.0, generator()), "empty"),
        (lambda: acquire(KSPACE, np.ones((6, 4, 1), dtype=bool), 0.0, generator()), "does not fit"),
        (lambda: acquire(KSPACE, np.ones((2, 4, 6, 1), dtype=bool), 0.0, generator()), "does not fit"),
    ],
)
def test_refusals(call, says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        call()
    assert "\n" not in str(refusal.value)
