"""Structural similarity."""

from __future__ import annotations

from typing import Any

import numpy as np

from ... import InputError
from .magnitudes import magnitudes
from .measure import Measure

WINDOW = 11
"""Width of the Gaussian window in pixels (Wang et al. 2004)."""


def ssim(reference: np.ndarray, image: np.ndarray, region: np.ndarray | None = None) -> float:
    """Return the mean structural similarity of the magnitudes, computed slice by slice.

    The settings are those of the paper: an 11 x 11 Gaussian window of 1.5 pixels, weighted moments without
    bias correction, ``K1 = 0.01``, ``K2 = 0.03``. The dynamic range is the largest magnitude of the whole
    reference, so all slices and regions of a volume share it. 1 when the magnitudes are equal.

    Parameters
    ----------
    reference, image : array (x, y, z)
        Real or complex; magnitudes are compared, in double precision.
    region : bool array (x, y, z), optional
        Mean of the similarity map over these voxels. When left out, the mean over each slice where the window
        lies inside it (a border of 5 pixels is left out), then over slices.

    Raises
    ------
    InputError
        A slice is smaller than the window; the arrays do not fit each other, hold NaN or infinite values, or
        the reference is zero in the region.

    Notes
    -----
    Source: Wang, Bovik, Sheikh & Simoncelli, IEEE Trans. Image Process. 13 (2004) 600. Computed by
    scikit-image.

    Examples
    --------
    >>> bars = np.zeros((32, 32, 1))
    >>> bars[::4] = 1
    >>> ssim(bars, bars), round(ssim(bars, 0.5 * bars), 2)
    (1.0, 0.64)
    """
    from skimage.metrics import structural_similarity

    r, x, inside = magnitudes(reference, image, region)
    if min(r.shape[:2]) < WINDOW:
        raise InputError(f"slices are {r.shape[0]} x {r.shape[1]}; ssim needs at least {WINDOW} x {WINDOW}")
    # slices take the place of colour channels, which are compared one by one and averaged
    compared: Any = structural_similarity(
        r,
        x,
        channel_axis=2,
        data_range=r.max(),
        gaussian_weights=True,
        sigma=1.5,
        use_sample_covariance=False,
        full=True,
    )
    mean, similarity = compared
    return float(mean if region is None else similarity[inside].mean())


def _overall(reference: np.ndarray, image: np.ndarray, support: np.ndarray) -> float:
    return ssim(reference, image)


SSIM = Measure("ssim", "higher", "", "structural similarity, mean inside the object", ssim)
SSIM_OVERALL = Measure("ssim_overall", "higher", "", "structural similarity, mean overall", _overall)
