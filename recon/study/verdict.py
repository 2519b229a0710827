"""The verdict: the highest acceleration that meets every limit, and what breaks first beyond it.

Each choice of sampling and reconstruction has a curve of measures against the acceleration. An acceleration
passes when the mean over the draws of every limited measure is within its limit, no case of it failed, and
every lower acceleration passes too. Where a study has several objects or acquisitions (noise levels, coils),
a choice has to pass in all of them: they are conditions, not choices.

While any case failed nothing is decided: it might have passed, or have made another choice the best. The
sentence says so first, and the acceleration is None, so that no program takes what is left for a verdict.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from ... import CAUTION
from .cases import text
from .settings import Limit
from .tables import DRAWS, Row, deviation, grouped, mean


@dataclass(frozen=True)
class Point:
    """One acceleration of a curve.

    Attributes
    ----------
    acceleration : float
        As asked for.
    means : dict of str to float
        Mean over the draws of every measure.
    finished, failed : int
        Numbers of cases.
    broken : tuple of str
        The measures whose mean is outside its limit.
    deviations : dict of str to float
        Standard deviation over the draws of every measure; none of a single draw.
    """

    acceleration: float
    means: Mapping[str, float]
    finished: int
    failed: int
    broken: tuple[str, ...]
    deviations: Mapping[str, float] = field(default_factory=dict)

    @property
    def passes(self) -> bool:
        """Whether everything is within its limit."""
        return not self.broken and not self.failed and self.finished > 0


@dataclass(frozen=True)
class Curve:
    """Measures against acceleration of one choice under one condition.

    Attributes
    ----------
    choice, condition : dict
        Settings.
    points : tuple of Point
        By rising acceleration.
    """

    choice: Mapping[str, Any]
    condition: Mapping[str, Any]
    points: tuple[Point, ...]

    @property
    def passed(self) -> int:
        """Number of points, from the lowest acceleration, that pass without a gap."""
        return next((i for i, point in enumerate(self.points) if not point.passes), len(self.points))

    @property
    def acceleration(self) -> float | None:
        """The highest acceleration that passes; None when the lowest does not."""
        return self.points[self.passed - 1].acceleration if self.passed else None

    def first_failure(self, limits: Mapping[str, Limit]) -> dict[str, Any] | None:
        """Return what breaks first beyond the last pass: the limit that a straight line crosses first."""
        if self.passed == len(self.points):
            return None
        point = self.points[self.passed]
        failure: dict[str, Any] = {"acceleration": point.acceleration, "failed_cases": point.failed}
        if not point.broken:
            return failure
        before = self.points[self.passed - 1] if self.passed else None

        def crossing(name: str) -> float:
            """Return how soon the limit is crossed after the last pass, 0 to 1; without one, how far out."""
            bound = limits[name].broken_bound(point.means[name])
            if before is None:
                return -_excess(limits[name], point.means[name])
            return (bound - before.means[name]) / (point.means[name] - before.means[name])

        measure = min(point.broken, key=crossing)
        value = point.means[measure]
        return failure | {
            "measure": measure,
            "mean": value,
            "limit": str(limits[measure]),
            "excess": _excess(limits[measure], value),
        }

    def margin(self, limits: Mapping[str, Limit]) -> float:
        """Return the least relative distance from a limit at the highest acceleration that passes."""
        if not self.passed:
            return -math.inf
        means = self.points[self.passed - 1].means
        return min(-_excess(limit, means[name]) for name, limit in limits.items())


def decide(
    title: str, rows: Sequence[Row], limits: Mapping[str, Limit], measures: Sequence[str]
) -> dict[str, Any]:
    """Return the verdict, as `verdict.json` says it.

    Parameters
    ----------
    title : str
        The study's title.
    rows : sequence of Row
        All its cases.
    limits : mapping of str to Limit
    measures : sequence of str
        The measures whose means the curves show.

    Returns
    -------
    dict
        ``acceleration`` (None when nothing passes, a case failed, or there is no limit), ``sentence``,
        ``choice``, ``first_failure``, ``curves``, ``warnings``, ``not_converged``, ``failed``, ``limits``,
        ``cases``, ``caution``.
    """
    curves = [_curve(group, limits, measures) for group in grouped(rows, _curve_key)]
    condition_names = _varying([curve.condition for curve in curves])
    best = _best(curves, limits) if limits else []
    weakest = min(best, key=lambda curve: (curve.acceleration or 0.0, curve.margin(limits)), default=None)
    label = _label(best[0], curves) if best else ""
    condition = _settings_text(weakest.condition, condition_names) if weakest else ""
    not_converged = [row for row in rows if row.record is not None and not row.converged]
    failed = [row for row in rows if row.record is None]
    return {
        "study": title,
        "acceleration": weakest.acceleration if weakest and not failed else None,
        "sentence": _undecided(len(failed), len(rows), _sentence(weakest, label, condition, limits)),
        "label": label,
        "choice": dict(best[0].choice) if best and weakest and weakest.acceleration else None,
        "first_failure": weakest.first_failure(limits) if weakest else None,
        "limits": {name: limit.model_dump(exclude_none=True) for name, limit in limits.items()},
        "curves": [_as_dict(curve, limits, curves, condition_names) for curve in curves],
        "warnings": [*_warnings(rows, not_converged, failed), *_close_calls(weakest, limits)],
        "not_converged": [{"id": row.case.id, "case": str(row.case)} for row in not_converged],
        "failed": [{"id": row.case.id, "case": str(row.case), "error": row.failure} for row in failed],
        "cases": len(rows),
        "caution": CAUTION,
    }


def _curve_key(row: Row) -> tuple[tuple[str, str], ...]:
    left_out = {*DRAWS, "acceleration"}
    return tuple((name, text(value)) for name, value in row.settings.items() if name not in left_out)


def _curve(rows: Sequence[Row], limits: Mapping[str, Limit], measures: Sequence[str]) -> Curve:
    case = rows[0].case
    condition = case.condition
    left_out = {*DRAWS, "acceleration", *condition}
    choice = {name: value for name, value in case.settings.items() if name not in left_out}
    points = []
    for group in grouped(rows, lambda row: row.settings["acceleration"]):
        finished = [row for row in group if row.record is not None]
        means = {name: _mean([row.measure(name) for row in finished]) for name in measures}
        broken = tuple(name for name, limit in limits.items() if finished and not limit.allows(means[name]))
        deviations = {name: deviation([row.measure(name) for row in finished]) for name in measures}
        spread = {name: value for name, value in deviations.items() if value is not None}
        acceleration = float(group[0].settings["acceleration"])
        points.append(Point(acceleration, means, len(finished), len(group) - len(finished), broken, spread))
    return Curve(choice, condition, tuple(sorted(points, key=lambda point: point.acceleration)))


def _mean(values: Sequence[float]) -> float:
    average = mean(values)
    return math.nan if average is None else average


def _best(curves: Sequence[Curve], limits: Mapping[str, Limit]) -> list[Curve]:
    """Return the curves, one a condition, of the choice that reaches furthest in its worst condition."""
    choices: dict[str, list[Curve]] = {}
    for curve in curves:
        choices.setdefault(str(curve.choice), []).append(curve)

    def reach(of_choice: list[Curve]) -> tuple[float, float, float]:
        accelerations = [curve.acceleration or 0.0 for curve in of_choice]
        margin = min(curve.margin(limits) for curve in of_choice)
        # of those that pass nowhere, the one that is least beyond its limits
        first = min(-(curve.first_failure(limits) or {}).get("excess", math.inf) for curve in of_choice)
        return min(accelerations), margin, first if not any(accelerations) else 0.0

    return max(choices.values(), key=reach, default=[])


def _sentence(weakest: Curve | None, label: str, condition: str, limits: Mapping[str, Limit]) -> str:
    if not limits:
        return (
            "No limit was given, so there is no verdict; add a [limits] table, "
            "for example nrmse = { at_most = 0.05 }."
        )
    if weakest is None:
        return "There is no case to judge."
    where = f" under {condition}" if condition else ""
    failure = weakest.first_failure(limits)
    if weakest.acceleration is None:
        assert failure is not None
        lowest = text(failure["acceleration"])
        return (
            f"No acceleration passes: at R = {lowest}, the lowest tried, {_breaks(failure)}{where} "
            f"with the best, {label}."
        )
    highest = text(weakest.acceleration)
    if failure is None:
        return f"R = {highest} is the highest acceleration tried, and no limit broke with {label}."
    tried = ", ".join(text(point.acceleration) for point in weakest.points)
    everywhere = " in every condition" if condition else ""
    return (
        f"R = {highest} is the highest of those tried ({tried}) that meets every limit{everywhere}, "
        f"with {label}; "
        f"at R = {text(failure['acceleration'])}{where} {_breaks(failure)}."
    )


def _undecided(failed: int, cases: int, sentence: str) -> str:
    """Say first that cases failed, where any did."""
    if not failed:
        return sentence
    rest = sentence if sentence.startswith("R = ") else sentence[0].lower() + sentence[1:]
    return f"Not decided: {failed} of {cases} cases failed; {rest}"


def _breaks(failure: Mapping[str, Any]) -> str:
    if "measure" not in failure:
        number = failure["failed_cases"]
        return f"{number} case{'s' if number > 1 else ''} failed"
    value, limit = failure["mean"], failure["limit"]
    if not math.isfinite(failure["excess"]):
        return f"{failure['measure']} is {value}, its limit is {limit}"
    beyond = f"{failure['excess']:.1%}" if failure["excess"] >= 5e-4 else "a hair"
    return f"{failure['measure']} breaks first: {value:.4g}, {beyond} beyond its limit of {limit}"


def _warnings(rows: Sequence[Row], not_converged: Sequence[Row], failed: Sequence[Row]) -> list[str]:
    warnings = []
    if failed:
        warnings.append(f"{len(failed)} of {len(rows)} cases failed; they are run again with the next run.")
    if not_converged:
        named = ", ".join(row.case.id for row in not_converged[:5])
        more = f" and {len(not_converged) - 5} more" if len(not_converged) > 5 else ""
        warnings.append(
            f"{len(not_converged)} of {len(rows)} cases stopped before they converged: {named}{more}."
        )
    return warnings


def _close_calls(weakest: Curve | None, limits: Mapping[str, Limit]) -> list[str]:
    """Name the limits that the verdict keeps by less than the standard deviation over the draws."""
    if weakest is None or not weakest.passed:
        return []
    point = weakest.points[weakest.passed - 1]
    return [
        f"{name} at R = {text(point.acceleration)} keeps its limit of {limit} by less than the standard "
        f"deviation over its {point.finished} draws, {point.deviations[name]:.2g}; "
        "take more draws before you rely on it."
        for name, limit in limits.items()
        if name in point.deviations and limit.slack(point.means[name]) < point.deviations[name]
    ]


def _as_dict(
    curve: Curve, limits: Mapping[str, Limit], curves: Sequence[Curve], condition_names: set[str]
) -> dict[str, Any]:
    return {
        "label": _label(curve, curves),
        "condition_label": _settings_text(curve.condition, condition_names),
        "pattern": curve.choice["pattern"],
        "method": curve.choice["method"],
        "choice": dict(curve.choice),
        "condition": dict(curve.condition),
        "acceleration": curve.acceleration if limits else None,
        "first_failure": curve.first_failure(limits) if limits else None,
        "points": [
            {
                "acceleration": point.acceleration,
                "means": dict(point.means),
                "finished": point.finished,
                "failed": point.failed,
                "passes": point.passes if limits else None,
                "broken": list(point.broken),
            }
            for point in curve.points
        ],
    }


def _excess(limit: Limit, value: float) -> float:
    """How far a value is beyond its limit, relative to the bound; negative within it."""
    bound = limit.broken_bound(value)
    return -limit.slack(value) / (abs(bound) if bound else 1.0)


def _varying(settings: Iterable[Mapping[str, Any]]) -> set[str]:
    """Names of the settings that differ."""
    values: dict[str, set[str]] = {}
    listed = list(settings)
    for name in {name for one in listed for name in one}:
        values[name] = {text(one.get(name)) for one in listed}
    return {name for name, found in values.items() if len(found) > 1}


def _label(curve: Curve, curves: Sequence[Curve]) -> str:
    """Put the choice in words: pattern and method, and what tells it from others of the same two."""
    choice = curve.choice
    same = [c.choice for c in curves if all(c.choice[key] == choice[key] for key in ("pattern", "method"))]
    rest = _settings_text(choice, _varying(same))
    return f"{choice['pattern']} and {choice['method']}" + (f" ({rest})" if rest else "")


def _settings_text(settings: Mapping[str, Any], names: set[str]) -> str:
    return ", ".join(f"{name} {text(value) or 'none'}" for name, value in settings.items() if name in names)
