"""The real type that goes with an array's type."""

from __future__ import annotations

import numpy as np


def real_type(dtype: np.dtype | type) -> type[np.float32] | type[np.float64]:
    """Return the type of the real part, and of every scalar that must not widen the array.

    Examples
    --------
    >>> real_type(np.complex64), real_type(np.float64)
    (<class 'numpy.float32'>, <class 'numpy.float64'>)
    """
    return np.float32 if np.dtype(dtype) in (np.complex64, np.float32) else np.float64
