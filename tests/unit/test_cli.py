"""The command line: every command for real, and every bad input in one line with exit code 2."""

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import jsonschema
import nibabel as nib
import numpy as np
import pytest

from skipline.recon.cli import run_command
from skipline.recon.files import read_volume, write_volume
from skipline.recon.fourier import to_kspace

CONFIGS = Path(__file__).parents[2] / "configs"
SMALL = [
    "--set", "reference.matrix=[64, 64]", "--set", "sampling.calibration=8", "--set", "sampling.draws=1",
    "--set", "sampling.acceleration=[2, 3]",
]  # fmt: skip


@pytest.fixture
def refused(capsys):
    """Run a command that must be refused; return its one line."""

    def run(*arguments, code=2):
        capsys.readouterr()
        assert run_command([str(a) for a in arguments]) == code
        captured = capsys.readouterr()
        assert captured.out == ""
        lines = captured.err.splitlines()
        assert len(lines) == 1
        assert lines[0].startswith("skipline: ")
        return lines[0]

    return run


@pytest.fixture
def scan(tmp_path):
    """A phantom's image, k-space and maps of four coils, and a mask, as files."""
    files = {name: tmp_path / f"{name}.nii.gz" for name in ("image", "kspace", "maps", "mask")}
    assert (
        run_command(
            f"phantom shepp-logan --output {files['image']} --matrix 64,48 --coils 4 --snr 50 "
            f"--kspace {files['kspace']} --maps {files['maps']}".split()
        )
        == 0
    )
    line = f"mask variable-density-lines --output {files['mask']} --like {files['kspace']} --acceleration 2"
    assert run_command([*line.split(), "--constraint", "calibration=12", "--option", "power=1.5"]) == 0
    return files


def test_phantom_mask_recon_compare(scan, tmp_path, capsys):
    out = tmp_path / "sparse.nii.gz"
    line = f"recon {scan['kspace']} {scan['mask']} --output {out} --maps {scan['maps']} --option weight=1"
    assert run_command(line.split()) == 0
    for path, shape in ((out, (64, 48, 1)), (scan["kspace"], (64, 48, 1, 1, 4)), (scan["mask"], (64, 48, 1))):
        image: Any = nib.load(path)
        assert image.shape == shape
        np.testing.assert_allclose(image.affine, read_volume(scan["image"]).affine)
    sidecar = json.loads((tmp_path / "sparse.json").read_text())
    assert sidecar["Converged"] is True
    assert sidecar["SigmaSource"] == "k-space border"
    assert "not for diagnosis" in sidecar["Caution"]
    capsys.readouterr()
    assert (
        run_command(["compare", str(scan["image"]), str(out), "--json", "--error", str(tmp_path / "e.nii")])
        == 0
    )
    found = json.loads(capsys.readouterr().out)
    assert 0 < found["nrmse"] < 0.2
    assert found["ssim"] > 0.7
    assert read_volume(tmp_path / "e.nii").data.shape == (64, 48, 1)


def test_recon_of_a_fully_sampled_scan_is_the_image(scan, tmp_path):
    full = tmp_path / "full.nii.gz"
    source = read_volume(scan["kspace"])
    write_volume(full, np.ones((64, 48, 1), bool), source.affine, content="mask")
    out = tmp_path / "out.nii.gz"
    line = f"recon {scan['kspace']} {full} --output {out} --maps {scan['maps']} --method zero-filled"
    assert run_command(line.split()) == 0
    np.testing.assert_allclose(read_volume(out).data, read_volume(scan["image"]).data, atol=1e-5)


def test_run_check_and_run_again(tmp_path, capsys):
    folder = tmp_path / "results"
    assert run_command(["check", "first-study", *SMALL]) == 0
    assert "8 cases" in capsys.readouterr().out
    assert run_command(["run", "first-study", "--output", str(folder), "--workers", "1", *SMALL]) == 0
    first = capsys.readouterr().out
    assert "8 cases done" in first
    assert "R = " in first
    for name in ("study.toml", "verdict.json", "cases.csv", "summary.csv", "report.html", "cases"):
        assert (folder / name).exists(), name
    before = {p: p.stat().st_mtime_ns for p in folder.glob("cases/*/*")}
    assert run_command(["run", "first-study", "--output", str(folder), *SMALL]) == 0
    assert "0 cases done, 8 were finished before" in capsys.readouterr().out
    assert before == {p: p.stat().st_mtime_ns for p in folder.glob("cases/*/*")}


def test_schema_accepts_the_ready_studies(capsys):
    import tomllib

    assert run_command(["schema"]) == 0
    schema = json.loads(capsys.readouterr().out)
    for file in CONFIGS.glob("*.toml"):
        values = tomllib.loads(file.read_text())
        if file.stem == "volume-study":
            values["reference"]["image"] = "volume.nii.gz"
        jsonschema.validate(values, schema)
    values = tomllib.loads((CONFIGS / "first-study.toml").read_text())
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(values | {"sampling": {"pattern": "circles"}}, schema)


def test_list_names_everything(capsys):
    assert run_command(["list"]) == 0
    listed = capsys.readouterr().out
    for name in (
        "variable-density-points",
        "line-pair-slab",
        "wavelet-sparse",
        "ssim_overall",
        "penalise_coarsest",
    ):
        assert name in listed


@pytest.mark.parametrize("command", ["run", "check", "phantom", "mask", "recon", "compare", "list", "schema"])
def test_help_has_an_example(command, capsys):
    assert run_command([command, "--help"]) == 0
    assert "Example: skipline " + command in " ".join(capsys.readouterr().out.split())


@pytest.mark.parametrize(
    ("overrides", "message"),
    [
        (["sampling.aceleration=2"], 'did you mean "acceleration"'),
        (["sampling.acceleration=fast"], "expected a number"),
        (["sampling.acceleration=0.5"], "at least 1"),
        (["sampling.acceleration=100"], "at most"),
        (["sampling.calibration=100"], "calibration"),
        (["reference.phantom=line-pair-slb"], 'did you mean "line-pair-slab"'),
        (["sampling.pattern=regular"], "regular-lines"),
        (["reconstruction.1.wavelet=db44"], "did you mean 'db4"),
        (["reconstruction.1.weight=-1"], "at least 0"),
        (["limits.nrms.at_most=1"], 'did you mean "nrmse"'),
        (["acquisition.snr=-3"], "more than 0"),
    ],
)
@pytest.mark.parametrize("command", ["check", "run"])
def test_a_study_that_cannot_be_run(refused, tmp_path, command, overrides, message):
    where = ["--output", tmp_path / "out"] if command == "run" else []
    settings = [part for override in overrides for part in ("--set", override)]
    assert message in refused(command, "first-study", *where, *SMALL, *settings)
    assert list(tmp_path.iterdir()) == []


def test_studies_and_files_that_are_not_there(refused, tmp_path):
    assert "the ready ones are: first-study" in refused("run", "first")
    assert "no such study file" in refused("check", tmp_path / "none.toml")
    (tmp_path / "broken.toml").write_text("[study\n")
    assert "broken.toml, line 1" in refused("check", tmp_path / "broken.toml")
    assert "reference" in refused("run", "volume-study", "--output", tmp_path / "out")
    missing = tmp_path / "none.nii.gz"
    assert "does not exist" in refused("run", "volume-study", "--set", f"reference.image={missing}")
    assert not (tmp_path / "out").exists()


def test_files_that_cannot_be_used(refused, scan, tmp_path):
    out = tmp_path / "out.nii.gz"
    recon = ["recon", scan["kspace"], scan["mask"], "--output", out]
    assert "no coil maps" in refused(*recon)
    assert "expected complex" in refused("recon", scan["mask"], scan["mask"], "--output", out)
    affine = np.eye(4)
    for name, data, message in (
        ("empty", np.zeros((64, 48, 1), bool), "mask is empty"),
        ("small", np.ones((32, 48, 1), bool), "expected the same grid"),
    ):
        write_volume(tmp_path / f"{name}.nii", data, affine, content="mask")
        line = ["recon", scan["kspace"], tmp_path / f"{name}.nii", "--maps", scan["maps"], "--output", out]
        assert message in refused(*line)
    truncated = tmp_path / "truncated.nii.gz"
    truncated.write_bytes(scan["kspace"].read_bytes()[:2000])
    assert "truncated" in refused("recon", truncated, scan["mask"], "--output", out)
    text = tmp_path / "text.nii"
    text.write_text("not an image")
    assert "not NIfTI" in refused("compare", text, scan["image"])
    bad = np.ones((64, 48, 1), np.float32)
    bad[3, 3] = np.nan
    nib.save(nib.Nifti1Image(bad, affine), tmp_path / "nan.nii")
    assert "NaN" in refused("compare", tmp_path / "nan.nii", scan["image"])
    nib.save(nib.Nifti1Image(np.zeros_like(bad), affine), tmp_path / "zero.nii")
    assert "zero everywhere" in refused("compare", tmp_path / "zero.nii", scan["image"])
    assert "different places" in refused("compare", scan["image"], tmp_path / "zero.nii")
    option = ["--maps", scan["maps"], "--option", "weigth=2"]
    assert 'did you mean "weight"' in refused(*recon, *option)
    assert not out.exists()


def test_folders_that_cannot_be_used(refused, tmp_path):
    assert run_command(["run", "first-study", "--output", str(tmp_path / "a"), *SMALL]) == 0
    assert "another study" in refused("run", "multi-coil-study", "--output", tmp_path / "a")
    (tmp_path / "file").write_text("")
    assert str(tmp_path / "file") in refused("run", "first-study", "--output", tmp_path / "file" / "b")


def test_a_two_dimensional_multi_slice_scan(tmp_path):
    """A file with a plane of k-space for each slice must not be transformed along z."""
    rng = np.random.default_rng(0)
    truth = np.zeros((32, 24, 3), np.complex64)
    truth[8:24, 6:18] = [1, 2, 3]
    planes = to_kspace(truth, (0, 1)).astype(np.complex64)
    lines = np.broadcast_to(rng.random((1, 24, 1)) < 2, truth.shape)
    write_volume(tmp_path / "mask.nii", lines, np.eye(4), content="mask")
    for name, sidecar, option in (("a", {"EncodedAxes": "xy"}, []), ("b", {}, ["--encoded-axes", "xy"])):
        write_volume(tmp_path / f"{name}.nii", planes, np.eye(4), content="k-space", sidecar=sidecar)
        out = tmp_path / f"{name}-image.nii"
        line = ["recon", tmp_path / f"{name}.nii", tmp_path / "mask.nii", "--output", out, *option]
        for method in ("zero-filled", "wavelet-sparse"):
            assert run_command([*map(str, line), "--method", method, "--sigma", "0"]) == 0
            np.testing.assert_allclose(read_volume(out).data, truth, atol=1e-4)


def test_no_command_overwrites_what_it_reads_or_writes_one_file_twice(refused, scan, tmp_path):
    before = {path: path.read_bytes() for path in tmp_path.iterdir()}
    image, new = scan["image"], tmp_path / "new.nii"
    recon = ["recon", scan["kspace"], scan["mask"], "--maps", scan["maps"], "--output"]
    mask = ["mask", "variable-density-lines", "--acceleration", 2]
    phantom = ["phantom", "shepp-logan", "--matrix", "64,48", "--output", new]
    for path in (scan["kspace"], scan["mask"], scan["maps"], str(scan["maps"]).removesuffix(".gz")):
        assert "expected another name" in refused(*recon, path)
    for path in (image, str(image).removesuffix(".gz")):
        assert "expected another name" in refused(*mask, "--like", image, "--output", path)
        assert "expected another name" in refused("compare", image, scan["mask"], "--error", path)
    law = tmp_path / "law.tsv"
    law.write_text("".join("1\n" for _ in range(48)))
    before[law] = law.read_bytes()
    line = [*mask, "--like", image, "--output", new, "--option", f"law={law}", "--table", law]
    assert "is one of the inputs" in refused(*line)
    for option, path in (("--kspace", new), ("--kspace", f"{new}.gz"), ("--maps", new)):
        assert "expected another name" in refused(*phantom, "--coils", 2, option, path)
    for path in (tmp_path / "none" / "k.nii", tmp_path / "mask.nii.gz" / "k.nii"):
        assert "cannot be written" in refused(*phantom, "--kspace", path)
    assert {path: path.read_bytes() for path in tmp_path.iterdir()} == before


def test_recon_doubts_a_wrong_mask(refused, scan, tmp_path, capsys):
    line = ["recon", scan["kspace"], scan["mask"], "--maps", scan["maps"], "--method", "zero-filled"]
    source = read_volume(scan["kspace"])
    sampled = read_volume(scan["mask"]).data != 0
    write_volume(scan["kspace"], source.data * sampled, source.affine, content="k-space")
    write_volume(tmp_path / "other.nii", ~sampled, source.affine, content="mask")
    line[2] = tmp_path / "other.nii"
    assert run_command([*map(str, line), "--output", str(tmp_path / "o.nii")]) == 0
    err = capsys.readouterr().err
    assert "hold exactly zero" in err
    assert "outside the mask" in err


def test_a_mask_of_each_slice_its_own_is_not_one_of_k_space(refused, tmp_path):
    planes = to_kspace(np.ones((32, 24, 3), np.complex64), (0, 1)).astype(np.complex64)
    each = np.random.default_rng(0).random((1, 24, 3)) < 0.5
    write_volume(tmp_path / "k.nii", planes, np.eye(4), content="k-space", sidecar={"EncodedAxes": "xy"})
    write_volume(tmp_path / "m.nii", np.broadcast_to(each, planes.shape), np.eye(4), content="mask")
    line = ["recon", tmp_path / "k.nii", tmp_path / "m.nii", "--sigma", 0, "--output", tmp_path / "o.nii"]
    said = refused(*line)
    assert "differs along z" in said
    assert "expected the same mask for every slice" in said
    assert not (tmp_path / "o.nii").exists()
    assert run_command([*map(str, line), "--encoded-axes", "xyz", "--method", "zero-filled"]) == 0


@pytest.mark.parametrize("unit", ["mm", "meter", "micron"])
def test_places_are_compared_in_voxels_whatever_the_unit(refused, tmp_path, unit, capsys):
    scale = {"mm": 1, "meter": 1e-3, "micron": 1e3}[unit]
    data = np.random.default_rng(0).random((16, 16, 16)).astype(np.float32)
    write_volume(tmp_path / "a.nii", data, np.diag([2, 2, 2, 1]), content="image")
    for name, voxels in (("same", 0.001), ("moved", 0.1)):
        affine = np.diag([2.0, 2, 2, 1])
        affine[0, 3] = 2 * voxels
        affine[:3] *= scale
        image = nib.Nifti1Image(data, affine)
        image.header.set_xyzt_units(unit)
        nib.save(image, tmp_path / f"{name}.nii")
    for one, other in (("a", "same"), ("same", "a"), ("same", "same")):
        assert run_command(["compare", str(tmp_path / f"{one}.nii"), str(tmp_path / f"{other}.nii")]) == 0
    for one, other in (("a", "moved"), ("moved", "a"), ("same", "moved")):
        assert "different places" in refused("compare", tmp_path / f"{one}.nii", tmp_path / f"{other}.nii")


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ("phantom shepp-logan --output {} --matrix 4,4", "--matrix: must be at least 16, not 4"),
        ("phantom shepp-logan --output {} --matrix 32,9000", "--matrix: must be at most 8192, not 9000"),
        ("phantom shepp-logan --output {} --coils 300", "--coils: must be at most 128, not 300"),
        (
            "mask variable-density-lines --matrix 64,64,1 --output {} --acceleration 0.5",
            "--acceleration: must be at least 1, not 0.5",
        ),
        ("check first-study --set study.²=1", "--set study.²: is not a key here"),
    ],
)
def test_values_out_of_bounds_are_told_by_their_option(refused, tmp_path, line, message):
    assert message in refused(*line.format(tmp_path / "o.nii").split())
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("axes", ["yx", "a", "yy", ""])
def test_phase_encode_axes_that_do_not_exist(refused, scan, tmp_path, axes):
    line = ["mask", "variable-density-points", "--output", tmp_path / "m.nii", "--like", scan["image"]]
    assert "expected one of: x, y, z, xy, xz, yz" in refused(
        *line, "--acceleration", 4, "--phase-encode", axes
    )


def test_warnings_of_a_study(capsys, tmp_path):
    line = ["--set", "reference.field_of_view_mm=[240, 150]", *SMALL]
    assert run_command(["check", "first-study", *line]) == 0
    assert "it may fold" in capsys.readouterr().err
    line = [
        "--output",
        str(tmp_path / "o"),
        *SMALL,
        "--set",
        "sampling.draws=3",
        "--set",
        "limits.nrmse.at_most=0.0525",
    ]
    assert run_command(["run", "first-study", *line]) == 0
    captured = capsys.readouterr()
    assert "of those tried (2, 3)" in captured.out
    assert "variable-density-lines and zero-filled: R = none" in captured.out
    assert "take more draws" in captured.err


def test_usage_errors_are_one_line(refused):
    assert "did you mean" in refused("runn").lower()
    assert "--outptu" in refused("run", "first-study", "--outptu", "x")


def test_ctrl_c_is_told_in_one_line(tmp_path):
    """A real process, a real signal; what is kept, and that the rest follows, test_study_run.py tells."""
    folder = tmp_path / "out"
    command = [
        sys.executable, "-c", "from skipline.recon.cli import main; main()", "run", "first-study",
        "--output", str(folder), "--set", "reference.matrix=[128, 128]", "--workers", "2",
    ]  # fmt: skip
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    deadline = time.monotonic() + 60
    while not list(folder.glob("cases/*/case.json")) and time.monotonic() < deadline:
        time.sleep(0.05)
    os.kill(process.pid, signal.SIGINT)
    _, err = process.communicate(timeout=60)
    assert process.returncode == 1
    assert err.count("\n") == 1
    assert "cases are finished and kept" in err
    assert not list(folder.rglob(".skipline-*.part"))


def test_a_mask_for_the_sequence(tmp_path, capsys):
    """NIfTI, table, picture; judged again from both files with the same words."""
    files = {name: tmp_path / name for name in ("mask.nii.gz", "order.tsv", "mask.png")}
    line = (
        f"mask poisson-disc --matrix 1,64,48 --phase-encode yz --acceleration 6 --constraint calibration=8 "
        f"--constraint train_length=16 --order centre-out --effective-echo 3 --output {files['mask.nii.gz']} "
        f"--table {files['order.tsv']} --figure {files['mask.png']} --best-of 3"
    )
    assert run_command(line.split()) == 0
    words = capsys.readouterr().out.splitlines()
    assert words[0] == "512 of 3072 samples, acceleration 6"
    assert words[-1].startswith("32 echo trains of 16, effective echo 3")
    sidecar = json.loads((tmp_path / "mask.json").read_text())
    assert sidecar["Judgement"]["samples"] == 512
    assert sidecar["PhaseEncodingDirection"] == "j"
    assert "not for diagnosis" in json.loads((tmp_path / "order.json").read_text())["Caution"]
    assert files["mask.png"].read_bytes()[:4] == b"\x89PNG"
    for name in ("mask.nii.gz", "order.tsv"):
        assert run_command(["mask", "--judge", str(files[name])]) == 0
        assert capsys.readouterr().out.splitlines() == words[:-1]


def test_masks_that_cannot_be_made(refused, tmp_path):
    line = ["mask", "variable-density-lines", "--matrix", "64,64,1", "--output", tmp_path / "m.nii"]
    lines = [*line, "--acceleration", 4]
    gap = refused(*lines, "--constraint", "largest_gap=3")
    assert "largest_gap 3 takes" in gap
    assert "at most R = " in gap
    assert 'did you mean "largest_gap"' in refused(*lines, "--constraint", "largst_gap=3")
    assert "either --like FILE or --matrix" in refused(*line[:2], *line[4:], "--acceleration", 4)
    assert "expected 3 numbers" in refused(*lines[:3], "64", *lines[4:])
    assert "m.tsv is that of --output" in refused(*lines, "--table", tmp_path / "m.tsv")
    assert "a pattern, --output and --acceleration" in refused("mask")
    assert "writes no mask" in refused("mask", "--judge", tmp_path / "t.tsv", "--output", tmp_path / "m.nii")
    table = tmp_path / "t.tsv"
    table.write_text("ky\n1\n1\n")
    (tmp_path / "t.json").write_text('{"GridShape": [8]}')
    assert "line 3" in refused("mask", "--judge", table)
    law = tmp_path / "law.txt"
    law.write_text("1\n-1\n")
    assert "law" in refused(*lines, "--option", f"law={law}")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["law.txt", "t.json", "t.tsv"]


def test_constraints_are_sweep_axes_and_a_law_file_counts_by_its_content(tmp_path, capsys):
    study = tmp_path / "study.toml"
    study.write_text((CONFIGS / "first-study.toml").read_text().replace("power = 2.0", 'law = "law.txt"'))
    np.savetxt(tmp_path / "law.txt", 1.0 / (1 + np.abs(np.arange(64) - 32)))
    line = [
        "--set",
        'sampling.pattern="variable-density-lines"',
        "--set",
        "sampling.partial_fourier=[0.75, 1.0]",
    ]
    line = [str(study), *SMALL, *line, "--set", "sampling.acceleration=2", "--output", str(tmp_path / "out")]
    assert run_command(["run", *line]) == 0
    assert "4 cases done" in capsys.readouterr().out
    assert run_command(["run", *line]) == 0
    assert "0 cases done, 4 were finished before" in capsys.readouterr().out
    np.savetxt(tmp_path / "law.txt", 1.0 / (2 + np.abs(np.arange(64) - 32)))
    assert run_command(["run", *line]) == 0
    assert "4 cases done" in capsys.readouterr().out
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(tmp_path)
        assert run_command(["check", str(study), *SMALL, "--set", "sampling.largest_gap=1"]) == 2
    assert "largest_gap" in capsys.readouterr().err
