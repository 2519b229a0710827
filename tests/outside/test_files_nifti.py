"""Files against nibabel, volumes that others made, the NIfTI-1 header and the BIDS schema."""

import gzip
import importlib.util
import struct
from pathlib import Path
from typing import Any

import nibabel as nib
import numpy as np
import pytest
from nibabel.testing import data_path

from skipline.recon.files import phase_encoding, read_sidecar, read_volume, write_volume

# slices of 3 mm, tilted about x by the angle of a 3-4-5 triangle, x to the left
AFFINE = np.array([[-0.9, 0, 0, 90], [0, 0.72, 1.8, -70], [0, -0.54, 2.4, 20], [0, 0, 0, 1.0]])


def opened(path) -> Any:
    """The file as nibabel itself opens it."""
    return nib.load(path)  # type: ignore[attr-defined]


SHIPPED_IN = Path(str(data_path))

# source: test volumes that nibabel ships
SHIPPED = {
    "anatomical.nii": (33, 41, 25),  # big-endian int16
    "functional.nii": (20, 1, 17, 21, 3),  # int16 with a slope; 20 frames
    "example4d.nii.gz": (2, 1, 128, 96, 24),  # a rotated qform
    "example_nifti2.nii.gz": (2, 1, 32, 20, 12),  # NIfTI-2
    "standard.nii.gz": (4, 5, 7),  # uint8, sform only, no units
    "reoriented_anat_moved.nii": (21, 26, 22),  # big-endian float32
}


@pytest.mark.parametrize("name", SHIPPED)
def test_volumes_that_nibabel_ships(tmp_path, name):
    path = SHIPPED_IN / name
    given, volume = opened(path), read_volume(path)
    assert volume.data.shape == SHIPPED[name]
    stored = np.asanyarray(given.dataobj)
    in_file_order = volume.data if volume.data.ndim == 3 else volume.data[:, 0].transpose(1, 2, 3, 0)
    np.testing.assert_array_equal(in_file_order, stored)
    assert volume.data.dtype == stored.dtype.newbyteorder("=")
    np.testing.assert_array_equal(volume.affine, given.affine)
    np.testing.assert_array_equal(volume.zooms, given.header.get_zooms())
    assert volume.units == given.header.get_xyzt_units()
    assert bool(volume.notes) == (name == "functional.nii")

    write_volume(tmp_path / "copy.nii.gz", volume.data, volume.affine, content="image", like=volume)
    copy = opened(tmp_path / "copy.nii.gz")
    assert type(copy) is type(given)
    np.testing.assert_array_equal(copy.affine, given.affine)
    for field in ("pixdim", "xyzt_units", "qform_code", "sform_code"):
        np.testing.assert_array_equal(copy.header[field], given.header[field])
    np.testing.assert_array_equal(np.asanyarray(copy.dataobj).reshape(stored.shape), stored)


def test_the_brain_template_in_the_nilearn_wheel():
    # source: MNI ICBM152 T1 template (Fonov et al. 2011), as the nilearn wheel ships it
    spec = importlib.util.find_spec("nilearn")
    assert spec is not None
    assert spec.origin is not None
    path = Path(spec.origin).parent / "datasets" / "data" / "mni_icbm152_t1_tal_nlin_sym_09a_converted.nii.gz"
    given, volume = opened(path), read_volume(path)
    np.testing.assert_array_equal(volume.data, np.asanyarray(given.dataobj))
    np.testing.assert_array_equal(volume.affine, given.affine)
    assert volume.voxel_mm == pytest.approx((1, 1, 1))
    bright = volume.data > 0.2 * np.percentile(volume.data, 99)
    litres = np.count_nonzero(bright) * np.prod(volume.voxel_mm) / 1e6
    assert 1.2 < litres < 2.2  # an adult brain, and the cerebrospinal fluid around it


@pytest.mark.parametrize("name", ["image.nii", "image.nii.gz"])
@pytest.mark.parametrize("dtype", [np.complex64, np.complex128])
def test_nibabel_opens_what_we_write(tmp_path, name, dtype):
    rng = np.random.default_rng(8)
    data = (rng.standard_normal((12, 10, 4)) + 1j * rng.standard_normal((12, 10, 4))).astype(dtype)
    write_volume(tmp_path / name, data, AFFINE, content="image")
    image = opened(tmp_path / name)
    back = np.asanyarray(image.dataobj)
    assert back.dtype == dtype
    assert back.tobytes("C") == data.tobytes()
    np.testing.assert_allclose(image.affine, AFFINE, rtol=1e-6)
    np.testing.assert_allclose(image.header.get_zooms(), np.linalg.norm(AFFINE[:3, :3], axis=0), rtol=1e-6)
    assert image.header.get_xyzt_units()[0] == "mm"


def test_a_reference_and_its_results_share_a_grid_in_nibabel(tmp_path):
    reference = read_volume(SHIPPED_IN / "anatomical.nii")
    error = np.zeros(reference.data.shape, np.float32)
    error[3, 4, 5] = 1
    write_volume(tmp_path / "error.nii.gz", error, reference.affine, content="map", like=reference)
    given, image = opened(reference.path), opened(tmp_path / "error.nii.gz")
    np.testing.assert_array_equal(image.affine, given.affine)
    assert image.header.get_zooms() == given.header.get_zooms()
    np.testing.assert_array_equal(image.get_fdata(), error)


def test_the_header_is_that_of_the_standard(tmp_path):
    # source: nifti1.h (NIFTI-1.1), offsets and codes from memory
    kspace = np.arange(3 * 8 * 6 * 2, dtype=np.complex64).reshape(3, 8, 6, 2)
    write_volume(tmp_path / "k.nii.gz", kspace, AFFINE, content="k-space")
    content = gzip.decompress((tmp_path / "k.nii.gz").read_bytes())
    assert struct.unpack_from("<i", content, 0) == (348,)
    assert struct.unpack_from("<8h", content, 40) == (5, 8, 6, 2, 1, 3, 1, 1)
    assert struct.unpack_from("<2h", content, 70) == (32, 64)  # DT_COMPLEX64, bits
    assert struct.unpack_from("<f", content, 108) == (352,)
    assert content[123] == 2  # NIFTI_UNITS_MM
    assert struct.unpack_from("<2h", content, 252) == (1, 1)  # NIFTI_XFORM_SCANNER_ANAT
    np.testing.assert_allclose(struct.unpack_from("<12f", content, 280), AFFINE[:3].ravel(), rtol=1e-6)
    assert content[344:348] == b"n+1\0"
    assert len(content) == 352 + kspace.nbytes
    in_order = np.frombuffer(content, "<c8", offset=352)  # x is the fastest axis, coils the slowest
    np.testing.assert_array_equal(in_order, kspace.transpose(0, 3, 2, 1).ravel())


def test_sidecars_use_the_terms_of_bids(tmp_path):
    # source: BIDS schema 2.0.1 (BIDS 1.11.2), objects/metadata, read with bidsschematools
    string = {"type": "string"}
    terms = {
        "Description": string,
        "Units": string,
        "Sources": {"type": "array", "items": string},
        "PhaseEncodingDirection": {"type": "string", "enum": ["i", "i-", "j", "j-", "k", "k-"]},
        "GeneratedBy": {
            "type": "array",
            "minItems": 1,
            "items": {
                "type": "object",
                "required": ["Name"],
                "properties": {"Name": string, "Version": string, "Description": string},
            },
        },
    }
    jsonschema = pytest.importorskip("jsonschema")
    sidecar = {"Sources": ["bids::sub-01/anat/sub-01_T1w.nii.gz"], **phase_encoding("yz")}
    write_volume(tmp_path / "i.nii.gz", np.ones((4, 4, 4)), AFFINE, content="image", sidecar=sidecar)
    said = read_sidecar(tmp_path / "i.nii.gz")
    jsonschema.validate(said, {"type": "object", "properties": terms, "required": list(terms)})
    # the second phase-encoded axis has no term there, nor has the field of view: those names are ours
    assert said["SecondPhaseEncodingDirection"] in terms["PhaseEncodingDirection"]["enum"]


@pytest.mark.parametrize(
    ("stored", "expected"),
    [
        # common practice, no source: scanners export phase as 12-bit integers, 0 to 4095 for -pi to pi, which
        # after a slope of 2 and an intercept of -4096 reads -4096 to 4094
        (np.array([0, 1024, 2048, 3072]), [-np.pi, -np.pi / 2, 0, np.pi / 2]),
        (np.array([-4096, -2048, 0, 2048]), [-np.pi, -np.pi / 2, 0, np.pi / 2]),
    ],
)
def test_integer_phase_is_that_of_scanners(tmp_path, stored, expected):
    nib.Nifti1Image(np.full((2, 2, 1), 3.0), AFFINE).to_filename(tmp_path / "magnitude.nii")
    nib.Nifti1Image(stored.astype(np.int16).reshape(2, 2, 1), AFFINE).to_filename(tmp_path / "phase.nii")
    volume = read_volume(tmp_path / "magnitude.nii", phase=tmp_path / "phase.nii")
    np.testing.assert_allclose(volume.data.ravel(), 3 * np.exp(1j * np.array(expected)), atol=1e-6)
