"""The unitary, centred discrete Fourier transform of this package."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import scipy.fft


def to_kspace(x: np.ndarray, axes: Sequence[int] = (-3, -2, -1), threads: int = 1) -> np.ndarray:
    """Image to k-space.

    Index ``i`` of an axis of length ``N`` is position ``(i - N // 2) * voxel`` in the image and frequency
    ``(i - N // 2) / FOV`` in k-space. The transform is unitary: noise has the same standard deviation in
    both.

    Parameters
    ----------
    x : array, complex64 or complex128
    axes : sequence of int
    threads : int

    Returns
    -------
    array of the shape and type of `x`

    Examples
    --------
    >>> import numpy as np
    >>> x = np.zeros((4, 4, 1), np.complex64)
    >>> x[2, 2] = 1  # a point at the centre has a flat spectrum
    >>> bool(np.allclose(to_kspace(x), 0.25))
    True
    """
    shifted = scipy.fft.ifftshift(x, axes)
    k = scipy.fft.fftn(shifted, axes=axes, norm="ortho", overwrite_x=True, workers=threads)
    return scipy.fft.fftshift(k, axes)


def to_image(k: np.ndarray, axes: Sequence[int] = (-3, -2, -1), threads: int = 1) -> np.ndarray:
    """k-space to image: inverse, and adjoint, of `to_kspace`.

    Examples
    --------
    >>> import numpy as np
    >>> x = np.arange(30, dtype=np.complex128).reshape(5, 6, 1)
    >>> bool(np.allclose(to_image(to_kspace(x)), x))
    True
    """
    shifted = scipy.fft.ifftshift(k, axes)
    x = scipy.fft.ifftn(shifted, axes=axes, norm="ortho", overwrite_x=True, workers=threads)
    return scipy.fft.fftshift(x, axes)
