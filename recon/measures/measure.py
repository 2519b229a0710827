"""What a measure is: a number from comparing an image with its reference."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    import numpy as np


@dataclass(frozen=True)
class Measure:
    """A number from comparing an image with its reference.

    Attributes
    ----------
    name : str
        What study files, tables and the command line call it.
    better : "lower" or "higher"
        Which way is better.
    unit : str
        Empty for a plain number.
    description : str
        One line.
    compute : callable
        ``compute(reference, image, support) -> float``, for the reference and the image, real or complex
        ``(x, y, z)``, and the bool array of that shape which says where the object is.

    Examples
    --------
    A measure of one's own:

    >>> import numpy as np
    >>> def lost_signal(reference, image, support):
    ...     return float(1 - np.abs(image[support]).mean() / np.abs(reference[support]).mean())
    >>> measure = Measure("lost_signal", "lower", "", "share of the mean signal that is lost", lost_signal)
    >>> ones = np.ones((8, 8, 1))
    >>> measure.compute(ones, 0.75 * ones, ones > 0)
    0.25
    """

    name: str
    better: Literal["lower", "higher"]
    unit: str
    description: str
    compute: Callable[[np.ndarray, np.ndarray, np.ndarray], float]
