"""Interference between the scales of a wavelet transform: the transform point spread of a mask.

Undersampling spreads a single wavelet coefficient over the others. Coarse scales live where k-space is
sampled densely and fine ones where it is not, so the point-spread function of pixels says little of them.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .pointspread import sample_weights

Array = NDArray[np.float64] | NDArray[np.complex128]
Block = tuple[slice, ...]


@dataclass(frozen=True)
class Leakage:
    """How much a coefficient of scale j leaks into scale i: matrices with a row i and a column j a scale.

    A coefficient of value 1 is synthesised, transformed to k-space, sampled, transformed back and analysed.
    What comes back in its own place is what was `kept`, what comes back elsewhere is interference. Both
    matrices are relative to what was kept, and infinite in the columns of scales of which nothing is kept.

    Attributes
    ----------
    peak : ndarray of float64
        Largest magnitude of the interference that any tried coefficient of scale j makes in scale i.
    energy : ndarray of float64
        Energy of the interference in all of scale i, mean over the tried coefficients of scale j.
    kept : ndarray of float64
        Mean value that comes back of a coefficient of 1, for each scale. Without a density the energies of
        a column sum to 1 / kept - 1 when all its coefficients keep the same: undersampling is a projection.

    Examples
    --------
    >>> everything = leakage(np.ones(8, bool), lambda x: x, lambda c: c, [[np.s_[:4,]], [np.s_[4:,]]])
    >>> everything.kept, everything.peak.max() < 1e-12
    (array([1., 1.]), np.True_)
    """

    peak: NDArray[np.float64]
    energy: NDArray[np.float64]
    kept: NDArray[np.float64]


def leakage(
    mask: NDArray[np.bool_],
    analysis: Callable[[NDArray[np.complex128]], Array],
    synthesis: Callable[[NDArray[np.complex128]], Array],
    scales: Sequence[Sequence[Block]],
    *,
    shape: tuple[int, ...] | None = None,
    density: NDArray[np.float64] | None = None,
    coefficients: int = 16,
) -> Leakage:
    """Measure the interference between the scales of an orthonormal transform.

    TPSF(i, j) = e_i^H W F^H P F W^H e_j, with W the analysis, F the unitary Fourier transform and P the mask.

    Parameters
    ----------
    mask : ndarray of bool
        True where a sample is taken. It has the axes of the image; an axis of length 1 is one along which
        the mask is the same, as the readout.
    analysis, synthesis : callable
        The transform, from an image to its coefficients and back, complex128 arrays of the same shape.
        It may overwrite what it is given.
    scales : sequence of sequence of tuple of slice
        For each scale the blocks of its coefficients in the array; no two may overlap. Coefficients outside
        all blocks are left out.
    shape : tuple of int, optional
        Shape of the image; that of the mask when not given.
    density : ndarray of float64, optional
        Inclusion probabilities, of the shape of the mask: each sample then has the weight 1 / probability.
    coefficients : int
        Coefficients to try of each scale, spread over its blocks (all, when there are no more).

    Returns
    -------
    Leakage

    Raises
    ------
    InputError
        When the mask is empty or does not fit the image, or the blocks overlap or are empty.

    References
    ----------
    Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    One level of Haar's wavelet on an axis. Of 16 lines the 8 in the middle are taken: the coarse scale is
    kept, and what comes back of the fine one comes back mostly as something else.

    >>> h = np.sqrt(0.5)
    >>> def analysis(x):
    ...     return np.concatenate([h * (x[::2] + x[1::2]), h * (x[::2] - x[1::2])])
    >>> def synthesis(c):
    ...     a, d = np.split(h * c, 2)
    ...     return np.stack([a + d, a - d], axis=1).ravel()
    >>> middle = abs(np.arange(16) - 7.5) < 4
    >>> found = leakage(middle, analysis, synthesis, [[np.s_[:8,]], [np.s_[8:,]]])
    >>> found.kept.round(2), found.energy.round(2)
    (array([0.81, 0.19]), array([[0.04, 3.62],
           [0.19, 0.76]]))
    """
    from scipy.fft import fftn, ifftn

    mask = np.asarray(mask)
    shape = mask.shape if shape is None else tuple(shape)
    if mask.dtype != bool or not mask.any():
        raise InputError("mask: expected true and false, with a sample at least")
    if mask.ndim != len(shape) or any(m not in (1, n) for m, n in zip(mask.shape, shape, strict=True)):
        raise InputError(f"mask of shape {mask.shape} does not fit an image of shape {shape}")
    if coefficients < 1:
        raise InputError(f"coefficients {coefficients}: expected at least 1 of each scale")
    scale_of = _scale_of(scales, shape)
    weights = np.fft.ifftshift(sample_weights(mask[None], density)[0])
    axes = tuple(axis for axis, n in enumerate(mask.shape) if n > 1)

    count = len(scales)
    members = [np.flatnonzero(scale_of == number) for number in range(count)]
    peak, energy, kept = np.zeros((count, count)), np.zeros((count, count)), np.zeros(count)
    for j in range(count):
        tried = members[j][_spread(members[j].size, coefficients)]
        for place in tried:
            unit = np.zeros(shape, np.complex128)
            unit.flat[place] = 1
            # A shift of the origin in the image cancels between F and F^H.
            spectrum = fftn(np.asarray(synthesis(unit), np.complex128), axes=axes, overwrite_x=True)
            image = ifftn(weights * spectrum, axes=axes, overwrite_x=True)
            found = np.abs(np.asarray(analysis(np.asarray(image, np.complex128)))).ravel()
            # The operator is positive semi-definite: what comes back in place is real and not negative.
            own, found[place] = float(found[place]), 0.0
            kept[j] += own / tried.size
            for i in range(count):
                leaked = found[members[i]]
                peak[i, j] = max(peak[i, j], _ratio(leaked.max(), own))
                energy[i, j] += _ratio(float(leaked @ leaked), own**2) / tried.size
    return Leakage(peak=peak, energy=energy, kept=kept)


def _scale_of(scales: Sequence[Sequence[Block]], shape: tuple[int, ...]) -> NDArray[np.int64]:
    """Return the number of the scale of every coefficient, flat, -1 outside all."""
    scale_of = np.full(shape, -1)
    for number, blocks in enumerate(scales):
        for block in blocks:
            if len(block) != len(shape):
                raise InputError(
                    f"scale {number}: a block has {len(block)} slices, expected {len(shape)}, one an axis"
                )
            if (scale_of[block] != -1).any():
                raise InputError(f"scale {number}: a block overlaps another; expected each coefficient once")
            scale_of[block] = number
        if not (scale_of == number).any():
            raise InputError(f"scale {number} has no coefficient; expected one at least")
    if not scales:
        raise InputError("scales: expected one at least")
    return scale_of.ravel()


def _spread(size: int, count: int) -> NDArray[np.intp]:
    """Return `count` numbers of 0 ... size - 1, well apart at any scale: steps of the golden ratio."""
    if count >= size:
        return np.arange(size)
    golden = (np.sqrt(5.0) - 1.0) / 2.0
    return np.unique((((np.arange(count) + 0.5) * golden) % 1.0 * size).astype(np.intp))


def _ratio(numerator: float, own: float) -> float:
    """Relative to what was kept; rounding errors of nothing are nothing."""
    return float(numerator / own) if own > 1e-12 else float("inf")
