"""Judgement of a mask before any scan: point spread, gaps, density, energy, conjugate pairs."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .pointspread import Sidelobes, sidelobes


@dataclass(frozen=True)
class Judgement:
    """What can be said of a mask before the scan.

    Attributes
    ----------
    shape : tuple of int
        Points along the phase-encode axes.
    samples : int
        Points that are taken.
    acceleration : float
        R: points of the whole grid / samples.
    sidelobes : Sidelobes
        Of the point-spread function, with what uniform draws have beside it.
    largest_gap : float
        Lines: the most positions from a taken line to the next, where the places just before and just behind
        the range that may be taken count as taken. Points: the diameter, in grid steps, of the largest circle
        around a point of that range with no sample inside. 1 when every point is taken.
    local_density : ndarray of float64
        Share of the points that is taken, in each cell of a coarse grid; NaN in a cell with no point that may
        be taken.
    cells : tuple of tuple of int
        Where the cells begin, as indices of the grid, for each axis.
    energy : float
        Share of the energy of k-space that the samples take.
    centre_energy : float
        The same of its centre alone: up to a quarter of the highest frequency of each axis.
    spectrum : {"model", "given"}
        What the energies are of: the model |F(k)|^2 = 1 / (1 + |k|^2), k in cycles per field of view, or
        the power spectrum that was given.
    conjugate_pairs : int
        Pairs k, -k that are both taken.

    Examples
    --------
    >>> found = judge(np.arange(16) % 4 == 0)
    >>> found.acceleration, found.largest_gap, found.conjugate_pairs
    (4.0, 4.0, 1)
    """

    shape: tuple[int, ...]
    samples: int
    acceleration: float
    sidelobes: Sidelobes
    largest_gap: float
    local_density: NDArray[np.float64]
    cells: tuple[tuple[int, ...], ...]
    energy: float
    centre_energy: float
    spectrum: Literal["model", "given"]
    conjugate_pairs: int

    def to_dict(self) -> dict[str, Any]:
        """Return all of it as numbers, texts and lists that JSON can hold; None stands for NaN.

        Examples
        --------
        >>> found = judge(np.arange(16) % 4 == 0).to_dict()
        >>> found["shape"], found["sidelobes"]["peak"], found["local_density"][:2]
        ([16], 1.0, [1.0, 0.0])
        """
        densities = self.local_density.astype(object)
        densities[np.isnan(self.local_density)] = None
        return asdict(self) | {
            "shape": list(self.shape),
            "local_density": densities.tolist(),
            "cells": [list(starts) for starts in self.cells],
        }


def judge(
    mask: NDArray[np.bool_],
    *,
    density: NDArray[np.float64] | None = None,
    spectrum: NDArray[np.float64] | None = None,
    allowed: NDArray[np.bool_] | None = None,
    cells: int | None = None,
) -> Judgement:
    """Judge a mask.

    Parameters
    ----------
    mask : ndarray of bool
        True where a sample is taken; one phase-encode axis for lines, two for points. The centre of k-space
        has index N // 2.
    density : ndarray of float64, optional
        Inclusion probabilities of the pattern, of the shape of the mask; without them the sidelobes have no
        compensated figures.
    spectrum : ndarray of float64, optional
        Power spectrum of what is scanned, of the shape of the mask, in any unit. A model stands in for it.
    allowed : ndarray of bool, optional
        Points that the sequence may take, such as `Grid.allowed` gives; all when not given. Gaps and local
        densities are those of this part of the grid.
    cells : int, optional
        Cells of the coarse grid along each axis; 16 for lines and 8 for points when not given, and never
        more than there are points.

    Returns
    -------
    Judgement

    Raises
    ------
    InputError
        When the mask is empty or has not one or two axes, or another array does not fit it.

    Examples
    --------
    >>> from skipline.masks import Grid, VariableDensityLines
    >>> pattern, grid = VariableDensityLines(), Grid((256,), 24)
    >>> mask = pattern.draw(grid, 4, np.random.default_rng(1))
    >>> found = judge(mask, density=pattern.density(grid, 4))
    >>> found.samples, found.local_density[7:9].round(2), round(found.centre_energy, 2)
    (64, array([0.75, 0.88]), 0.98)
    """
    mask = np.asarray(mask)
    if mask.ndim not in (1, 2):
        raise InputError(f"mask of shape {mask.shape}: expected one phase-encode axis, or two")
    found = sidelobes(mask, density)
    allowed = _fitting("allowed points", allowed, mask, bool)
    if allowed is None:
        allowed = np.ones(mask.shape, dtype=bool)
    power = _fitting("power spectrum", spectrum, mask, np.float64)
    if power is not None and not (np.isfinite(power).all() and (power >= 0).all() and power.any()):
        raise InputError("power spectrum: expected finite numbers of at least 0, and not 0 everywhere")
    if power is None:
        power = model_spectrum(mask.shape)
    starts = _cell_starts(mask.shape, cells)
    centre = np.ones(mask.shape, dtype=bool)
    for k, n in zip(_frequencies(mask.shape), mask.shape, strict=True):
        centre &= abs(k) <= n // 2 / 4
    return Judgement(
        shape=mask.shape,
        samples=int(np.count_nonzero(mask)),
        acceleration=mask.size / int(np.count_nonzero(mask)),
        sidelobes=found,
        largest_gap=largest_gap(mask, allowed),
        local_density=_local_density(mask, allowed, starts),
        cells=tuple(tuple(axis.tolist()) for axis in starts),
        energy=_share(power, mask),
        centre_energy=_share(power * centre, mask),
        spectrum="model" if spectrum is None else "given",
        conjugate_pairs=conjugate_pairs(mask),
    )


def largest_gap(mask: NDArray[np.bool_], allowed: NDArray[np.bool_] | None = None) -> float:
    """Return the largest gap between samples, in grid steps; `Judgement` has the definition.

    Parameters
    ----------
    mask : ndarray of bool
        Of one or two axes, with at least one sample.
    allowed : ndarray of bool, optional
        Points that may be taken; all when not given.

    Returns
    -------
    float

    Examples
    --------
    >>> largest_gap(np.array([0, 1, 0, 0, 1, 1, 0, 0, 0], bool))
    4.0
    """
    allowed = np.ones(mask.shape, dtype=bool) if allowed is None else allowed
    if mask.ndim == 1:
        permitted = np.flatnonzero(allowed | mask)
        edges = [permitted[0] - 1, *np.flatnonzero(mask), permitted[-1] + 1]
        return float(np.diff(edges).max())
    from scipy.ndimage import distance_transform_edt

    distance = np.asarray(distance_transform_edt(~mask))
    return max(2.0 * float(distance[allowed | mask].max()), 1.0)


def conjugate_pairs(mask: NDArray[np.bool_]) -> int:
    """Return how many pairs k, -k are both taken; the centre is no pair.

    The conjugate of index i is 2 (N // 2) - i; the first index of an even axis has none on the grid.

    Parameters
    ----------
    mask : ndarray of bool

    Returns
    -------
    int

    Examples
    --------
    >>> conjugate_pairs(np.array([1, 1, 0, 1, 1, 1], bool))  # k = -3, -2, 0, 1, 2
    1
    """
    symmetric = np.pad(mask, [(0, 1 - n % 2) for n in mask.shape])  # of odd length, so flipping maps k to -k
    both = int(np.count_nonzero(symmetric & np.flip(symmetric)))
    return (both - int(mask[tuple(n // 2 for n in mask.shape)])) // 2


def model_spectrum(shape: tuple[int, ...]) -> NDArray[np.float64]:
    """Return the model of a power spectrum, 1 / (1 + |k|^2) with k in cycles per field of view.

    The power of images falls about as 1 / |k|^2; the 1 stands for the size of the object, which fills the
    field of view.

    Parameters
    ----------
    shape : tuple of int

    Returns
    -------
    ndarray of float64

    References
    ----------
    Field, J. Opt. Soc. Am. A 4 (1987) 2379.

    Examples
    --------
    >>> model_spectrum((5,))
    array([0.2, 0.5, 1. , 0.5, 0.2])
    """
    return 1.0 / (1.0 + np.asarray(sum(k.astype(np.float64) ** 2 for k in _frequencies(shape))))


def _frequencies(shape: tuple[int, ...]) -> tuple[NDArray[np.intp], ...]:
    """Return k of each axis in cycles per field of view, ready to broadcast."""
    return np.ix_(*(np.arange(n) - n // 2 for n in shape))


def _fitting(name: str, array: Any, mask: NDArray[np.bool_], dtype: type) -> Any:
    """Return an optional array once it has the shape of the mask."""
    if array is None:
        return None
    array = np.asarray(array, dtype=dtype)
    if array.shape != mask.shape:
        raise InputError(f"{name}: expected the shape of the mask, {mask.shape}, got {array.shape}")
    return array


def _cell_starts(shape: tuple[int, ...], cells: int | None) -> list[NDArray[np.intp]]:
    cells = {1: 16, 2: 8}[len(shape)] if cells is None else cells
    if cells < 1:
        raise InputError(f"cells {cells}: expected at least 1 along each axis")
    return [np.arange(min(cells, n)) * n // min(cells, n) for n in shape]


def _local_density(
    mask: NDArray[np.bool_], allowed: NDArray[np.bool_], starts: list[NDArray[np.intp]]
) -> NDArray[np.float64]:
    taken, points = mask.astype(np.float64), (allowed | mask).astype(np.float64)
    for axis, begin in enumerate(starts):
        taken, points = (np.add.reduceat(a, begin, axis=axis) for a in (taken, points))
    return np.divide(taken, points, out=np.full(points.shape, np.nan), where=points > 0)


def _share(power: NDArray[np.float64], mask: NDArray[np.bool_]) -> float:
    """Return the share of the power at the samples; 0 when there is none at all."""
    whole = float(power.sum())
    return float(power[mask].sum()) / whole if whole > 0 else 0.0
