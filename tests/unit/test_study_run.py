import csv
import json
import os
import platform
import signal
import subprocess
import sys
import time
from typing import Any

import nibabel as nib
import numpy as np
import pytest

from skipline import CAUTION, InputError
from skipline.recon.study import estimate, load_study, run, runner
from skipline.recon.study.evaluate import evaluate, prepared_for
from skipline.recon.study.references import prepare

STUDY = """\
[study]
title = "Slab"
seed = 7

[reference]
phantom = "line-pair-slab"
matrix = [64, 48]

[acquisition]
snr = 30.0

[sampling]
pattern = "variable-density-lines"
acceleration = [2.0, 4.0]
calibration = 8

[[reconstruction]]
method = "zero-filled"

[[reconstruction]]
method = "wavelet-sparse"

[limits]
nrmse = { at_most = 0.5 }
"""


@pytest.fixture
def study_file(tmp_path):
    path = tmp_path / "slab.toml"
    path.write_text(STUDY)
    return path


def nifti(path) -> Any:
    return nib.load(path)


def rows(path):
    return list(csv.DictReader(path.read_text().splitlines()))


def files(folder):
    return {
        str(path.relative_to(folder)): path.stat().st_mtime_ns for path in folder.rglob("*") if path.is_file()
    }


def test_a_run_and_the_next(study_file, tmp_path):
    folder = tmp_path / "results"
    study = load_study(study_file)
    outcome = run(study, folder, workers=1, progress=False)
    assert (outcome.done, outcome.skipped, outcome.failed) == (4, 0, ())
    assert {item.name for item in folder.iterdir()} == {
        "study.toml",
        "verdict.json",
        "cases.csv",
        "summary.csv",
        "cases",
        "reference.nii.gz",
        "reference.json",
    }
    for case in study.cases():
        assert {item.name for item in (folder / "cases" / case.id).iterdir()} == {
            "case.json",
            "image.nii.gz",
            "image.json",
            "error.nii.gz",
            "error.json",
            "mask.nii.gz",
            "mask.json",
        }
    table = rows(folder / "cases.csv")
    assert [row["id"] for row in table] == [case.id for case in study.cases()]
    summary = rows(folder / "summary.csv")
    assert [row["nrmse_mean"] for row in summary] == [row["nrmse"] for row in table]
    assert {row["nrmse_n"] for row in summary} == {"1"}
    record = json.loads((folder / "cases" / study.cases()[0].id / "case.json").read_text())
    assert record["machine"].startswith(f"{platform.system()} {platform.machine()}, ")
    verdict = json.loads((folder / "verdict.json").read_text())
    assert verdict == outcome.verdict
    assert verdict["caution"] == CAUTION

    before = files(folder / "cases")
    again = run(study, folder, workers=1, progress=False)
    assert (again.done, again.skipped) == (0, 4)
    assert files(folder / "cases") == before, "no finished case is touched"
    assert again.verdict == outcome.verdict

    more = run(load_study(study_file, ["sampling.acceleration=[2, 3]"]), folder, workers=1, progress=False)
    assert (more.done, more.skipped) == (2, 2)
    assert {row["acceleration"] for row in rows(folder / "cases.csv")} == {"2", "3"}, (
        "a case of before is not ours"
    )

    missing = folder / "cases" / study.cases()[0].id / "case.json"
    missing.unlink()
    assert run(study, folder, workers=1, progress=False).done == 1


def test_the_study_as_it_was_run_gives_the_same_cases(study_file, tmp_path):
    study = load_study(study_file, ["sampling.draws=2", "reconstruction.0.method=zero-filled"])
    run(load_study(study_file, ["sampling.acceleration=2"]), tmp_path / "results", workers=1, progress=False)
    run(study, tmp_path / "results", workers=1, progress=False)
    again = load_study(tmp_path / "results" / "study.toml")
    assert [case.id for case in again.cases()] == [case.id for case in study.cases()]


def test_volumes_lie_where_the_reference_lies(study_file, tmp_path):
    affine = np.array([[0, -2, 0, 10], [1.5, 0, 0, -20], [0, 0, 3, 5], [0, 0, 0, 1.0]])
    rng = np.random.default_rng(2)
    data = (rng.random((24, 32, 5)) + 1j * rng.random((24, 32, 5))).astype(np.complex64)
    image = nib.Nifti1Image(data, affine)
    image.header.set_xyzt_units("mm", "sec")
    nib.save(image, tmp_path / "scan.nii.gz")
    overrides = [
        f"reference.image={tmp_path / 'scan.nii.gz'}",
        "sampling.acceleration=2",
        "reference.slices=[1, 3]",
    ]
    study_file.write_text(STUDY.replace('phantom = "line-pair-slab"\nmatrix = [64, 48]\n', ""))
    study = load_study(study_file, overrides)
    run(study, tmp_path / "results", workers=1, progress=False)
    shifted = affine.copy()
    shifted[:3, 3] += affine[:3, 2]
    for case in study.cases():
        for name in ("image", "error", "mask"):
            written = nifti(tmp_path / "results" / "cases" / case.id / f"{name}.nii.gz")
            np.testing.assert_allclose(written.affine, shifted, atol=1e-5)
            assert written.header.get_zooms()[:3] == pytest.approx((1.5, 2, 3))
            assert written.shape == (24, 32, 3)
    reference = np.asanyarray(nifti(tmp_path / "results" / "reference.nii.gz").dataobj)
    np.testing.assert_allclose(reference, data[:, :, 1:4], atol=1e-6)


def test_the_phantom_is_centred(study_file, tmp_path):
    run(load_study(study_file, ["sampling.acceleration=2"]), tmp_path / "results", workers=1, progress=False)
    affine = nifti(tmp_path / "results" / "reference.nii.gz").affine
    np.testing.assert_allclose(affine @ [32, 24, 0, 1], [0, 0, 0, 1], atol=1e-6)


@pytest.mark.parametrize("coils", [1, 4])
def test_full_sampling_without_noise_gives_the_reference(study_file, coils):
    study = load_study(
        study_file,
        [
            "sampling.acceleration=1",
            "acquisition.snr=inf",
            f"acquisition.coils={coils}",
            'reconstruction.1.solver=["fista", "admm"]',
        ],
    )
    for case in study.cases():
        assert evaluate(case).record["measures"]["nrmse_overall"] < 1e-5


def test_without_noise_undersampled_data_are_regularised_still(study_file):
    """A weight in units of sigma is no weight when sigma is 0; so the method estimates the level itself."""
    overrides = ["sampling.acceleration=2", "acquisition.snr=inf", "reference.matrix=[192, 192]"]
    zero, sparse = (evaluate(case).record for case in load_study(study_file, overrides).cases())
    assert sparse["measures"]["ssim"] > zero["measures"]["ssim"] + 0.03
    assert sparse["convergence"]["sigma_source"] != "given"


def test_the_snr_is_that_of_the_combined_image(study_file, tmp_path):
    """Of the fully sampled image of a case, one coil or many, given maps of any scale."""
    nib.save(
        nib.Nifti1Image(np.full((64, 48, 1, 1, 2), 3j, np.complex64), np.eye(4)), tmp_path / "maps.nii.gz"
    )
    for array in ("coils=1", "coils=6", f"maps={tmp_path / 'maps.nii.gz'}"):
        overrides = ["sampling.acceleration=1", f"acquisition.{array}", "acquisition.snr=20"]
        case = load_study(study_file, overrides).cases()[0]
        prepared = prepared_for(case)
        noise = (evaluate(case).image - prepared.image)[prepared.support]
        measured = np.abs(prepared.image[prepared.support]).mean() / np.real(noise).std()
        assert measured == pytest.approx(20, rel=0.1), array


def test_given_maps(study_file, tmp_path):
    shape = (64, 48, 1, 1, 2)
    maps = np.empty(shape, np.complex64)
    maps[..., 0] = np.linspace(0.5, 3, 48)[None, :, None, None]
    maps[..., 1] = 2j
    nib.save(nib.Nifti1Image(maps, np.eye(4)), tmp_path / "maps.nii.gz")
    overrides = [
        f"acquisition.maps={tmp_path / 'maps.nii.gz'}",
        "acquisition.snr=inf",
        "sampling.acceleration=1",
    ]
    case = load_study(study_file, overrides).cases()[0]
    assert case.settings["coils"] == 2
    one = load_study(study_file, ["acquisition.snr=inf", "sampling.acceleration=1"]).cases()[0]
    np.testing.assert_allclose(evaluate(case).image, evaluate(one).image, atol=1e-5)
    with pytest.raises(
        InputError, match=r"--set acquisition.maps: the coil maps are 64 x 48 x 1 and the reference"
    ):
        load_study(study_file, [*overrides, "reference.matrix=[64, 64]"])
    with pytest.raises(InputError, match="the coil maps are for 2 coils, but coils = 3"):
        load_study(study_file, [*overrides, "acquisition.coils=3"])


def test_kspace_as_reference(study_file, tmp_path):
    case = load_study(study_file).cases()[0]
    kspace = prepare(case.reference, 1, None).kspace[0]
    nib.save(nib.Nifti1Image(kspace, np.diag([2, 2, 5, 1])), tmp_path / "k.nii.gz")
    text = STUDY.replace('phantom = "line-pair-slab"\nmatrix = [64, 48]', 'kspace = "k.nii.gz"')
    study_file.write_text(text)
    other = load_study(study_file).cases()[0]
    np.testing.assert_allclose(evaluate(other).image, evaluate(case).image, atol=1e-5)


def test_masks_and_noise_are_paired(study_file):
    cases = load_study(study_file, ["sampling.acceleration=2", "sampling.draws=2"]).cases()
    masks = {(case.settings["method"], case.draw): evaluate(case).mask for case in cases}
    for draw in (0, 1):
        np.testing.assert_array_equal(masks["zero-filled", draw], masks["wavelet-sparse", draw])
    assert (masks["zero-filled", 0] != masks["zero-filled", 1]).any()


def test_a_failing_case_stops_no_other(study_file, tmp_path, monkeypatch):
    study = load_study(study_file)
    bad = study.cases()[1].id

    def fail(case, threads):
        if case.id == bad:
            raise ValueError("the matrix\nis singular")
        return evaluate(case, threads)

    monkeypatch.setattr(runner, "evaluate", fail)
    outcome = run(study, tmp_path / "results", workers=1, progress=False)
    assert (outcome.done, [failure.case.id for failure in outcome.failed]) == (3, [bad])
    assert not (tmp_path / "results" / "cases" / bad).exists()
    row = next(row for row in rows(tmp_path / "results" / "cases.csv") if row["id"] == bad)
    assert row["error"] == "ValueError: the matrix is singular"
    assert outcome.verdict["failed"][0]["id"] == bad
    monkeypatch.undo()
    assert run(study, tmp_path / "results", workers=1, progress=False).done == 1


def test_a_full_disk_leaves_no_half_of_a_case(study_file, tmp_path, monkeypatch):
    def full(path, content):
        raise InputError(f"{path} cannot be written (No space left on device)")

    monkeypatch.setattr(runner.results, "write_json", full)
    outcome = run(
        load_study(study_file, ["sampling.acceleration=2"]), tmp_path / "results", 1, progress=False
    )
    assert all("No space left" in failure.message for failure in outcome.failed)
    assert len(outcome.failed) == 2
    assert not list((tmp_path / "results" / "cases").iterdir())


def test_ctrl_c_in_this_process(study_file, tmp_path, monkeypatch):
    study = load_study(study_file)
    cases = study.cases()
    real = runner.results.write_case

    def interrupted(folder, case, prepared, evaluated):
        real(folder, case, prepared, evaluated)
        if case.id == cases[2].id:
            (folder / "cases" / case.id / "case.json").unlink()
            raise KeyboardInterrupt

    monkeypatch.setattr(runner.results, "write_case", interrupted)
    with pytest.raises(KeyboardInterrupt, match="2 of 4 cases are finished and kept"):
        run(study, tmp_path / "results", workers=1, progress=False)
    assert {item.name for item in (tmp_path / "results" / "cases").iterdir()} == {
        case.id for case in cases[:2]
    }


def test_folders_that_are_refused(study_file, tmp_path):
    study = load_study(study_file, ["sampling.acceleration=2"])
    run(study, tmp_path / "results", workers=1, progress=False)
    before = files(tmp_path / "results")
    for overrides, other in [
        (["study.title=Other"], 'another study, "Slab"'),
        (["study.seed=8"], "with seed 7"),
        (["reference.matrix=[64, 64]"], "of another reference"),
    ]:
        with pytest.raises(InputError, match=other):
            run(load_study(study_file, overrides), tmp_path / "results", workers=1, progress=False)
    assert files(tmp_path / "results") == before
    (tmp_path / "photos").mkdir()
    (tmp_path / "photos" / "cat.png").write_text("meow")
    with pytest.raises(InputError, match="holds other files and no study"):
        run(study, tmp_path / "photos", workers=1, progress=False)
    with pytest.raises(InputError, match="is a file"):
        run(study, study_file, workers=1, progress=False)
    with pytest.raises(InputError, match="cannot be written to"):
        run(study, "/proc/results", workers=1, progress=False)
    with pytest.raises(InputError, match="workers must be at least 1"):
        run(study, tmp_path / "new", workers=0, progress=False)
    assert not (tmp_path / "new").exists()


def test_a_reference_more(study_file, tmp_path):
    folder = tmp_path / "results"
    one = load_study(study_file, ["sampling.acceleration=2"])
    run(one, folder, workers=1, progress=False)
    two = load_study(study_file, ["sampling.acceleration=2", "reference.matrix=[[64, 48], [32, 48]]"])
    outcome = run(two, folder, workers=1, progress=False)
    assert (outcome.done, outcome.skipped) == (2, 2)
    last = two.cases()[-1]
    assert nifti(folder / f"reference-{last.reference_id}.nii.gz").shape == (32, 48, 1)
    assert nifti(folder / "reference.nii.gz").shape == (64, 48, 1)


def test_an_estimate_grows_with_the_study(study_file):
    small = estimate(load_study(study_file), workers=2)
    large = estimate(load_study(study_file, ["sampling.draws=10", "acquisition.coils=8"]), workers=2)
    assert (small.cases, large.cases) == (4, 40)
    assert small.seconds < large.seconds
    assert small.memory_bytes < large.memory_bytes
    assert small.disk_bytes < large.disk_bytes


SCRIPT = """
import sys
from skipline.recon.study import load_study, run

if __name__ == "__main__":
    try:
        outcome = run(load_study(sys.argv[1], sys.argv[3:]), sys.argv[2], workers=2, progress=False)
    except KeyboardInterrupt as stop:
        sys.exit(f"130 {stop}")
    print(outcome.done, outcome.skipped, len(outcome.failed))
"""


def test_processes_and_ctrl_c(study_file, tmp_path):
    """Two workers give what one gives; Ctrl-C leaves finished cases and nothing else; the rest follows."""
    (tmp_path / "script.py").write_text(SCRIPT)
    overrides = ["sampling.draws=10", "reference.matrix=[96, 96]"]
    command = [sys.executable, "script.py", "slab.toml", "results", *overrides]
    process = subprocess.Popen(
        command, cwd=tmp_path, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    cases = tmp_path / "results" / "cases"
    end = time.monotonic() + 60
    while time.monotonic() < end and process.poll() is None and len(list(cases.glob("*/case.json"))) < 4:
        time.sleep(0.01)
    process.send_signal(signal.SIGINT)
    time.sleep(0.05)
    process.send_signal(signal.SIGINT)  # the impatient press it twice
    _, stderr = process.communicate(timeout=30)
    assert stderr.startswith("130 stopped; "), stderr
    assert "Traceback" not in stderr
    finished = list(cases.glob("*/case.json"))
    assert 4 <= len(finished) < 40
    assert len(list(cases.iterdir())) == len(finished), "only finished cases are left"
    assert all(len(list(case.parent.iterdir())) == 7 for case in finished)

    done = subprocess.run(command, cwd=tmp_path, capture_output=True, text=True, timeout=60)
    assert done.stdout.split() == [str(40 - len(finished)), str(len(finished)), "0"], done.stderr
    assert not done.stderr

    study = load_study(study_file, overrides)
    for case in study.cases()[:2]:
        here = evaluate(case, threads=2)
        there = np.asanyarray(nifti(cases / case.id / "image.nii.gz").dataobj)
        np.testing.assert_array_equal(here.image, there)


def test_a_file_that_is_overwritten_between_two_runs(study_file, tmp_path):
    study_file.write_text(STUDY.replace('phantom = "line-pair-slab"\nmatrix = [64, 48]', 'image = "a.nii"'))
    overrides = ["acquisition.snr=inf", "sampling.acceleration=1", "sampling.calibration=0"]
    rng = np.random.default_rng(3)
    old, new = rng.random((2, 16, 16, 1)).astype(np.float32) + 1
    nib.save(nib.Nifti1Image(old, np.eye(4)), tmp_path / "a.nii")
    first = load_study(study_file, overrides).cases()[0]
    np.testing.assert_allclose(prepared_for(first).image, old, atol=1e-5)
    nib.save(nib.Nifti1Image(new, np.eye(4)), tmp_path / "a.nii")
    second = load_study(study_file, overrides).cases()[0]
    assert second.id != first.id
    np.testing.assert_allclose(prepared_for(second).image, new, atol=1e-5)
    np.testing.assert_allclose(evaluate(second).image, new, atol=1e-5)

    nib.save(nib.Nifti1Image(old + new, np.eye(4)), tmp_path / "a.nii")
    third = load_study(study_file, overrides)
    nib.save(nib.Nifti1Image(old, np.eye(4)), tmp_path / "a.nii")
    with pytest.raises(InputError, match="have changed since the study was read"):
        run(third, tmp_path / "results", workers=1, progress=False)


def test_maps_that_are_overwritten_between_two_runs(study_file, tmp_path):
    maps = [np.full((64, 48, 1, 1, coils), 1j, np.complex64) for coils in (2, 3)]
    found = []
    for one in maps:
        nib.save(nib.Nifti1Image(one, np.eye(4)), tmp_path / "maps.nii")
        case = load_study(study_file, [f"acquisition.maps={tmp_path / 'maps.nii'}"]).cases()[0]
        found.append((case.settings["coils"], len(prepared_for(case).kspace)))
    assert found == [(2, 2), (3, 3)]


def children(pid):
    """Return the workers of a process."""
    listed = subprocess.run(
        ["ps", "-A", "-ww", "-o", "pid=,ppid=,args="], capture_output=True, text=True
    ).stdout
    lines = [line.split(None, 2) for line in listed.splitlines()]
    return [int(own) for own, parent, args in lines if int(parent) == pid and "spawn_main" in args]


KILLED = """
import os, signal, sys, time
from skipline.recon.study import load_study, run, runner
from skipline.recon.study.evaluate import evaluate

def dies(case, threads):
    # the fatal case always, another one once: as when the system runs out of memory
    if (case.sampling.acceleration, case.draw) == (4.0, 1) or (case.draw == 2 and not os.path.exists("once")):
        if case.draw == 2:
            open("once", "w").close()
        os.kill(os.getpid(), signal.SIGKILL)
    return evaluate(case, threads)

runner.evaluate = dies

if __name__ == "__main__":
    outcome = run(load_study(sys.argv[1], ["sampling.draws=4"]), "results", workers=2, progress=False)
    print(outcome.done, [(f.case.sampling.acceleration, f.case.draw, f.message) for f in outcome.failed])
    print(outcome.verdict["sentence"])
"""


def test_a_killed_worker_takes_no_other_case_with_it(study_file, tmp_path):
    """A case that kills its worker whenever it runs fails; what was beside it, and what follows, is done."""
    (tmp_path / "script.py").write_text(KILLED)
    study_file.write_text(STUDY.replace('[[reconstruction]]\nmethod = "wavelet-sparse"\n\n', ""))
    command = [sys.executable, "script.py", "slab.toml"]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, text=True, timeout=90)
    first, sentence = done.stdout.splitlines()
    ended = "the worker process ended (killed, or out of memory)"
    assert first == f"7 {[(4.0, 1, ended)]}", done.stderr
    assert sentence.startswith("Not decided: 1 of 8 cases failed; R = 2 ")
    assert not done.stderr
    assert len(list((tmp_path / "results" / "cases").iterdir())) == 7


def test_kill_9_of_a_worker_from_outside(study_file, tmp_path):
    (tmp_path / "script.py").write_text(SCRIPT)
    overrides = ["sampling.draws=10", "reference.matrix=[96, 96]"]
    process = subprocess.Popen(
        [sys.executable, "script.py", "slab.toml", "results", *overrides],
        cwd=tmp_path, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    cases = tmp_path / "results" / "cases"
    end = time.monotonic() + 60
    while time.monotonic() < end and process.poll() is None and len(list(cases.glob("*/case.json"))) < 4:
        time.sleep(0.01)
    os.kill(children(process.pid)[0], signal.SIGKILL)
    stdout, stderr = process.communicate(timeout=90)
    assert stdout.split() == ["40", "0", "0"], stderr
    assert not stderr
    assert len(list(cases.glob("*/case.json"))) == 40


@pytest.mark.parametrize("delay", [0.0, 0.1, 0.3])
def test_ctrl_c_reaches_the_whole_group_while_workers_start(study_file, tmp_path, delay):
    (tmp_path / "script.py").write_text(SCRIPT)
    process = subprocess.Popen(
        [sys.executable, "script.py", "slab.toml", "results", "sampling.draws=10"],
        cwd=tmp_path, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True,
    )  # fmt: skip
    end = time.monotonic() + 60
    while time.monotonic() < end and process.poll() is None and not children(process.pid):
        time.sleep(0.005)
    time.sleep(delay)
    os.killpg(process.pid, signal.SIGINT)
    _, stderr = process.communicate(timeout=30)
    assert stderr.startswith("130 stopped; "), stderr
    assert len(stderr.splitlines()) == 1, "no worker says anything"
    cases = tmp_path / "results" / "cases"
    assert len(list(cases.iterdir())) == len(list(cases.glob("*/case.json"))), "only finished cases are left"
