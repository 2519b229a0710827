"""The noise's standard deviation, estimated from acquired k-space."""

from __future__ import annotations

import numpy as np

from .acquired import Acquired

BORDER_FRACTION = 0.05
SMALLEST_BORDER = 64


def estimate_sigma(data: Acquired) -> float:
    """Estimate the standard deviation of the real part of the noise from the k-space border.

    The samples farthest from the centre of k-space (the outer 5%, 64 at least) hold little signal, so their
    squared magnitude is exponentially distributed with median ``2 ln(2) sigma^2``; the median tolerates the
    few that do hold signal. The estimate is an upper one for objects with much detail at the resolution
    limit. Samples that are exactly zero (filled in by a scanner) are left out.

    Parameters
    ----------
    data : Acquired

    Returns
    -------
    float
        0 when every sample is zero.

    Notes
    -----
    The border as a place with little signal: common practice, no source.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> k = (rng.normal(size=(1, 128, 128, 1)) + 1j * rng.normal(size=(1, 128, 128, 1))) * 0.1
    >>> k[0, 64, 64, 0] = 100
    >>> round(estimate_sigma(Acquired(k, np.ones((1, 128, 1), bool))), 2)
    0.1
    """
    radius2 = np.zeros(data.shape)
    for axis, n in enumerate(data.shape):
        if n > 1:
            frequency = (np.arange(n) - n // 2) / (n / 2)
            radius2 = radius2 + (frequency**2).reshape([-1 if a == axis else 1 for a in range(3)])
    sampled = np.broadcast_to(data.mask, data.shape)
    distance = radius2[sampled]
    border = min(distance.size, max(SMALLEST_BORDER, int(BORDER_FRACTION * distance.size)))
    power = np.abs(data.kspace[:, sampled].astype(np.complex128)) ** 2
    outside = power[:, distance >= np.partition(distance, -border)[-border]]
    outside = outside[outside > 0]
    return float(np.sqrt(np.median(outside) / (2 * np.log(2)))) if outside.size else 0.0
