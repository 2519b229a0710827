"""The phase-encode grid of a scan, and a mask on it as a mask of k-space."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ... import InputError

if TYPE_CHECKING:
    from ...masks.grid import Grid
    from .settings import Sampling

Shape = tuple[int, int, int]


def phase_encode_axes(phase_encode: str | None, pattern_axes: int, shape: Shape) -> str:
    """Return the phase-encode axes of a pattern, the usual ones when none are asked for.

    Parameters
    ----------
    phase_encode : str or None
        ``"y"``, ``"yz"``, ...
    pattern_axes : int
        1 for patterns of lines, 2 for patterns of points.
    shape : tuple of 3 int
        Shape of the image.

    Raises
    ------
    InputError
        The number of axes does not fit the pattern, or an axis has one point.

    Examples
    --------
    >>> phase_encode_axes(None, 1, (256, 256, 1)), phase_encode_axes(None, 2, (256, 256, 1))
    ('y', 'xy')
    >>> phase_encode_axes(None, 2, (128, 128, 64)), phase_encode_axes("xz", 2, (128, 128, 64))
    ('yz', 'xz')
    """
    if phase_encode is None:
        usual = {1: "y", 2: "yz" if shape[2] > 1 else "xy"}
        return usual[pattern_axes]
    if (
        not phase_encode
        or any(axis not in "xyz" for axis in phase_encode)
        or "".join(sorted(set(phase_encode))) != phase_encode
    ):
        raise InputError(f'"{phase_encode}" names no phase-encode axes; expected one of: x, y, z, xy, xz, yz')
    if len(phase_encode) != pattern_axes:
        expected = {1: "one axis, for example y", 2: "two axes, for example yz"}[pattern_axes]
        raise InputError(f'"{phase_encode}" does not fit the pattern; it undersamples {expected}')
    for axis, length in zip("xyz", shape, strict=True):
        if axis in phase_encode and length == 1:
            raise InputError(f'"{phase_encode}" encodes {axis}, along which the reference has one point')
    return phase_encode


def grid_shape(phase_encode: str, shape: Shape) -> tuple[int, ...]:
    """Return the shape of the phase-encode grid.

    Examples
    --------
    >>> grid_shape("yz", (128, 96, 64))
    (96, 64)
    """
    return tuple(shape["xyz".index(axis)] for axis in phase_encode)


CONSTRAINTS = (
    "calibration", "calibration_shape", "shutter", "partial_fourier", "largest_gap", "skip_conjugates",
    "train_length",
)  # fmt: skip
"""The keys of a study's sampling table that say what the sequence permits and demands."""


def phase_encode_grid(sampling: Sampling, shape: Shape) -> Grid:
    """Return the phase-encode grid of a sampling, with its constraints.

    Raises
    ------
    InputError
        Constraints that cannot be met together.

    Examples
    --------
    >>> from skipline.recon.study.settings import Sampling
    >>> sampling = Sampling(pattern="regular-lines", phase_encode="y", acceleration=2, partial_fourier=0.75)
    >>> int(phase_encode_grid(sampling, (64, 48, 1)).allowed().sum())
    36
    """
    from ...masks.grid import Grid

    assert sampling.phase_encode is not None  # the plan fills it in
    constraints = {name: getattr(sampling, name) for name in CONSTRAINTS}
    return Grid(grid_shape(sampling.phase_encode, shape), **constraints)


def on_kspace(mask: np.ndarray, phase_encode: str) -> np.ndarray:
    """Give the mask of a phase-encode grid the three axes of k-space; a fully sampled axis has length 1.

    Parameters
    ----------
    mask : bool array
        Of the grid's shape.
    phase_encode : str

    Returns
    -------
    bool array, broadcastable to (x, y, z)

    Examples
    --------
    >>> on_kspace(np.ones((96, 64), bool), "yz").shape, on_kspace(np.ones(96, bool), "y").shape
    ((1, 96, 64), (1, 96, 1))
    """
    lengths = dict(zip(phase_encode, mask.shape, strict=True))
    return mask.reshape([lengths.get(axis, 1) for axis in "xyz"])
