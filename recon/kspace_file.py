"""K-space from a NIfTI file, spatially encoded on all three axes whatever the file has."""

from __future__ import annotations

import os
from dataclasses import replace

import numpy as np

from .. import InputError
from .files import Volume, read_sidecar, read_volume


def read_kspace(path: str | os.PathLike[str], encoded_axes: str | None = None) -> Volume:
    """Read k-space of one coil or several, ``(coil, x, y, z)``, centred and encoded on x, y and z.

    A 2-D multi-slice scan is encoded on x and y only: its file holds one plane of k-space for each slice.
    Such an axis is transformed here, so that everything else meets one kind of k-space.

    Parameters
    ----------
    path : path
        Complex; coils are dimension 5 of the file.
    encoded_axes : str, optional
        The axes of the file that are spatial frequencies, such as ``"xy"``. When not given, ``EncodedAxes``
        of the sidecar; without one, all three.

    Returns
    -------
    Volume

    Raises
    ------
    InputError
        As `read_volume` does; real values, several time frames, or no such axes.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> from skipline.recon.files import write_volume
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "slices.nii"
    ...     write_volume(path, np.ones((4, 4, 3), np.complex64), np.eye(4), content="k-space")
    ...     all_axes, slices = read_kspace(path), read_kspace(path, "xy")
    >>> all_axes.data.shape, bool(np.allclose(slices.data[0, :, :, 1], 3**0.5)), slices.notes
    ((1, 4, 4, 3), True, ('z is not encoded in the file and was transformed',))
    """
    volume = read_volume(path)
    data = volume.data
    if not np.iscomplexobj(data):
        raise InputError(f"{path} is real; expected complex k-space")
    if data.ndim == 5:
        raise InputError(
            f"{path} has {len(data)} time frames, dimension 4; expected one (coils are dimension 5)"
        )
    data = data if data.ndim == 4 else data[None]
    left = not_encoded(path, data.shape, encoded_axes)
    if not left:
        return replace(volume, data=data)

    from .fourier import to_kspace

    data = to_kspace(data, ["xyz".index(axis) - 3 for axis in left])
    note = f"{' and '.join(left)} is not encoded in the file and was transformed"
    return replace(volume, data=data, notes=(*volume.notes, note))


def not_encoded(
    path: str | os.PathLike[str], shape: tuple[int, ...], encoded_axes: str | None = None
) -> list[str]:
    """Return the axes, of more than one point, along which a file of k-space holds places.

    Parameters
    ----------
    path, encoded_axes
        As in `read_kspace`.
    shape : tuple of int
        Of its data; the last three are x, y, z.

    Raises
    ------
    InputError
        There are no such axes.

    Examples
    --------
    >>> not_encoded("a file without sidecar.nii", (4, 64, 64, 20), "xy")
    ['z']
    """
    named = read_sidecar(path).get("EncodedAxes", "xyz") if encoded_axes is None else encoded_axes
    if not isinstance(named, str) or not named or "".join(sorted(set(named) & set("xyz"))) != named:
        raise InputError(f"{path}: the encoded axes are {named!r}; expected xyz, xy, or another set of these")
    return [axis for axis in "xyz" if axis not in named and shape["xyz".index(axis) - 3] > 1]
