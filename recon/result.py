"""What a reconstruction method returns."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Reconstruction:
    """An image and how it was come by.

    Attributes
    ----------
    image : complex array ``(x, y, z)``
    converged : bool
        False when an iterative method stopped before its criterion was met.
    stopped : str
        Why it stopped, in words.
    iterations : int
        The most that any independently solved slice took; 0 for a direct method.
    objective, optimality : float or None
        Value of the objective, and the relative residual of its optimality conditions, in the units of the
        data; None for a direct method.
    sigma : float or None
        The noise's standard deviation that was used.
    sigma_source : str
        Where sigma comes from: ``"given"``, ``"k-space border"`` (estimated), or ``"none"``.
    weight : float or None
        The regularisation weight, in units of sigma.

    Examples
    --------
    >>> Reconstruction(np.zeros((4, 4, 1), np.complex64)).converged
    True
    """

    image: np.ndarray
    converged: bool = True
    stopped: str = "direct method"
    iterations: int = 0
    objective: float | None = None
    optimality: float | None = None
    sigma: float | None = None
    sigma_source: str = "none"
    weight: float | None = None
