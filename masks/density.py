"""Sampling density: how likely each point of the grid is to be taken.

A law says how dense the samples shall be relative to each other. It becomes a probability for each point,
its inclusion probability, once the number of samples is known.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .grid import Grid


def power_law(grid: Grid, power: float) -> NDArray[np.float64]:
    """Return the law (1 - r)^p, with r the distance from the centre of k-space as `Grid.radius` measures it.

    Parameters
    ----------
    grid : Grid
    power : float
        p, at least 0; with 0 the law is uniform.

    Returns
    -------
    ndarray of float64
        Of the shape of the grid, 1 at the centre.

    Raises
    ------
    InputError
        When the power is negative or not finite.

    References
    ----------
    Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> power_law(Grid((8,)), 2)
    array([0.    , 0.0625, 0.25  , 0.5625, 1.    , 0.5625, 0.25  , 0.0625])
    """
    if not (np.isfinite(power) and power >= 0):
        raise InputError(f"power {power:g}: expected a number of at least 0")
    return (1.0 - grid.radius()) ** power


def gaussian_law(grid: Grid, width: float) -> NDArray[np.float64]:
    """Return the law exp(-r^2 / (2 w^2)), with r the distance from the centre as `Grid.radius` measures it.

    Parameters
    ----------
    grid : Grid
    width : float
        w, the standard deviation, above 0; 1 is the distance of the farthest point of the grid.

    Returns
    -------
    ndarray of float64
        Of the shape of the grid, 1 at the centre.

    Raises
    ------
    InputError
        When the width is not finite and above 0.

    Examples
    --------
    >>> gaussian_law(Grid((8,)), 0.5).round(3)
    array([0.135, 0.325, 0.607, 0.882, 1.   , 0.882, 0.607, 0.325])
    """
    if not (np.isfinite(width) and width > 0):
        raise InputError(f"width {width:g}: expected a number above 0")
    return np.exp(-((grid.radius() / width) ** 2) / 2)


def read_law(path: str | Path, grid: Grid) -> NDArray[np.float64]:
    """Read a law from a file: relative densities, one number for each point of the grid.

    Parameters
    ----------
    path : str or Path
        An array that numpy saved (``.npy``), or text with numbers between blanks or commas, one row of the
        grid a line (for lines: one column or one row).
    grid : Grid

    Returns
    -------
    ndarray of float64
        Of the shape of the grid.

    Raises
    ------
    InputError
        When the file is not there, is not of numbers, has another shape than the grid, or is no law:
        negative, not finite, or zero everywhere.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "law.txt"
    ...     _ = path.write_text("0 1 2 1")
    ...     read_law(path, Grid((4,)))
    array([0., 1., 2., 1.])
    """
    path = Path(path)
    try:
        if path.suffix == ".npy":
            law = np.load(path, allow_pickle=False)
        else:
            rows = [
                line.partition("#")[0].replace(",", " ").split() for line in path.read_text().splitlines()
            ]
            law = np.array([[float(number) for number in row] for row in rows if row])
    except FileNotFoundError:
        raise InputError(f"density law {path}: there is no such file") from None
    except (OSError, ValueError, EOFError):
        raise InputError(
            f"density law {path}: expected rows of numbers of equal length, or an array that numpy saved "
            "(.npy)"
        ) from None
    if law.dtype.kind not in "buif":
        raise InputError(f"density law {path}: expected real numbers, got {law.dtype}")
    if grid.axes == 1 and law.size == max(law.shape, default=0):
        law = law.reshape(-1)
    if law.shape != grid.shape:
        raise InputError(f"density law {path}: expected the shape of the grid, {grid.shape}, got {law.shape}")
    try:
        return _checked(law)
    except InputError as error:
        raise InputError(str(error).replace("density law", f"density law {path}", 1)) from None


def adaptive_law(
    images: NDArray[np.inexact] | Sequence[NDArray[np.inexact]], axes: Sequence[int]
) -> NDArray[np.float64]:
    """Return the mean power spectrum of reference images: k-space is sampled where such objects have energy.

    Each image counts alike, whatever its scale. The power is averaged over the axes that are not
    undersampled; by Parseval it does not matter whether a readout axis is transformed.

    Parameters
    ----------
    images : ndarray, or several
        Reference images, real or complex, fully sampled; of equal size along the phase-encode axes.
    axes : sequence of int
        The axes that are undersampled, in the order of the grid: one for lines, two for points.

    Returns
    -------
    ndarray of float64
        Of the shape of the grid; the sum is 1.

    Raises
    ------
    InputError
        When there is no image, an image is not finite or zero everywhere, or the sizes differ.

    References
    ----------
    Knoll, Clason, Diwoky & Stollberger, Magn. Reson. Mater. Phys. 24 (2011) 43.

    Examples
    --------
    >>> point = np.zeros((8, 4)); point[4, 2] = 1.0
    >>> adaptive_law(point, axes=[1])
    array([0.25, 0.25, 0.25, 0.25])
    >>> adaptive_law([np.ones((8, 4)), point], axes=[1])
    array([0.125, 0.125, 0.625, 0.125])
    """
    several = [images] if isinstance(images, np.ndarray) else list(images)
    if not several:
        raise InputError("adaptive law: expected at least one reference image")
    spectra = [_power_spectrum(np.asarray(image), tuple(axes)) for image in several]
    for spectrum in spectra:
        if spectrum.shape != spectra[0].shape:
            raise InputError(
                f"adaptive law: expected reference images of equal size along the phase-encode axes, "
                f"got {spectra[0].shape} and {spectrum.shape}"
            )
    return np.mean(spectra, axis=0)


def _power_spectrum(image: NDArray[np.inexact], axes: tuple[int, ...]) -> NDArray[np.float64]:
    """Return the power of an image along some axes, averaged over the others; the sum is 1."""
    if len(axes) not in (1, 2) or len({a % max(image.ndim, 1) for a in axes}) != len(axes):
        raise InputError(f"adaptive law: expected one or two different axes, got {axes}")
    if any(not -image.ndim <= a < image.ndim for a in axes):
        raise InputError(f"adaptive law: the axes {axes} are not those of an image of shape {image.shape}")
    if not np.isfinite(image).all():
        raise InputError("adaptive law: a reference image has values that are not finite")
    largest = np.abs(image).max(initial=0)
    if largest == 0:
        raise InputError("adaptive law: a reference image is zero everywhere")
    image = np.moveaxis(image, axes, range(len(axes))) / largest
    transformed = tuple(range(len(axes)))
    # a shift of the image changes no power, a shift of k-space does
    power = np.abs(np.fft.fftshift(np.fft.fftn(image, axes=transformed), axes=transformed)) ** 2
    power = power.sum(axis=tuple(range(len(axes), image.ndim)), dtype=np.float64)
    return power / power.sum()


def inclusion_probabilities(
    law: NDArray[np.float64],
    samples: int,
    certain: NDArray[np.bool_] | None = None,
    allowed: NDArray[np.bool_] | None = None,
    partner: NDArray[np.intp] | None = None,
) -> NDArray[np.float64]:
    """Return the probability of each point to be taken: in proportion to a law, with a given sum.

    Where a probability would be above 1 the point is certain, and the others share the samples that are
    left, again in proportion to the law, until none is above 1. Points where the law is zero are taken only
    when all others are certain, and then all alike, as if the law there were the same small number.

    Where partners exclude each other, it is the two together whose probability is at most 1.

    Parameters
    ----------
    law : ndarray
        Relative density, at least 0, of any shape.
    samples : int
        Sum of the probabilities.
    certain : ndarray of bool, optional
        Points that are always taken, such as the calibration region. Of the shape of the law.
    allowed : ndarray of bool, optional
        Points that may be taken; the others have the probability 0. By default all.
    partner : ndarray of int, optional
        For each point the index in the flattened grid of the one that is not taken with it, -1 for none; it
        matters only where both are allowed and neither is certain. By default none.

    Returns
    -------
    ndarray of float64
        Of the shape of the law, between 0 and 1.

    Raises
    ------
    InputError
        When the law is negative, not finite or zero everywhere, or the number of samples is below that of the
        certain points or above that of all points that can be taken together.

    References
    ----------
    Sampling with probabilities proportional to size: Tille, Sampling Algorithms, Springer 2006, section 2.10.

    Examples
    --------
    >>> import numpy as np
    >>> inclusion_probabilities(np.array([8.0, 1.0, 2.0, 1.0]), 2)
    array([1.  , 0.25, 0.5 , 0.25])
    >>> inclusion_probabilities(np.array([8.0, 1.0, 2.0, 2.0]), 2, partner=np.array([3, -1, -1, 0]))
    array([0.8       , 0.33333333, 0.66666667, 0.2       ])
    """
    law = _checked(law)
    certain = np.zeros(law.shape, dtype=bool) if certain is None else certain
    allowed = np.ones(law.shape, dtype=bool) if allowed is None else allowed | certain
    for name, given in ("certain", certain), ("allowed", allowed), ("partner", partner):
        if given is not None and given.shape != law.shape:
            raise InputError(f"{name} points: expected the shape of the law, {law.shape}, got {given.shape}")
    flat, free = law.reshape(-1), (allowed & ~certain).reshape(-1)
    first = np.flatnonzero(free)
    second = np.full(first.size, -1)
    if partner is not None:
        other = partner.reshape(-1)[first]
        paired = (other >= 0) & free[other]
        kept = ~paired | (first < other)  # each pair once
        first, second = first[kept], np.where(paired, other, -1)[kept]
    pair = second >= 0
    fixed = int(np.count_nonzero(certain))
    if not fixed <= samples <= fixed + first.size:
        most = "that of all" if first.size + fixed == law.size else "that of all that can be taken together"
        raise InputError(
            f"samples {samples}: expected {fixed}, the number of certain points, to "
            f"{fixed + first.size}, {most}"
        )

    scale = float(flat[free].max(initial=0)) or 1.0
    a, b = flat[first] / scale, np.where(pair, flat[second] / scale, 0.0)
    together = _proportional(a + b, samples - fixed)
    share = np.divide(a, a + b, out=np.where(pair, 0.5, 1.0), where=a + b > 0)
    probabilities = np.zeros(law.size)
    probabilities[certain.reshape(-1)] = 1.0
    probabilities[first] = together * share
    probabilities[second[pair]] = (together - together * share)[pair]
    return probabilities.reshape(law.shape)


def _checked(law: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the law in float64, once it is one."""
    law = np.asarray(law, dtype=np.float64)
    if not (np.isfinite(law).all() and (law >= 0).all()):
        raise InputError("density law: expected finite numbers of at least 0")
    if not law.any():
        raise InputError("density law: it is zero everywhere; expected a point where it is not")
    return law


def _proportional(law: NDArray[np.float64], samples: int) -> NDArray[np.float64]:
    """Share the samples in proportion to the law, none above 1."""
    if samples == law.size:
        return np.ones(law.size)
    decreasing = np.argsort(-law, kind="stable")
    sizes = law[decreasing]
    if sizes[0] > 0:
        sizes = sizes / sizes[0]  # no overflow, however the law is scaled
    rest = np.cumsum(sizes[::-1])[::-1]  # from each point to the end
    # When the first m are certain, the largest of the rest gets (samples - m) sizes[m] / rest[m]: m is the
    # smallest number for which that is not above 1.
    left = samples - np.arange(law.size)
    m = int(np.argmax(left * sizes <= rest))
    shares = np.ones(law.size)
    shares[m:] = left[m] * (sizes[m:] / rest[m] if rest[m] > 0 else 1.0 / (law.size - m))
    probabilities = np.empty(law.size)
    probabilities[decreasing] = np.minimum(shares, 1.0)
    return probabilities
