"""Interference between wavelet scales, against the operator written out as a matrix."""

from itertools import pairwise
from typing import Any

import numpy as np
import pytest

from skipline import InputError
from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints
from skipline.masks.leakage import leakage
from skipline.recon.wavelet import WaveletTransform


def _scales_1d(lines: int, levels: int) -> list[list[tuple[slice, ...]]]:
    """Blocks of an image (1, 1, lines), the coarsest first."""
    ends = [lines >> level for level in range(levels, -1, -1)]
    return [[np.s_[:, :, : ends[0]]], *([np.s_[:, :, a:b]] for a, b in pairwise(ends))]


def _wavelet(shape: tuple[int, int, int], levels: int, axes: tuple[int, ...]) -> WaveletTransform:
    return WaveletTransform(shape, "db4", levels=levels, axes=axes, dtype=np.complex128)


MASK = VariableDensityLines().draw(Grid((32,), 6), 2, np.random.default_rng(1))


@pytest.mark.parametrize("compensated", [False, True])
def test_against_the_operator_as_a_matrix(compensated: bool) -> None:
    wavelet = _wavelet((1, 1, 32), 2, (2,))
    density = VariableDensityLines().density(Grid((32,), 6), 2) if compensated else None
    weights = MASK.astype(float)
    if density is not None:
        weights[MASK] /= density[MASK]
    n = np.arange(32) - 16
    fourier = np.exp(-2j * np.pi * np.outer(n, n) / 32) / np.sqrt(32)
    analysis = np.stack([wavelet.forward(e.reshape(1, 1, 32) + 0j).ravel() for e in np.eye(32)], axis=1)
    operator = analysis @ fourier.conj().T @ np.diag(weights) @ fourier @ analysis.conj().T

    found = leakage(
        MASK.reshape(1, 1, 32),
        wavelet.forward,
        wavelet.inverse,
        _scales_1d(32, 2),
        density=None if density is None else density.reshape(1, 1, 32),
        coefficients=32,
    )
    own = np.real(np.diagonal(operator))
    interference = abs(operator - np.diag(np.diagonal(operator))) / own
    blocks = [slice(0, 8), slice(8, 16), slice(16, 32)]
    for j, of in enumerate(blocks):
        assert found.kept[j] == pytest.approx(own[of].mean())
        for i, to in enumerate(blocks):
            assert found.peak[i, j] == pytest.approx(interference[to, of].max())
            assert found.energy[i, j] == pytest.approx((interference[to, of] ** 2).sum(axis=0).mean())


def test_the_energies_add_up_because_undersampling_is_a_projection() -> None:
    wavelet = _wavelet((1, 1, 64), 3, (2,))
    mask = VariableDensityLines().draw(Grid((64,), 8), 3, np.random.default_rng(2))
    found = leakage(
        mask.reshape(1, 1, 64), wavelet.forward, wavelet.inverse, _scales_1d(64, 3), coefficients=5
    )
    np.testing.assert_allclose(found.energy.sum(axis=0), 1 / found.kept - 1)
    assert found.kept[0] > 0.9  # the coarsest scale lives where all is sampled
    assert found.kept[-1] < 0.4
    assert found.peak[:, 0].max() < found.peak[:, -1].max()


def test_nothing_leaks_when_everything_is_sampled() -> None:
    wavelet = _wavelet((16, 16, 1), 1, (0, 1))
    scales = [[np.s_[:8, :8, :]], [np.s_[:8, 8:, :], np.s_[8:, :8, :], np.s_[8:, 8:, :]]]
    found = leakage(np.ones((16, 16, 1), bool), wavelet.forward, wavelet.inverse, scales)
    np.testing.assert_allclose(found.kept, 1)
    np.testing.assert_allclose(found.peak, 0, atol=1e-12)
    np.testing.assert_allclose(found.energy, 0, atol=1e-12)


def test_a_mask_is_the_same_along_an_axis_of_length_1() -> None:
    wavelet = _wavelet((16, 32, 1), 1, (0, 1))
    scales = [[np.s_[:8, :16, :]], [np.s_[:8, 16:, :], np.s_[8:, :16, :], np.s_[8:, 16:, :]]]
    lines = MASK.reshape(1, 32, 1)
    whole = np.broadcast_to(lines, (16, 32, 1)).copy()
    one = leakage(lines, wavelet.forward, wavelet.inverse, scales, shape=(16, 32, 1))
    other = leakage(whole, wavelet.forward, wavelet.inverse, scales)
    np.testing.assert_allclose(one.energy, other.energy)
    np.testing.assert_allclose(one.peak, other.peak)


def test_with_the_density_compensated_a_coefficient_comes_back_whole_on_average() -> None:
    wavelet, pattern, grid = (
        _wavelet((16, 16, 1), 1, (0, 1)),
        VariableDensityPoints(power=1),
        Grid((16, 16), 4),
    )
    scales = [[np.s_[:8, :8, :]], [np.s_[:8, 8:, :], np.s_[8:, :8, :], np.s_[8:, 8:, :]]]
    density, rng = pattern.density(grid, 2), np.random.default_rng(4)
    density = np.maximum(density, 1e-9)  # the law is 0 in the corner
    kept = [
        leakage(
            pattern.draw(grid, 2, rng)[..., None],
            wavelet.forward,
            wavelet.inverse,
            scales,
            density=density[..., None],
            coefficients=1,
        ).kept
        for _ in range(400)
    ]
    np.testing.assert_allclose(np.mean(kept, axis=0), 1, atol=0.02)


def test_what_is_not_kept_at_all_is_infinite() -> None:
    mask = np.zeros(8, bool)
    mask[4] = True  # the mean alone; a coefficient is a sample of k-space here

    def to_kspace(x: np.ndarray) -> np.ndarray:
        return np.fft.fftshift(np.fft.fft(np.fft.ifftshift(x), norm="ortho"))

    def to_image(c: np.ndarray) -> np.ndarray:
        return np.fft.fftshift(np.fft.ifft(np.fft.ifftshift(c), norm="ortho"))

    found = leakage(mask, to_kspace, to_image, [[np.s_[4:5,]], [np.s_[:4,]]])
    np.testing.assert_allclose(found.kept, [1, 0], atol=1e-12)
    assert np.isinf(found.peak[:, 1]).all()
    np.testing.assert_allclose(found.peak[:, 0], 0, atol=1e-12)


def same(x: Any) -> Any:
    return x


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        ((np.zeros(8, bool), same, same, [[np.s_[:,]]]), "a sample at least"),
        ((np.ones(8), same, same, [[np.s_[:,]]]), "true and false"),
        ((MASK, same, same, []), "scales: expected one at least"),
        ((MASK, same, same, [[np.s_[:8,]], [np.s_[7:,]]]), "scale 1: a block overlaps"),
        ((MASK, same, same, [[np.s_[:8,]], [np.s_[40:,]]]), "scale 1 has no coefficient"),
        ((MASK, same, same, [[np.s_[:8, :]]]), "has 2 slices, expected 1"),
    ],
)
def test_refusals(arguments: tuple[Any, ...], says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        leakage(*arguments)
    assert "\n" not in str(refusal.value)


def test_a_mask_that_does_not_fit_the_image_is_refused() -> None:
    with pytest.raises(InputError, match="does not fit an image of shape"):
        leakage(MASK, same, same, [[np.s_[:,]]], shape=(31,))
    with pytest.raises(InputError, match="coefficients 0"):
        leakage(MASK, same, same, [[np.s_[:,]]], coefficients=0)
