"""Acquisition: where the object is, how much noise a given SNR means, and what a mask lets through.

`sigma` is always the standard deviation of the real part, and of the imaginary part, of complex Gaussian
noise. With unitary transforms it is the same in k-space and in the image.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import isfinite
from typing import Any

import numpy as np
from numpy.typing import DTypeLike, NDArray

from .. import InputError


def support(image: NDArray[Any]) -> NDArray[np.bool_]:
    """Where the object is: magnitude above a tenth of the object's, holes filled slice by slice.

    The object's magnitude is the 99th percentile of the voxels above a tenth of the energy-weighted mean
    magnitude, sum m^3 / sum m^2. Dark voxels hardly count in such a mean, so that it does not matter how
    small a part of the image the object is; and a few voxels several times brighter move it little. Ringing
    at an edge stays below the threshold but next to the edge.

    Parameters
    ----------
    image : ndarray
        Noise-free or high-SNR image (x, y, z), real or complex; (x, y) is taken as one slice.

    Returns
    -------
    ndarray of bool
        Of the shape of `image`.

    Raises
    ------
    InputError
        When the image is zero everywhere, is not finite, or is not an image.

    Examples
    --------
    A ring counts with its inside:

    >>> import numpy as np
    >>> x, y = np.mgrid[-8:8, -8:8]
    >>> r = np.hypot(x, y)
    >>> ring = ((r > 4) & (r < 6))[:, :, None] * 1.0
    >>> bool(support(ring)[8, 8, 0]), bool(support(ring)[0, 0, 0])
    (True, False)
    """
    from scipy.ndimage import binary_fill_holes

    magnitude = np.abs(image).astype(np.float64)
    if magnitude.ndim not in (2, 3):
        raise InputError(f"support: expected an image (x, y, z), got an array of shape {magnitude.shape}")
    if not np.isfinite(magnitude).all():
        raise InputError("support: the image holds NaN or infinity; expected finite values")
    if not magnitude.any():
        raise InputError("support: the image is zero everywhere; expected an object")
    magnitude /= magnitude.max()  # no overflow, whatever the unit
    mean = np.sum(magnitude**3) / np.sum(magnitude**2)
    inside = magnitude > 0.1 * np.percentile(magnitude[magnitude > 0.1 * mean], 99)
    slices = inside[:, :, None] if inside.ndim == 2 else inside
    filled = np.stack(
        [np.asarray(binary_fill_holes(slices[:, :, z])) for z in range(slices.shape[2])], axis=2
    )
    return filled.reshape(inside.shape)


_support = support  # `sigma_for_snr` has an argument of that name


def sigma_for_snr(reference: NDArray[Any], snr: float, support: NDArray[np.bool_] | None = None) -> float:
    """Noise level that gives the fully sampled image the stated SNR.

    SNR is the mean magnitude of the noise-free object inside its support / sigma. With several coils give the
    combined image: when the maps have sum |S|^2 = 1, the least-squares combination has the noise of one coil.

    Parameters
    ----------
    reference : ndarray
        Noise-free image (x, y, z), real or complex.
    snr : float
        Signal-to-noise ratio, above 0; infinity means no noise.
    support : ndarray of bool, optional
        Where the object is; `support(reference)` when left out.

    Returns
    -------
    float
        Standard deviation of the real part, and of the imaginary part.

    Raises
    ------
    InputError
        When the SNR is not above 0, or the support is empty or of another shape.

    Examples
    --------
    >>> import numpy as np
    >>> image = np.zeros((16, 16, 1))
    >>> image[4:12, 4:12] = 7.0
    >>> sigma_for_snr(image, snr=35.0)
    0.2
    """
    if not snr > 0:
        raise InputError(f"snr: expected a number above 0, got {snr}")
    inside = _support(reference) if support is None else np.asarray(support, dtype=bool)
    if inside.shape != reference.shape:
        raise InputError(
            f"support: expected the shape of the reference, {reference.shape}, got {inside.shape}"
        )
    if not inside.any():
        raise InputError("support: it is empty; expected at least one pixel of the object")
    return float(np.mean(np.abs(reference[inside]), dtype=np.float64) / snr)


def complex_noise(
    shape: Sequence[int],
    sigma: float,
    rng: np.random.Generator,
    dtype: DTypeLike = np.complex64,
) -> NDArray[Any]:
    """Complex Gaussian noise, white, with independent real and imaginary parts.

    Parameters
    ----------
    shape : sequence of int
        Shape of the array.
    sigma : float
        Standard deviation of the real part, and of the imaginary part; 0 or more.
    rng : numpy.random.Generator
        Source of randomness.
    dtype : dtype
        complex64, or complex128.

    Returns
    -------
    ndarray
        Noise of that shape and dtype.

    Raises
    ------
    InputError
        When sigma is negative or not finite.

    Examples
    --------
    >>> import numpy as np
    >>> noise = complex_noise((8, 32, 32, 1), 0.5, np.random.default_rng(1))
    >>> noise.shape, str(noise.dtype), round(float(noise.imag.std()), 1)
    ((8, 32, 32, 1), 'complex64', 0.5)
    """
    if not (isfinite(sigma) and sigma >= 0):
        raise InputError(f"sigma: expected a finite number of at least 0, got {sigma}")
    single = np.dtype(dtype) == np.complex64
    pairs = rng.standard_normal((*shape, 2), dtype=np.float32 if single else np.float64)
    pairs *= sigma
    return pairs.view(np.complex64 if single else np.complex128)[..., 0]


def acquire(
    kspace: NDArray[Any], mask: NDArray[np.bool_], sigma: float, rng: np.random.Generator
) -> NDArray[Any]:
    """Add noise to fully sampled k-space, and keep what the mask takes.

    The noise is drawn for the whole grid before the mask is applied. Generators of the same seed thus give
    the same noise at a sample, whichever mask takes it: comparisons between masks are paired.

    Parameters
    ----------
    kspace : ndarray of complex64 or complex128
        Noise-free k-space (x, y, z) or (coil, x, y, z).
    mask : ndarray of bool
        Samples taken, broadcast against (x, y, z).
    sigma : float
        Standard deviation of the real part, and of the imaginary part, of the noise; 0 or more.
    rng : numpy.random.Generator
        Source of the noise.

    Returns
    -------
    ndarray
        Of the shape and dtype of `kspace`; zero where nothing was sampled.

    Raises
    ------
    InputError
        When the k-space is not complex, the mask is not boolean, takes nothing or does not fit.

    Examples
    --------
    >>> import numpy as np
    >>> kspace = np.ones((4, 4, 1), dtype=np.complex64)
    >>> every_other = (np.arange(4) % 2 == 0)[None, :, None]
    >>> acquire(kspace, every_other, 0.0, np.random.default_rng(1))[0, :, 0].real.tolist()
    [1.0, 0.0, 1.0, 0.0]
    """
    if kspace.ndim not in (3, 4) or not np.iscomplexobj(kspace):
        raise InputError(
            "k-space: expected complex samples (x, y, z) or (coil, x, y, z), "
            f"got {kspace.dtype} of shape {kspace.shape}"
        )
    if mask.dtype != np.bool_:
        raise InputError(f"mask: expected true/false values, got {mask.dtype}")
    grid = kspace.shape[-3:]
    if mask.ndim > 3 or any(m not in (1, n) for m, n in zip(mask.shape[::-1], grid[::-1], strict=False)):
        raise InputError(f"mask: its shape {mask.shape} does not fit k-space of shape {grid} (x, y, z)")
    if not mask.any():
        raise InputError("mask: it is empty; expected at least one sample")
    noisy = complex_noise(kspace.shape, sigma, rng, kspace.dtype)
    noisy += kspace
    noisy *= mask
    return noisy
