"""The fully sampled reference of a case: its k-space for each coil, its image, and where it lies in space."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ... import InputError
from .. import plugins
from .encoding import Shape
from .settings import Acquisition, Reference

if TYPE_CHECKING:
    from ..files import Volume

SLICE_THICKNESS_MM = 5.0
"""Thickness that files state for the slice of a 2-D phantom, which has none."""

Digests = tuple[tuple[str, str], ...]
"""The files of a reference by what they are, and the SHA-256 of the content of each."""

MATRIX = (256, 256)
"""Matrix of a phantom when the study file gives none."""


@dataclass(frozen=True)
class Prepared:
    """A reference ready to be undersampled.

    Attributes
    ----------
    kspace : complex array (coil, x, y, z)
        Fully sampled and noise-free.
    maps : complex array (coil, x, y, z) or None
        Coil sensitivities; None for one uniform coil.
    image : complex array (x, y, z)
        The coil-combined image of `kspace`, ``sum_c conj(S_c) x_c / sum_c |S_c|^2``, zero where no coil sees.
    support : bool array (x, y, z)
        The object.
    affine : float array (4, 4)
        Voxel index to mm.
    like : Volume or None
        The file whose zooms and units the results take.
    """

    kspace: np.ndarray
    maps: np.ndarray | None
    image: np.ndarray
    support: np.ndarray
    affine: np.ndarray
    like: Volume | None

    def sigma(self, snr: float | None) -> float:
        """Return the standard deviation of the noise in k-space for an SNR of the combined image.

        The combined image's noise is that of k-space divided by the root of ``sum_c |S_c|^2``, so the
        object's magnitude is weighted with it.

        Parameters
        ----------
        snr : float or None
            None stands for no noise, hence 0.
        """
        from ...phantoms.acquisition import sigma_for_snr

        if snr is None:
            return 0.0
        if self.maps is None:
            return float(sigma_for_snr(self.image, snr, self.support))
        return float(sigma_for_snr(self.image * np.sqrt(_power(self.maps)), snr, self.support))


def complete(reference: Reference) -> Reference:
    """Fill in a phantom's matrix and field of view, and the encoded axes that k-space's sidecar tells.

    Raises
    ------
    InputError
        There is no such phantom; the sidecar cannot be read.

    Examples
    --------
    >>> complete(Reference(phantom="line-pair-slab")).matrix
    (256, 256)
    """
    if reference.kspace is not None and reference.encoded_axes is None:
        from ..files import read_sidecar

        axes = read_sidecar(reference.kspace).get("EncodedAxes", "xyz")
        # whatever else it says is refused when k-space is read
        return reference.model_copy(update={"encoded_axes": axes}) if isinstance(axes, str) else reference
    if reference.phantom is None:
        return reference
    field_of_view = reference.field_of_view_mm or tuple(
        map(float, _phantom(reference.phantom).field_of_view_mm)
    )
    return reference.model_copy(
        update={"matrix": reference.matrix or MATRIX, "field_of_view_mm": field_of_view}
    )


def warnings(reference: Reference) -> list[str]:
    """Return what is probably not meant with a complete reference, a sentence each.

    Examples
    --------
    >>> warnings(complete(Reference(phantom="line-pair-slab", field_of_view_mm=(240.0, 120.0))))[0][:45]
    'the field of view of 240 x 120 mm is smaller '
    """
    if reference.phantom is None or reference.field_of_view_mm is None:
        return []
    own = _phantom(reference.phantom).field_of_view_mm
    own = own if isinstance(own, tuple) else (own, own)
    if all(given >= needed for given, needed in zip(reference.field_of_view_mm, own, strict=True)):
        return []
    sizes = [" x ".join(f"{length:g}" for length in lengths) for lengths in (reference.field_of_view_mm, own)]
    return [
        f"the field of view of {sizes[0]} mm is smaller than the {sizes[1]} mm that {reference.phantom} "
        "is made for: it may fold, and coil maps do not hold for what is folded"
    ]


def shape(reference: Reference) -> Shape:
    """Return the shape (x, y, z) of a complete reference; reads its file.

    Examples
    --------
    >>> shape(complete(Reference(phantom="line-pair-slab", matrix=(64, 48))))
    (64, 48, 1)
    """
    if reference.matrix is not None:
        return (*reference.matrix, 1)
    return _three(_source_data(reference).shape[-3:])


def coil_count(reference: Reference, acquisition: Acquisition) -> int:
    """Return the number of coils of an acquisition, after checking that its parts agree.

    Raises
    ------
    InputError
        Coil maps, k-space and the stated number of coils do not fit each other.

    Examples
    --------
    >>> coil_count(complete(Reference(phantom="line-pair-slab")), Acquisition(coils=8))
    8
    """
    measured = None
    if reference.kspace is not None:
        measured = len(_source_data(reference))
        if measured > 1 and acquisition.maps is None:
            raise InputError(f"k-space of {measured} coils needs their sensitivities; give acquisition.maps")
        if acquisition.coils not in (None, measured):
            raise InputError(f"coils = {acquisition.coils}, but the k-space has {measured}; leave coils out")
    if acquisition.maps is None:
        return measured or acquisition.coils or 1
    maps = given_maps(acquisition.maps)
    if maps.shape[1:] != shape(reference):
        raise InputError(
            f"the coil maps are {_by(maps.shape[1:])} and the reference is {_by(shape(reference))}"
        )
    for what, number in (("the k-space has", measured), ("coils =", acquisition.coils)):
        if number not in (None, maps.shape[0]):
            raise InputError(f"the coil maps are for {maps.shape[0]} coils, but {what} {number}")
    return maps.shape[0]


def prepare(
    reference: Reference, coils: int, maps_file: str | None, contents: Digests | None = None
) -> Prepared:
    """Prepare a complete reference; the last two are kept in memory.

    A phantom's k-space comes from its closed form, coils of the simulated array included; a volume's, and a
    phantom's with given coil maps, from the discrete Fourier transform of ``S_c x``.

    Parameters
    ----------
    reference : Reference
        With everything that `complete` fills in.
    coils : int
        Number of coils, as `coil_count` says.
    maps_file : str or None
        NIfTI volume of given coil maps.
    contents : tuple of (str, str), optional
        What `digests` said of the files when the study was read; what it says now when not given.

    Raises
    ------
    InputError
        A file is no longer what it was, or cannot be used.

    Examples
    --------
    >>> small = complete(Reference(phantom="line-pair-slab", matrix=(32, 32)))
    >>> prepare(small, 1, None).kspace.shape
    (1, 32, 32, 1)
    """
    return _prepare(
        reference, coils, maps_file, digests(reference, maps_file) if contents is None else contents
    )


@lru_cache(maxsize=2)
def _prepare(reference: Reference, coils: int, maps_file: str | None, contents: Digests) -> Prepared:
    from ...phantoms.acquisition import support
    from ..fourier import to_image, to_kspace

    if digests(reference, maps_file) != contents:
        raise InputError(
            f"the files of {reference.source} have changed since the study was read; run it again"
        )
    maps: np.ndarray | None = None
    array: Any = None
    if maps_file is not None:
        maps = given_maps(maps_file)
    elif coils > 1:
        array, maps = _ring_array(reference, coils)

    if reference.phantom is not None:
        phantom = _phantom(reference.phantom)
        options = {"matrix": reference.matrix, "field_of_view_mm": reference.field_of_view_mm}
        kspace = phantom.kspace(**options, array=array)
        kspace = kspace if kspace.ndim == 4 else kspace[None]
        if maps_file is not None:
            assert maps is not None
            kspace = to_kspace((maps * to_image(kspace[0])).astype(np.complex64))
        affine, like = _phantom_affine(reference), None
    else:
        like = _source(reference)
        data = np.asarray(_source_data(reference), np.complex64)
        affine = _sliced_affine(like.affine, reference)
        if reference.kspace is not None:
            kspace = data
        else:
            kspace = to_kspace(data[None] if maps is None else (maps * data).astype(np.complex64))

    images = to_image(kspace)
    image = images[0] if maps is None else _combine(images, maps)
    if not image.any():
        raise InputError("the reference is zero everywhere; there is nothing to compare with")
    return Prepared(np.ascontiguousarray(kspace), maps, image, support(image), affine, like)


def digests(reference: Reference, maps_file: str | None = None) -> Digests:
    """Return the digests of the files that there are of a reference: sidecars tell how a volume is read.

    Examples
    --------
    >>> digests(Reference(phantom="line-pair-slab"))
    ()
    """
    from ..files import sidecar_path

    files: dict[str, Path] = {}
    for key in ("image", "phase", "kspace"):
        if path := getattr(reference, key):
            files |= {key: Path(path), f"{key} sidecar": sidecar_path(path)}
    if maps_file is not None:
        files["maps"] = Path(maps_file)
    return tuple((key, digest(str(path))) for key, path in files.items() if path.is_file())


def digest(path: str) -> str:
    """Return the SHA-256 of a file's content.

    Raises
    ------
    InputError
        The file cannot be read.
    """
    try:
        with open(path, "rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError as error:
        raise InputError(f"{path} cannot be read ({error.strerror})") from None


def given_maps(path: str) -> np.ndarray:
    """Read coil maps, complex64 (coil, x, y, z).

    Raises
    ------
    InputError
        The file is not a NIfTI volume of coil maps.
    """
    return _read_maps(path, digest(path) if Path(path).is_file() else "")


# What is kept in memory goes by content: a file that is overwritten is another.


@lru_cache(maxsize=2)
def _read_maps(path: str, content: str) -> np.ndarray:
    from ..files import read_volume

    data = np.asarray(read_volume(path).data, np.complex64)
    return data if data.ndim == 4 else data[None]


def _phantom(name: str) -> Any:
    return plugins.load("phantoms", name)()


def _ring_array(reference: Reference, coils: int) -> tuple[Any, np.ndarray]:
    from ...phantoms.coils import ring_array

    array = ring_array(coils)
    return array, array.maps(shape(reference))


def _source(reference: Reference) -> Volume:
    return _read_source(reference, digests(reference))


@lru_cache(maxsize=2)
def _read_source(reference: Reference, contents: Digests) -> Volume:
    from ..files import read_volume
    from ..kspace_file import read_kspace

    if reference.kspace is not None:
        return read_kspace(reference.kspace, reference.encoded_axes)
    return read_volume(reference.source, phase=reference.phase)


def _source_data(reference: Reference) -> np.ndarray:
    """Return the file's data, (x, y, z), or (coil, x, y, z) for k-space."""
    data = np.asarray(_source(reference).data)
    if reference.kspace is None:
        if data.ndim != 3:
            raise InputError(f"expected a volume (x, y, z), not an array of {_by(data.shape)}")
        if reference.slices is not None:
            first, last = reference.slices
            if last >= data.shape[2]:
                raise InputError(
                    f"slices: [{first}, {last}] is outside the volume, which has {data.shape[2]}, from 0"
                )
            data = data[:, :, first : last + 1]
            if not data.any():
                raise InputError(
                    f"slices {first} to {last} are zero everywhere; there is nothing to compare with"
                )
    return data


def _phantom_affine(reference: Reference) -> np.ndarray:
    assert reference.matrix is not None
    assert reference.field_of_view_mm is not None
    voxel = [fov / n for fov, n in zip(reference.field_of_view_mm, reference.matrix, strict=True)]
    affine = np.diag([*voxel, SLICE_THICKNESS_MM, 1.0])
    affine[:2, 3] = [-(n // 2) * size for n, size in zip(reference.matrix, voxel, strict=True)]
    return affine


def _sliced_affine(affine: np.ndarray, reference: Reference) -> np.ndarray:
    affine = np.array(affine, float)
    if reference.slices is not None:
        affine[:3, 3] += affine[:3, 2] * reference.slices[0]
    return affine


def _combine(images: np.ndarray, maps: np.ndarray) -> np.ndarray:
    power = _power(maps)
    summed = np.sum(np.conj(maps) * images, axis=0)
    return np.divide(summed, power, out=np.zeros_like(summed), where=power > 0)


def _power(maps: np.ndarray) -> np.ndarray:
    return np.sum(np.abs(maps) ** 2, axis=0)


def _by(lengths: tuple[int, ...]) -> str:
    return " x ".join(map(str, lengths))


def _three(lengths: tuple[int, ...]) -> Shape:
    x, y, z = lengths
    return (x, y, z)
