"""NIfTI volumes and their JSON sidecars, read with care and written atomically.

In memory a volume is ``(x, y, z)``, ``(coil, x, y, z)`` or ``(time, coil, x, y, z)``; in a file time is
dimension 4 and coils are dimension 5, as NIfTI has it. Where BIDS has a term for what a sidecar says, that
term is used.
"""

from __future__ import annotations

import errno
import gzip
import json
import os
import secrets
import tempfile
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import IO, Any, Literal

import numpy as np

from .. import CAUTION, InputError, __version__

Content = Literal["image", "k-space", "mask", "map"]

_CONTENTS = ("image", "k-space", "mask", "map")
_MM = {"meter": 1000.0, "mm": 1.0, "micron": 0.001, "unknown": 1.0}
_NIFTI1_LONGEST_AXIS = 32767

# the fields of a header that say where the voxels lie
_GEOMETRY = (
    "pixdim", "xyzt_units", "qform_code", "sform_code",
    "quatern_b", "quatern_c", "quatern_d", "qoffset_x", "qoffset_y", "qoffset_z",
    "srow_x", "srow_y", "srow_z",
)  # fmt: skip


@dataclass(frozen=True, eq=False)
class Volume:
    """A NIfTI file in memory.

    Attributes
    ----------
    data : array (x, y, z), (coil, x, y, z) or (time, coil, x, y, z)
        C-contiguous, in the machine's byte order; the file's scaling is applied.
    affine : float64 array (4, 4)
        Voxel index ``(x, y, z)`` to position, in `units`.
    zooms : tuple of float
        Voxel size along x, y, z, then what the file has for time and coils, in `units`.
    units : tuple of 2 str
        Of space and of time, by their NIfTI names, such as ``("mm", "sec")``.
    path : Path
    notes : tuple of str
        What was assumed or put right while reading, a sentence each.
    header : nibabel header, optional
        The file's own, for what else it says of where the voxels lie.

    Examples
    --------
    >>> affine = np.diag([0.002, 0.002, 0.005, 1])
    >>> Volume(np.ones((4, 4, 1)), affine, (0.002, 0.002, 0.005), ("meter", "sec"), Path("a.nii")).voxel_mm
    (2.0, 2.0, 5.0)
    """

    data: np.ndarray
    affine: np.ndarray
    zooms: tuple[float, ...]
    units: tuple[str, str]
    path: Path
    notes: tuple[str, ...] = ()
    header: Any = None

    @property
    def voxel_mm(self) -> tuple[float, float, float]:
        """Voxel size along x, y, z in mm, by the affine; unknown units are taken for mm."""
        return _voxel_mm(self.affine, self.units[0])

    @property
    def affine_mm(self) -> np.ndarray:
        """Voxel index to position in mm; unknown units are taken for mm."""
        return np.diag([*[_MM.get(self.units[0], 1.0)] * 3, 1.0]) @ self.affine


def read_volume(
    path: str | os.PathLike[str],
    *,
    phase: str | os.PathLike[str] | None = None,
    allow_zero: bool = False,
) -> Volume:
    """Read a NIfTI volume, or a magnitude and its phase.

    NIfTI-1 and NIfTI-2 in one file, compressed or not. A 2-D file becomes ``(x, y, 1)``. Complex data stay
    complex, bit for bit.

    Parameters
    ----------
    path : path
        The volume; the magnitude when `phase` is given.
    phase : path, optional
        Phase of the same grid: in radians, or in the integer units of scanners, where 4096 steps make a turn.
        The sidecar's ``Units`` (BIDS: ``rad`` or ``arbitrary``) decides; without it the range of the values
        does, and `Volume.notes` says which it was.
    allow_zero : bool
        Accept a volume that is zero everywhere.

    Returns
    -------
    Volume
        complex64 when `phase` is given.

    Raises
    ------
    InputError
        The file is missing, unreadable, truncated, damaged or not NIfTI; it has NaN or infinite values, is
        zero everywhere, or has dimensions other than x, y, z, time, coil; magnitude and phase do not fit each
        other.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "slab.nii.gz"
    ...     write_volume(path, np.full((8, 8, 1), 1j, np.complex64), np.diag([2, 2, 5, 1]), content="image")
    ...     volume = read_volume(path)
    >>> volume.data.shape, str(volume.data.dtype), volume.zooms, volume.units
    ((8, 8, 1), 'complex64', (2.0, 2.0, 5.0), ('mm', 'unknown'))
    """
    volume = _read(Path(path))
    if not allow_zero and not volume.data.any():
        raise InputError(f"{path} is zero everywhere; expected an object")
    return volume if phase is None else _with_phase(volume, _read(Path(phase)))


def write_volume(
    path: str | os.PathLike[str],
    data: np.ndarray,
    affine: np.ndarray,
    *,
    content: Content,
    sidecar: Mapping[str, Any] | None = None,
    like: Volume | None = None,
) -> None:
    """Write a NIfTI volume and its JSON sidecar; both are complete or not there.

    The values are stored as they are, without scaling; bool as uint8. Equal data give equal bytes.

    Parameters
    ----------
    path : path
        Ends in ``.nii`` or ``.nii.gz``. The sidecar has the same name and ends in ``.json``.
    data : array (x, y, z), (coil, x, y, z) or (time, coil, x, y, z)
        Finite.
    affine : array (4, 4)
        Voxel index to position, in mm, or in the units of `like`.
    content : "image", "k-space", "mask" or "map"
        What the array is. A mask is of k-space, and bool; a map has a number for each place, such as an error
        or a coil sensitivity.
    sidecar : mapping, optional
        Further keys, or other values for ``Description``, ``Units``, ``EncodedAxes`` (the axes of the array
        that are spatial frequencies).
    like : Volume, optional
        A file on whose grid the data lie: its units, zooms, and both of its transforms survive. Where
        `affine` differs from its affine, as for a part of it, the transforms are moved along.

    Raises
    ------
    InputError
        The file cannot be written, or the data are not of a kind that it can hold.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "mask.nii.gz"
    ...     lines = np.arange(64)[None, :, None] % 2 == 0
    ...     mask = np.broadcast_to(lines, (64, 64, 1))
    ...     write_volume(path, mask, np.diag([3, 3, 5, 1]), content="mask", sidecar=phase_encoding("y"))
    ...     said = read_sidecar(path)
    >>> said["Content"], said["EncodedAxes"], said["PhaseEncodingDirection"], said["FieldOfView"]
    ('mask', 'xyz', 'j', [192.0, 192.0, 5.0])
    """
    path = Path(path)
    if not path.name.endswith((".nii", ".nii.gz")):
        raise InputError(f"{path} cannot be written; expected a name that ends in .nii or .nii.gz")
    data, affine = np.asarray(data), np.asarray(affine, np.float64)
    _check_content(path, data, content)
    image = _image(path, data, affine, like)
    units = like.units[0] if like else "mm"
    text = _json(sidecar_path(path), _sidecar(data, _voxel_mm(affine, units), content, sidecar or {}))
    # the sidecar first: a volume that is there has its sidecar
    with _replacing_all(sidecar_path(path), path) as (beside, file):
        beside.write(text.encode())
        if path.name.endswith(".gz"):
            with gzip.GzipFile("", "wb", compresslevel=1, fileobj=file, mtime=0) as compressed:
                image.to_stream(compressed)
        else:
            image.to_stream(file)


def sidecar_path(path: str | os.PathLike[str]) -> Path:
    """Return where the sidecar of a volume, or of a sampling table, is.

    Examples
    --------
    >>> sidecar_path("head.nii.gz").name, sidecar_path("head.t1.nii").name, sidecar_path("order.tsv").name
    ('head.json', 'head.t1.json', 'order.json')
    """
    path = Path(path)
    if path.suffix == ".tsv":
        return path.with_suffix(".json")
    stem = path.name.removesuffix(".gz").removesuffix(".nii").removesuffix(".json")
    return path.with_name(f"{stem}.json")


def read_sidecar(path: str | os.PathLike[str]) -> dict[str, Any]:
    """Read the sidecar of a volume.

    Parameters
    ----------
    path : path
        The volume, or the sidecar itself.

    Returns
    -------
    dict
        Empty when there is no sidecar.

    Raises
    ------
    InputError
        The sidecar cannot be read, or is not a JSON object.

    Examples
    --------
    >>> read_sidecar("a volume without sidecar.nii.gz")
    {}
    """
    path = sidecar_path(path)
    try:
        found = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        return {}
    except OSError as error:
        raise InputError(f"{path} cannot be read ({error.strerror})") from None
    except ValueError as error:
        raise InputError(f"{path} is not a JSON sidecar ({_one_line(error)})") from None
    if not isinstance(found, dict):
        raise InputError(f"{path} is not a JSON sidecar; expected an object in braces")
    return found


def check_outputs(
    outputs: Mapping[str, Path | None],
    inputs: Iterable[Path | None] = (),
    endings: Mapping[str, tuple[str, ...]] | None = None,
) -> None:
    """Refuse, before any work, what a command is to write and cannot or must not.

    Parameters
    ----------
    outputs : mapping
        Option to path; None where it was not given.
    inputs : iterable of Path or None
        What the command reads. Neither these nor their sidecars may be overwritten.
    endings : mapping, optional
        Option to the endings of its names, where it is no NIfTI volume.

    Raises
    ------
    InputError
        An output or its sidecar is an input, an input's sidecar or another output, has a name of another
        kind, or lies in a folder that is not there or cannot be written to.

    Examples
    --------
    >>> check_outputs({"--output": Path("a.nii"), "--kspace": Path("a.nii.gz")})
    Traceback (most recent call last):
        ...
    skipline.InputError: the sidecar of --kspace a.nii.gz is that of --output a.nii; expected another name
    """
    taken: dict[Any, str] = {}
    for path in filter(None, inputs):
        taken[_identity(sidecar_path(path))] = f"that of {path}"
    for path in filter(None, inputs):
        taken[_identity(path)] = "one of the inputs"
    for option, path in outputs.items():
        if path is None:
            continue
        named = f"{option} {path}"
        wanted = (endings or {}).get(option, (".nii", ".nii.gz"))
        if not path.name.endswith(wanted):
            raise InputError(f"{named}: expected a name that ends in {' or '.join(wanted)}")
        for file, words in ((path, named), (sidecar_path(path), f"the sidecar of {named}")):
            if already := taken.get(_identity(file)):
                raise InputError(f"{words} is {already}; expected another name")
            _check_place(file)
        taken[_identity(path)] = f"also {named}"
        taken[_identity(sidecar_path(path))] = f"that of {named}"


def _identity(path: Path) -> Any:
    """Return what two names of one file have in common."""
    try:
        found = path.stat()
    except OSError:
        return path.resolve()
    return found.st_dev, found.st_ino


def _check_place(path: Path) -> None:
    try:
        if path.is_dir():
            raise IsADirectoryError(errno.EISDIR, os.strerror(errno.EISDIR))
        with tempfile.TemporaryFile(dir=path.parent):  # permissions alone do not tell
            pass
    except OSError as error:
        raise InputError(f"{path} cannot be written ({error.strerror or _one_line(error)})") from None


def phase_encoding(axes: str) -> dict[str, str]:
    """Return what a sidecar says of the phase-encoded axes.

    The first is BIDS ``PhaseEncodingDirection``; for the second, which 3-D acquisitions have, BIDS has no
    term.

    Examples
    --------
    >>> phase_encoding("yz")
    {'PhaseEncodingDirection': 'j', 'SecondPhaseEncodingDirection': 'k'}
    """
    keys = ("PhaseEncodingDirection", "SecondPhaseEncodingDirection")
    return {key: "ijk"["xyz".index(axis)] for key, axis in zip(keys, axes, strict=False)}


def write_text(path: str | os.PathLike[str], text: str) -> None:
    """Write a text file, UTF-8, atomically: it is complete or as it was before.

    Raises
    ------
    InputError
        The file cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_text(Path(folder) / "note.txt", "SNR 35")
    ...     (Path(folder) / "note.txt").read_text()
    'SNR 35'
    """
    with replacing(Path(path)) as file:
        file.write(text.encode())


def write_json(path: str | os.PathLike[str], content: Any) -> None:
    """Write a JSON file atomically; NumPy numbers and arrays, and paths, are understood.

    Raises
    ------
    InputError
        The file cannot be written, or JSON has no way to write a value, as for NaN.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_json(Path(folder) / "case.json", {"nrmse": np.float64(0.25), "shape": np.array([2, 1])})
    ...     json.loads((Path(folder) / "case.json").read_text())
    {'nrmse': 0.25, 'shape': [2, 1]}
    """
    write_text(path, _json(Path(path), content))


# Reading


def _read(path: Path) -> Volume:
    with _opened(path) as stream, _header_remarks() as notes:
        klass = _nifti_class(path, stream)
        image = klass.from_file_map(klass.make_file_map({"image": stream}), mmap=False)
        stored = image.dataobj
        data = _in_memory(path, np.asanyarray(stored))
        while stream.read(1 << 20):  # to the end, where gzip has its check sum
            pass
        affine = np.array(image.affine, np.float64)
        if not np.isfinite(data).all():
            raise InputError(f"{path} holds NaN or infinite values; expected finite ones")
        if not np.isfinite(affine).all():
            raise InputError(f"{path} has NaN or infinite values in its affine; expected finite ones")
        if (stored.slope, stored.inter) != (1, 0):
            notes.append(
                f"{path.name}: stored values are scaled by {stored.slope:g} and shifted by {stored.inter:g}"
            )
        header = image.header
        return Volume(
            data=data,
            affine=affine,
            zooms=tuple(float(zoom) for zoom in header["pixdim"][1 : 1 + max(3, header["dim"][0])]),
            units=header.get_xyzt_units(),
            path=path,
            notes=tuple(notes),
            header=header,
        )


@contextmanager
def _opened(path: Path) -> Iterator[IO[bytes] | gzip.GzipFile]:
    """Open a file, through gzip when it is compressed, and say in one line what goes wrong with it."""
    try:
        with path.open("rb") as file:
            compressed = file.read(2) == b"\x1f\x8b"
            file.seek(0)
            if compressed:
                with gzip.open(file) as stream:
                    yield stream
            else:
                yield file
    except InputError:
        raise
    except FileNotFoundError:
        raise InputError(f"{path} does not exist{_nearest_file(path)}") from None
    except EOFError:
        raise InputError(f"{path} is truncated: it ends before its data do") from None
    except MemoryError:
        raise InputError(f"{path} needs more memory than there is, or its header is damaged") from None
    except OSError as error:
        if error.errno is not None:
            raise InputError(f"{path} cannot be read ({error.strerror})") from None
        raise InputError(f"{path} is truncated or damaged ({_one_line(error)})") from None
    except Exception as error:  # a damaged header fails in many ways
        raise InputError(f"{path} is damaged ({_one_line(error)})") from None


@contextmanager
def _header_remarks() -> Iterator[list[str]]:
    """Collect what nibabel remarks while it puts a header right, in place of printing it."""
    from nibabel.imageglobals import logger

    remarks: list[str] = []

    def collect(record: Any) -> bool:
        remarks.append(f"header: {record.getMessage()}")
        return False

    logger.addFilter(collect)
    try:
        yield remarks
    finally:
        logger.removeFilter(collect)


def _nifti_class(path: Path, stream: IO[bytes] | gzip.GzipFile) -> Any:
    """Tell the NIfTI version by the magic string in the header (nifti1.h, nifti2.h)."""
    from nibabel.nifti1 import Nifti1Image
    from nibabel.nifti2 import Nifti2Image

    head = stream.read(348)
    stream.seek(0)
    if head[344:348] == b"n+1\0":
        return Nifti1Image
    if head[4:8] == b"n+2\0":
        return Nifti2Image
    if head[344:348] == b"ni1\0" or head[4:8] == b"ni2\0":
        raise InputError(
            f"{path} is half of a NIfTI pair (.hdr and .img); expected a single .nii or .nii.gz file"
        )
    raise InputError(f"{path} is not NIfTI; expected a NIfTI-1 or NIfTI-2 file, .nii or .nii.gz")


def _in_memory(path: Path, stored: np.ndarray) -> np.ndarray:
    """Order the axes of a file, (x, y, z, time, coil), as they are in memory."""
    if stored.dtype.kind not in "biufc":
        raise InputError(f"{path} holds colours or records; expected a number for each voxel")
    if stored.ndim < 2 or any(n != 1 for n in stored.shape[5:]) or 0 in stored.shape:
        lengths = " x ".join(map(str, stored.shape))
        raise InputError(f"{path} has dimensions {lengths}; expected x, y, z, then time, then coils")
    shape = (*stored.shape, 1)[:3] if stored.ndim == 2 else stored.shape[:5]
    ordered = stored.reshape(shape, order="F")
    if ordered.ndim == 4 and ordered.shape[3] == 1:
        ordered = ordered[..., 0]
    elif ordered.ndim == 4:
        ordered = ordered[..., None]
    if ordered.ndim == 5:
        ordered = ordered.transpose(3, 4, 0, 1, 2)
        ordered = ordered[0] if len(ordered) == 1 else ordered
    # no longer than double precision
    widest = {"f": np.dtype(np.float64), "c": np.dtype(np.complex128)}.get(ordered.dtype.kind, ordered.dtype)
    dtype = min(ordered.dtype, widest, key=lambda each: each.itemsize).newbyteorder("=")
    return np.array(ordered, dtype, order="C")


def _with_phase(magnitude: Volume, phase: Volume) -> Volume:
    for volume in (magnitude, phase):
        if np.iscomplexobj(volume.data):
            raise InputError(f"{volume.path} is complex; expected a real magnitude and a real phase")
    if magnitude.data.min() < 0:
        raise InputError(f"{magnitude.path} has values below zero; expected a magnitude")
    if phase.data.shape != magnitude.data.shape:
        raise InputError(
            f"{phase.path} has shape {phase.data.shape}, "
            f"expected that of the magnitude, {magnitude.data.shape}"
        )
    if not agree(phase.affine, magnitude.affine, 0.01):
        raise InputError(
            f"{phase.path} lies elsewhere in space than {magnitude.path}; expected the same affine"
        )
    radians, note = _radians(phase)
    data = (magnitude.data * np.exp(1j * radians)).astype(np.complex64)
    return replace(magnitude, data=data, notes=(*magnitude.notes, *phase.notes, note))


def _radians(phase: Volume) -> tuple[np.ndarray, str]:
    """Phase in radians, and how its units were told.

    Scanners store a turn in 4096 steps, from 0 or from -4096 by twos. A small range of integers could as well
    be degrees, so it is refused.
    """
    name, values = phase.path.name, phase.data.astype(np.float64)
    low, high = values.min(), values.max()
    stated = read_sidecar(phase.path).get("Units")
    slack = 0.01  # radians that were stored as scaled integers
    within_turn = low >= -np.pi - slack and high <= (np.pi if low < -slack else 2 * np.pi) + slack
    if stated == "rad":
        return values, f"{name}: phase in radians, by its sidecar"
    if stated is None and within_turn:
        return values, f"{name}: phase in radians, by its range, {low:.4g} to {high:.4g}"
    certain = stated == "arbitrary" or (stated is None and (low < -360 or high > 360))
    if certain and (values == np.round(values)).all():
        if low >= 0 and high <= 4096:
            return (values - 2048) * (np.pi / 2048), f"{name}: phase in integer units, 0 to 4095 a turn"
        if low >= -4096 and high <= 4096:
            return values * (np.pi / 4096), f"{name}: phase in integer units, -4096 to 4094 a turn"
    raise InputError(
        f"{phase.path} goes from {low:.6g} to {high:.6g}; expected a phase in radians, or in integers from "
        "0 to 4095 or from -4096 to 4094 (its sidecar can say Units, rad or arbitrary)"
    )


# Writing


def _check_content(path: Path, data: np.ndarray, content: str) -> None:
    if content not in _CONTENTS:
        raise InputError(f'{path}: there is no content "{content}"; expected one of: {", ".join(_CONTENTS)}')
    if data.ndim not in (3, 4, 5) or data.size == 0:
        raise InputError(
            f"{path} cannot hold an array of shape {data.shape}; expected (x, y, z) or (coil, x, y, z)"
        )
    if data.dtype.kind not in "biufc" or (content == "mask") != (data.dtype == np.bool_):
        raise InputError(
            f"{path} cannot hold {data.dtype} values as {content}; expected bool for a mask, else numbers"
        )
    if content == "k-space" and not np.iscomplexobj(data):
        raise InputError(f"{path} cannot hold {data.dtype} values as k-space; expected complex ones")
    if not np.isfinite(data).all():
        raise InputError(f"{path} was not written: the data hold NaN or infinite values")


def _image(path: Path, data: np.ndarray, affine: np.ndarray, like: Volume | None) -> Any:
    from nibabel.nifti1 import Nifti1Image
    from nibabel.nifti2 import Nifti2Header, Nifti2Image
    from nibabel.spatialimages import HeaderDataError

    if affine.shape != (4, 4) or not np.isfinite(affine).all() or np.linalg.matrix_rank(affine) < 4:
        raise InputError(f"{path} cannot be written: the affine is not a 4 x 4 array that can be inverted")
    stored = {np.dtype(np.bool_): np.uint8, np.dtype(np.float16): np.float32}.get(data.dtype, data.dtype)
    ordered = data.astype(stored, copy=False)
    if data.ndim > 3:
        ordered = (ordered if data.ndim == 5 else ordered[None]).transpose(2, 3, 4, 0, 1)
    large = max(ordered.shape) > _NIFTI1_LONGEST_AXIS or (
        like is not None and isinstance(like.header, Nifti2Header)
    )
    klass = Nifti2Image if large else Nifti1Image
    header = klass.header_class()
    try:
        header.set_data_dtype(ordered.dtype)
    except HeaderDataError:
        raise InputError(f"{path} cannot hold {data.dtype} values; NIfTI has no such type") from None
    header.set_data_shape(ordered.shape)
    header["descrip"] = f"skipline {__version__}"
    _place(header, affine, like)
    # the affine that the header has, so that nibabel leaves it alone
    return klass(ordered, header.get_best_affine(), header)


def _place(header: Any, affine: np.ndarray, like: Volume | None) -> None:
    """Say in the header where the voxels lie."""
    if like is None:
        header.set_xyzt_units("mm")
        header["pixdim"][1:4] = _column_norms(affine)
        header.set_sform(affine, "scanner")
        header.set_qform(affine, "scanner")
        if not agree(header.get_qform(), affine, 1e-4):
            header.set_qform(None, 0)  # a shear, which it cannot say
        return
    if like.header is None:
        header.set_xyzt_units(*like.units)
        header["pixdim"][1 : 1 + len(like.zooms)] = like.zooms
    else:
        for field in _GEOMETRY:
            header[field] = like.header[field]
    if not agree(affine, like.affine, 1e-6):
        (qform, qform_code), (_, sform_code) = header.get_qform(coded=True), header.get_sform(coded=True)
        header["pixdim"][1:4] = _column_norms(affine)
        if qform is not None:
            header.set_qform(qform @ np.linalg.inv(like.affine) @ affine, int(qform_code))
        if sform_code > 0:
            header.set_sform(affine, int(sform_code))
    if not agree(header.get_best_affine(), affine, 1e-4):
        header.set_sform(affine, "aligned")


def _sidecar(
    data: np.ndarray, voxel_mm: tuple[float, float, float], content: str, more: Mapping[str, Any]
) -> dict[str, Any]:
    kind = "complex" if np.iscomplexobj(data) else "real"
    in_kspace = content in ("k-space", "mask")
    said: dict[str, Any] = {
        "Description": "sampled points of centred k-space" if content == "mask" else f"{kind} {content}",
        "Content": content,
        "EncodedAxes": "xyz" if in_kspace else "",
    }
    if content in ("image", "k-space"):
        said["Units"] = "arbitrary"
    said |= {
        "FieldOfView": [round(n * size, 6) for n, size in zip(data.shape[-3:], voxel_mm, strict=True)],
        "FieldOfViewUnits": "mm",
    }
    said |= more
    return said | {"GeneratedBy": [{"Name": "skipline", "Version": __version__}], "Caution": CAUTION}


@contextmanager
def replacing(path: Path) -> Iterator[IO[bytes]]:
    """Write to a temporary file in the same folder; it takes the place of `path` when all has gone well."""
    with _replacing_all(path) as (file,):
        yield file


@contextmanager
def _replacing_all(*paths: Path) -> Iterator[Sequence[IO[bytes]]]:
    """Do so with several files: none takes its place, in this order, before all are on the disk."""
    parts = {path: path.with_name(f".skipline-{secrets.token_hex(8)}.part") for path in paths}
    path = paths[-1]
    try:
        for path in paths:
            if path.is_dir():
                raise IsADirectoryError(errno.EISDIR, os.strerror(errno.EISDIR))
        try:
            with ExitStack() as stack:
                files = [stack.enter_context(part.open("xb")) for part in parts.values()]
                yield files
                for file in files:
                    file.flush()
                    os.fsync(file.fileno())
            for path, part in parts.items():
                part.replace(path)
        except BaseException:
            for part in parts.values():
                part.unlink(missing_ok=True)
            raise
    except OSError as error:
        raise InputError(f"{path} cannot be written ({error.strerror or _one_line(error)})") from None


def _json(path: Path, content: Any) -> str:
    def plain(value: Any) -> Any:
        if isinstance(value, np.generic | np.ndarray):
            return value.tolist()
        if isinstance(value, os.PathLike):
            return os.fspath(value)
        raise TypeError(f"JSON has no way to write {type(value).__name__}")

    try:
        return json.dumps(content, default=plain, allow_nan=False, ensure_ascii=False, indent=2) + "\n"
    except (TypeError, ValueError) as error:
        raise InputError(f"{path} cannot be written ({_one_line(error)})") from None


def agree(affine: np.ndarray, other: np.ndarray, voxels: float) -> bool:
    """Tell whether two affines differ by less than a share of a voxel, at the origin and from voxel to voxel.

    Examples
    --------
    >>> metres = np.diag([0.002, 0.002, 0.005, 1])
    >>> agree(metres, metres, 0.01), agree(metres + np.diag([0.001, 0, 0, 0]), metres, 0.01)
    (True, False)
    """
    single_precision = 1e-6  # of NIfTI-1's numbers
    return np.allclose(affine, other, rtol=single_precision, atol=voxels * _column_norms(other).min())


def _column_norms(affine: np.ndarray) -> np.ndarray:
    return np.linalg.norm(affine[:3, :3], axis=0)


def _voxel_mm(affine: np.ndarray, unit: str) -> tuple[float, float, float]:
    x, y, z = (float(size) * _MM.get(unit, 1.0) for size in _column_norms(affine))
    return x, y, z


def _nearest_file(path: Path) -> str:
    from difflib import get_close_matches

    try:
        names = [name for name in os.listdir(path.parent) if name.endswith((".nii", ".nii.gz"))]
    except OSError:
        return f"; there is no folder {path.parent}"
    close = get_close_matches(path.name, names, n=1)
    return f'; did you mean "{close[0]}"?' if close else ""


def _one_line(error: BaseException) -> str:
    return " ".join(str(error).split()) or type(error).__name__
