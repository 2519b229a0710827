"""Normalised root-mean-square error."""

from __future__ import annotations

import numpy as np

from ..inner import norm
from .magnitudes import magnitudes
from .measure import Measure


def nrmse(reference: np.ndarray, image: np.ndarray, region: np.ndarray | None = None) -> float:
    """Return the norm of the magnitudes' difference over the norm of the reference.

    ``|| |x| - |r| || / || r ||``, Euclidean norms over the region, of image ``x`` and reference ``r``,
    without fitting a scale. Zero when the magnitudes are equal; 1 for an image of zeros.

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
    Source: Fienup, Appl. Opt. 36 (1997) 8352; there the image's scale is fitted first.

    Examples
    --------
    >>> nrmse(np.full((4, 4, 1), 2.0), np.full((4, 4, 1), 1.5j))
    0.25
    """
    r, x, inside = magnitudes(reference, image, region)
    return norm(x[inside] - r[inside]) / norm(r[inside])


def _overall(reference: np.ndarray, image: np.ndarray, support: np.ndarray) -> float:
    return nrmse(reference, image)


NRMSE = Measure(
    "nrmse", "lower", "", "root-mean-square error relative to the reference, inside the object", nrmse
)
NRMSE_OVERALL = Measure(
    "nrmse_overall", "lower", "", "root-mean-square error relative to the reference, overall", _overall
)
