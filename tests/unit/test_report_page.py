import base64
import csv
import io
import json
import re
import shutil
import subprocess
import sys
from html.parser import HTMLParser
from pathlib import Path

import matplotlib
import numpy as np
import pytest
from matplotlib.image import imread

from skipline import CAUTION, InputError
from skipline.recon.files import read_volume
from skipline.recon.report import findings as reading
from skipline.recon.report import write_report
from skipline.recon.report.montage import montages
from skipline.recon.report.samples import encoded_axes, mask_rows
from skipline.recon.report.table import summary_table
from skipline.recon.study import load_study, run, runner

HOSTILE = (
    "<script>alert(1)</script> & \"a\" 'b' </title></style><img src=x onerror=alert(2)> {{ 7 * 7 }} $x_{2$"
)

STUDY = """\
[study]
title = '''{title}'''
seed = 7
description = '''{title}'''

[reference]
phantom = "line-pair-slab"
matrix = [48, 32]
field_of_view_mm = [240.0, 320.0]

[acquisition]
snr = 30.0

[sampling]
pattern = ["variable-density-lines", "regular-lines"]
acceleration = [1.5, 2.0, 3.0]
calibration = 4
draws = 2

[[reconstruction]]
method = "zero-filled"

[[reconstruction]]
method = "wavelet-sparse"

[limits]
nrmse = {{ at_most = 0.2 }}
ssim = {{ at_least = 0.3 }}
"""


def make(folder, overrides=(), title="Slab", text=STUDY):
    path = folder / "slab.toml"
    path.write_text(text.format(title=title))
    run(load_study(path, overrides), folder / "results", workers=1, progress=False)
    return folder / "results"


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    return make(tmp_path_factory.mktemp("report"), title=HOSTILE)


@pytest.fixture
def copy(results, tmp_path):
    return Path(shutil.copytree(results, tmp_path / "copy"))


@pytest.fixture(scope="module")
def page(results):
    return write_report(results).read_text()


class Page(HTMLParser):
    """Tags with their attributes, and the text by the tag that it stands in."""

    def __init__(self, page):
        super().__init__()
        self.tags = []
        self.text = []
        self.inside = []
        self.feed(page)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag not in ("meta", "img", "path", "rect", "use"):
            self.inside.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        while self.inside and self.inside.pop() != tag:
            pass

    def handle_data(self, data):
        self.text.append((self.inside[-1] if self.inside else "", data))

    def all_text(self, *tags):
        return " ".join(data for tag, data in self.text if not tags or tag in tags)


def png(source):
    return imread(io.BytesIO(base64.b64decode(source.split(",")[1])))


def test_the_contents_in_their_order(results, page):
    text = re.sub(r"\s+", " ", Page(page[: page.index("<nav")] + page[page.index("</nav>") :]).all_text())
    verdict = json.loads((results / "verdict.json").read_text())
    expected = [
        HOSTILE,
        verdict["sentence"],
        CAUTION,
        "Each measure against acceleration",
        "Images and their errors",
        "Masks",
        "Means over the draws",
        "How the cases ended",
        "Settings and versions",
        "numba",
        "The study as it was run",
        'phantom = "line-pair-slab"',
        "Reproduce",
        "skipline run study.toml",
    ]
    place = text.index("study report")
    for part in expected:
        assert part in text[place:], f"{part} is missing, or too early"
        place = text.index(part, place) + len(part)


def test_hostile_text_is_text(results, page):
    parsed = Page(page)
    assert parsed.all_text("h1") == HOSTILE
    assert parsed.all_text("title").startswith(HOSTILE)
    assert (results / "study.toml").read_text() in parsed.all_text("pre")
    assert not any(tag in ("script", "iframe", "object", "link", "base") for tag, _ in parsed.tags)
    assert not any(name.startswith("on") for _, attributes in parsed.tags for name in attributes)
    assert all(
        attributes["src"].startswith("data:image/png") for tag, attributes in parsed.tags if tag == "img"
    )


def test_nothing_is_loaded_from_elsewhere(page):
    parsed = Page(page)
    for _, attributes in parsed.tags:
        for name in ("src", "href", "xlink:href", "srcset", "action", "data"):
            assert (attributes.get(name) or "#").startswith(("#", "data:")), attributes
    assert "@import" not in page
    assert not re.search(r"url\((?!#)", page)
    policy = next(a["content"] for tag, a in parsed.tags if a.get("http-equiv") == "Content-Security-Policy")
    assert "default-src 'none'" in policy


def test_ids_are_unique_and_links_lead_somewhere(page):
    tags = Page(page).tags
    ids = [attributes["id"] for _, attributes in tags if "id" in attributes]
    assert len(ids) == len(set(ids))
    targets = {attributes["href"][1:] for tag, attributes in tags if tag == "a"}
    targets |= set(re.findall(r"url\(#([^)]*)\)", page))
    assert targets
    assert targets <= set(ids)


def test_equal_results_give_equal_bytes_whatever_the_plot_settings(copy, page):
    with matplotlib.rc_context({"lines.linewidth": 7.0, "font.size": 22.0, "svg.hashsalt": "other"}):
        path = write_report(copy)
    assert path == copy / "report.html"
    assert path.read_text() == page
    assert not [item.name for item in copy.iterdir() if item.name.startswith(".")], (
        "no temporary file is left"
    )


def test_points_are_those_of_the_summary(results):
    with (results / "summary.csv").open() as file:
        rows = list(csv.DictReader(file))
    found = reading.read_findings(results)
    points = {
        (curve.choice["pattern"], curve.choice["method"], point.acceleration): point
        for curve in found.curves
        for point in curve.points
    }
    assert len(points) == len(rows) == 12
    for row in rows:
        point = points[row["pattern"], row["method"], float(row["acceleration"])]
        for name in ("nrmse", "psnr", "ssim_overall"):
            statistics = point.statistics(name)
            assert statistics is not None
            assert statistics.mean == pytest.approx(float(row[f"{name}_mean"]), rel=1e-4)
            if row[f"{name}_sd"]:
                assert statistics.deviation == pytest.approx(float(row[f"{name}_sd"]), rel=1e-4)
            else:
                assert statistics.deviation is None
            assert statistics.number == int(row[f"{name}_n"])


def test_the_montage_shows_the_arrays(results):
    found = reading.read_findings(results)
    shown = montages(found)
    assert shown is not None
    assert [montage.pattern for montage in shown.montages] == ["variable-density-lines", "regular-lines"]
    assert shown.aspect == pytest.approx(240 / 320), "drawn to scale, whatever the voxels"
    assert shown.scale.percent == pytest.approx(100 * 50 / 240, abs=0.01)
    assert (shown.matrix, shown.scale.label) == ("48 × 32, 240 × 320 mm", "50 mm")

    reference = np.abs(read_volume(results / "reference.nii.gz").data[:, :, 0])
    window = float(shown.window) / 100 * reference.max()
    error_window = float(shown.error_window) / 100 * reference.max()
    row = shown.montages[0].rows[1]
    assert row.reference.picture
    assert row.images[1].picture
    assert row.errors[1].picture
    grey = png(row.reference.picture.source)
    assert grey.shape == (32, 48, 4), "rows are y, columns x"
    expected = np.clip(reference / window, 0, 1).T[::-1]
    np.testing.assert_allclose(grey[..., 0], expected, atol=0.008)

    case = next(
        case
        for case in found.cases
        if case.settings["pattern"] == "variable-density-lines"
        and case.settings["method"] == "wavelet-sparse"
        and str(case.settings["acceleration"]).startswith(row.acceleration)
        and case.draws == (0, 0)
    )
    image = np.abs(read_volume(case.folder / "image.nii.gz").data[:, :, 0])
    np.testing.assert_allclose(
        png(row.images[1].picture.source)[..., 0], np.clip(image / window, 0, 1).T[::-1], atol=0.008
    )
    assert row.images[1].measure == f"nrmse {case.measures['nrmse']:.3g}"
    error = read_volume(case.folder / "error.nii.gz").data[:, :, 0].T[::-1]
    drawn = png(row.errors[1].picture.source)
    assert (np.abs(error) > error_window).mean() < 0.1, "the window hides little"
    too_bright, too_dark = error > error_window / 4, error < -error_window / 4
    assert too_bright.any()
    assert too_dark.any()
    assert (drawn[too_bright][:, 0] > drawn[too_bright][:, 2]).all(), "too bright is orange"
    assert (drawn[too_dark][:, 0] < drawn[too_dark][:, 2]).all(), "too dark is blue"


def test_the_montage_has_the_verdict_and_the_first_failure(tmp_path):
    limit = ["limits.nrmse={ at_most = 0.12 }", "sampling.acceleration=[1.2, 1.5, 1.8, 2, 2.5, 3, 3.5, 4]"]
    found = reading.read_findings(make(tmp_path, limit))
    shown = montages(found)
    failure = found.verdict["first_failure"]
    assert found.verdict["acceleration"] is not None
    assert failure
    deciding = (
        next(m for m in shown.montages if m.pattern == found.verdict["choice"]["pattern"]) if shown else None
    )
    assert deciding
    assert len(deciding.rows) == 4
    marks = {row.mark: float(row.acceleration) for row in deciding.rows if row.mark}
    assert marks == {
        "verdict": found.verdict["acceleration"],
        "first to fail": failure["acceleration"],
    }


def test_masks_tell_what_was_achieved(results):
    rows = mask_rows(reading.read_findings(results))
    assert [row.pattern for row in rows] == ["variable-density-lines", "regular-lines"]
    assert [tile.acceleration for tile in rows[0].tiles] == ["1.5", "2", "3"]
    third = rows[0].tiles[2]
    assert (third.samples, third.achieved) == ("11 of 32 lines", "2.909")
    drawn = png(third.picture.source)[..., 0] > 0.5
    assert drawn.shape == (32, 48)
    assert drawn.all(axis=1).sum() == 11
    assert drawn.any(axis=1).sum() == 11
    assert third.picture.aspect == pytest.approx((48 / 240) / (32 / 320)), "k-space reaches to 1 / (2 voxel)"


def test_a_mask_of_points_in_a_volume(tmp_path):
    from skipline.recon.files import write_volume

    x, y, z = np.meshgrid(*map(np.arange, (24, 20, 16)), indexing="ij")
    ball = ((x - 12) ** 2 + (y - 10) ** 2 + 1.5 * (z - 10) ** 2 < 60) * 1.0
    write_volume(tmp_path / "ball.nii.gz", ball, np.diag([2.0, 2.0, 4.0, 1]), content="image")
    text = STUDY.replace('phantom = "line-pair-slab"', 'image = "ball.nii.gz"')
    text = text.replace("matrix = [48, 32]", "").replace("field_of_view_mm = [240.0, 320.0]", "")
    text = text.replace('["variable-density-lines", "regular-lines"]', '"variable-density-points"')
    found = reading.read_findings(make(tmp_path, ["sampling.acceleration=2", "sampling.draws=1"], text=text))
    (row,) = mask_rows(found)
    assert row.axes == ("y", "z")
    assert row.tiles[0].samples == "160 of 320 points"
    assert png(row.tiles[0].picture.source).shape == (16, 20, 4)
    shown = montages(found)
    assert shown
    assert shown.slice == "slice 11 of 16", "through the middle of the ball"
    assert shown.aspect == pytest.approx(24 / 20)
    write_report(found.folder)


@pytest.mark.parametrize(
    ("axes", "expected"), [((1,), "y"), ((0,), "x"), ((1, 2), "yz"), ((0, 1), "xy"), ((), "y")]
)
def test_encoded_axes(axes, expected):
    rng = np.random.default_rng(0)
    shape = [n if axis in axes else 1 for axis, n in enumerate((9, 8, 7))]
    mask = np.broadcast_to(rng.random(shape) < 0.5 if axes else np.ones(shape, bool), (9, 8, 7))
    assert encoded_axes(mask) == expected


def test_the_table_tells_constants_once(results):
    table = summary_table(reading.read_findings(results))
    assert table is not None
    heads = [head.text for head in table.heads]
    assert heads[:3] == ["pattern", "R", "method"]
    assert "wavelet" not in heads
    assert "wavelet db4" in table.constants
    assert "snr 30" in table.constants
    assert len(table.rows) == 12
    assert {len(row) for row in table.rows} == {len(heads)}
    nrmse = heads.index("nrmse")
    for row in table.rows:
        assert row[nrmse].broken == (float(row[nrmse].text) > 0.2)
    assert any(row[nrmse].broken for row in table.rows)
    assert not all(row[nrmse].broken for row in table.rows)


def test_what_follows_from_the_pattern_has_no_column(tmp_path):
    patterns = 'sampling.pattern=["variable-density-lines", "variable-density-points"]'
    found = reading.read_findings(
        make(tmp_path, [patterns, "sampling.acceleration=2", "sampling.power=[2, 3]"])
    )
    table = summary_table(found)
    assert table is not None
    heads = [head.text for head in table.heads]
    assert "phase_encode" not in heads
    assert "phase_encode y of variable-density-lines, xy of variable-density-points" in table.constants
    assert "power" in heads


def test_noise_and_no_noise_are_two_conditions(tmp_path):
    folder = make(tmp_path, ["acquisition.snr=[30, inf]", "sampling.draws=1", "sampling.acceleration=[1, 2]"])
    page = write_report(folder).read_text()
    text = Page(page).all_text("h3")
    assert "snr 30" in text
    assert "snr none" in text
    assert "Each point is one draw, so there are no error bars." in page
    table = summary_table(reading.read_findings(folder))
    assert table is not None
    assert "snr" in [head.text for head in table.heads]


def test_one_pattern_one_method_one_case_no_limits(tmp_path):
    text = STUDY[: STUDY.index('\n[[reconstruction]]\nmethod = "wavelet')]
    overrides = ["sampling.acceleration=2", "sampling.pattern=regular-lines", "sampling.draws=1"]
    folder = make(tmp_path, overrides, text=text)
    page = write_report(folder).read_text()
    assert "No limit was given" in page
    assert "Every case was finished" in page


def test_twenty_accelerations(tmp_path):
    overrides = [
        f"sampling.acceleration={[1 + 0.25 * i for i in range(20)]}",
        "sampling.pattern=variable-density-lines",
        "sampling.draws=1",
        "sampling.calibration=2",
    ]
    folder = make(tmp_path, overrides)
    page = write_report(folder).read_text()
    assert page.count('class="row"') == 4
    assert page.count('alt="mask of') == 20


def test_missing_measures_and_missing_volumes(copy):
    for number, path in enumerate(sorted((copy / "cases").glob("*/case.json"))):
        record = json.loads(path.read_text())
        del record["measures"]["ssim_overall"]
        if record["settings"]["method"] == "zero-filled":
            del record["measures"]["nrmse"]
        path.write_text(json.dumps(record))
        if number % 5 == 0:
            (path.parent / "image.nii.gz").unlink()
            (path.parent / "mask.nii.gz").unlink()
    page = write_report(copy).read_text()
    assert "ssim_overall against" not in page
    assert "nrmse against acceleration R, 2 lines" in page
    assert "psnr against acceleration R, 4 lines" in page
    assert "no image" in page


def test_a_measure_of_a_package_that_is_not_here(copy):
    name = "<b>lost$_{$"
    for path in (copy / "cases").glob("*/case.json"):
        record = json.loads(path.read_text())
        record["measures"][name] = 0.5
        path.write_text(json.dumps(record))
    parsed = Page(write_report(copy).read_text())
    assert name in [data for tag, data in parsed.text if tag == "strong"]
    assert name in [data for tag, data in parsed.text if tag == "text"], "the label of the axis"


def test_failed_and_not_converged_cases_are_told(tmp_path, monkeypatch):
    evaluate = runner.evaluate

    def failing(case, threads=1):
        if case.method_name == "zero-filled" and case.draw == 1:
            raise OSError(f"disc full: {HOSTILE}")
        return evaluate(case, threads)

    monkeypatch.setattr(runner, "evaluate", failing)
    folder = make(tmp_path, ["reconstruction.1.iterations=1"])
    page = write_report(folder).read_text()
    parsed = Page(page)
    failures = [data for tag, data in parsed.text if tag == "strong" and "disc full" in data]
    assert failures == [f"OSError: disc full: {HOSTILE}"] * 3
    assert not any(tag == "script" for tag, _ in parsed.tags)
    verdict = json.loads((folder / "verdict.json").read_text())
    assert len(verdict["not_converged"]) == 9
    assert parsed.all_text("h3").count("did not converge") == 1
    assert all(told["id"] in page for told in verdict["not_converged"])
    assert "not converged</span>" in page, "beside its image"


def test_nothing_finished(tmp_path, monkeypatch):
    def failing(case, threads=1):
        raise InputError("no")

    monkeypatch.setattr(runner, "evaluate", failing)
    page = write_report(make(tmp_path)).read_text()
    assert "No case was finished" in page
    assert "18 failed" in page


def test_a_name_that_is_no_text(copy):
    # what os.fsdecode makes of a file name that is not UTF-8
    for path in (copy / "cases").glob("*/case.json"):
        record = json.loads(path.read_text())
        record["files"] = {"image \udcff": "0" * 64}
        path.write_text(json.dumps(record))
    assert "SHA-256 of image ?" in write_report(copy).read_text(encoding="utf-8")


def test_no_results_no_report(tmp_path, copy):
    with pytest.raises(InputError, match=r"holds no results of a study .no verdict.json"):
        write_report(tmp_path / "nowhere")
    (copy / "verdict.json").write_text("{")
    (copy / "report.html").write_text("before")
    with pytest.raises(InputError, match=r"cannot be read .JSONDecodeError"):
        write_report(copy)
    (copy / "verdict.json").write_text("[]")
    with pytest.raises(InputError, match="cannot be read"):
        write_report(copy)
    assert (copy / "report.html").read_text() == "before"


def test_neither_display_nor_global_figures(copy):
    # by itself, and from a thread: a report is written where there is no display
    code = f"""
import sys, threading
import skipline.recon.report
assert not {{"matplotlib", "jinja2", "numba"}} & set(sys.modules)
from skipline.recon.report import write_report
thread = threading.Thread(target=write_report, args=({str(copy)!r},))
thread.start(); thread.join()
assert "matplotlib.pyplot" not in sys.modules
"""
    subprocess.run([sys.executable, "-c", code], check=True, env={"MPLBACKEND": "no-such", "PATH": ""})
    assert (copy / "report.html").exists()


def test_colours_are_defined_and_can_be_read_in_light_and_dark(page):
    style = page[page.index("<style>") : page.index("</style>")]
    light, dark = (
        dict(re.findall(r"(--[\w-]+): (#[0-9a-f]{6})", block))
        for block in re.findall(r":root \{([^}]*)\}", style)
    )
    used = set(re.findall(r"var\((--[\w-]+)\)", page)) - {"--methods"}
    assert used <= set(light)
    assert set(light) == set(dark)
    for colours in (light, dark):
        for name in ("--ink", "--quiet", "--limit", "--accent"):
            # WCAG 2.2, 1.4.3: 4.5 for text; 1.4.11: 3 for graphics
            assert contrast(colours[name], colours["--paper"]) >= 4.5, name
            assert contrast(colours[name], colours["--card"]) >= 4.5, name
        for name in colours:
            if name.startswith("--series"):
                assert contrast(colours[name], colours["--card"]) >= 3, name


def contrast(one, other):
    # WCAG 2.2, definition of contrast ratio and relative luminance
    def luminance(colour):
        channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
        linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)
