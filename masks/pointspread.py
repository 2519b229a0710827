"""Point-spread function of a mask: what undersampling makes of a single bright point."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from .. import InputError


@dataclass(frozen=True)
class Sidelobes:
    """How large the point-spread function is outside its peak, relative to the peak.

    Attributes
    ----------
    peak : float
        Largest magnitude.
    rms : float
        Root mean square over all positions but the peak.
    rms_uniform : float
        Root mean square that uniform random draws have at every position: sqrt((N - K) / (K (N - 1))) for K
        samples of a grid of N points. By Parseval the `rms` over all positions is this for every mask. A
        pattern cannot lessen the energy of the sidelobes; it can spread it evenly, or move it to where it
        does less harm.

    Examples
    --------
    >>> sidelobes(np.arange(16) % 4 == 0).peak
    1.0
    """

    peak: float
    rms: float
    rms_uniform: float


def point_spread(mask: NDArray[np.bool_]) -> NDArray[np.complex128]:
    """Return the point-spread function of a mask.

    PSF(r) = 1/K sum_k mask(k) exp(2 pi i k . r / N), with K the number of samples.

    Parameters
    ----------
    mask : ndarray of bool
        True where a sample is taken; of any number of axes. The centre of k-space has index N // 2.

    Returns
    -------
    ndarray of complex128
        Of the shape of the mask; the peak, at index N // 2, is 1.

    Raises
    ------
    InputError
        When the mask is not of true and false, or takes no sample.

    Examples
    --------
    Every fourth line: replicas at quarters of the field of view.

    >>> np.flatnonzero(abs(point_spread(np.arange(16) % 4 == 0)) > 0.5)
    array([ 0,  4,  8, 12])
    """
    mask = np.asarray(mask)
    if mask.dtype != bool:
        raise InputError(f"mask: expected true and false, got numbers of type {mask.dtype}")
    samples = np.count_nonzero(mask)
    if samples == 0:
        raise InputError("mask: it takes no sample; expected at least one")
    return np.fft.fftshift(np.fft.ifftn(np.fft.ifftshift(mask), norm="forward")) / samples


def sidelobes(mask: NDArray[np.bool_]) -> Sidelobes:
    """Return the peak and the root mean square of the sidelobes.

    Parameters
    ----------
    mask : ndarray of bool
        True where a sample is taken; of any number of axes. The centre of k-space has index N // 2.

    Returns
    -------
    Sidelobes
        All are 0 when the mask takes every sample.

    Raises
    ------
    InputError
        When the mask is not of true and false, or takes no sample.

    Examples
    --------
    >>> mask = np.random.default_rng(1).permutation(256) < 64
    >>> found = sidelobes(mask)
    >>> f"{found.rms:.4f} {found.rms_uniform:.4f}"
    '0.1085 0.1085'
    """
    spread = np.abs(point_spread(mask))
    spread[tuple(n // 2 for n in spread.shape)] = 0.0
    points, samples = spread.size, int(np.count_nonzero(mask))
    others = max(points - 1, 1)
    return Sidelobes(
        peak=float(spread.max()),
        rms=sqrt(float(np.sum(spread**2)) / others),
        rms_uniform=sqrt((points - samples) / (samples * others)),
    )
