"""The sensing operator ``A = P F S``: coil sensitivities, Fourier transform, sampling."""

from __future__ import annotations

import numpy as np
import scipy.fft
from numba import njit

from .. import InputError
from .acquired import fits
from .fourier import to_image, to_kspace
from .inner import inner
from .precision import real_type
from .team import Team

_FAST = {"contract", "reassoc", "nsz"}


class Sensing:
    """Fourier sensing of an image by one coil or several: ``y_c = P F (S_c x)``.

    The iterations of a solver never need the centred transform: sampling is diagonal in k-space, so the
    shifts that centre it cancel in ``A^H A``; and along an axis that the mask samples fully, the Fourier
    transform cancels altogether. Hence `encode` turns the data once into the form in which `descend` and
    `normal` transform only the undersampled axes, without shifts.

    Parameters
    ----------
    mask : bool array, broadcastable to `shape`
        The sampled points; an axis of length 1 (with a longer image axis) is fully sampled.
    shape : tuple of 3 int
        Shape of the image.
    maps : complex array ``(coil, *shape)``, optional
        Coil sensitivities; one uniform coil when not given.
    dtype : complex64 or complex128
    team : Team, optional
        The threads that share the work.

    Attributes
    ----------
    bound : float
        Largest eigenvalue of ``A^H A``, or an upper bound: ``max sum_c |S_c|^2``, and 1 for one uniform coil.

    Raises
    ------
    InputError
        Mask or maps do not fit the shape, the mask is empty, or the maps are zero.

    Notes
    -----
    Source: Pruessmann et al., Magn. Reson. Med. 42 (1999) 952.

    Examples
    --------
    >>> import numpy as np
    >>> mask = np.zeros((1, 8, 1), bool); mask[:, ::2] = True
    >>> A = Sensing(mask, (4, 8, 1), dtype=np.complex128)
    >>> x = np.ones((4, 8, 1), complex)
    >>> y = A.forward(x)
    >>> bool(np.isclose(np.vdot(y, y), np.vdot(x, A.adjoint(y))))
    True
    """

    def __init__(
        self,
        mask: np.ndarray,
        shape: tuple[int, int, int],
        maps: np.ndarray | None = None,
        dtype: np.dtype | type = np.complex64,
        team: Team | None = None,
    ):
        self.shape = shape
        self.dtype = np.dtype(dtype)
        self.mask = np.asarray(mask, bool)
        self.team = team or Team()
        self._real = real_type(dtype)
        if not fits(self.mask, shape):
            raise InputError(f"the mask has shape {self.mask.shape}, which does not fit an image of {shape}")
        if not self.mask.any():
            raise InputError("the mask is empty: no sample is taken")
        self.axes = tuple(a for a in range(3) if self.mask.shape[a] > 1)
        self.maps = None
        self.bound = 1.0
        if maps is not None:
            if maps.ndim != 4 or maps.shape[1:] != shape:
                raise InputError(
                    f"coil maps have shape {maps.shape}, expected (coil, {', '.join(map(str, shape))})"
                )
            self.maps = np.ascontiguousarray(maps, self.dtype)
            self.bound = float(np.max(np.sum(np.abs(self.maps.astype(np.complex128)) ** 2, axis=0)))
            if not self.bound > 0:
                raise InputError("the coil maps are zero everywhere")
        self.coils = 1 if self.maps is None else len(self.maps)
        # for the kernels: uncentred and spread over the grid, 1 where sampled
        unshifted = np.broadcast_to(scipy.fft.ifftshift(self.mask, self.axes), shape)
        self._sampled = np.ascontiguousarray(unshifted, np.uint8)
        self._work = None if maps is None else np.empty((self.coils, *shape), self.dtype)

    @property
    def samples(self) -> int:
        """Number of sampled points of the full grid."""
        return int(np.broadcast_to(self.mask, self.shape).sum())

    def forward(self, x: np.ndarray) -> np.ndarray:
        """Centred k-space ``(coil, *shape)`` of the image `x`, zero where not sampled."""
        per_coil = x[None] if self.maps is None else self.maps * x
        return to_kspace(per_coil, threads=self.team.threads) * self.mask

    def adjoint(self, y: np.ndarray) -> np.ndarray:
        """``A^H y`` for centred k-space `y`."""
        per_coil = to_image(y * self.mask, threads=self.team.threads)
        return per_coil[0] if self.maps is None else np.sum(np.conj(self.maps) * per_coil, axis=0)

    def encode(self, y: np.ndarray) -> np.ndarray:
        """Bring centred k-space into the form that `descend` and `residual` work in; norms are kept.

        Fully sampled axes are transformed back into the image, the others are freed of their shifts.
        """
        decoupled = tuple(a - 3 for a in range(3) if a not in self.axes)
        y = to_image(y * self.mask, decoupled, self.team.threads) if decoupled else y * self.mask
        encoded = scipy.fft.ifftshift(y, [a - 3 for a in self.axes])
        for a in self.axes:
            n = self.shape[a]
            # F ifftshift(x) = exp(2 pi i k (n//2) / n) F x, with k the index of the uncentred transform
            phase = np.exp(-2j * np.pi * ((np.arange(n) * (n // 2)) % n) / n)
            encoded = encoded * phase.reshape([-1 if b == a else 1 for b in range(3)])
        return np.ascontiguousarray(encoded, self.dtype)

    def residual_norm2(self, x: np.ndarray, encoded: np.ndarray) -> float:
        """Return ``||A x - y||^2`` for encoded data `y`."""
        total = 0.0
        for coil in range(self.coils):
            k = x.copy() if self.maps is None else self.maps[coil] * x
            difference = self._fft(k) * self._sampled - encoded[coil]
            total += inner(difference, difference)
        return total

    def backproject(self, encoded: np.ndarray) -> np.ndarray:
        """``A^H y`` for encoded data `y`."""
        total = np.zeros(self.shape, self.dtype)
        for coil in range(self.coils):
            x = self._ifft(encoded[coil].copy())
            total += x if self.maps is None else np.conj(self.maps[coil]) * x
        return total

    def zero_filled(self, encoded: np.ndarray) -> np.ndarray:
        """``A^H y / sum_c |S_c|^2`` for encoded data `y`; zero where no coil sees."""
        x = self.backproject(encoded)
        if self.maps is not None:
            seen = np.sum(np.abs(self.maps) ** 2, axis=0)
            np.divide(x, seen, out=x, where=seen > 0)
            x[seen == 0] = 0
        return x

    def normal(self, x: np.ndarray, out: np.ndarray) -> np.ndarray:
        """Write ``A^H A x`` to `out`, which may not be `x`."""
        self._check(x)
        self._check(out)
        if self.maps is None:
            np.copyto(out, x)
            k = self._fft(out)
            np.multiply(k, self._sampled, out=k)
            self._ifft(out)
            return out
        self._round_trips(x, None)
        self._share(_combine, self.maps.reshape(self.coils, -1), self._work_lines, out.reshape(-1))
        return out

    def descend(self, z: np.ndarray, encoded: np.ndarray, out: np.ndarray) -> np.ndarray:
        """Write the gradient step ``z - A^H (A z - y) / bound`` to `out`, which may not be `z`."""
        if self.maps is None:
            return self.relax(z, encoded, 0.0, out)
        for array in (z, out):
            self._check(array)
        self._check(encoded, encoded=True)
        self._round_trips(z, encoded)
        step = self._real(1 / self.bound)
        self._share(
            _combine_step,
            self.maps.reshape(self.coils, -1),
            self._work_lines,
            z.reshape(-1),
            step,
            out.reshape(-1),
        )
        return out

    def relax(self, w: np.ndarray, encoded: np.ndarray, rho: float, out: np.ndarray) -> np.ndarray:
        """For one uniform coil, write the minimiser of ``||A x - y||^2 / 2 + rho ||x - w||^2 / 2`` to `out`.

        In k-space this is ``(y + rho F w) / (1 + rho)`` where a sample was taken and ``F w`` elsewhere;
        ``rho = 0`` replaces the samples, which is also the gradient step of unit length.
        """
        for array in (w, out):
            self._check(array)
        self._check(encoded, encoded=True)
        np.copyto(out, w)
        self._fft(out)
        taken = self._real(1 / (1 + rho))
        self._share(
            _replace_sampled, out.reshape(-1), self._sampled.reshape(-1), encoded[0].reshape(-1), taken
        )
        self._ifft(out)
        return out

    @property
    def _work_lines(self) -> np.ndarray:
        assert self._work is not None
        return self._work.reshape(self.coils, -1)

    def _share(self, kernel, *args) -> None:
        """Share a kernel over the elements of the image, in whole blocks."""
        size = self._sampled.size
        self.team.share(kernel, size, *args, elements=size, grain=BLOCK)

    def _check(self, x: np.ndarray, encoded: bool = False) -> np.ndarray:
        """Refuse what the kernels, which see bare memory, must not get."""
        shape = (self.coils, *self.shape) if encoded else self.shape
        if x.shape != shape or x.dtype != self.dtype or not x.flags.c_contiguous:
            raise InputError(
                f"expected a C-contiguous {self.dtype} array of shape {shape}, got {x.dtype} of {x.shape}"
            )
        return x

    def _round_trips(self, x: np.ndarray, encoded: np.ndarray | None) -> None:
        """``F^H P (F S_c x - y_c)`` of every coil, each by one thread."""
        assert self.maps is not None
        assert self._work is not None
        maps, work_of = self.maps, self._work

        def round_trip(coil: int) -> None:
            work = work_of[coil]
            _multiply(x.reshape(-1), maps[coil].reshape(-1), work.reshape(-1))
            k = self._fft(work, alone=True)
            if encoded is None:
                np.multiply(k, self._sampled, out=k)
            else:
                _subtract_sampled(k.reshape(-1), self._sampled.reshape(-1), encoded[coil].reshape(-1))
            self._ifft(work, alone=True)

        self.team.each(round_trip, range(self.coils))

    def _fft(self, x: np.ndarray, alone: bool = False) -> np.ndarray:
        """Uncentred transform along the undersampled axes, in place."""
        return _in_place(scipy.fft.fftn, x, self.axes, 1 if alone else self.team.threads)

    def _ifft(self, k: np.ndarray, alone: bool = False) -> np.ndarray:
        return _in_place(scipy.fft.ifftn, k, self.axes, 1 if alone else self.team.threads)


SMALLEST_PARALLEL_FFT = 1 << 18
"""Elements below which starting threads for a transform costs more than they save."""


def _in_place(transform, x: np.ndarray, axes: tuple[int, ...], threads: int) -> np.ndarray:
    if not axes:
        return x
    workers = threads if x.size >= SMALLEST_PARALLEL_FFT else 1
    result = transform(x, axes=axes, norm="ortho", overwrite_x=True, workers=workers)
    if not np.may_share_memory(result, x):  # SciPy may, but need not, work in the memory it may overwrite
        np.copyto(x, result)
    return x


@njit(nogil=True, cache=True, fastmath=_FAST)
def _replace_sampled(start, stop, k, sampled, y, taken):
    """``k + sampled * taken * (y - k)``, where y is zero unless sampled."""
    k, sampled, y = k[start:stop], sampled[start:stop], y[start:stop]
    one = taken / taken  # of the arrays' precision
    for j in range(k.size):
        k[j] = (one - sampled[j] * taken) * k[j] + taken * y[j]


@njit(nogil=True, cache=True, fastmath=_FAST)
def _subtract_sampled(k, sampled, y):
    for j in range(k.size):
        k[j] = sampled[j] * k[j] - y[j]


@njit(nogil=True, cache=True, fastmath=_FAST)
def _multiply(x, s, out):
    for j in range(out.size):
        out[j] = s[j] * x[j]


BLOCK = 2048
"""Elements that stay in the fastest cache while the coils are added. Threads share whole blocks: a vector
instruction and the scalar one for what is left over round differently, so none may begin inside a block."""


@njit(nogil=True, cache=True, fastmath=_FAST)
def _add_conjugate_product(s, x, out):
    for j in range(out.size):
        out[j] += np.conj(s[j]) * x[j]


@njit(nogil=True, cache=True)
def _combine(start, stop, maps, per_coil, out):
    """``sum_c conj(S_c) x_c``, the coils added in their order."""
    for at in range(start, stop, BLOCK):
        end = min(at + BLOCK, stop)
        out[at:end] = 0
        for coil in range(maps.shape[0]):
            _add_conjugate_product(maps[coil, at:end], per_coil[coil, at:end], out[at:end])


@njit(nogil=True, cache=True, fastmath=_FAST)
def _step(z, step, gradient):
    for j in range(z.size):
        gradient[j] = z[j] - step * gradient[j]


@njit(nogil=True, cache=True)
def _combine_step(start, stop, maps, per_coil, z, step, out):
    """``z - step * sum_c conj(S_c) x_c``."""
    for at in range(start, stop, BLOCK):
        end = min(at + BLOCK, stop)
        _combine(at, end, maps, per_coil, out)
        _step(z[at:end], step, out[at:end])
