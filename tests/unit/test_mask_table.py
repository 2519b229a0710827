"""The sampling table, written and read back."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skipline import CAUTION, InputError
from skipline.masks import Grid
from skipline.masks.order import EchoTrains, echo_trains
from skipline.masks.table import read_mask, read_table, write_table
from skipline.recon import plugins

PATTERNS = [
    name for name in plugins.patterns() if isinstance(getattr(plugins.load("patterns", name), "axes", 0), int)
]
NAMES = ["train", "echo", "ky", "kz", "echo_time_ms", "time_ms"]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("tables")


def assert_same(a: EchoTrains, b: EchoTrains) -> None:
    assert a.shape == b.shape
    for name in ("index", "train", "echo", "echo_time_ms", "time_ms"):
        np.testing.assert_array_equal(getattr(a, name), getattr(b, name))
        assert getattr(a, name).dtype == getattr(b, name).dtype


@settings(max_examples=80)
@given(st.data())
def test_read_back_it_is_the_same_for_every_pattern_and_order(folder: Path, data: st.DataObject) -> None:
    pattern = plugins.load("patterns", data.draw(st.sampled_from(PATTERNS)))()
    shape = tuple(data.draw(st.lists(st.integers(16, 40), min_size=pattern.axes, max_size=pattern.axes)))
    grid, seed = Grid(shape, data.draw(st.integers(0, 4))), data.draw(st.integers(0, 2**32 - 1))
    mask = pattern.draw(grid, data.draw(st.floats(1, 4)), np.random.default_rng(seed))
    samples = int(mask.sum())
    length = data.draw(st.sampled_from([n for n in range(1, 33) if samples % n == 0]))
    trains = echo_trains(
        mask,
        length,
        order=data.draw(st.sampled_from(["linear", "centre-out", "interleaved"])),
        effective_echo=data.draw(st.integers(1, length)),
        echo_spacing_ms=data.draw(st.floats(0.5, 20)),
        repetition_time_ms=data.draw(st.floats(700, 5000)),
    )
    write_table(folder / "scan.tsv", trains)
    again = read_table(folder / "scan.tsv")
    assert_same(again, trains)
    np.testing.assert_array_equal(again.mask, mask)
    np.testing.assert_array_equal(read_mask(folder / "scan.tsv"), mask)
    assert [path.name for path in folder.iterdir() if path.name.startswith(".")] == []


TRAINS = echo_trains(np.ones((4, 6), bool), 4, order="centre-out", effective_echo=2)


def test_the_sidecar_says_what_the_columns_are(tmp_path: Path) -> None:
    write_table(tmp_path / "scan.tsv", TRAINS, {"Pattern": "mine", "GridShape": "no", "Caution": ""})
    said = json.loads((tmp_path / "scan.json").read_text())
    assert (tmp_path / "scan.tsv").read_text().split("\n")[0].split("\t") == NAMES
    assert all(said[name]["Description"] for name in NAMES)
    assert said["time_ms"]["Units"] == "ms"
    assert (said["GridShape"], said["TrainLength"], said["EffectiveEcho"]) == ([4, 6], 4, 2)
    assert said["Caution"] == CAUTION
    assert said["Pattern"] == "mine"
    assert "N // 2" in said["Convention"]


def test_k_is_counted_from_the_centre(tmp_path: Path) -> None:
    write_table(tmp_path / "scan.tsv", TRAINS)
    rows = np.loadtxt(tmp_path / "scan.tsv", skiprows=1)
    assert (rows[:, 2].min(), rows[:, 2].max(), rows[:, 3].min(), rows[:, 3].max()) == (-2, 1, -3, 2)
    centre = rows[(rows[:, 2] == 0) & (rows[:, 3] == 0)]
    assert centre[0, 1] == 2


def _written(folder: Path, text: str | bytes, sidecar: Any = None) -> Path:
    path = folder / "theirs.tsv"
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    if sidecar is not None:
        path.with_suffix(".json").write_text(json.dumps(sidecar))
    return path


def test_tables_made_elsewhere(tmp_path: Path) -> None:
    expected = [True, False, True, True]
    for text in (
        "ky\n-2\n1\n0\n",
        "\ufeffky\r\n-2\r\n1\r\n0\r\n\r\n",
        "note\tky\n\t-2\nx\t1\n\t0.0",
        "kz\tky\n0\t-2\n0\t1\n0\t0",
    ):
        assert read_mask(_written(tmp_path, text), (4,)).tolist() == expected
    turned = "time_ms\tkz\techo\ttrain\tky\techo_time_ms\n7\t0\t2\t0\t-1\t2\n6\t1\t1\t0\t0\t1\n"
    trains = read_table(_written(tmp_path, turned), (2, 3))
    assert trains.index.tolist() == [[1, 2], [0, 1]]  # in the order of train and echo
    assert trains.time_ms.tolist() == [6, 7]


HEAD = "\t".join(NAMES) + "\n"
ROWS = ["0\t1\t-2\t0\t5\t5", "0\t2\t0\t1\t10\t10", "1\t1\t1\t-1\t5\t105", "1\t2\t-1\t0\t10\t110"]


def table(**changed: str) -> str:
    """A good table of a 4 x 4 grid, but for some lines (line2 is the first row)."""
    lines = [changed.get(f"line{n}", row) for n, row in enumerate(ROWS, start=2)]
    return HEAD + "\n".join(lines) + "\n"


def test_the_table_of_the_refusals_is_good_as_it_is(tmp_path: Path) -> None:
    assert read_table(_written(tmp_path, table()), (4, 4)).mask.sum() == 4


@pytest.mark.parametrize(
    ("text", "says"),
    [
        (table(line4="1\t1\t-2\t0\t5\t105"), "line 4: ky -2, kz 0 is there already, in line 2"),
        (table(line5="1\t1\t-1\t0\t5\t105"), "line 5: train 1, echo 1 is there already, in line 4"),
        (
            table(line3="0\t2\t2\t1\t10\t10"),
            "line 3: ky 2 is outside the grid of 4 x 4 points; expected -2 to 1",
        ),
        (table(line3="0\t2\t0\t-3\t10\t10"), "line 3: kz -3 is outside the grid"),
        (table(line5="1\t2\t-1\t0\t10"), "line 5: 5 fields; expected 6"),
        (table(line5=""), "the same"),
        (table(line4="1\t1\t1.5\t-1\t5\t105"), "line 4: ky is '1.5'; expected a whole number"),
        (table(line4="1\t1\tone\t-1\t5\t105"), "line 4: ky is 'one'; expected a whole number"),
        (table(line4="1\t1\t1\t-1\t5\tnan"), "line 4: time_ms is 'nan'; expected a finite number"),
        (table(line4="1\t1\t1e300\t-1\t5\t5"), "line 4: ky is '1e300'; expected a whole number"),
        (table(line2="-1\t1\t-2\t0\t5\t5"), "line 2: train -1, echo 1: expected trains from 0"),
        (table(line2="0\t0\t-2\t0\t5\t5"), "line 2: train 0, echo 0: expected trains from 0, echoes from 1"),
        ("train\techo\tky\techo_time_ms\ttime_ms\n0\t1\t0\t5\t5\n", "line 1: the column kz is missing"),
        ("ky\tkz\n0\t0\n", "line 1: the column train and echo and echo_time_ms and time_ms is missing"),
        ("ky\tky\n0\t0\n", 'line 1: the column "ky" is there twice'),
        (HEAD, "line 2: the table ends before its first row"),
        ("", "line 1: not a sampling table"),
        ("train,echo,ky,kz\n0,1,0,0\n", "line 1: not a sampling table; expected the columns ky, kz"),
        (b"\x1f\x8b\x08\x00\xff\xfe", "line 1: not a sampling table; expected tab-separated text"),
        ("PK\x03\x04", "line 1: not a sampling table"),
    ],
)
def test_refusals(tmp_path: Path, text: str | bytes, says: str) -> None:
    path = _written(tmp_path, text)
    if says == "the same":  # an empty line at the end is none
        assert read_table(path, (4, 4)).mask.sum() == 3
        return
    with pytest.raises(InputError) as refusal:
        read_table(path, (4, 4))
    assert str(refusal.value).startswith(str(path))
    assert says in str(refusal.value)
    assert "\n" not in str(refusal.value)


def test_lines_have_kz_0(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="line 3: kz 1 is outside the grid of 8 points; expected 0 to 0"):
        read_mask(_written(tmp_path, "ky\tkz\n0\t0\n1\t1\n"), (8,))


@pytest.mark.parametrize(
    ("sidecar", "shape", "says"),
    [
        (None, None, "has no sidecar with GridShape"),
        ({"Other": 1}, None, "has no sidecar with GridShape"),
        ([], None, "has no sidecar with GridShape"),
        ({"GridShape": [4, 4]}, (4, 5), "is for a grid of 4 x 4 points by its sidecar; expected 4 x 5"),
        ({"GridShape": [4, 0]}, None, "GridShape .4, 0.: expected the numbers of points"),
        ({"GridShape": "4"}, None, "GridShape 4: expected"),
        (None, (2, 2, 2), "expected the numbers of points along one or two axes"),
    ],
)
def test_the_shape_must_be_known(tmp_path: Path, sidecar: Any, shape: Any, says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        read_table(_written(tmp_path, table(), sidecar), shape)
    assert "\n" not in str(refusal.value)


def test_files(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"missing.tsv cannot be read \(No such file"):
        read_mask(tmp_path / "missing.tsv", (4,))
    with pytest.raises(InputError, match=r"ends with \.tsv"):
        write_table(tmp_path / "scan.csv", TRAINS)
    with pytest.raises(InputError, match="cannot be written"):
        write_table(tmp_path / "nowhere" / "scan.tsv", TRAINS)
    with pytest.raises(InputError, match="its sidecar cannot hold"):
        write_table(tmp_path / "scan.tsv", TRAINS, {"Weight": float("nan")})
    (tmp_path / "folder.tsv").mkdir()
    with pytest.raises(InputError, match=r"folder.tsv cannot be written"):
        write_table(tmp_path / "folder.tsv", TRAINS)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["folder.json", "folder.tsv"]
    (tmp_path / "folder.json").unlink()
    (tmp_path / "folder.tsv").rmdir()
    (tmp_path / "broken.json").write_text("{")
    (tmp_path / "broken.tsv").write_text(table())
    with pytest.raises(InputError, match=r"broken.json cannot be read as JSON"):
        read_table(tmp_path / "broken.tsv")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["broken.json", "broken.tsv"]
