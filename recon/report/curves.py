"""Curves: each measure against the acceleration, with its limit and the verdict."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Any

from ... import InputError
from .. import plugins
from ..study.settings import Limit
from .findings import Curve, Findings, Statistics
from .vector import FAINT, INK, LIMIT, SERIES

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_MARKERS = ("o", "s", "^", "D", "v", "P", "X", "<", ">", "*")
_DASHES: tuple[Any, ...] = ("-", (0, (5, 1.6)), (0, (1.4, 1.4)), (0, (5, 1.4, 1.4, 1.4)))
_MANY = 10
"""Above so many points of a line its markers are smaller."""

_INCHES = (3.9, 2.9)
_FRAME = (0.135, 0.165, 0.72, 0.735)
"""Left, bottom, width, height of the axes, the same in all panels; the limit is named at their right."""


@dataclass(frozen=True)
class Style:
    """How a line is drawn."""

    colour: str
    marker: str
    dashes: Any


@dataclass(frozen=True)
class Line:
    """One line: the accelerations that have a value, and the values."""

    label: str
    style: Style
    values: Mapping[float, Statistics]


@dataclass(frozen=True)
class Panel:
    """All lines of one measure under one condition.

    Attributes
    ----------
    measure, unit, description, better : str
        What is known of the measure; only its name when its package is not installed here.
    lines : tuple of Line
    limit : Limit or None
    verdict : float or None
        The acceleration of the verdict.
    """

    measure: str
    unit: str
    description: str
    better: str
    lines: tuple[Line, ...]
    limit: Limit | None
    verdict: float | None

    @property
    def infinite(self) -> bool:
        """Whether some value cannot be drawn."""
        return any(not math.isfinite(value.mean) for line in self.lines for value in line.values.values())

    @property
    def draws(self) -> tuple[int, int]:
        """The lowest and the highest number of draws of a point."""
        numbers = [value.number for line in self.lines for value in line.values.values()]
        return min(numbers), max(numbers)

    @property
    def says(self) -> str:
        """The panel in words."""
        means = [value.mean for line in self.lines for value in line.values.values()]
        limit = f"; limit {self.limit}" if self.limit else ""
        return (
            f"{self.measure} against acceleration R, {len(self.lines)} lines, "
            f"from {min(means):.3g} to {max(means):.3g} {self.unit}".rstrip()
            + limit
        )


def panels(findings: Findings) -> list[tuple[str, list[Panel]]]:
    """Return the panels under each condition; a condition has a name when there are several."""
    limits = {name: Limit(**limit) for name, limit in findings.verdict["limits"].items()}
    style = styles(findings.curves)
    groups: dict[str, list[Curve]] = {}
    for curve in findings.curves:
        groups.setdefault(curve.condition_label, []).append(curve)
    found = []
    for condition, curves in groups.items():
        of_condition = []
        for name in findings.measures:
            lines = tuple(
                Line(curve.label, style[curve.label], values)
                for curve in curves
                if (values := _values(curve, name))
            )
            if lines:
                of_condition.append(
                    Panel(name, *_about(name), lines, limits.get(name), findings.verdict["acceleration"])
                )
        if of_condition:
            found.append((condition, of_condition))
    return found


def styles(curves: Sequence[Curve]) -> dict[str, Style]:
    """Return the style of each label: colour tells the methods apart, dashes the sampling.

    Where one of the two does not vary, colour and dashes tell apart what does. Markers differ always.
    """
    labels = {curve.label: curve for curve in curves}
    methods = _numbered(str(curve.method) for curve in labels.values())
    samplings = _numbered(str(curve.sampling) for curve in labels.values())
    found = {}
    for number, (label, curve) in enumerate(labels.items()):
        method, sampling = methods[str(curve.method)], samplings[str(curve.sampling)]
        colour, dashes = (sampling, 0) if len(methods) == 1 else (method, sampling)
        found[label] = Style(
            SERIES[colour % len(SERIES)],
            _MARKERS[number % len(_MARKERS)],
            _DASHES[dashes % len(_DASHES)],
        )
    return found


def panel_figure(panel: Panel) -> Figure:
    """Draw a panel: means, and the standard deviation over the draws as error bars.

    The limit is a line whose forbidden side is shaded; lines are moved sideways a little, so that error bars
    do not hide each other.
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_INCHES)
    axes = figure.add_axes(_FRAME)
    accelerations = sorted({r for line in panel.lines for r in line.values})
    shift = _sideways(accelerations, len(panel.lines))
    for number, line in enumerate(panel.lines):
        _draw_line(axes, line, shift * (number - (len(panel.lines) - 1) / 2))
    _scale(axes, panel, accelerations)
    for bound, allowed_above in _bounds(panel.limit):
        _draw_limit(axes, bound, allowed_above)
    if panel.verdict is not None and panel.verdict in accelerations:
        axes.axvline(panel.verdict, color=INK, linewidth=0.9, dashes=(1, 2), zorder=1)
        axes.annotate(
            f"verdict R = {panel.verdict:g}", (panel.verdict, 1), (0, 3), size=8, color=INK, ha="center",
            xycoords=("data", "axes fraction"), textcoords="offset points", va="bottom",
        )  # fmt: skip
    unit = f" ({panel.unit})" if panel.unit else ""
    # the name may be another package's, and a dollar sign in it is no mathematics
    axes.set_ylabel(panel.measure + unit, size=9, color=INK, parse_math=False)
    axes.set_xlabel("acceleration R", size=9, color=INK)
    axes.grid(axis="y", color=FAINT, linewidth=0.5)
    axes.set_axisbelow(True)
    axes.tick_params(labelsize=8.5, colors=INK, width=0.6, length=3)
    for side, spine in axes.spines.items():
        spine.set(color=INK, linewidth=0.6, visible=side in ("left", "bottom"))
    return figure


def swatch_figure(style: Style) -> Figure:
    """Draw a piece of a line, for the legend."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(0.5, 0.18))
    axes = figure.add_axes((0, 0, 1, 1))
    axes.plot([0, 1, 2], [0, 0, 0], **_stroke(style), markevery=[1])
    axes.set(xlim=(0, 2), ylim=(-1, 1))
    axes.set_axis_off()
    return figure


def _values(curve: Curve, measure: str) -> dict[float, Statistics]:
    found = {point.acceleration: point.statistics(measure) for point in curve.points}
    return {acceleration: value for acceleration, value in found.items() if value is not None}


def _about(measure: str) -> tuple[str, str, str]:
    try:
        found = plugins.load("measures", measure)
    except InputError:  # the results may come from a place with other packages
        return "", "", ""
    return found.unit, found.description, found.better


def _numbered(names: Iterable[str]) -> dict[str, int]:
    return {name: number for number, name in enumerate(dict.fromkeys(names))}


def _stroke(style: Style) -> dict[str, Any]:
    return {
        "color": style.colour, "marker": style.marker, "linestyle": style.dashes, "linewidth": 1.5,
        "markersize": 5, "markeredgewidth": 0,
    }  # fmt: skip


def _draw_line(axes: Axes, line: Line, shift: float) -> None:
    shown = {r: value for r, value in sorted(line.values.items()) if math.isfinite(value.mean)}
    at = [r + shift for r in shown]
    small = {"markersize": 3.4, "linewidth": 1.1} if len(at) > _MANY else {}
    stroke: dict[str, Any] = {**_stroke(line.style), **small, "zorder": 3, "clip_on": False}
    axes.plot(at, [value.mean for value in shown.values()], **stroke)
    spread = {r: value for r, value in shown.items() if value.deviation is not None}
    axes.errorbar(
        [r + shift for r in spread], [value.mean for value in spread.values()],
        yerr=[value.deviation or 0.0 for value in spread.values()],
        fmt="none", ecolor=line.style.colour, elinewidth=0.9, capsize=2, capthick=0.9, zorder=2.5,
    )  # fmt: skip


def _sideways(accelerations: Sequence[float], lines: int) -> float:
    """Return the distance between neighbouring lines at the same acceleration."""
    if len(accelerations) < 2 or lines < 2:
        return 0.0 if lines < 2 else 0.01
    gap = min(b - a for a, b in pairwise(accelerations))
    return min(0.012 * (accelerations[-1] - accelerations[0]), 0.4 * gap / lines)


def _scale(axes: Axes, panel: Panel, accelerations: Sequence[float]) -> None:
    """Set the ranges: all that was tried, all values with their bars, and the limit."""
    values = [bound for bound, _ in _bounds(panel.limit)]
    for line in panel.lines:
        for value in line.values.values():
            if math.isfinite(value.mean):
                values += [value.mean - (value.deviation or 0), value.mean + (value.deviation or 0)]
    low, high = (min(values), max(values)) if values else (0.0, 1.0)
    margin = 0.08 * (high - low) or 0.05 * abs(high) or 1.0
    axes.set_ylim(low - margin, high + margin)
    first, last = accelerations[0], accelerations[-1]
    margin = 0.06 * (last - first) or 0.5
    axes.set_xlim(first - margin, last + margin)
    gaps = [(b - a) / (last - first) for a, b in pairwise(accelerations)]
    if min(gaps, default=1.0) >= 0.09:
        axes.set_xticks(accelerations, [f"{r:g}" for r in accelerations])


def _bounds(limit: Limit | None) -> list[tuple[float, bool]]:
    """Return the bounds of a limit, and whether what is above is allowed."""
    if limit is None:
        return []
    both = ((limit.at_most, False), (limit.at_least, True))
    return [(bound, allowed_above) for bound, allowed_above in both if bound is not None]


def _draw_limit(axes: Axes, bound: float, allowed_above: bool) -> None:
    low, high = axes.get_ylim()
    axes.axhspan(*((low, bound) if allowed_above else (bound, high)), color=LIMIT, alpha=0.1, linewidth=0)
    axes.axhline(bound, color=LIMIT, linewidth=1.1, zorder=2)
    axes.annotate(
        f"limit\n{'≥' if allowed_above else '≤'} {bound:g}", (1, bound), (4, 0), size=8, color=LIMIT,
        xycoords=("axes fraction", "data"), textcoords="offset points", va="center", annotation_clip=False,
    )  # fmt: skip
