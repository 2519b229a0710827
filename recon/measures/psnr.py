"""Peak signal-to-noise ratio."""

from __future__ import annotations

import math

import numpy as np

from .magnitudes import magnitudes
from .measure import Measure


def psnr(reference: np.ndarray, image: np.ndarray, region: np.ndarray | None = None) -> float:
    """Return the reference's peak over the root-mean-square error, in decibels.

    ``20 log10(max |r| / rms(|x| - |r|))``, both over the region, of image ``x`` and reference ``r``. The
    noise is all that differs, artefacts included. Infinite when the magnitudes are equal.

    Parameters
    ----------
    reference, image : array (x, y, z)
        Real or complex; magnitudes are compared, in double precision.
    region : bool array (x, y, z), optional
        Where to compare; everywhere when left out.

    Raises
    ------
    InputError
        The arrays do not fit each other, hold NaN or infinite values, or the reference is zero in the region.

    Notes
    -----
    Source: Huynh-Thu & Ghanbari, Electron. Lett. 44 (2008) 800; the peak is the reference's own, as MR images
    have no largest possible value.

    Examples
    --------
    >>> psnr(np.full((4, 4, 1), 10.0), np.full((4, 4, 1), 9.0))
    20.0
    """
    r, x, inside = magnitudes(reference, image, region)
    error = math.sqrt(np.mean((x[inside] - r[inside]) ** 2))
    return 20 * math.log10(r[inside].max() / error) if error > 0 else math.inf


def _overall(reference: np.ndarray, image: np.ndarray, support: np.ndarray) -> float:
    return psnr(reference, image)


PSNR = Measure(
    "psnr", "higher", "dB", "peak of the reference over root-mean-square error, inside the object", psnr
)
PSNR_OVERALL = Measure(
    "psnr_overall", "higher", "dB", "peak of the reference over root-mean-square error, overall", _overall
)
