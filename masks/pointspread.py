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
        Largest magnitude. With a dense centre it lies on the flank of the main lobe.
    outside_main_lobe : float
        Largest magnitude outside the main lobe. The main lobe is all that can be reached from the peak by
        steps down to a neighbour (diagonal ones too; the field of view is periodic). So this is the highest
        of the other local maxima, and 0 when there is none.
    rms : float
        Root mean square over all positions but the peak.
    rms_uniform : float
        Root mean square that uniform random draws have at every position: sqrt((N - K) / (K (N - 1))) for K
        samples of a grid of N points. By Parseval the `rms` over all positions is this for every mask. A
        pattern cannot lessen the energy of the sidelobes; it can spread it evenly, or move it to where it
        does less harm. So the `rms` cannot rank masks.
    compensated_peak, compensated_rms : float or None
        Largest magnitude and root mean square, over all positions but the peak, of the point spread in which
        every sample has the weight 1 / probability; None without a density. With these weights the main lobe
        of the mean over draws is a single position. By Parseval the `compensated_rms` depends on which
        weights were drawn and not on how the samples lie; the `compensated_peak` depends on both.

    References
    ----------
    Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182, choose a draw by the peak with these weights.

    Examples
    --------
    >>> found = sidelobes(np.arange(16) % 4 == 0)
    >>> found.peak, found.outside_main_lobe
    (1.0, 1.0)

    The low half of k-space: the point spread falls from its peak to its first zero, and the first sidelobe
    behind that is 13 dB below the peak.

    >>> found = sidelobes(abs(np.arange(257) - 128) <= 64)
    >>> f"{found.peak:.2f} {found.outside_main_lobe:.2f}"
    '0.63 0.21'
    """

    peak: float
    outside_main_lobe: float
    rms: float
    rms_uniform: float
    compensated_peak: float | None = None
    compensated_rms: float | None = None


def point_spread(
    mask: NDArray[np.bool_], density: NDArray[np.float64] | None = None
) -> NDArray[np.complex128]:
    """Return the point-spread function of a mask.

    PSF(r) = sum_k w(k) exp(2 pi i k . r / N) / sum_k w(k), with w = 1 for a sample, 0 where none is taken.

    Parameters
    ----------
    mask : ndarray of bool
        True where a sample is taken; of any number of axes. The centre of k-space has index N // 2.
    density : ndarray of float64, optional
        Inclusion probabilities, of the shape of the mask: each sample gets the weight 1 / probability.

    Returns
    -------
    ndarray of complex128
        Of the shape of the mask; the peak, at index N // 2, is 1.

    Raises
    ------
    InputError
        When the mask is not of true and false, or takes no sample, or the density does not fit it.

    Examples
    --------
    Every fourth line: replicas at quarters of the field of view.

    >>> np.flatnonzero(abs(point_spread(np.arange(16) % 4 == 0)) > 0.5)
    array([ 0,  4,  8, 12])
    """
    weights = sample_weights(_checked(mask)[None], density)[0]
    return np.fft.fftshift(np.fft.ifftn(np.fft.ifftshift(weights), norm="forward")) / weights.sum()


def sidelobes(mask: NDArray[np.bool_], density: NDArray[np.float64] | None = None) -> Sidelobes:
    """Return the peak and the root mean square of the sidelobes.

    Parameters
    ----------
    mask : ndarray of bool
        True where a sample is taken; of any number of axes. The centre of k-space has index N // 2.
    density : ndarray of float64, optional
        Inclusion probabilities, of the shape of the mask, for the compensated figures.

    Returns
    -------
    Sidelobes
        All are 0 when the mask takes every sample (the compensated ones: when the density is 1 too).

    Raises
    ------
    InputError
        When the mask is not of true and false, or takes no sample, or the density does not fit it.

    Examples
    --------
    >>> mask = np.random.default_rng(1).permutation(256) < 64
    >>> found = sidelobes(mask)
    >>> f"{found.rms:.4f} {found.rms_uniform:.4f}"
    '0.1085 0.1085'
    """
    masks = _checked(mask)[None]
    points, samples = mask.size, int(np.count_nonzero(mask))
    others = max(points - 1, 1)
    power = spread_power(masks)
    compensated = None if density is None else spread_power(masks, density)
    return Sidelobes(
        peak=_root(highest(power)),
        outside_main_lobe=_root(highest_outside_main_lobe(power)),
        rms=_root(_others(power).sum(axis=1) / others),
        rms_uniform=sqrt((points - samples) / (samples * others)),
        compensated_peak=None if compensated is None else _root(highest(compensated)),
        compensated_rms=None if compensated is None else _root(_others(compensated).sum(axis=1) / others),
    )


def sample_weights(
    masks: NDArray[np.bool_], density: NDArray[np.float64] | None = None
) -> NDArray[np.float64]:
    """Return the weight of each sample: 1, or 1 / probability when a density is given.

    Parameters
    ----------
    masks : ndarray of bool
        A stack of masks, (draw, *grid).
    density : ndarray of float64, optional
        Inclusion probabilities, of the shape of the grid.

    Returns
    -------
    ndarray of float64
        Of the shape of the stack, 0 where no sample is taken.

    Raises
    ------
    InputError
        When the density has another shape, is not finite, or is not above 0 where a sample is taken.

    Examples
    --------
    >>> sample_weights(np.array([[True, False, True]]), np.array([1.0, 0.5, 0.25]))
    array([[1., 0., 4.]])
    """
    if density is None:
        return masks.astype(np.float64)
    density = np.asarray(density, dtype=np.float64)
    if density.shape != masks.shape[1:]:
        raise InputError(f"density: expected the shape of the mask, {masks.shape[1:]}, got {density.shape}")
    taken = masks.any(axis=0)
    if not (np.isfinite(density).all() and (density[taken] > 0).all()):
        raise InputError("density: expected finite probabilities, above 0 at every sample that is taken")
    weights = np.divide(1.0, density, out=np.zeros_like(density), where=taken)
    return np.where(masks, weights, 0.0)


def spread_power(masks: NDArray[np.bool_], density: NDArray[np.float64] | None = None) -> NDArray[np.float64]:
    """Return |PSF|^2 of a stack of masks, its peak first: at index 0 of every axis of the grid.

    Parameters
    ----------
    masks : ndarray of bool
        A stack of masks, (draw, *grid), each with a sample.
    density : ndarray of float64, optional
        Inclusion probabilities, of the shape of the grid.

    Returns
    -------
    ndarray of float64
        Of the shape of the stack; the peaks are 1. The transforms run as one batch.

    Raises
    ------
    InputError
        When the density does not fit the masks.

    Examples
    --------
    >>> spread_power(np.array([[True, False, True, False]])).round(9)
    array([[1., 0., 1., 0.]])
    """
    from scipy.fft import fftn

    axes = tuple(range(1, masks.ndim))
    weights = sample_weights(masks, density)
    # The magnitude knows nothing of where k-space has its centre, so nothing is shifted.
    spectrum = np.asarray(fftn(weights / weights.sum(axis=axes, keepdims=True), axes=axes), np.complex128)
    return np.real(spectrum) ** 2 + np.imag(spectrum) ** 2


def highest(power: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return, for each draw, the highest |PSF|^2 at any position but the peak; 0 on a grid of one point.

    Parameters
    ----------
    power : ndarray of float64
        From `spread_power`.

    Returns
    -------
    ndarray of float64
        One number a draw.

    Examples
    --------
    >>> highest(np.array([[1.0, 0.6, 0.1, 0.2, 0.1, 0.6]]))
    array([0.6])
    """
    return _others(power).max(axis=1, initial=0.0)


def highest_outside_main_lobe(power: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return, for each draw, the highest |PSF|^2 outside the main lobe, as `Sidelobes` defines it.

    Parameters
    ----------
    power : ndarray of float64
        From `spread_power`.

    Returns
    -------
    ndarray of float64
        One number a draw, 0 where the main lobe is all there is.

    Examples
    --------
    >>> highest_outside_main_lobe(np.array([[1.0, 0.6, 0.1, 0.2, 0.1, 0.6]]))
    array([0.2])
    """
    from scipy.ndimage import maximum_filter

    # The highest position that cannot be reached going down has no higher neighbour: that one would either
    # be outside as well, or the position could be reached from it.
    neighbourhood = (1, *(3,) * (power.ndim - 1))
    summits = power >= maximum_filter(power, size=neighbourhood, mode="wrap")
    return _others(np.where(summits, power, 0.0)).max(axis=1, initial=0.0)


def _others(power: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return all positions but the peak, one row a draw."""
    return power.reshape(len(power), -1)[:, 1:]


def _root(power: NDArray[np.float64]) -> float:
    return sqrt(float(power[0]))


def _checked(mask: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Return the mask as an array of true and false that takes a sample."""
    mask = np.asarray(mask)
    if mask.dtype != bool:
        raise InputError(f"mask: expected true and false, got numbers of type {mask.dtype}")
    if not mask.any():
        raise InputError("mask: it takes no sample; expected at least one")
    return mask
