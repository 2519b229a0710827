"""The convex problem that every solver works on, and what a solver returns."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from .inner import norm
from .sensing import Sensing
from .wavelet_l1 import WaveletL1


@dataclass(frozen=True)
class Problem:
    """``min_x  ||A x - y||^2 / 2 + weight ||W x||_1``.

    Attributes
    ----------
    sensing : Sensing
        ``A``, with ``bound >= ||A^H A||``.
    encoded : complex array ``(coil, x, y, z)``
        ``sensing.encode(y)``.
    penalty : WaveletL1
    """

    sensing: Sensing
    encoded: np.ndarray
    penalty: WaveletL1

    def objective(self, x: np.ndarray) -> float:
        """Value of the objective at `x`."""
        return 0.5 * self.sensing.residual_norm2(x, self.encoded) + self.penalty.value(x)

    def start(self) -> np.ndarray:
        """``A^H y / sum_c |S_c|^2``, zero where no coil sees: the zero-filled image."""
        return self.sensing.zero_filled(self.encoded)

    def optimality(self, x: np.ndarray) -> float:
        """Relative length of a proximal gradient step from `x`: zero exactly at a minimiser.

        It is the residual of the optimality (Karush-Kuhn-Tucker) conditions in the units of the image,
        ``||x - prox(x - grad f(x) / L)|| / ||x||``.
        """
        step = self.sensing.descend(x, self.encoded, np.empty_like(x))
        self.penalty.prox(step, 1 / self.sensing.bound, step)
        return relative(norm(x - step), norm(x))


def relative(part: float, whole: float) -> float:
    """``part / whole``, where nothing of nothing is nothing."""
    return float(part / whole) if whole > 0 else float(part)


@dataclass(frozen=True)
class Solution:
    """What a solver found, and how it ended.

    Attributes
    ----------
    x : complex array ``(x, y, z)``
    converged : bool
        Whether the solver's criterion was met before the iteration limit.
    stopped : str
        Why it stopped, in words.
    iterations : int
    change : float
        Relative change of ``x`` in the last iteration.
    optimality : float
        `Problem.optimality` at ``x``.
    objective : float
    """

    x: np.ndarray
    converged: bool
    stopped: str
    iterations: int
    change: float
    optimality: float
    objective: float


Callback = Callable[[int, np.ndarray], bool | None]
"""Called with the iteration number and the iterate, which is only lent; returning True stops the solver."""


class Solver(Protocol):
    """A frozen object with the options of an algorithm."""

    def minimise(
        self, problem: Problem, x: np.ndarray, callback: Callback | None
    ) -> tuple[np.ndarray, bool, str, int, float]:
        """Return the minimiser found from the start `x`, converged, stopped, iterations and change."""
        ...


def solve(
    problem: Problem, solver: Solver, start: np.ndarray | None = None, callback: Callback | None = None
) -> Solution:
    """Minimise the problem's objective.

    Parameters
    ----------
    problem : Problem
    solver : Solver
        `Fista` or `Admm`.
    start : complex array, optional
        Where to start (a warm start); the zero-filled image when not given.
    callback : callable, optional
        Called as ``callback(iteration, x)`` after each iteration; stops the solver when it returns True.

    Returns
    -------
    Solution

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.recon.fista import Fista
    >>> from skipline.recon.sensing import Sensing
    >>> from skipline.recon.wavelet import WaveletTransform
    >>> A = Sensing(np.ones((1, 1, 1), bool), (1, 8, 8))
    >>> y = A.encode(A.forward(np.ones((1, 8, 8), np.complex64)))
    >>> penalty = WaveletL1(WaveletTransform((1, 8, 8), "haar", 3, (1, 2)), weight=0.8)
    >>> solution = solve(Problem(A, y, penalty), Fista())
    >>> solution.converged, round(float(abs(solution.x[0, 0, 0])), 4)  # (8 - 0.8) / 8
    (True, 0.9)
    """
    x = problem.start() if start is None else np.array(start, problem.sensing.dtype, order="C")
    x, converged, stopped, iterations, change = solver.minimise(problem, x, callback)
    return Solution(x, converged, stopped, iterations, change, problem.optimality(x), problem.objective(x))
