import os
import struct
import warnings

import matplotlib
import numpy as np
import pytest

from skipline import InputError
from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints
from skipline.masks.order import echo_trains
from skipline.recon.report.mask_figure import write_mask_figure

GRIDS = {1: (VariableDensityLines(), Grid((96,), 12)), 2: (VariableDensityPoints(), Grid((48, 32), 8))}


def drawn(axes, seed=1):
    pattern, grid = GRIDS[axes]
    mask = pattern.draw(grid, 4, np.random.default_rng(seed))
    return mask, {
        "density": pattern.density(grid, 4),
        "trains": echo_trains(mask, 8, effective_echo=3),
        "title": "with all, at $5",
    }


def written(path, mask, **options):
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # a layout that failed, a glyph that is missing
        write_mask_figure(path, mask, **options)
    return path.read_bytes()


@pytest.mark.parametrize("axes", [1, 2])
@pytest.mark.parametrize("options", [(), ("density",), ("trains",)])
def test_png(tmp_path, axes, options):
    mask, given = drawn(axes)
    png = written(tmp_path / "mask.png", mask, **{name: given[name] for name in options})
    assert png[:8] == b"\x89PNG\r\n\x1a\n"
    width, height = struct.unpack(">II", png[16:24])
    assert 1500 < width < 3000
    assert 900 < height < 2600
    assert 40_000 < len(png) < 1_500_000
    assert os.listdir(tmp_path) == ["mask.png"]


def test_another_mask_is_another_figure(tmp_path):
    one, other = (written(tmp_path / f"{seed}.png", drawn(1, seed)[0]) for seed in (1, 2))
    assert one != other


@pytest.mark.parametrize("axes", [1, 2])
@pytest.mark.parametrize("ending", ["png", "svg", "pdf"])
def test_equal_masks_give_equal_bytes_whatever_the_settings(tmp_path, axes, ending, monkeypatch):
    mask, given = drawn(axes)
    first = written(tmp_path / f"first.{ending}", mask, **given)
    monkeypatch.setitem(matplotlib.rcParams, "font.size", 20)
    monkeypatch.setitem(matplotlib.rcParams, "image.cmap", "jet")
    assert written(tmp_path / f"second.{ending.upper()}", mask, **given) == first


def test_svg_says_what_the_figure_must(tmp_path):
    for axes, unit in ((1, "24 of 96 lines"), (2, "384 of 48 × 32 points")):
        mask, given = drawn(axes)
        svg = written(tmp_path / "mask.svg", mask, **given).decode()
        # glyphs are drawn, and each text stands before them as a comment
        for said in (
            "with all, at $5", f"R = 4, {unit}", "effective echo 3 of 8 (red)", "Point spread", "Gaps",
            "ensity", "nothing of SAR, nerve stimulation",
        ):  # fmt: skip
            assert said in svg


@pytest.mark.parametrize(
    "mask",
    [
        np.ones(1, bool), np.ones(16, bool), np.arange(9) == 4, np.arange(128) % 4 == 0,
        np.ones((1, 1), bool), np.ones((12, 10), bool), np.arange(35).reshape(5, 7) == 17,
        np.arange(96).reshape(96, 1) % 3 == 0,
    ],
)  # fmt: skip
def test_extreme_masks(tmp_path, mask):
    assert len(written(tmp_path / "mask.png", mask, trains=echo_trains(mask, 1))) > 20_000


@pytest.mark.parametrize("name", ["mask.jpg", "mask", "mask.nii.gz", ".png"])
def test_other_endings_are_refused_in_one_line(tmp_path, name):
    with pytest.raises(InputError, match=r"expected a name ending in \.png, \.svg or \.pdf") as refusal:
        write_mask_figure(tmp_path / name, np.ones(8, bool))
    assert "\n" not in str(refusal.value)
    assert os.listdir(tmp_path) == []


def test_what_does_not_fit_is_refused(tmp_path):
    mask, given = drawn(1)
    path = tmp_path / "mask.png"
    with pytest.raises(InputError, match=r"echo trains: .* other samples"):
        write_mask_figure(path, drawn(1, seed=2)[0], trains=given["trains"])
    with pytest.raises(InputError, match="density: expected the shape of the mask"):
        write_mask_figure(path, mask, density=np.ones(5))
    with pytest.raises(InputError, match="one phase-encode axis, or two"):
        write_mask_figure(path, np.ones((2, 2, 2), bool))
    with pytest.raises(InputError, match="takes no sample"):
        write_mask_figure(path, np.zeros(8, bool))
    with pytest.raises(InputError, match="cannot be written"):
        write_mask_figure(tmp_path / "nowhere" / "mask.png", mask)
    assert os.listdir(tmp_path) == []
