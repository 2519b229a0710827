"""The filters of the orthogonal wavelets that PyWavelets knows."""

from __future__ import annotations

from difflib import get_close_matches
from functools import lru_cache

import numpy as np
from pywt import Wavelet, wavelist  # type: ignore[attr-defined]  # the package builds its names at run time

from .. import InputError

ORTHONORMAL_WITHIN = 1e-6
"""How far the products of a filter with its even shifts may be from 1 and 0."""


@lru_cache(maxsize=1)
def orthogonal_wavelets() -> tuple[str, ...]:
    """Names of the wavelets of PyWavelets whose periodised transform is orthonormal.

    PyWavelets' own mark is checked by number: ``dmey`` carries it, but its truncated filter misses
    orthonormality in the sixth digit, and is left out.

    Examples
    --------
    >>> names = orthogonal_wavelets()
    >>> [name in names for name in ("haar", "db4", "sym8", "coif3", "bior2.2", "dmey")]
    [True, True, True, True, False, False]
    """
    return tuple(name for name in wavelist(kind="discrete") if _is_orthonormal(name))


def _is_orthonormal(name: str) -> bool:
    wavelet = Wavelet(name)
    if not wavelet.orthogonal:
        return False
    h = np.asarray(wavelet.dec_lo)
    products = np.correlate(h, h, "full")[len(h) - 1 :: 2]
    products[0] -= 1
    return bool(np.max(np.abs(products)) < ORTHONORMAL_WITHIN)


def check_orthogonal(name: str) -> str:
    """Return `name` when it is an orthogonal wavelet.

    Raises
    ------
    InputError
        The name is not one of `orthogonal_wavelets`; the nearest one is named.

    Examples
    --------
    >>> check_orthogonal("db44")
    Traceback (most recent call last):
    ...
    skipline.InputError: 'db44' is not an orthogonal wavelet of PyWavelets; did you mean 'db4'?
    """
    if name not in orthogonal_wavelets():
        near = get_close_matches(name, orthogonal_wavelets(), 1, 0.3) or ["db4"]
        raise InputError(f"{name!r} is not an orthogonal wavelet of PyWavelets; did you mean {near[0]!r}?")
    return name


def analysis_filters(name: str) -> tuple[np.ndarray, np.ndarray]:
    """Low-pass and high-pass filter, in the order in which they meet the samples of the signal.

    Examples
    --------
    >>> low, high = analysis_filters("haar")
    >>> low.round(3).tolist(), high.round(3).tolist()
    ([0.707, 0.707], [0.707, -0.707])
    """
    wavelet = Wavelet(check_orthogonal(name))
    return np.asarray(wavelet.dec_lo)[::-1], np.asarray(wavelet.dec_hi)[::-1]
