"""How many levels a wavelet transform has."""

from __future__ import annotations

from collections.abc import Sequence

from .. import InputError

COARSEST_SAMPLES = 8
"""By default an axis is halved as long as at least this many samples remain."""


def default_levels(lengths: Sequence[int]) -> int:
    """Return the number of levels that leaves at least `COARSEST_SAMPLES` samples on the shortest axis.

    Examples
    --------
    >>> default_levels([256, 256]), default_levels([181, 217, 181]), default_levels([12])
    (5, 4, 0)
    """
    shortest, levels = min(lengths), 0
    while (shortest := (shortest + 1) // 2) >= COARSEST_SAMPLES:
        levels += 1
    return levels


def check_levels(levels: int | None, lengths: Sequence[int]) -> int:
    """Return the number of levels for axes of the given lengths; the default when `levels` is None.

    Raises
    ------
    InputError
        The shortest axis cannot be halved so often.

    Examples
    --------
    >>> check_levels(5, [16, 64])
    Traceback (most recent call last):
        ...
    skipline.InputError: 5 wavelet levels asked for, but the shortest axis has 16 samples: at most 4
    """
    if levels is None:
        return default_levels(lengths)
    shortest = min(lengths)
    possible = (shortest - 1).bit_length()
    if levels > possible:
        raise InputError(
            f"{levels} wavelet levels asked for, but the shortest axis has {shortest} samples: "
            f"at most {possible}"
        )
    return levels
