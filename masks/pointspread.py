"""The point-spread function of a sampling mask: what one point of the object looks like, zero-filled."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Sidelobes:
    """Sidelobes of a point-spread function with peak 1.

    Attributes
    ----------
    peak : float
        Largest magnitude outside the peak.
    rms : float
        Root mean square outside the peak.
    rms_uniform : float
        What a uniform random draw of as many samples has, ``sqrt((N - K) / (K (N - 1)))``: elementary
        sampling theory, for a draw without replacement.
    """

    peak: float
    rms: float
    rms_uniform: float


def point_spread(mask: np.ndarray) -> np.ndarray:
    """Return the point-spread function of a mask, centred, with peak 1.

    Parameters
    ----------
    mask : bool array of any shape
        Centred k-space.

    Returns
    -------
    complex128 array of the same shape

    Examples
    --------
    >>> every_second = np.arange(8) % 2 == 0
    >>> np.abs(point_spread(every_second)).round(3)
    array([1., 0., 0., 0., 1., 0., 0., 0.])
    """
    from scipy.fft import fftshift, ifftn, ifftshift

    spread = fftshift(ifftn(ifftshift(mask.astype(np.complex128))))
    return spread / spread[tuple(n // 2 for n in mask.shape)]


def sidelobes(mask: np.ndarray) -> Sidelobes:
    """Measure the sidelobes of a mask's point-spread function.

    Examples
    --------
    >>> found = sidelobes(np.arange(8) % 2 == 0)
    >>> round(found.peak, 3), round(found.rms, 3), round(found.rms_uniform, 3)
    (1.0, 0.378, 0.378)
    """
    outside = np.abs(point_spread(mask)).ravel()
    outside = np.delete(outside, np.ravel_multi_index([n // 2 for n in mask.shape], mask.shape))
    n, k = mask.size, int(np.count_nonzero(mask))
    return Sidelobes(
        peak=float(outside.max(initial=0.0)),
        rms=float(np.sqrt(np.mean(outside**2))) if outside.size else 0.0,
        rms_uniform=float(np.sqrt((n - k) / (k * max(n - 1, 1)))),
    )
