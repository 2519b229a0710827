"""How many levels a wavelet transform has, along each axis."""

from __future__ import annotations

from collections.abc import Sequence

from .. import InputError

COARSEST_SAMPLES = 8
"""By default an axis is halved as long as this many samples remain, and once where that can be done."""


def axis_levels(levels: int | None, lengths: Sequence[int]) -> tuple[int, ...]:
    """Return how often each axis is halved.

    Every axis has its own number of levels, so that a volume of few slices has still all of its levels in the
    plane.

    Parameters
    ----------
    levels : int or None
        As many as that, but no more than an axis allows; None for the default, see `COARSEST_SAMPLES`.
    lengths : sequence of int

    Raises
    ------
    InputError
        No axis can be halved so often.

    Examples
    --------
    >>> axis_levels(None, [256, 192, 12, 1]), axis_levels(3, [64, 6])
    ((5, 4, 1, 0), (3, 3))
    >>> axis_levels(9, [16, 64])
    Traceback (most recent call last):
        ...
    skipline.InputError: 9 wavelet levels asked for, but the longest axis has 64 samples: at most 6
    """
    if levels is None:
        return tuple(_default(n) for n in lengths)
    longest = max(lengths)
    if levels > _possible(longest):
        raise InputError(
            f"{levels} wavelet levels asked for, but the longest axis has {longest} samples: "
            f"at most {_possible(longest)}"
        )
    return tuple(min(levels, _possible(n)) for n in lengths)


def _possible(n: int) -> int:
    return (n - 1).bit_length()


def _default(n: int) -> int:
    levels = 0
    while (n := (n + 1) // 2) >= (COARSEST_SAMPLES if levels else 2):
        levels += 1
        if n < COARSEST_SAMPLES:
            break
    return levels
