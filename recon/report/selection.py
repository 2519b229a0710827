"""What the montages show: which patterns, methods and accelerations, out of all that was run."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

from ..study.cases import text
from .findings import Curve, Findings, Finished

ROWS = 4
"""The most accelerations of a montage."""

METHODS = 3
"""The most methods of a montage."""


@dataclass(frozen=True, eq=False)
class Column:
    """A method: its name, with the options that tell it from others, and its curve."""

    name: str
    curve: Curve


@dataclass(frozen=True, eq=False)
class Selection:
    """What the montage of a pattern shows.

    Attributes
    ----------
    pattern : str
    columns : tuple of Column
        All of the same sampling.
    accelerations : tuple of float
        Rising.
    best : Curve
        The one that reaches furthest.
    """

    pattern: str
    columns: tuple[Column, ...]
    accelerations: tuple[float, ...]
    best: Curve

    def cases(self, acceleration: float) -> list[Finished | None]:
        """Return a case a column: of the first draw that all columns have, or else the first of each."""
        by_draw: list[dict[tuple[int, ...], Finished]] = []
        for column in self.columns:
            point = column.curve.at(acceleration)
            by_draw.append({case.draws: case for case in (point.cases if point else ())})
        common = set.intersection(*map(set, by_draw))
        return [cases[min(common or cases)] if cases else None for cases in by_draw]

    def mark(self, acceleration: float, deciding: Curve | None) -> str:
        """Say what is particular about an acceleration."""
        if deciding is not None and acceleration == deciding.acceleration:
            return "verdict" if self.best is deciding else "the verdict’s R"
        failing = (self.best.first_failure or {}).get("acceleration")
        return "first to fail" if acceleration == failing else ""


def shown_condition(findings: Findings) -> Curve | None:
    """Return a curve of the object and acquisition to show, those that decide; None when nothing finished."""
    finished = [curve for curve in findings.curves if any(point.cases for point in curve.points)]
    deciding = findings.deciding_curve
    return deciding if deciding in finished else next(iter(finished), None)


def select(findings: Findings, shown: Curve) -> list[Selection]:
    """Return a selection a pattern, under the condition of a curve.

    Of each pattern the settings that reach furthest, and of each method the options that do.
    """
    curves = [curve for curve in findings.curves if curve.condition == shown.condition]
    by_pattern: dict[str, list[Curve]] = {}
    for curve in curves:
        by_pattern.setdefault(curve.choice["pattern"], []).append(curve)
    return [_select(pattern, group, findings.deciding_curve) for pattern, group in by_pattern.items()]


def choose_rows(tried: Sequence[float], wanted: Sequence[float | None], most: int = ROWS) -> list[float]:
    """Choose accelerations to show: those wanted, then the ends, then those that halve the widest gaps.

    Parameters
    ----------
    tried : sequence of float
        Rising.
    wanted : sequence of float or None
        The most important first; what was not tried is left out.
    most : int

    Examples
    --------
    >>> choose_rows([1.5, 2, 3, 4, 6, 8, 10], [4, 6])
    [1.5, 4, 6, 10]
    >>> choose_rows([1, 2, 3, 4, 5, 6, 7], [None, None])
    [1, 2, 4, 7]
    >>> choose_rows([2, 4], [2, None])
    [2, 4]
    """
    candidates = [r for r in wanted if r in tried] + [tried[-1], tried[0]]
    chosen = [r for r in dict.fromkeys(candidates) if r is not None][:most]
    while len(chosen) < min(most, len(tried)):
        places = sorted({-1, len(tried), *map(tried.index, chosen)})
        before, after = max(pairwise(places), key=lambda gap: gap[1] - gap[0])
        chosen.append(tried[(before + after) // 2])
    return sorted(chosen)


def _select(pattern: str, curves: Sequence[Curve], deciding: Curve | None) -> Selection:
    def reach(curve: Curve) -> tuple[bool, float, bool, float]:
        as_decided = deciding is not None and curve.method == deciding.method
        excess = float((curve.first_failure or {}).get("excess", math.inf))
        # solvers of one problem differ in the last digits only, which is no reason to prefer one
        return curve is deciding, curve.acceleration or 0.0, as_decided, -round(excess, 3)

    best = max(curves, key=reach)
    paired = [curve for curve in curves if curve.sampling == best.sampling]
    by_method: dict[str, Curve] = {}
    for curve in sorted(paired, key=reach):
        by_method[curve.choice["method"]] = curve
    # in the order of the study file; the best is there, whatever else is left out
    names = list(dict.fromkeys(curve.choice["method"] for curve in paired))
    kept = {
        best.choice["method"],
        *names[: METHODS if best.choice["method"] in names[:METHODS] else METHODS - 1],
    }
    names = [name for name in names if name in kept]
    columns = tuple(Column(_method_name(by_method[name], paired), by_method[name]) for name in names)
    tried = sorted({point.acceleration for column in columns for point in column.curve.points})
    failing = (best.first_failure or {}).get("acceleration")
    wanted = [deciding.acceleration if deciding else None, failing, best.acceleration]
    return Selection(pattern, columns, tuple(choose_rows(tried, wanted)), best)


def _method_name(curve: Curve, others: Sequence[Curve]) -> str:
    rivals = [other.method for other in others if other.choice["method"] == curve.choice["method"]]
    told = [name for name in curve.method if len({str(rival.get(name)) for rival in rivals}) > 1]
    options = ", ".join(f"{name} {text(curve.method[name]) or 'none'}" for name in told)
    return curve.choice["method"] + (f" ({options})" if options else "")
