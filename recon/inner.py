"""Inner products and norms whose bytes do not depend on the number of threads.

The BLAS cuts a sum among its threads, and so rounds it differently for each number of them; NumPy's pairwise
sum does not.
"""

from __future__ import annotations

import numpy as np


def inner(a: np.ndarray, b: np.ndarray) -> float:
    """Return the real part of ``<a, b>``, summed in double precision.

    Examples
    --------
    >>> inner(np.array([1 + 1j, 2]), np.array([1, 1j]))
    1.0
    """
    products = np.real(a) * np.real(b)
    if np.iscomplexobj(a) and np.iscomplexobj(b):
        products = products + np.imag(a) * np.imag(b)
    return float(np.sum(products, dtype=np.float64))


def norm(a: np.ndarray) -> float:
    """Return the Euclidean length of an array of any shape.

    Examples
    --------
    >>> norm(np.array([[3, 4j]]))
    5.0
    """
    return float(np.sqrt(inner(a, a)))
