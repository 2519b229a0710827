"""A clock whose hand turns from frame to frame, so that any few positions in sequence lie far apart."""

from __future__ import annotations

from math import gcd

import numpy as np
from numpy.typing import NDArray

GOLDEN = (5**0.5 - 1) / 2


def turns(places: float, frames: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Return the positions of the hand, in turns, from a random start on.

    When the circle has a whole number of places the hand goes from one to another, and visits each once in a
    period. Else it turns by the golden ratio each time.

    Parameters
    ----------
    places : float
        Places on the circle.
    frames : int
        How many positions.
    rng : numpy.random.Generator

    Returns
    -------
    ndarray of float64
        ``(frames,)``, at least 0 and below 1.

    References
    ----------
    Kronecker sequences, of which any part in sequence is spread evenly: Niederreiter, Random Number
    Generation and Quasi-Monte Carlo Methods (SIAM 1992), chapter 3.

    Examples
    --------
    >>> turns(8, 9, np.random.default_rng(3)) * 8
    array([6., 3., 0., 5., 2., 7., 4., 1., 6.])
    """
    period = max(round(places), 1)
    if abs(places - period) > 1e-6:
        return (rng.random() + GOLDEN * np.arange(frames, dtype=np.float64)) % 1
    # the whole number nearest to the golden ratio that shares no divisor with the period
    turn = min(
        (n for n in range(1, period + 1) if gcd(n, period) == 1), key=lambda n: abs(n - GOLDEN * period)
    )
    return (int(rng.integers(period)) + turn * np.arange(frames, dtype=np.float64)) % period / period
