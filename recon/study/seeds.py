"""Random numbers that belong to a purpose: the masks, the noise.

Each random quantity has its own stream, keyed by (study seed, purpose, draw number). So all methods see the
same masks and the same noise, a value added to a study changes no other case, and the number of workers
changes nothing.
"""

from __future__ import annotations

import hashlib

import numpy as np


def generator(seed: int, purpose: str, draw: int) -> np.random.Generator:
    """Return the random generator of one draw.

    Parameters
    ----------
    seed : int
        The study's seed, 0 or more.
    purpose : str
        What is drawn: ``"mask"``, ``"noise"``.
    draw : int
        Number of the draw, from 0.

    Returns
    -------
    numpy.random.Generator
        The same stream on every machine and in every process.

    Examples
    --------
    >>> int(generator(7, "mask", 0).integers(1000)) == int(generator(7, "mask", 0).integers(1000))
    True
    >>> generator(7, "mask", 0).random() == generator(7, "noise", 0).random()
    False
    """
    # Python's own hash() of a text differs from process to process; this one does not.
    digest = hashlib.sha256(purpose.encode()).digest()
    words = [int.from_bytes(digest[i : i + 4], "little") for i in range(0, 16, 4)]
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(*words, draw)))
