"""Alternating direction method of multipliers on the split ``v = W x``."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit

from .fista import SETTLED, as_lines
from .inner import inner, norm
from .precision import real_type
from .problem import Callback, Problem, relative


@dataclass(frozen=True)
class Admm:
    """ADMM with the scaled multiplier ``d``, and residual balancing.

    Parameters
    ----------
    iterations : int
        Largest number of iterations.
    tolerance : float
        Stop when the primal residual ``||W x - v||``, the dual residual ``rho / L ||v - v_before||`` and the
        change ``||v - v_before||`` have been at most this times ``||v||`` for `SETTLED` iterations on end.
    rho : float
        First penalty parameter, in units of the largest eigenvalue of ``A^H A``.
    inner : int
        Conjugate-gradient iterations of each x-update with several coils.

    Notes
    -----
    The iteration is::

        x = argmin ||A x - y||^2 / 2 + rho ||W x - v + d||^2 / 2
        v = soft(W x + d, weight / rho)
        d = d + W x - v

    With one uniform coil the x-update is exact, in k-space; with several it is solved by conjugate gradients
    from the last ``x``, a fixed number of them: an inexact update, which the proof of convergence does not
    cover and the stopping criterion does. Where one residual is three times the other (Boyd proposes ten),
    rho is changed by a factor of two, ever more rarely, so that it settles.
    Source: Boyd et al., Found. Trends Mach. Learn. 3 (2011) 1, sections 3.3 and 3.4.1; Goldstein & Osher,
    SIAM J. Imaging Sci. 2 (2009) 323.

    Examples
    --------
    >>> Admm(iterations=50).rho
    0.3
    """

    iterations: int = 1000
    tolerance: float = 1e-5
    rho: float = 0.3
    inner: int = 4

    def minimise(
        self, problem: Problem, x: np.ndarray, callback: Callback | None = None
    ) -> tuple[np.ndarray, bool, str, int, float]:
        """Run the iteration; see `Solver`."""
        sensing, penalty = problem.sensing, problem.penalty
        real = real_type(x.dtype)
        W = penalty.transform
        rho = self.rho * sensing.bound
        v, d, w = W.forward(x), np.zeros_like(x), x.copy()
        Wx, v_next = np.empty_like(x), np.empty_like(x)
        lines = x.shape[0] * x.shape[1]
        sums = np.zeros((lines, 3))
        minimise_x = _exact if sensing.maps is None else _ConjugateGradients(problem, self.inner)
        start_size = norm(v)
        change, settled, balance_at = np.inf, 0, 4
        for k in range(1, self.iterations + 1):
            minimise_x(problem, w, rho, x)
            W.forward(x, Wx)
            np.add(Wx, d, out=v_next)
            penalty.shrink(v_next, 1 / rho)
            sensing.team.share(
                _multiplier, lines, as_lines(Wx), as_lines(d), as_lines(v), as_lines(v_next), sums,
                elements=x.size,
            )  # fmt: skip
            primal, moved, size = np.sqrt(sums.sum(axis=0))
            dual = rho / sensing.bound * moved
            change = relative(moved, size)
            # where the answer is zero, its size tells nothing
            scale = size if size > 0 else start_size
            settled = settled + 1 if max(primal, dual, moved) <= self.tolerance * scale else 0
            if k == balance_at:
                # ever rarer: convergence is proven for a rho that settles
                balance_at += balance_at // 2
                factor = 2.0 if primal > 3 * dual else 0.5 if dual > 3 * primal else 1.0
                rho *= factor
                d *= real(1 / factor)
            np.subtract(v, d, out=Wx)
            W.inverse(Wx, w)
            if callback is not None and callback(k, W.inverse(v)):
                return W.inverse(v), False, "stopped by the callback", k, change
            if settled == SETTLED:
                return W.inverse(v), True, "change, primal and dual residual within tolerance", k, change
        return W.inverse(v), False, "iteration limit", self.iterations, change


def _exact(problem: Problem, w: np.ndarray, rho: float, x: np.ndarray) -> None:
    problem.sensing.relax(w, problem.encoded, rho, x)


class _ConjugateGradients:
    """``(A^H A + rho) x = A^H y + rho w`` by conjugate gradients from the last x.

    Source: Hestenes & Stiefel, J. Res. Natl. Bur. Stand. 49 (1952) 409.
    """

    def __init__(self, problem: Problem, iterations: int):
        self.iterations = iterations
        self._backprojected = problem.sensing.backproject(problem.encoded)
        self._r, self._p, self._q = (np.empty_like(self._backprojected) for _ in range(3))

    def __call__(self, problem: Problem, w: np.ndarray, rho: float, x: np.ndarray) -> None:
        r, p, q = self._r, self._p, self._q
        problem.sensing.normal(x, q)
        np.subtract(self._backprojected, q, out=r)
        r += rho * (w - x)
        np.copyto(p, r)
        rr = inner(r, r)
        for _ in range(self.iterations):
            if rr <= 0:
                return
            problem.sensing.normal(p, q)
            q += rho * p
            alpha = rr / inner(p, q)
            x += alpha * p
            r -= alpha * q
            rr, rr_before = inner(r, r), rr
            p *= rr / rr_before
            p += r


# d becomes d + W x - v_next and v becomes v_next; the sums of each line are |W x - v_next|^2,
# |v_next - v|^2 and |v_next|^2.
@njit(nogil=True, cache=True)
def _multiplier(start, stop, Wx, d, v, v_next, sums):
    for i in range(start, stop):
        sums[i] = _multiplier_line(Wx[i], d[i], v[i], v_next[i])


@njit(nogil=True, cache=True, fastmath={"contract", "reassoc", "nsz"})
def _multiplier_line(Wx, d, v, v_next):
    zero = v[0] - v[0]
    primal2, moved2, size2 = zero, zero, zero
    for j in range(v.size):
        r = Wx[j] - v_next[j]
        s = v_next[j] - v[j]
        primal2 += r * r
        moved2 += s * s
        size2 += v_next[j] * v_next[j]
        d[j] += r
        v[j] = v_next[j]
    return primal2, moved2, size2
