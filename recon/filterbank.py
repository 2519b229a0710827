"""One level of the orthonormal periodised filter bank along one axis, in `numba`.

Along an axis of length ``n``, with ``half = n // 2`` and the filters ``h`` (low pass) and ``g`` (high pass)::

    low[i]  = sum_t h[t] x[(2 i + t + shift) mod 2 half]
    high[i] = sum_t g[t] x[(2 i + t + shift) mod 2 half]

and the synthesis is the transpose. When ``n`` is odd the last sample goes through unchanged, as the last
sample of the low band: an axis of coefficients is ``[low, (last sample), high]``.

How it is made fast: a complex array is seen as pairs of real numbers, which a real filter treats alike; every
inner loop is `_fir8`, eight taps over contiguous streams of one flat array; and the streams are named by
unsigned offsets, because slices cost a reference count each and signed indices a test for wrapping around,
which keeps the compiler from vector instructions. Longer filters take several such loops; shorter ones are
padded with zeros.

Source: Mallat, IEEE Trans. Pattern Anal. Mach. Intell. 11 (1989) 674.
"""

from __future__ import annotations

import numpy as np
from numba import njit, uintp

# Contraction to fused multiply-add and reassociation inside one line are all that is allowed to the
# compiler: NaN and infinity keep their meaning.
_FAST = {"contract", "reassoc", "nsz"}


@njit(nogil=True, cache=True, fastmath=_FAST)
def _fir8(out, at, s, width, o0, o1, o2, o3, o4, o5, o6, o7, c, t):
    """Write (``t == 0``) or add to ``out[at:at + width]`` the taps ``c[t:t + 8]`` of eight streams of `s`."""
    c0, c1, c2, c3, c4, c5, c6, c7 = (
        c[t],
        c[t + 1],
        c[t + 2],
        c[t + 3],
        c[t + 4],
        c[t + 5],
        c[t + 6],
        c[t + 7],
    )
    if t == 0:
        for j in range(width):
            out[at + j] = (
                (c0 * s[o0 + j] + c1 * s[o1 + j] + c2 * s[o2 + j] + c3 * s[o3 + j])
                + (c4 * s[o4 + j] + c5 * s[o5 + j] + c6 * s[o6 + j] + c7 * s[o7 + j])
            )  # fmt: skip
    else:
        for j in range(width):
            out[at + j] += (
                (c0 * s[o0 + j] + c1 * s[o1 + j] + c2 * s[o2 + j] + c3 * s[o3 + j])
                + (c4 * s[o4 + j] + c5 * s[o5 + j] + c6 * s[o6 + j] + c7 * s[o7 + j])
            )  # fmt: skip


@njit(nogil=True, cache=True)
def _copy(out, at, s, start, width):
    for j in range(width):
        out[at + j] = s[start + j]


@njit(nogil=True, cache=True)
def analyse_columns(start, stop, src, dst, n, line, outer, width, h, g, shift):
    """Analyse along an axis that is not the last; a work item is a pair of output lines.

    `src` and `dst` are flat and real; line ``i`` of outer index ``o`` starts at ``i * line + o * outer`` and
    has `width` numbers.
    """
    half = n // 2
    m = 2 * half
    top = n - half
    w = uintp(width)
    for item in range(start, stop):
        at = item // half * outer
        i = item % half
        low = uintp(at + i * line)
        high = uintp(at + (top + i) * line)
        for t in range(0, h.size, 8):
            k = 2 * i + t + shift
            o0 = uintp(at + k % m * line)
            o1 = uintp(at + (k + 1) % m * line)
            o2 = uintp(at + (k + 2) % m * line)
            o3 = uintp(at + (k + 3) % m * line)
            o4 = uintp(at + (k + 4) % m * line)
            o5 = uintp(at + (k + 5) % m * line)
            o6 = uintp(at + (k + 6) % m * line)
            o7 = uintp(at + (k + 7) % m * line)
            _fir8(dst, low, src, w, o0, o1, o2, o3, o4, o5, o6, o7, h, t)
            _fir8(dst, high, src, w, o0, o1, o2, o3, o4, o5, o6, o7, g, t)
        if i == 0 and n > m:
            _copy(dst, uintp(at + half * line), src, uintp(at + m * line), w)


@njit(nogil=True, cache=True)
def synthesise_columns(start, stop, src, dst, n, line, outer, width, even, odd, shift):
    """Transpose of `analyse_columns`; `even` and `odd` hold those taps of ``h`` and ``g``, interleaved."""
    half = n // 2
    m = 2 * half
    top = n - half
    w = uintp(width)
    for item in range(start, stop):
        at = item // half * outer
        i = item % half
        first = uintp(at + (2 * i + shift) % m * line)
        second = uintp(at + (2 * i + 1 + shift) % m * line)
        for t in range(0, even.size, 8):
            k = i - t // 2
            o0 = uintp(at + k % half * line)
            o2 = uintp(at + (k - 1) % half * line)
            o4 = uintp(at + (k - 2) % half * line)
            o6 = uintp(at + (k - 3) % half * line)
            o1 = o0 + uintp(top * line)
            o3 = o2 + uintp(top * line)
            o5 = o4 + uintp(top * line)
            o7 = o6 + uintp(top * line)
            _fir8(dst, first, src, w, o0, o1, o2, o3, o4, o5, o6, o7, even, t)
            _fir8(dst, second, src, w, o0, o1, o2, o3, o4, o5, o6, o7, odd, t)
        if i == 0 and n > m:
            _copy(dst, uintp(at + m * line), src, uintp(at + half * line), w)


@njit(nogil=True, cache=True)
def _split(both, at, even, size):
    """Even samples of ``both[at:]`` to ``even[:size]``, odd ones behind them."""
    for i in range(size):
        even[i] = both[at + uintp(2) * i]
    for i in range(size):
        even[size + i] = both[at + uintp(2) * i + uintp(1)]


@njit(nogil=True, cache=True)
def _merge(even, size, both):
    """Transpose of `_split` to the beginning of `both`."""
    for i in range(size):
        both[uintp(2) * i] = even[i]
        both[uintp(2) * i + uintp(1)] = even[size + i]


@njit(nogil=True, cache=True)
def analyse_rows(start, stop, src, dst, rows, line, outer, n, h, g, shift):
    """Analyse along the contiguous last axis; a work item is one row, and `src` and `dst` may be the same.

    `src` is flat with one number a sample (a complex64 is moved as one 8-byte number); `dst` is the flat real
    view. Row ``r`` of the leading block starts at sample ``r // rows * outer + r % rows * line``. It is split
    into its even and odd samples, extended periodically, so that each tap reads a contiguous stream.
    """
    half = n // 2
    m = 2 * half
    top = n - half
    size = half + h.size // 2
    extended = np.empty(2 * size, src.dtype)
    phases = np.empty(2 * size, src.dtype)
    streams = phases.view(h.dtype)
    reals = streams.size // phases.size
    w = uintp(half * reals)
    odd = uintp(size * reals)
    for item in range(start, stop):
        at = item // rows * outer + item % rows * line
        for i in range(-shift):
            extended[i] = src[at + (i + shift) % m]
        inside = min(m, extended.size + shift)
        _copy(extended, uintp(-shift), src, uintp(at), uintp(inside))
        for i in range(inside - shift, extended.size):
            extended[i] = src[at + (i + shift) % m]
        _split(extended, uintp(0), phases, uintp(size))
        last = src[at + n - 1]
        low = uintp(at * reals)
        high = uintp((at + top) * reals)
        for t in range(0, h.size, 8):
            o0 = uintp(t // 2 * reals)
            o2 = o0 + uintp(reals)
            o4 = o2 + uintp(reals)
            o6 = o4 + uintp(reals)
            _fir8(dst, low, streams, w, o0, odd + o0, o2, odd + o2, o4, odd + o4, o6, odd + o6, h, t)
            _fir8(dst, high, streams, w, o0, odd + o0, o2, odd + o2, o4, odd + o4, o6, odd + o6, g, t)
        if n > m:
            phases[0] = last
            _copy(dst, uintp((at + half) * reals), streams, uintp(0), uintp(reals))


@njit(nogil=True, cache=True)
def synthesise_rows(start, stop, src, dst, rows, line, outer, n, even, odd, shift):
    """Transpose of `analyse_rows`; here `src` and `dst` are both flat with one number a sample."""
    half = n // 2
    m = 2 * half
    top = n - half
    pad = even.size // 2
    size = half + pad
    bands = np.empty(2 * size, src.dtype)
    phases = np.empty(m, src.dtype)
    merged = np.empty(m, src.dtype)
    streams = bands.view(even.dtype)
    out = phases.view(even.dtype)
    reals = streams.size // bands.size
    w = uintp(half * reals)
    high = uintp(size * reals)
    first = shift % m
    for item in range(start, stop):
        at = item // rows * outer + item % rows * line
        for i in range(pad):
            bands[i] = src[at + (i - pad) % half]
            bands[size + i] = src[at + top + (i - pad) % half]
        _copy(bands, uintp(pad), src, uintp(at), uintp(half))
        _copy(bands, uintp(size + pad), src, uintp(at + top), uintp(half))
        last = src[at + half]
        for t in range(0, even.size, 8):
            o0 = uintp((pad - t // 2) * reals)
            o2 = o0 - uintp(reals)
            o4 = o2 - uintp(reals)
            o6 = o4 - uintp(reals)
            _fir8(
                out, uintp(0), streams, w, o0, high + o0, o2, high + o2, o4, high + o4, o6, high + o6, even, t
            )
            _fir8(out, w, streams, w, o0, high + o0, o2, high + o2, o4, high + o4, o6, high + o6, odd, t)
        _merge(phases, uintp(half), merged)
        _copy(dst, uintp(at + first), merged, uintp(0), uintp(m - first))
        _copy(dst, uintp(at), merged, uintp(m - first), uintp(first))
        if n > m:
            dst[at + m] = last
