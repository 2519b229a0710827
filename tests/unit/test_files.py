"""Volumes there and back, sidecars, atomic writing."""

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import hypothesis.extra.numpy as hnp
import nibabel as nib
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from nibabel.eulerangles import euler2mat

from skipline import CAUTION, InputError, __version__
from skipline.recon import files
from skipline.recon.files import (
    Volume,
    phase_encoding,
    read_sidecar,
    read_volume,
    sidecar_path,
    write_json,
    write_text,
    write_volume,
)

AFFINE = np.array([[-1.5, 0, 0.1, 90], [0, 2, 0.3, -70], [0.05, -0.4, 3, 20], [0, 0, 0, 1.0]])

DTYPES = ["u1", "i2", "i4", "f4", "f8", "c8", "c16", "i1", "u2", "u4", "i8", "u8"]


def finite_arrays(dtype: str):
    shapes = hnp.array_shapes(min_dims=3, max_dims=5, min_side=1, max_side=5)
    kind = np.dtype(dtype)
    elements: Any = {"allow_nan": False, "allow_infinity": False} if kind.kind in "fc" else {}
    return hnp.arrays(kind, shapes, elements=hnp.from_dtype(kind, **elements))


def small_images() -> np.ndarray:
    rng = np.random.default_rng(1)
    return (rng.standard_normal((6, 5, 4)) + 1j * rng.standard_normal((6, 5, 4))).astype(np.complex64)


def opened(path) -> Any:
    """The file as nibabel itself opens it."""
    return nib.load(path)  # type: ignore[attr-defined]


# There and back


@given(data=st.sampled_from(DTYPES).flatmap(finite_arrays), compressed=st.booleans())
@settings(max_examples=80, deadline=None)
def test_every_type_and_shape_comes_back_bit_for_bit(tmp_path_factory, data, compressed):
    path = tmp_path_factory.mktemp("there") / ("volume.nii.gz" if compressed else "volume.nii")
    content = "k-space" if np.iscomplexobj(data) else "map"
    write_volume(path, data, AFFINE, content=content)
    back = read_volume(path, allow_zero=True)
    expected = data[0] if data.ndim == 5 and len(data) == 1 else data
    assert back.data.dtype == data.dtype
    assert back.data.shape == expected.shape
    assert back.data.tobytes() == expected.tobytes()
    assert back.data.flags.c_contiguous
    np.testing.assert_allclose(back.affine, AFFINE, rtol=1e-6)


@given(
    rotation=st.tuples(st.floats(-3, 3), st.floats(-3, 3), st.floats(-3, 3)),
    voxel=st.tuples(st.floats(0.1, 10), st.floats(0.1, 10), st.floats(0.1, 10)),
    origin=st.tuples(st.floats(-500, 500), st.floats(-500, 500), st.floats(-500, 500)),
    flip=st.booleans(),
)
@settings(max_examples=60, deadline=None)
def test_any_affine_comes_back_with_its_zooms(tmp_path_factory, rotation, voxel, origin, flip):
    turn = euler2mat(*rotation)
    affine = np.eye(4)
    affine[:3, :3] = turn @ np.diag(voxel) * (-1 if flip else 1)
    affine[:3, 3] = origin
    path = tmp_path_factory.mktemp("affine") / "volume.nii"
    write_volume(path, np.ones((3, 2, 2)), affine, content="image")
    back = read_volume(path)
    np.testing.assert_allclose(back.affine, affine, rtol=1e-5, atol=1e-4)
    np.testing.assert_allclose(back.zooms, voxel, rtol=1e-5)
    np.testing.assert_allclose(back.voxel_mm, voxel, rtol=1e-4)
    header = opened(path).header
    # nifti1.h: three float32 numbers of a unit quaternion, the fourth from the others; near half a turn that
    # leaves an angle of about the square root of float32's precision. The sform above is exact.
    np.testing.assert_allclose(header.get_qform(), affine, rtol=0, atol=3e-3 * max(voxel) + 1e-4)


def test_signs_of_zero_and_tiny_numbers_survive(tmp_path):
    data = np.array([complex(-0.0, 0.0), complex(0.0, -0.0), complex(1e-45, -1e-45), complex(3e38, -3e38)])
    data = data.astype(np.complex64).reshape(2, 2, 1)
    write_volume(tmp_path / "a.nii.gz", data, AFFINE, content="image")
    assert read_volume(tmp_path / "a.nii.gz").data.tobytes() == data.tobytes()


def test_coils_are_dimension_5_of_the_file_and_the_first_in_memory(tmp_path):
    rng = np.random.default_rng(2)
    kspace = (rng.standard_normal((3, 6, 5, 2)) + 1j).astype(np.complex64)
    write_volume(tmp_path / "k.nii.gz", kspace, AFFINE, content="k-space")
    stored = np.asanyarray(opened(tmp_path / "k.nii.gz").dataobj)
    assert stored.shape == (6, 5, 2, 1, 3)
    assert stored[4, 3, 1, 0, 2] == kspace[2, 4, 3, 1]
    assert np.array_equal(read_volume(tmp_path / "k.nii.gz").data, kspace)


def test_frames_are_dimension_4_of_the_file_and_come_before_coils(tmp_path):
    series = np.arange(2 * 1 * 4 * 3 * 2, dtype=np.float32).reshape(2, 1, 4, 3, 2)
    write_volume(tmp_path / "s.nii", series, AFFINE, content="image")
    stored = np.asanyarray(opened(tmp_path / "s.nii").dataobj)
    assert stored.shape == (4, 3, 2, 2, 1)
    assert np.array_equal(read_volume(tmp_path / "s.nii").data, series)
    nib.Nifti1Image(stored[..., 0], AFFINE).to_filename(tmp_path / "four.nii")
    assert np.array_equal(read_volume(tmp_path / "four.nii").data, series)


@pytest.mark.parametrize(("shape", "expected"), [((5, 4), (5, 4, 1)), ((5, 4, 3, 1), (5, 4, 3))])
def test_axes_are_made_three(tmp_path, shape, expected):
    data = np.random.default_rng(3).random(shape)
    nib.Nifti1Image(data, AFFINE).to_filename(tmp_path / "a.nii")
    back = read_volume(tmp_path / "a.nii")
    assert np.array_equal(back.data, data.reshape(expected))
    assert len(back.zooms) >= 3


def test_a_mask_is_stored_as_bytes(tmp_path):
    mask = np.random.default_rng(4).random((6, 5, 1)) < 0.5
    write_volume(tmp_path / "m.nii.gz", mask, AFFINE, content="mask")
    back = read_volume(tmp_path / "m.nii.gz").data
    assert back.dtype == np.uint8
    assert np.array_equal(back.astype(bool), mask)


def test_other_byte_orders_become_the_machines(tmp_path):
    data = np.arange(1, 25, dtype=">f4").reshape(4, 3, 2)
    nib.Nifti1Image(data, AFFINE, nib.Nifti1Header(endianness=">")).to_filename(tmp_path / "a.nii")
    back = read_volume(tmp_path / "a.nii")
    assert back.data.dtype.isnative
    assert np.array_equal(back.data, data)
    write_volume(tmp_path / "b.nii", data, AFFINE, content="image", like=back)
    assert np.array_equal(read_volume(tmp_path / "b.nii").data, data)
    np.testing.assert_array_equal(read_volume(tmp_path / "b.nii").affine, back.affine)


def test_scaling_is_applied_and_told(tmp_path):
    image = nib.Nifti1Image(np.arange(24, dtype=np.int16).reshape(4, 3, 2), AFFINE)
    image.header.set_slope_inter(0.5, -3)
    image.to_filename(tmp_path / "a.nii")
    back = read_volume(tmp_path / "a.nii")
    np.testing.assert_array_equal(back.data, 0.5 * np.arange(24).reshape(4, 3, 2) - 3)
    assert back.notes == ("a.nii: stored values are scaled by 0.5 and shifted by -3",)


def test_equal_data_give_equal_bytes(tmp_path):
    for name in ("one.nii.gz", "another.nii.gz"):
        write_volume(tmp_path / name, small_images(), AFFINE, content="image")
    assert (tmp_path / "one.nii.gz").read_bytes() == (tmp_path / "another.nii.gz").read_bytes()
    assert (tmp_path / "one.nii.gz").read_bytes()[4:8] == b"\0\0\0\0"  # gzip's time


def test_a_file_is_compressed_whatever_its_name_says(tmp_path):
    write_volume(tmp_path / "a.nii.gz", small_images(), AFFINE, content="image")
    (tmp_path / "a.nii.gz").rename(tmp_path / "b.nii")
    assert np.array_equal(read_volume(tmp_path / "b.nii").data, small_images())


def test_axes_too_long_for_nifti_1_are_stored_as_nifti_2(tmp_path):
    data = np.ones((40000, 1, 1), np.uint8)
    write_volume(tmp_path / "a.nii", data, np.eye(4), content="map")
    assert isinstance(opened(tmp_path / "a.nii"), nib.Nifti2Image)
    assert read_volume(tmp_path / "a.nii").data.shape == data.shape


# The grid of another file


def other(tmp_path, klass=nib.Nifti1Image) -> Volume:
    """A file whose two transforms, zooms and units are all unusual."""
    image = klass(np.ones((6, 5, 4, 2), np.int16), None)
    image.header.set_sform(AFFINE, 4)
    image.header.set_qform(np.diag([0.002, -0.003, 0.004, 1]), 1)
    image.header["pixdim"][1:5] = 0.002, 0.003, 0.004, 2.5
    image.header.set_xyzt_units("meter", "sec")
    image.to_filename(tmp_path / "other.nii.gz")
    return read_volume(tmp_path / "other.nii.gz")


@pytest.mark.parametrize("klass", [nib.Nifti1Image, nib.Nifti2Image])
def test_transforms_zooms_and_units_of_another_file_survive(tmp_path, klass):
    like = other(tmp_path, klass)
    assert like.units == ("meter", "sec")
    assert like.zooms == pytest.approx((0.002, 0.003, 0.004, 2.5))
    write_volume(tmp_path / "a.nii.gz", small_images(), like.affine, content="image", like=like)
    written, given_file = (opened(tmp_path / name) for name in ("a.nii.gz", "other.nii.gz"))
    assert isinstance(written, klass)
    for field in ("pixdim", "qform_code", "sform_code", "srow_x", "quatern_b", "qoffset_x", "xyzt_units"):
        np.testing.assert_array_equal(written.header[field], given_file.header[field])
    np.testing.assert_array_equal(written.affine, given_file.affine)


def test_part_of_a_volume_moves_both_transforms(tmp_path):
    like = other(tmp_path)
    part = like.affine.copy()
    part[:3, 3] += part[:3, :3] @ [0, 1, 2]
    write_volume(tmp_path / "a.nii", np.ones((6, 4, 1)), part, content="image", like=like)
    written, given_file = (opened(tmp_path / name).header for name in ("a.nii", "other.nii.gz"))
    np.testing.assert_array_equal(written.get_sform(), part.astype(np.float32))
    qform = given_file.get_qform()
    np.testing.assert_allclose(written.get_qform()[:3, 3], qform[:3] @ [0, 1, 2, 1], rtol=1e-5, atol=1e-9)
    assert (int(written["qform_code"]), int(written["sform_code"])) == (1, 4)


def test_a_file_without_transforms_can_be_written_in_part(tmp_path):
    image = nib.Nifti1Image(np.ones((6, 5, 4)), None)
    image.header["pixdim"][1:4] = 2, 3, 4
    image.to_filename(tmp_path / "bare.nii")
    like = read_volume(tmp_path / "bare.nii")
    write_volume(tmp_path / "same.nii", np.ones((6, 5, 4)), like.affine, content="image", like=like)
    np.testing.assert_array_equal(read_volume(tmp_path / "same.nii").affine, like.affine)
    assert int(read_volume(tmp_path / "same.nii").header["sform_code"]) == 0
    # without transforms the origin follows from the shape, so a part needs one
    write_volume(tmp_path / "part.nii", np.ones((6, 5, 1)), like.affine, content="image", like=like)
    np.testing.assert_allclose(read_volume(tmp_path / "part.nii").affine, like.affine)


def test_a_volume_made_by_hand_serves_as_the_grid(tmp_path):
    like = Volume(np.ones((2, 2, 2)), AFFINE, (1.5, 2, 3, 7), ("micron", "msec"), Path("nowhere.nii"))
    write_volume(tmp_path / "a.nii", np.ones((2, 2, 2)), AFFINE, content="image", like=like)
    back = read_volume(tmp_path / "a.nii")
    np.testing.assert_allclose(back.affine, AFFINE, rtol=1e-6)
    assert back.zooms == (1.5, 2, 3)
    assert back.units == ("micron", "msec")


def test_a_sheared_grid_has_no_quaternion(tmp_path):
    sheared = np.eye(4)
    sheared[0, 1] = 0.4
    write_volume(tmp_path / "a.nii", np.ones((2, 2, 2)), sheared, content="image")
    back = read_volume(tmp_path / "a.nii")
    np.testing.assert_allclose(back.affine, sheared, rtol=1e-6)
    assert int(back.header["qform_code"]) == 0


# Bad input: one clear line that names the file


def refused(path, **options) -> str:
    with pytest.raises(InputError) as refusal:
        read_volume(path, **options)
    message = str(refusal.value)
    assert "\n" not in message
    assert str(path) in message
    return message


def test_a_missing_file_is_refused_with_the_nearest(tmp_path):
    write_volume(tmp_path / "head.nii.gz", small_images(), AFFINE, content="image")
    assert refused(tmp_path / "haed.nii.gz").endswith('does not exist; did you mean "head.nii.gz"?')
    assert refused(tmp_path / "quite another.mgz").endswith("does not exist")
    assert "there is no folder" in refused(tmp_path / "nowhere" / "head.nii")


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "is not NIfTI"),
        (b"not an image", "is not NIfTI"),
        (bytes(1000), "is not NIfTI"),
        (b"\x1f\x8bnot gzip", "is damaged|truncated or damaged"),
        (b"\x1f\x8b", "is truncated"),
    ],
)
def test_what_is_not_nifti_is_refused(tmp_path, content, message):
    (tmp_path / "a.nii.gz").write_bytes(content)
    with pytest.raises(InputError, match=message):
        read_volume(tmp_path / "a.nii.gz")
    refused(tmp_path / "a.nii.gz")


def test_a_folder_and_half_of_a_pair_are_refused(tmp_path):
    assert "cannot be read (Is a directory)" in refused(tmp_path)
    nib.Nifti1Pair(np.ones((4, 4, 4)), np.eye(4)).to_filename(tmp_path / "pair.hdr")
    assert "half of a NIfTI pair" in refused(tmp_path / "pair.hdr")
    nib.Nifti2Pair(np.ones((4, 4, 4)), np.eye(4)).to_filename(tmp_path / "pair.hdr")
    assert "half of a NIfTI pair" in refused(tmp_path / "pair.hdr")


@pytest.mark.parametrize("name", ["a.nii", "a.nii.gz"])
@pytest.mark.parametrize("kept", [0.05, 0.3, 0.6, 0.95, -9, -4, -1])
def test_a_truncated_file_is_refused(tmp_path, name, kept):
    write_volume(tmp_path / name, small_images(), AFFINE, content="image")
    whole = (tmp_path / name).read_bytes()
    (tmp_path / name).write_bytes(whole[: kept if kept < 0 else int(kept * len(whole))])
    message = refused(tmp_path / name)
    if int(abs(kept) * len(whole)) > 348:
        assert "truncated" in message


def test_a_changed_byte_in_compressed_data_is_noticed(tmp_path):
    write_volume(tmp_path / "a.nii.gz", small_images(), AFFINE, content="image")
    whole = bytearray((tmp_path / "a.nii.gz").read_bytes())
    whole[-6] ^= 1  # in the check sum
    (tmp_path / "a.nii.gz").write_bytes(whole)
    assert "damaged" in refused(tmp_path / "a.nii.gz")


@pytest.mark.parametrize("offset", [0, 40, 41, 42, 70, 72, 76, 108, 112, 254, 344])
@pytest.mark.parametrize("value", [0x00, 0x7F, 0xFF])
def test_a_damaged_header_is_read_or_refused_in_one_line(tmp_path, capfd, offset, value):
    write_volume(tmp_path / "a.nii", small_images(), AFFINE, content="image")
    whole = bytearray((tmp_path / "a.nii").read_bytes())
    whole[offset : offset + 2] = bytes([value, value])
    (tmp_path / "a.nii").write_bytes(whole)
    message = f"{tmp_path / 'a.nii'} in one line"
    try:
        read_volume(tmp_path / "a.nii", allow_zero=True)
    except InputError as refusal:
        message = str(refusal)
    assert "\n" not in message
    assert str(tmp_path / "a.nii") in message
    assert capfd.readouterr() == ("", "")


def test_what_nibabel_puts_right_is_noted_and_not_printed(tmp_path, capfd):
    write_volume(tmp_path / "a.nii", small_images(), AFFINE, content="image")
    whole = bytearray((tmp_path / "a.nii").read_bytes())
    whole[80:84] = np.float32(-1.5).tobytes()  # pixdim[1]
    (tmp_path / "a.nii").write_bytes(whole)
    (note,) = read_volume(tmp_path / "a.nii").notes
    assert note.startswith("header: pixdim")
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize(
    ("dtype", "value"),
    [(np.float32, np.nan), (np.float64, np.inf), (np.complex64, complex(0, -np.inf)), (np.complex64, np.nan)],
)
def test_values_that_are_not_finite_are_refused(tmp_path, dtype, value):
    data = np.ones((4, 4, 2), dtype)
    data[1, 2, 0] = value
    nib.Nifti1Image(data, AFFINE).to_filename(tmp_path / "a.nii.gz")
    assert "holds NaN or infinite values" in refused(tmp_path / "a.nii.gz")


def test_a_volume_of_zeros_is_refused_unless_allowed(tmp_path):
    write_volume(tmp_path / "a.nii", np.zeros((4, 4, 2)), AFFINE, content="map")
    assert "is zero everywhere" in refused(tmp_path / "a.nii")
    assert not read_volume(tmp_path / "a.nii", allow_zero=True).data.any()


@pytest.mark.parametrize("shape", [(7,), (2, 2, 2, 1, 1, 2)])
def test_other_dimensions_are_refused(tmp_path, shape):
    nib.Nifti1Image(np.ones(shape), AFFINE).to_filename(tmp_path / "a.nii")
    assert "expected x, y, z, then time, then coils" in refused(tmp_path / "a.nii")


def test_colours_are_refused(tmp_path):
    rgb = np.zeros((4, 4, 2), np.dtype([("R", "u1"), ("G", "u1"), ("B", "u1")]))
    nib.Nifti1Image(rgb, AFFINE).to_filename(tmp_path / "a.nii")
    assert "holds colours" in refused(tmp_path / "a.nii")


# Magnitude with phase


def pair(tmp_path, phase, *, units=None, magnitude=None, affine=AFFINE):
    magnitude = np.abs(small_images()) if magnitude is None else magnitude
    nib.Nifti1Image(magnitude, AFFINE).to_filename(tmp_path / "mag.nii.gz")
    nib.Nifti1Image(phase, affine).to_filename(tmp_path / "ph.nii.gz")
    if units:
        write_json(tmp_path / "ph.json", {"Units": units})
    return tmp_path / "mag.nii.gz", tmp_path / "ph.nii.gz"


def turns(low: float) -> np.ndarray:
    """Phase in radians from `low` on for a turn, as the small image has it."""
    return (np.angle(small_images()) - low) % (2 * np.pi) + low


@pytest.mark.parametrize(
    ("phase", "units", "told"),
    [
        (turns(-np.pi).astype(np.float32), None, "radians, by its range"),
        (turns(0), None, "radians, by its range"),
        (turns(-np.pi) + 6 * np.pi, "rad", "radians, by its sidecar"),
        (np.round(turns(-np.pi) / np.pi * 2048 + 2048).astype(np.int16), None, "0 to 4095 a turn"),
        (2 * np.round(turns(-np.pi) / np.pi * 2048).astype(np.int16), None, "-4096 to 4094 a turn"),
        (2 * np.round(turns(-np.pi) / np.pi * 2048).astype(np.int16), "arbitrary", "-4096 to 4094 a turn"),
    ],
)
def test_magnitude_and_phase_make_a_complex_volume(tmp_path, phase, units, told):
    magnitude, phase_file = pair(tmp_path, phase, units=units)
    volume = read_volume(magnitude, phase=phase_file)
    assert volume.data.dtype == np.complex64
    np.testing.assert_allclose(volume.data, small_images(), atol=0.01)
    np.testing.assert_allclose(abs(volume.data), abs(small_images()), rtol=1e-6)
    assert any(told in note for note in volume.notes)


def test_a_phase_of_zero_leaves_the_magnitude(tmp_path):
    magnitude, phase_file = pair(tmp_path, np.zeros((6, 5, 4)))
    np.testing.assert_allclose(read_volume(magnitude, phase=phase_file).data, abs(small_images()))


@pytest.mark.parametrize(
    ("phase", "options", "message"),
    [
        (np.degrees(turns(-np.pi)), {}, "expected a phase in radians"),
        (np.round(np.degrees(turns(0))), {}, "expected a phase in radians"),  # degrees, or integer units?
        (5000 * turns(0), {}, "expected a phase in radians"),
        (np.degrees(turns(0)), {"units": "deg"}, "expected a phase in radians"),
        (np.zeros((6, 5, 3)), {}, r"has shape \(6, 5, 3\), expected that of the magnitude, \(6, 5, 4\)"),
        (np.zeros((6, 5, 4)), {"affine": AFFINE + 0.5 * np.eye(4, k=3)}, "lies elsewhere in space"),
        (small_images(), {}, "is complex; expected a real magnitude and a real phase"),
        (np.zeros((6, 5, 4)), {"magnitude": small_images()}, "is complex"),
        (np.zeros((6, 5, 4)), {"magnitude": np.real(small_images())}, "has values below zero"),
    ],
)
def test_a_phase_that_does_not_fit_is_refused(tmp_path, phase, options, message):
    magnitude, phase_file = pair(tmp_path, phase, **options)
    with pytest.raises(InputError, match=message) as refusal:
        read_volume(magnitude, phase=phase_file)
    assert "\n" not in str(refusal.value)
    with pytest.raises(InputError, match="does not exist"):
        read_volume(magnitude, phase=tmp_path / "missing.nii")


# Writing


def test_the_sidecar_says_what_the_array_is(tmp_path):
    mask = np.ones((8, 6, 1), bool)
    extra = {"Sources": ["bids::scan.nii.gz"], "Acceleration": np.float64(2), "Draws": np.arange(2)}
    write_volume(tmp_path / "m.nii.gz", mask, np.diag([2, 3, 5, 1]), content="mask", sidecar=extra)
    said = read_sidecar(tmp_path / "m.nii.gz")
    assert said == {
        "Description": "sampled points of centred k-space",
        "Content": "mask",
        "EncodedAxes": "xyz",
        "FieldOfView": [16, 18, 5],
        "FieldOfViewUnits": "mm",
        "Sources": ["bids::scan.nii.gz"],
        "Acceleration": 2,
        "Draws": [0, 1],
        "GeneratedBy": [{"Name": "skipline", "Version": __version__}],
        "Caution": CAUTION,
    }
    own = {"Description": "mine", "Units": "rad", "EncodedAxes": "x", "Caution": "none", "GeneratedBy": []}
    write_volume(tmp_path / "i.nii", small_images(), AFFINE, content="image", sidecar=own)
    said = read_sidecar(tmp_path / "i.nii")
    assert (said["Description"], said["Units"], said["EncodedAxes"]) == ("mine", "rad", "x")
    assert said["Caution"] == CAUTION
    assert said["GeneratedBy"][0]["Name"] == "skipline"


def test_the_field_of_view_is_in_mm_whatever_the_units(tmp_path):
    like = other(tmp_path)
    metres = np.diag([0.002, 0.003, 0.004, 1])
    write_volume(tmp_path / "a.nii", np.ones((6, 5, 4)), metres, content="image", like=like)
    assert read_sidecar(tmp_path / "a.nii")["FieldOfView"] == [12, 15, 16]


def test_phase_encoded_axes_are_told():
    assert phase_encoding("y") == {"PhaseEncodingDirection": "j"}
    assert phase_encoding("xz") == {"PhaseEncodingDirection": "i", "SecondPhaseEncodingDirection": "k"}


@pytest.mark.parametrize(
    ("name", "expected"),
    [("a.nii", "a.json"), ("a.nii.gz", "a.json"), ("a.b.nii.gz", "a.b.json"), ("a.json", "a.json")],
)
def test_where_the_sidecar_is(name, expected):
    assert sidecar_path(Path("folder") / name) == Path("folder") / expected


@pytest.mark.parametrize("content", ["{", "[1]", '"text"', "\x00"])
def test_a_sidecar_that_is_none_is_refused(tmp_path, content):
    (tmp_path / "a.json").write_text(content)
    with pytest.raises(InputError, match="is not a JSON sidecar") as refusal:
        read_sidecar(tmp_path / "a.nii.gz")
    assert "\n" not in str(refusal.value)


@pytest.mark.parametrize(
    ("data", "options", "message"),
    [
        (np.full((4, 4, 1), np.nan), {}, "the data hold NaN or infinite values"),
        (np.ones((4, 4)), {}, r"cannot hold an array of shape \(4, 4\)"),
        (np.ones((0, 4, 1)), {}, "cannot hold an array of shape"),
        (np.ones((4, 4, 1), object), {}, "cannot hold object values"),
        (np.ones((4, 4, 1), bool), {}, "cannot hold bool values as image"),
        (np.ones((4, 4, 1)), {"content": "mask"}, "cannot hold float64 values as mask; expected bool"),
        (np.ones((4, 4, 1)), {"content": "k-space"}, "expected complex ones"),
        (np.ones((4, 4, 1)), {"content": "images"}, 'there is no content "images"; expected one of'),
        (np.ones((4, 4, 1)), {"affine": np.eye(3)}, "the affine is not a 4 x 4 array"),
        (np.ones((4, 4, 1)), {"affine": np.diag([1, 0, 1, 1])}, "that can be inverted"),
        (np.ones((4, 4, 1)), {"name": "a.img"}, "expected a name that ends in .nii or .nii.gz"),
        (np.ones((4, 4, 1)), {"sidecar": {"SNR": np.inf}}, "a.json cannot be written .Out of range float"),
        (np.ones((4, 4, 1)), {"sidecar": {"SNR": {1, 2}}}, "JSON has no way to write set"),
    ],
)
def test_what_cannot_be_written_is_refused_and_nothing_is_left(tmp_path, data, options, message):
    options = {"content": "image", "affine": np.eye(4), "name": "a.nii.gz", **options}
    with pytest.raises(InputError, match=message) as refusal:
        write_volume(tmp_path / options.pop("name"), data, options.pop("affine"), **options)
    assert "\n" not in str(refusal.value)
    assert list(tmp_path.iterdir()) == []


def write_anything(place: Path) -> None:
    write_volume(place, small_images(), AFFINE, content="image")


@pytest.mark.parametrize(
    "write", [write_anything, lambda place: write_text(place, "text"), lambda place: write_json(place, {})]
)
def test_a_place_that_cannot_be_written_to_is_refused_in_one_line(tmp_path, write):
    (tmp_path / "file").write_text("not a folder")
    (tmp_path / "folder.nii").mkdir()
    for place in (tmp_path / "file" / "a.nii", tmp_path / "missing" / "a.nii", tmp_path / "folder.nii"):
        with pytest.raises(InputError, match=r"cannot be written \([A-Z][a-z ]+\)$") as refusal:
            write(place)
        assert str(place) in str(refusal.value)
        assert "\n" not in str(refusal.value)
    assert sorted(path.name for path in tmp_path.rglob("*")) == ["file", "folder.nii"]


@pytest.mark.parametrize("trouble", [OSError(28, "No space left on device"), KeyboardInterrupt()])
@pytest.mark.parametrize("good", [0, 1])
def test_a_write_that_fails_leaves_what_was_there(tmp_path, monkeypatch, trouble, good):
    """A volume has two files: where the second does not fit, the first must not be new."""
    write_volume(tmp_path / "a.nii.gz", small_images(), AFFINE, content="image")
    write_text(tmp_path / "note.txt", "before")
    before = {path.name: path.read_bytes() for path in tmp_path.iterdir()}

    calls = []

    def fail(_):
        calls.append(1)
        if len(calls) > good:
            raise trouble

    monkeypatch.setattr(files.os, "fsync", fail)
    expected = KeyboardInterrupt if isinstance(trouble, KeyboardInterrupt) else InputError
    with pytest.raises(expected):
        write_volume(tmp_path / "a.nii.gz", 2 * small_images(), AFFINE, content="k-space")
    with pytest.raises(expected):
        write_text(tmp_path / "note.txt", "after")
    assert {path.name: path.read_bytes() for path in tmp_path.iterdir()} == before


def test_a_file_appears_only_when_it_is_complete(tmp_path, monkeypatch):
    seen = []
    replace = Path.replace

    def spy(self, target):
        seen.append((Path(target).name, sorted(p.name for p in tmp_path.iterdir() if p.suffix != ".part")))
        return replace(self, target)

    monkeypatch.setattr(files.Path, "replace", spy)
    write_volume(tmp_path / "a.nii.gz", small_images(), AFFINE, content="image")
    assert seen == [("a.json", []), ("a.nii.gz", ["a.json"])]


@pytest.mark.parametrize(
    ("outputs", "inputs", "message"),
    [
        ({"--output": "a.nii"}, ["a.nii"], "--output .*a.nii is one of the inputs"),
        ({"--output": "a.nii.gz"}, ["a.nii"], "the sidecar of --output .*a.nii.gz is that of .*a.nii;"),
        ({"--output": "link.nii"}, ["a.nii"], "is one of the inputs"),
        ({"--output": "sub/../a.nii"}, ["a.nii"], "is one of the inputs"),
        ({"--output": "b.nii", "--maps": "b.nii"}, [], "--maps .*b.nii is also --output .*b.nii"),
        ({"--output": "b.nii", "--maps": "b.nii.gz"}, [], "the sidecar of --maps .* is that of --output"),
        ({"--output": "b.nii", "--table": "b.tsv"}, [], "the sidecar of --table .* is that of --output"),
        (
            {"--output": "b.nii", "--maps": "b.img"},
            [],
            "--maps .*b.img: expected a name that ends in .nii or",
        ),
        ({"--output": "b.nii", "--maps": "no/b.nii"}, [], "cannot be written .No such file or directory"),
        ({"--output": "b.nii", "--maps": "a.nii/b.nii"}, [], "cannot be written .Not a directory"),
        ({"--output": "sub"}, [], "expected a name that ends"),
        ({"--output": "sub/c.nii"}, [], "c.json cannot be written .Is a directory"),
    ],
)
def test_outputs_that_must_not_be_written(tmp_path, outputs, inputs, message):
    (tmp_path / "sub" / "c.json").mkdir(parents=True)
    write_anything(tmp_path / "a.nii")
    (tmp_path / "link.nii").symlink_to(tmp_path / "a.nii")
    before = sorted(tmp_path.rglob("*"))
    paths = {option: tmp_path / name for option, name in outputs.items()}
    with pytest.raises(InputError, match=message):
        files.check_outputs(paths, [None, *(tmp_path / name for name in inputs)], {"--table": (".tsv",)})
    assert sorted(tmp_path.rglob("*")) == before


def test_outputs_that_may_be_written(tmp_path):
    write_anything(tmp_path / "a.nii")
    write_anything(tmp_path / "b.nii")
    before = sorted(tmp_path.iterdir())
    files.check_outputs(
        {"--output": tmp_path / "b.nii", "--maps": None, "--figure": tmp_path / "b.png"},
        [tmp_path / "a.nii", tmp_path / "a.nii"],
        {"--figure": (".png",)},
    )
    assert sorted(tmp_path.iterdir()) == before


def test_files_have_the_usual_permissions(tmp_path):
    (tmp_path / "usual").write_text("")
    write_anything(tmp_path / "a.nii")
    assert (tmp_path / "a.nii").stat().st_mode == (tmp_path / "usual").stat().st_mode


def test_text_is_utf_8_and_lines_stay_as_they_are(tmp_path):
    write_text(tmp_path / "a.txt", "σ = 0.02\nµT\r\n")
    assert (tmp_path / "a.txt").read_bytes() == "σ = 0.02\nµT\r\n".encode()
    write_json(tmp_path / "a.json", {"σ": np.float32(0.5), "path": Path("a") / "b", "n": np.int64(3)})
    assert json.loads((tmp_path / "a.json").read_text(encoding="utf-8")) == {"σ": 0.5, "path": "a/b", "n": 3}


def test_reading_loads_nothing_heavy_but_nibabel(tmp_path):
    write_anything(tmp_path / "a.nii.gz")
    program = (
        "import sys; from skipline.recon import files; early = 'nibabel' in sys.modules; "
        "files.read_volume(sys.argv[1]); "
        "heavy = 'scipy.linalg', 'numba', 'skimage', 'matplotlib', 'pydantic', 'pandas', 'h5py'; "
        "print(early, [name for name in heavy if name in sys.modules])"
    )
    command = [sys.executable, "-c", program, str(tmp_path / "a.nii.gz")]
    done = subprocess.run(command, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False []"
