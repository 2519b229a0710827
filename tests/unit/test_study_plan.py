import json
import tomllib
from pathlib import Path

import jsonschema
import numpy as np
import pytest

import skipline
from skipline import InputError
from skipline.recon.study import load_study, study_schema

CONFIGS = Path(skipline.__file__).parent / "configs"

STUDY = """\
[study]
title = "Slab"
seed = 7

[reference]
phantom = "line-pair-slab"
matrix = [64, 64]

[acquisition]
snr = 30.0

[sampling]
pattern = "variable-density-lines"
acceleration = [2.0, 4.0]
calibration = 8
draws = 3

[[reconstruction]]
method = "zero-filled"

[[reconstruction]]
method = "wavelet-sparse"
weight = 2.0

[limits]
nrmse = { at_most = 0.05 }
"""


@pytest.fixture
def study_file(tmp_path):
    path = tmp_path / "slab.toml"
    path.write_text(STUDY)
    return path


def refusal(path, *overrides):
    with pytest.raises(InputError) as error:
        load_study(path, overrides)
    message = str(error.value)
    assert "\n" not in message
    return message


def edited(path, old, new):
    assert old in STUDY
    path.write_text(STUDY.replace(old, new))
    return refusal(path).removeprefix(f"{path}")


def test_cases_are_all_combinations(study_file):
    cases = load_study(study_file).cases()
    assert len(cases) == 2 * 3 * 2
    assert len({case.id for case in cases}) == 12
    assert {case.settings["phase_encode"] for case in cases} == {"y"}


def test_a_value_more_changes_no_other_case(study_file):
    before = {case.id for case in load_study(study_file).cases()}
    more = [
        "sampling.acceleration=[2, 3, 4]",
        "sampling.draws=5",
        'reconstruction.1.solver=["fista", "admm"]',
    ]
    after = {case.id for case in load_study(study_file, more).cases()}
    assert len(after) == 3 * 5 * 3
    assert before < after


@pytest.mark.parametrize(
    "change",
    ["study.title=Other", "study.description=Long", "limits.ssim={at_least=0.5}", "sampling.phase_encode=y"],
)
def test_what_does_not_touch_the_result_does_not_touch_the_id(study_file, change):
    ids = [[case.id for case in load_study(study_file, overrides).cases()] for overrides in ([], [change])]
    assert ids[0] == ids[1]


@pytest.mark.parametrize(
    "change", ["study.seed=8", "acquisition.snr=31", "reference.matrix=[64, 66]", "sampling.power=3.5"]
)
def test_what_touches_the_result_touches_the_id(study_file, change):
    ids = [{case.id for case in load_study(study_file, overrides).cases()} for overrides in ([], [change])]
    assert not ids[0] & ids[1]


def test_no_noise_no_draws_of_it(study_file):
    assert (
        len(load_study(study_file, ["acquisition.snr=[30, inf]", "acquisition.noise_draws=2"]).cases()) == 36
    )
    assert "there is no noise to draw" in refusal(
        study_file, "acquisition.snr=inf", "acquisition.noise_draws=2"
    )


def test_options_go_to_the_patterns_that_have_them(study_file):
    patterns = 'sampling.pattern=["variable-density-lines", "regular-lines"]'
    cases = load_study(study_file, [patterns, "sampling.power=[1, 2]", "sampling.draws=1"]).cases()
    found = {(case.settings["pattern"], case.settings.get("power")) for case in cases}
    assert found == {("variable-density-lines", 1), ("variable-density-lines", 2), ("regular-lines", None)}


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("seed = 7", "sed = 7", ", line 1, [study] seed: is missing"),
        ("seed = 7", "seed = 7\nsed = 7", ', line 4, [study] sed: is not a key here; did you mean "seed"?'),
        (
            "acceleration = [2.0, 4.0]",
            "acceleration = [2.0, 0.5]",
            ", line 14, [sampling] acceleration: must be at least 1, not 0.5",
        ),
        (
            "acceleration = [2.0, 4.0]",
            "acceleration = []",
            ", line 14, [sampling] acceleration: an empty list leaves nothing",
        ),
        ("acceleration = [2.0, 4.0]", "acceleration = 9.0", ", line 14, [sampling] acceleration: "),
        ("calibration = 8", "calibration = 65", ", line 15, [sampling] calibration: "),
        (
            "calibration = 8",
            "calibraton = 8",
            ', line 15, [sampling] calibraton: is not a key here, nor an option of "variable-density-lines"; '
            'did you mean "calibration"?',
        ),
        ('"variable-density-lines"', '"variable-densty-lines"', ", line 13, [sampling] pattern: "),
        ('"line-pair-slab"', '"line-pair-slob"', ", line 6, [reference] phantom: "),
        (
            'phantom = "line-pair-slab"\nmatrix = [64, 64]\n',
            "",
            ", line 5, [reference]: needs a phantom, an image or kspace",
        ),
        (
            "[acquisition]",
            "[aquisition]",
            ', line 9, [aquisition]: is not a table of a study file; did you mean "acquisition"?',
        ),
        ('"wavelet-sparse"', '"wavelet-spars"', ", line 22, [[reconstruction]] number 2 method: "),
        (
            "weight = 2.0",
            "wieght = 2.0",
            ", line 23, [[reconstruction]] number 2 wieght: is not a key here, nor an option of "
            '"wavelet-sparse"; did you mean "weight"?',
        ),
        (
            "weight = 2.0",
            "weight = -1",
            ", line 23, [[reconstruction]] number 2 weight: must be at least 0, not -1",
        ),
        (
            "weight = 2.0",
            'weight = "2"',
            ', line 23, [[reconstruction]] number 2 weight: expected a number, not "2"',
        ),
        (
            "weight = 2.0",
            'solver = "fitsa"',
            ', line 23, [[reconstruction]] number 2 solver: "fitsa" is not a choice; did you mean "fista"?',
        ),
        ("weight = 2.0", 'wavelet = "db99"', ", line 23, [[reconstruction]] number 2 wavelet: "),
        ("weight = 2.0", "method = 1", ", line 23: not valid TOML: "),
        ("nrmse = {", "nrsme = {", ", line 26, [limits] nrsme: "),
        (
            "{ at_most = 0.05 }",
            "0.05",
            ", line 26, [limits] nrmse: expected { at_most = ... } or { at_least = ... }, not 0.05",
        ),
        (
            "{ at_most = 0.05 }",
            "{ at_most = true }",
            ", line 26, [limits] nrmse.at_most: expected a number, not true",
        ),
        (
            "{ at_most = 0.05 }",
            "{ at_least = 0.05 }",
            ", line 26, [limits] nrmse: nrmse is better when it is lower; expected at_most",
        ),
        (
            "[sampling]",
            "[[sampling]]",
            ", line 12, [[sampling]]: expected one table, [sampling] in single brackets",
        ),
        ("draws = 3", "draws = [3, 4]", ", line 16, [sampling] draws: expected a whole number, not [3, 4]"),
        (
            "draws = 3",
            'phase_encode = "xy"',
            ', line 16, [sampling] phase_encode: "xy" does not fit the pattern',
        ),
        ("snr = 30.0", "coils = 0", ", line 10, [acquisition] coils: must be at least 1, not 0"),
    ],
)
def test_refusals(study_file, old, new, message):
    found = edited(study_file, old, new)
    assert found.startswith(message)


def test_nearest_names_of_plug_ins(study_file):
    for old, nearest in [
        ("variable-density-lines", "variable-densty-lines"),
        ("line-pair-slab", "line-pair-slob"),
        ("wavelet-sparse", "wavelet-spars"),
        ("nrmse", "nrsme"),
    ]:
        assert old in edited(study_file, old, nearest).split("did you mean")[-1]


def test_missing_tables(study_file):
    study_file.write_text('[study]\ntitle = "Slab"\nseed = 7\n')
    assert refusal(study_file).endswith("the table [reference] is missing")
    study_file.write_text(STUDY.replace("[[reconstruction]]", "[reconstruction]", 1).split("[[")[0])
    assert refusal(study_file).endswith("expected [[reconstruction]], in double brackets: one a method")


def test_refused_overrides(study_file):
    assert refusal(study_file, "sampling.acceleration=0.5") == (
        "--set sampling.acceleration: must be at least 1, not 0.5"
    )


def test_images(study_file, tmp_path, monkeypatch):
    import nibabel as nib

    text = STUDY.replace('phantom = "line-pair-slab"\nmatrix = [64, 64]', 'image = "brain.nii.gz"')
    study_file.write_text(text)
    assert "line 6, [reference] image: " in refusal(study_file)
    data = np.random.default_rng(1).random((16, 32, 6)).astype(np.float32)
    nib.save(nib.Nifti1Image(data, np.eye(4)), tmp_path / "brain.nii.gz")
    case = load_study(study_file).cases()[0]
    assert case.settings["reference"] == "brain.nii.gz"

    nib.save(nib.Nifti1Image(data, np.eye(4)), tmp_path / "moved.nii.gz")
    (tmp_path / "moved.nii.gz").write_bytes((tmp_path / "brain.nii.gz").read_bytes())
    moved = load_study(study_file, [f"reference.image={tmp_path / 'moved.nii.gz'}"]).cases()[0]
    assert moved.id == case.id, "a file that is moved is the same file"
    nib.save(nib.Nifti1Image(2 * data, np.eye(4)), tmp_path / "moved.nii.gz")
    other = load_study(study_file, [f"reference.image={tmp_path / 'moved.nii.gz'}"]).cases()[0]
    assert other.id != case.id, "a file that is changed is another"
    assert other.reference_id != case.reference_id

    assert load_study(study_file, ["reference.slices=[2, 4]"]).cases()[0].id != case.id
    assert "outside the volume" in refusal(study_file, "reference.slices=[2, 6]")
    points = ["sampling.pattern=variable-density-points", "sampling.calibration=4", "sampling.acceleration=2"]
    assert load_study(study_file, points).cases()[0].settings["phase_encode"] == "yz"
    flat = [*points, "reference.slices=[2, 2]"]
    assert load_study(study_file, flat).cases()[0].settings["phase_encode"] == "xy"
    assert "along which the reference has one point" in refusal(study_file, *flat, "sampling.phase_encode=yz")


def test_encoded_axes_make_another_case(study_file, tmp_path):
    import nibabel as nib

    text = STUDY.replace('phantom = "line-pair-slab"\nmatrix = [64, 64]', 'kspace = "k.nii.gz"')
    study_file.write_text(text)
    data = np.random.default_rng(1).random((16, 32, 6)).astype(np.complex64)
    nib.save(nib.Nifti1Image(data, np.eye(4)), tmp_path / "k.nii.gz")
    both = ["sampling.acceleration=2", "sampling.draws=1", 'reference.encoded_axes=["xy", "xyz"]']
    cases = load_study(study_file, both).cases()
    assert [case.settings["encoded_axes"] for case in cases] == ["xy", "xy", "xyz", "xyz"]
    assert len({case.reference_id for case in cases}) == 2

    plain = load_study(study_file).cases()[0]
    assert plain.settings["encoded_axes"] == "xyz"
    assert load_study(study_file, ["reference.encoded_axes=xyz"]).cases()[0].id == plain.id
    (tmp_path / "k.json").write_text('{"EncodedAxes": "xy"}')
    told = load_study(study_file).cases()[0]
    assert told.settings["encoded_axes"] == "xy"
    assert told.id != plain.id
    (tmp_path / "k.json").write_text('{"EncodedAxes": ["x", "y"]}')
    assert "the encoded axes are ['x', 'y']; expected" in refusal(study_file)


def test_the_units_of_the_phase_make_another_case(study_file, tmp_path):
    import nibabel as nib

    text = STUDY.replace(
        'phantom = "line-pair-slab"\nmatrix = [64, 64]', 'image = "m.nii.gz"\nphase = "p.nii.gz"'
    )
    study_file.write_text(text)
    data = np.random.default_rng(1).integers(0, 4, (16, 32, 6)).astype(np.int16)
    for name in ("m", "p"):
        nib.save(nib.Nifti1Image(data, np.eye(4)), tmp_path / f"{name}.nii.gz")
    ids = set()
    for units in ("arbitrary", "rad"):
        (tmp_path / "p.json").write_text(json.dumps({"Units": units}))
        case = load_study(study_file).cases()[0]
        assert "phase sidecar" in dict(case.digests)
        ids |= {case.id, case.reference_id}
    assert len(ids) == 4


def test_slices_smaller_than_the_window_of_similarity(study_file, tmp_path):
    import nibabel as nib

    text = STUDY.replace('phantom = "line-pair-slab"\nmatrix = [64, 64]', 'image = "small.nii.gz"')
    study_file.write_text(text.replace("calibration = 8", "calibration = 4"))
    for side, refused in ((10, True), (11, False)):
        data = np.ones((side, 32, 3), np.float32)
        nib.save(nib.Nifti1Image(data, np.eye(4)), tmp_path / "small.nii.gz")
        if refused:
            assert refusal(study_file) == (
                f"{study_file}, line 6, [reference] image: "
                "slices are 10 x 32; similarity needs at least 11 x 11"
            )
        else:
            assert load_study(study_file).cases()


def test_the_ready_studies_are_valid(tmp_path):
    import nibabel as nib

    nib.save(nib.Nifti1Image(np.ones((32, 64, 64), np.float32), np.eye(4)), tmp_path / "volume.nii.gz")
    assert len(load_study(CONFIGS / "first-study.toml").cases()) > 10
    assert load_study(CONFIGS / "multi-coil-study.toml").cases()[0].settings["coils"] == 8
    assert "--set reference.image=" in refusal(CONFIGS / "volume-study.toml")
    volume = load_study(CONFIGS / "volume-study.toml", [f"reference.image={tmp_path / 'volume.nii.gz'}"])
    assert volume.cases()[0].settings["phase_encode"] == "yz"


def test_schema():
    schema = json.loads(json.dumps(study_schema(), allow_nan=False))
    validator = jsonschema.Draft202012Validator(schema)
    validator.check_schema(schema)
    for path in CONFIGS.glob("*.toml"):
        validator.validate(tomllib.loads(path.read_text()))
    study = tomllib.loads(STUDY)
    validator.validate(study)
    for table, key, value in [
        ("study", "sed", 1),
        ("sampling", "acceleration", [0.5]),
        ("sampling", "powr", 1),
        ("sampling", "calibration", [[1, 2, 3]]),
        ("reference", "matrix", [64, "64"]),
        ("reference", "phantom", "slob"),
        ("limits", "nrsme", {"at_most": 1}),
        ("limits", "nrmse", {"at_mots": 1}),
    ]:
        with pytest.raises(jsonschema.ValidationError):
            validator.validate({**study, table: {**study[table], key: value}})
    with pytest.raises(jsonschema.ValidationError):
        validator.validate({**study, "reconstruction": [{"method": "zero-filled", "weight": 1}]})
