"""Orthonormal periodised wavelet transform of images and volumes of any size."""

from __future__ import annotations

from functools import cache

import numpy as np

from .. import InputError
from . import filterbank
from .precision import real_type
from .team import Team
from .wavelet_filters import analysis_filters
from .wavelet_levels import axis_levels


@cache
def _padded_filters(name: str, dtype: np.dtype) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, int]:
    """Analysis filters padded to a multiple of eight taps, synthesis filters, and the shift of PyWavelets."""
    low, high = analysis_filters(name)
    padding = (0, -low.size % 8)
    h = np.pad(low.astype(dtype), padding)
    g = np.pad(high.astype(dtype), padding)
    even, odd = (np.stack([h[parity::2], g[parity::2]], axis=1).ravel() for parity in (0, 1))
    return h, g, even, odd, 1 - low.size // 2


class WaveletTransform:
    """Orthonormal wavelet transform ``W`` with periodic boundaries; ``W^H W = W W^H = 1`` for any size.

    The coefficients have the shape of the image. Each level halves the transformed axes of the block that
    the level before left in the corner; the coarsest scale ends at ``coefficients[coarsest]``. Where a
    length is odd at some level, its last sample passes to the next level unchanged and the transform works
    on the even rest: this keeps the transform orthonormal for every size. For even lengths the coefficients
    are those of PyWavelets in mode ``periodization``.

    Parameters
    ----------
    shape : tuple of 3 int
        Shape of the image. Axes that are not transformed are batches.
    wavelet : str
        Any orthogonal wavelet of PyWavelets.
    levels : int, optional
        Number of levels, of each axis as far as it can be halved; see `axis_levels` when not given. 0 is the
        identity.
    axes : tuple of int
        The transformed axes.
    dtype : complex64, complex128, float32 or float64
    team : Team, optional
        The threads that share the work.

    Raises
    ------
    InputError
        Unknown or non-orthogonal wavelet, or more levels than the longest axis can be halved; an array of
        another shape, type or memory order.

    Notes
    -----
    Source: Mallat, IEEE Trans. Pattern Anal. Mach. Intell. 11 (1989) 674; Daubechies, Ten Lectures on
    Wavelets, SIAM 1992.

    Examples
    --------
    >>> import numpy as np
    >>> W = WaveletTransform((1, 24, 37), "db4", levels=2, axes=(1, 2), dtype=np.float64)
    >>> x = np.random.default_rng(0).normal(size=(1, 24, 37))
    >>> c = W.forward(x)
    >>> bool(np.isclose(np.linalg.norm(c), np.linalg.norm(x))), bool(np.allclose(W.inverse(c), x))
    (True, True)
    """

    def __init__(
        self,
        shape: tuple[int, int, int],
        wavelet: str = "db4",
        levels: int | None = None,
        axes: tuple[int, ...] = (0, 1, 2),
        dtype: np.dtype | type = np.complex64,
        team: Team | None = None,
    ):
        self.shape = shape
        self.wavelet = wavelet
        self.axes = tuple(sorted(axes))
        self.dtype = np.dtype(dtype)
        self.part = np.dtype(real_type(dtype))
        # Rows are taken apart sample by sample; a complex64 moves fastest as one 8-byte number.
        self._carrier = np.dtype(np.float64) if self.dtype == np.complex64 else self.dtype
        of_axis = dict(zip(self.axes, axis_levels(levels, [shape[a] for a in self.axes]), strict=True))
        self.levels = max(of_axis.values())
        # the axes that each level halves, and the block that it works on
        self._halved = [tuple(a for a in self.axes if of_axis[a] > level) for level in range(self.levels)]
        self._h, self._g, self._even, self._odd, self._shift = _padded_filters(wavelet, self.part)
        self.team = team or Team()
        self._boxes = [tuple(shape)]
        for halved in self._halved:
            box = self._boxes[-1]
            self._boxes.append(tuple((n + 1) // 2 if a in halved else n for a, n in enumerate(box)))
        self.coarsest = tuple(slice(n) for n in self._boxes[-1])
        self._scratch = np.empty(shape, self.dtype)

    def forward(self, x: np.ndarray, out: np.ndarray | None = None) -> np.ndarray:
        """Return the coefficients of `x`, written to `out` when given (which may be `x`)."""
        self._check(x)
        out = np.empty_like(x) if out is None else self._check(out)
        if self.levels == 0 and out is not x:
            np.copyto(out, x)
        source = x
        for box, halved in zip(self._boxes, self._halved, strict=False):
            self._level(source, out, box, halved[::-1], forward=True)
            source = out
        return out

    def inverse(self, c: np.ndarray, out: np.ndarray | None = None) -> np.ndarray:
        """Return the image with coefficients `c`, written to `out` when given (which may be `c`)."""
        self._check(c)
        if out is None:
            out = c.copy()
        elif out is not c:
            np.copyto(self._check(out), c)
        for box, halved in zip(self._boxes[-2::-1], self._halved[::-1], strict=True):
            self._level(out, out, box, halved, forward=False)
        return out

    def _check(self, x: np.ndarray) -> np.ndarray:
        """Refuse what the kernels, which see bare memory, must not get."""
        if x.shape != self.shape or x.dtype != self.dtype or not x.flags.c_contiguous:
            raise InputError(
                f"expected a C-contiguous {self.dtype} array of {self.shape}, got {x.dtype} of {x.shape}"
            )
        return x

    def _level(
        self, src: np.ndarray, dst: np.ndarray, box: tuple[int, ...], axes: tuple[int, ...], *, forward: bool
    ) -> None:
        """Filter the leading `box` of `src` along `axes` in turn and leave the result in `dst`.

        A pass along the first or second axis cannot work in place, so the passes alternate between the
        scratch array and `dst`, such that the last one ends in `dst`.
        """
        corner = tuple(slice(n) for n in box)
        targets = [dst if (len(axes) - 1 - i) % 2 == 0 else self._scratch for i in range(len(axes))]
        for axis, target in zip(axes, targets, strict=True):
            if src is target and axis != 2:
                self._scratch[corner] = src[corner]
                src = self._scratch
            self._along(axis, src, target, box, forward)
            src = target

    def _along(
        self, axis: int, src: np.ndarray, dst: np.ndarray, box: tuple[int, ...], forward: bool
    ) -> None:
        n = box[axis]
        elements = box[0] * box[1] * box[2]
        if n < 2:
            dst[tuple(slice(m) for m in box)] = src[tuple(slice(m) for m in box)]
            return
        filters = (self._h, self._g) if forward else (self._even, self._odd)
        plane, row = self.shape[1] * self.shape[2], self.shape[2]
        if axis == 2:
            kernel = filterbank.analyse_rows if forward else filterbank.synthesise_rows
            target = dst.view(self.part) if forward else dst.view(self._carrier)
            self.team.share(
                kernel, box[0] * box[1], src.view(self._carrier).reshape(-1), target.reshape(-1),
                box[1], row, plane, n, *filters, self._shift, elements=elements,
            )  # fmt: skip
        else:
            kernel = filterbank.analyse_columns if forward else filterbank.synthesise_columns
            reals = self.dtype.itemsize // self.part.itemsize
            line, outer = (plane, row) if axis == 0 else (row, plane)
            source, target = (a.view(self.part).reshape(-1) for a in (src, dst))
            strides = (line * reals, outer * reals, box[2] * reals)
            self.team.share(
                kernel, n // 2 * box[1 - axis], source, target, n, *strides,
                *filters, self._shift, elements=elements,
            )  # fmt: skip
