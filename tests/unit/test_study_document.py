import tomllib
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from skipline import InputError
from skipline.recon.study.document import locate, parse, read_document, render

STUDY = '''# a study
[study]
title = "Slab"
description = """
seed = 3
[sampling]
"""
seed = 7

[sampling]
"acceleration" = [
    2.0, # not [x]
    4.0,
]
pattern . name = 1

[[reconstruction]]
method = "zero-filled"

[[reconstruction]] # the second
  method = "wavelet-sparse"
  weight = 2

[limits.nrmse]
at_most = 0.05
'''


def test_lines_of_keys():
    lines = locate(STUDY)
    assert lines["study", "title"] == 3
    assert lines["study", "seed"] == 8, "the text of a multi-line string is no key"
    assert lines["sampling",] == 10
    assert lines["sampling", "acceleration"] == 11
    assert lines["sampling", "pattern"] == lines["sampling", "pattern", "name"] == 15
    assert lines["reconstruction", 0, "method"] == 18
    assert lines["reconstruction", 1] == 20
    assert lines["reconstruction", 1, "weight"] == 22
    assert lines["limits", "nrmse", "at_most"] == 25


def test_refusal_says_file_line_table_and_key():
    document = parse(STUDY, Path("slab.toml"))
    assert str(document.refusal(("reconstruction", 1, "weight"), "no")) == (
        "slab.toml, line 22, [[reconstruction]] number 2 weight: no"
    )
    assert str(document.refusal(("study", "sed"), "no")) == "slab.toml, line 2, [study] sed: no"
    assert str(document.refusal(("acquisition", "snr"), "no")) == "slab.toml, [acquisition] snr: no"


def test_overrides():
    document = parse(
        STUDY,
        Path("slab.toml"),
        [
            "study.seed=8",
            "reconstruction.1.weight=[1, 2]",
            "acquisition.snr=inf",
            "study.title=two words",
            'study.description="3"',
        ],
    )
    assert document.values["study"] == {"title": "two words", "description": "3", "seed": 8}
    assert document.values["reconstruction"][1]["weight"] == [1, 2]
    assert document.values["acquisition"] == {"snr": float("inf")}
    assert str(document.refusal(("reconstruction", 1, "weight"), "no")) == "--set reconstruction.1.weight: no"


def test_paths_are_relative_to_the_file_and_those_of_overrides_to_here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    text = '[reference]\nimage = ["a.nii", "/b.nii"]\n'
    values = parse(text, Path("deep/study.toml")).values
    assert values["reference"]["image"] == [str(tmp_path / "deep/a.nii"), "/b.nii"]
    values = parse(text, Path("deep/study.toml"), ["reference.image=a.nii", "acquisition.maps=m.nii"]).values
    assert values["reference"]["image"] == str(tmp_path / "a.nii")
    assert values["acquisition"]["maps"] == str(tmp_path / "m.nii")


@pytest.mark.parametrize(
    ("override", "message"),
    [
        ("study.seed", "expected key=value"),
        ("=3", "expected key=value"),
        ("study..seed=3", "expected key=value"),
        ("seed=3", "expected table.key=value"),
        ("reconstruction.weight=3", "say which, for example reconstruction.0.weight"),
        ("reconstruction.2.weight=3", "has 2 items, counted from 0; there is no 2"),
        ("study.seed.deep=3", "study.seed has no item 'deep'"),
        ("study.0=3", "study has no item 0"),
    ],
)
def test_overrides_that_cannot_be_applied(override, message):
    with pytest.raises(InputError, match="--set") as error:
        parse(STUDY, Path("slab.toml"), [override])
    assert message in str(error.value)
    assert "\n" not in str(error.value)


@pytest.mark.parametrize(
    ("text", "line"),
    [
        ("[study]\ntitle = \n", 2),
        ("a = 1\nb = 'x\n", 2),
        ("a = 1\na = 2\n", 2),
        ("a = [1,\n", 1),
        ('a = """\n\n', 1),
    ],
)
def test_broken_toml_is_refused_with_its_line(text, line):
    with pytest.raises(InputError, match=rf"^slab\.toml, line {line}: not valid TOML: [a-z]"):
        parse(text, Path("slab.toml"))


def test_files_that_are_no_study(tmp_path):
    with pytest.raises(InputError, match="there is no such study file"):
        read_document(tmp_path / "none.toml")
    with pytest.raises(InputError, match="is a folder"):
        read_document(tmp_path)
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(InputError, match="not text in UTF-8"):
        read_document(tmp_path / "bytes.toml")


keys = st.sampled_from(["a", "b-c", "", "d e", 'f"', "g.h", "\u00e9", "\x7f"])
plain = st.booleans() | st.integers(-(2**62), 2**62) | st.floats(allow_nan=False) | st.text(max_size=8)
values = (
    plain
    | st.lists(plain | st.lists(plain, max_size=2), max_size=3)
    | st.dictionaries(keys, plain, max_size=2)
)
tables = st.dictionaries(keys, values, max_size=3)


@given(
    st.dictionaries(st.sampled_from(["study", "sampling"]), tables), st.lists(tables, min_size=1, max_size=2)
)
def test_rendered_tables_read_back_equal(study, reconstruction):
    document = {**study, "reconstruction": reconstruction}
    assert tomllib.loads(render(document)) == document


@given(
    st.lists(
        st.sampled_from(["# [x]", "a = 1", "", "b = ['[', \"]\"]", "c = [", "1,", "]", '"""', "[t]"]),
        max_size=12,
    )
)
def test_locating_never_fails(lines):
    assert all(1 <= line <= len(lines) for line in locate("\n".join(lines)).values())
