"""The penalty ``weight * ||W x||_1`` of an orthonormal wavelet transform."""

from __future__ import annotations

import numpy as np
from numba import njit

from .wavelet import WaveletTransform


class WaveletL1:
    """Sum of the magnitudes of the wavelet coefficients, times a weight.

    Parameters
    ----------
    transform : WaveletTransform
    weight : float
        In the units of the image: with unitary transforms, ``w`` times the noise's standard deviation.
    penalise_coarsest : bool
        Whether the coarsest scale, which is not sparse, is penalised too.

    Notes
    -----
    Source: Chen, Donoho & Saunders, SIAM J. Sci. Comput. 20 (1998) 33; the proximal map is soft
    thresholding of the coefficients (Daubechies, Defrise & De Mol, Commun. Pure Appl. Math. 57 (2004) 1413).

    Examples
    --------
    >>> import numpy as np
    >>> penalty = WaveletL1(WaveletTransform((1, 1, 4), levels=0, axes=(2,)), weight=1.0)
    >>> x = np.array([[[3, -2j, 0.5, 0]]], np.complex64)
    >>> penalty.value(x)
    5.5
    >>> np.abs(penalty.prox(x, 1.0, np.empty_like(x))).ravel().round(3).tolist()
    [2.0, 1.0, 0.0, 0.0]
    """

    def __init__(self, transform: WaveletTransform, weight: float, penalise_coarsest: bool = True):
        self.transform = transform
        self.weight = float(weight)
        self.penalise_coarsest = penalise_coarsest

    def value(self, x: np.ndarray) -> float:
        """``weight * ||W x||_1``."""
        c = self.transform.forward(x)
        magnitude = float(np.sum(np.abs(c), dtype=np.float64))
        if not self.penalise_coarsest:
            magnitude -= float(np.sum(np.abs(c[self.transform.coarsest]), dtype=np.float64))
        return self.weight * magnitude

    def prox(self, v: np.ndarray, step: float, out: np.ndarray) -> np.ndarray:
        """Write ``argmin_x ||x - v||^2 / 2 + step * weight * ||W x||_1`` to `out` (which may be `v`)."""
        self.transform.forward(v, out)
        self.shrink(out, step)
        return self.transform.inverse(out, out)

    def shrink(self, c: np.ndarray, step: float) -> None:
        """Soft-threshold coefficients in place at ``step * weight``."""
        n0, n1, n2 = c.shape
        kept = (0, 0, 0) if self.penalise_coarsest else tuple(s.stop for s in self.transform.coarsest)
        part = self.transform.part.type
        threshold = part(step * self.weight)
        floor = max(threshold, np.finfo(part).tiny)
        lines = c.reshape(n0 * n1, n2)
        self.transform.team.share(
            _shrink, n0 * n1, lines, n1, kept, threshold, floor, part(1), elements=c.size
        )


# Division in the manner of C, not of Python, lets the compiler vectorise; the floor keeps it from 0 / 0.
@njit(nogil=True, cache=True, fastmath={"contract", "reassoc", "nsz"}, error_model="numpy")
def _shrink_line(c, threshold, floor, one):
    for j in range(c.size):
        re = c[j].real
        im = c[j].imag
        scale = one - threshold / max(np.sqrt(re * re + im * im), floor)
        c[j] = complex(scale * re, scale * im)


@njit(nogil=True, cache=True)
def _shrink(start, stop, c, rows, kept, threshold, floor, one):
    for i in range(start, stop):
        inside = i // rows < kept[0] and i % rows < kept[1]
        _shrink_line(c[i, (kept[2] if inside else 0) :], threshold, floor, one)
