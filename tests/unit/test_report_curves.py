import io
import math
import zlib

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from matplotlib.image import imread

from skipline.recon.report.curves import Line, Panel, Style, panel_figure, styles
from skipline.recon.report.findings import Curve, Statistics
from skipline.recon.report.png import palette_png
from skipline.recon.report.selection import choose_rows
from skipline.recon.report.vector import LIMIT, SERIES, inline_svg
from skipline.recon.report.wording import nice_above, nice_below, number, with_spread
from skipline.recon.study.settings import Limit

STYLE = Style(SERIES[0], "o", "-")


def panel(values, limit=None, verdict=None, lines=1):
    told = {r: Statistics(*value) for r, value in values.items()}
    return Panel(
        "nrmse", "", "", "lower", tuple(Line(str(i), STYLE, told) for i in range(lines)), limit, verdict
    )


def test_means_error_bars_and_verdict():
    figure = panel_figure(panel({2.0: (0.1, 0.02, 3), 4.0: (0.3, None, 1)}, verdict=2.0))
    (axes,) = figure.axes
    line = axes.get_lines()[0]
    np.testing.assert_allclose(np.array(line.get_xydata()), [[2, 0.1], [4, 0.3]])
    (bars,) = axes.collections
    (segment,) = bars.get_segments()  # type: ignore[attr-defined]
    np.testing.assert_allclose(segment, [[2, 0.08], [2, 0.12]])
    assert "verdict R = 2" in [text.get_text() for text in axes.texts]
    low, high = axes.get_ylim()
    assert low < 0.08
    assert high > 0.3
    assert axes.get_xlabel() == "acceleration R"


@pytest.mark.parametrize(
    ("limit", "shaded"),
    [
        (Limit(at_most=0.2), [(0.2, math.inf)]),
        (Limit(at_least=0.2), [(-math.inf, 0.2)]),
        (Limit(at_least=0.15, at_most=0.25), [(0.25, math.inf), (-math.inf, 0.15)]),
        (Limit(at_most=0.9), [(0.9, math.inf)]),
    ],
)
def test_the_forbidden_side_is_shaded(limit, shaded):
    figure = panel_figure(panel({2.0: (0.1, 0.02, 3), 4.0: (0.3, 0.01, 3)}, limit))
    (axes,) = figure.axes
    low, high = axes.get_ylim()
    boxes = [patch.get_extents().transformed(axes.transData.inverted()) for patch in axes.patches]
    found = [(box.y0, box.y1) for box in boxes]
    expected = [(max(bottom, low), min(top, high)) for bottom, top in shaded]
    np.testing.assert_allclose(found, expected)
    assert [text.get_color() for text in axes.texts] == [LIMIT] * len(shaded)


def test_infinite_values_and_single_points_are_survived():
    only = panel({1.0: (math.inf, None, 1), 2.0: (40.0, None, 1)}, Limit(at_least=30), 2.0)
    assert only.infinite
    (axes,) = panel_figure(only).axes
    np.testing.assert_allclose(np.array(axes.get_lines()[0].get_xydata()), [[2, 40]])
    panel_figure(panel({1.0: (math.inf, None, 1)}))
    panel_figure(panel({3.0: (0.0, None, 1)}, lines=3))


def test_lines_stay_at_their_acceleration():
    # moved sideways by less than a fifth of the way to the next
    accelerations = [1 + 0.25 * i for i in range(20)]
    figure = panel_figure(panel({r: (r, 0.1, 2) for r in accelerations}, lines=12))
    for line in figure.axes[0].get_lines():
        x = np.asarray(line.get_xdata(), float)
        if len(x) == 20:
            assert np.abs(x - accelerations).max() <= 0.05 + 1e-9


def curve(pattern, method, **options):
    choice = {"pattern": pattern, "method": method, **options}
    return Curve(str(choice), "", choice, {}, None, None, ())


def test_no_two_lines_look_alike():
    curves = [
        curve(pattern, method, weight=weight)
        for pattern in "abc"
        for method, weight in [("zero-filled", None), ("sparse", 1), ("sparse", 2)]
    ]
    found = styles(curves)
    assert len(found) == 9
    assert len({style.marker for style in found.values()}) == 9
    assert len({(style.colour, str(style.dashes)) for style in found.values()}) == 9
    of_method = {found[one.label].colour for one in curves if one.choice["method"] == "zero-filled"}
    assert len(of_method) == 1, "one colour a method"
    alone = styles([curve(pattern, "sparse") for pattern in "abc"])
    assert len({style.colour for style in alone.values()}) == 3, (
        "patterns take the colours when they alone vary"
    )


def test_svg_text_cannot_break_out():
    named = Panel("</svg><script>$x", "<b>", "", "lower", panel({2.0: (0.1, None, 1)}).lines, None, None)
    svg = inline_svg(lambda: panel_figure(named), "n", named.says)
    assert svg.count("<svg") == svg.count("</svg>") == 1
    assert "<script" not in svg
    assert "<b>" not in svg
    assert SERIES[0] not in svg
    assert "var(--series-1)" in svg


@given(
    tried=st.lists(st.floats(1, 32), min_size=1, max_size=25, unique=True).map(sorted),
    data=st.data(),
    most=st.integers(1, 6),
)
def test_rows_hold_what_is_wanted(tried, data, most):
    wanted = data.draw(st.lists(st.one_of(st.none(), st.sampled_from(tried)), max_size=3))
    rows = choose_rows(tried, wanted, most)
    assert len(rows) == min(most, len(tried)) == len(set(rows))
    assert rows == sorted(rows)
    assert set(rows) <= set(tried)
    given_first = [r for r in dict.fromkeys(wanted) if r is not None][:most]
    assert set(given_first) <= set(rows)


@given(st.floats(1e-6, 1e6))
def test_nice_numbers(value):
    assert nice_below(value) <= value * (1 + 1e-8)
    assert nice_below(value) > value / 2.6
    assert value * (1 - 1e-8) <= nice_above(value) < 2.1 * value


@given(st.floats(-1e6, 1e6, allow_nan=False))
def test_numbers_read_back(value):
    text = number(value).replace("−", "-")
    assert float(text) == pytest.approx(value, rel=6e-4, abs=1e-300)


def test_spread_has_the_decimals_of_the_mean():
    assert with_spread(math.inf, None) == ("∞", "")
    assert with_spread(2e-7, 1e-9) == ("2.000e−7", "1.0e−9")
    assert with_spread(0.0, 0.0) == ("0.000", "0.000")
    assert number("inf") == "∞"
    assert number("nan") == "–"


@given(
    data=st.data(),
    rows=st.integers(1, 9),
    columns=st.integers(1, 9),
)
def test_png_reads_back(data, rows, columns):
    numbers = data.draw(st.lists(st.integers(0, 255), min_size=rows * columns, max_size=rows * columns))
    levels = np.array(numbers, np.uint8).reshape(rows, columns)
    palette = np.random.default_rng(0).integers(0, 256, (256, 3), np.uint8)
    decoded = imread(io.BytesIO(palette_png(levels, palette)))
    np.testing.assert_allclose(255 * decoded[..., :3], palette[levels], atol=1e-3)


def test_png_of_a_smooth_image_is_filtered():
    x, y = np.meshgrid(np.arange(400), np.arange(300))
    levels = ((x * x + 3 * y * y) // 400 % 256).astype(np.uint8)
    grey = np.arange(256, dtype=np.uint8)[:, None].repeat(3, 1)
    encoded = palette_png(levels, grey)
    assert len(encoded) < 0.5 * len(zlib.compress(levels.tobytes(), 9))
    np.testing.assert_allclose(255 * imread(io.BytesIO(encoded))[..., 0], levels, atol=1e-3)
