"""The tables of a study: `cases.csv`, a row a case, and `summary.csv`, a row for the draws of a case.

A table starts with its header, so that every program reads it; the caution stands in full in `verdict.json`
and `report.html`, and in short in the last column, `note`.
"""

from __future__ import annotations

import csv
import io
import math
import statistics
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from .cases import Case, text

NOTE = "research only; not for diagnosis"

DRAWS = ("draw", "noise_draw")
"""The settings over which the summary averages."""

ALWAYS = ("reference", "coils", "snr", "pattern", "calibration", "acceleration", *DRAWS, "method")
"""Settings that have a column even when they do not vary."""


@dataclass(frozen=True)
class Row:
    """A case and what came of it.

    Attributes
    ----------
    case : Case
    record : dict or None
        What `case.json` says; None when the case failed.
    failure : str
        Why it failed, in one line.
    """

    case: Case
    record: Mapping[str, Any] | None
    failure: str = ""

    @property
    def settings(self) -> dict[str, Any]:
        """The case's settings."""
        return self.case.settings

    def measure(self, name: str) -> float:
        """Value of a measure; NaN when the case failed."""
        return math.nan if self.record is None else float(self.record["measures"].get(name, math.nan))

    @property
    def converged(self) -> bool:
        """Whether the reconstruction met its criterion; a failed case did not."""
        return self.record is not None and bool(self.record["convergence"]["converged"])


def setting_columns(rows: Sequence[Row]) -> list[str]:
    """Return the settings that a table needs: those that matter always, those that vary, and all options.

    Their order is the order of the study file, whatever the values.
    """
    names: dict[str, None] = {}
    for row in rows:
        names |= dict.fromkeys(row.settings)
    # options come in the middle of the settings, so another case's are sorted in after their neighbour
    order = _merged([list(row.settings) for row in _distinct(rows, lambda row: tuple(row.settings))])
    options = {
        name
        for row in _distinct(rows, lambda row: (type(row.case.pattern), type(row.case.method)))
        for name in _options(row.case)
    }
    values: dict[str, set[str]] = {name: set() for name in names}
    for row in rows:
        for name in names:
            values[name].add(text(row.settings.get(name)))
    return [
        name
        for name in order
        if name in ALWAYS or len(values[name]) > 1 or (name in options and values[name] != {""})
    ]


def cases_csv(rows: Sequence[Row], measures: Sequence[str]) -> str:
    """Return `cases.csv`: the settings, the measures, and how the reconstruction ended.

    Parameters
    ----------
    rows : sequence of Row
        In the order of the table.
    measures : sequence of str
        The columns of measures.
    """
    settings = setting_columns(rows)
    achieved = settings.index("acceleration") + 1
    head = [*settings[:achieved], "acceleration_achieved", *settings[achieved:], *measures]
    lines: list[list[str]] = [[*head, "iterations", "converged", "stopped", "seconds", "error", "id", "note"]]
    for row in rows:
        record: Mapping[str, Any] = row.record or {}
        ending: Mapping[str, Any] = record.get("convergence", {})
        values = {**row.settings, "acceleration_achieved": record.get("acceleration_achieved")}
        values |= {name: row.measure(name) if row.record else None for name in measures}
        values |= {name: ending.get(name) for name in ("iterations", "converged", "stopped")}
        values |= {"seconds": record.get("seconds"), "error": row.failure, "id": row.case.id, "note": NOTE}
        lines.append([text(values.get(name)) for name in lines[0]])
    return _csv(lines)


def summary_csv(rows: Sequence[Row], measures: Sequence[str]) -> str:
    """Return `summary.csv`: mean, standard deviation (n - 1) and n of each measure over the draws.

    Failed cases count in no mean; `failed` and `not_converged` say how many there are.
    """
    settings = [name for name in setting_columns(rows) if name not in DRAWS]
    statistics_of = [f"{measure}_{what}" for measure in measures for what in ("mean", "sd", "n")]
    lines: list[list[str]] = [[*settings, *statistics_of, "seconds_mean", "not_converged", "failed", "note"]]
    for group in grouped(rows, lambda row: setting_key(row, DRAWS)):
        values: dict[str, Any] = dict(group[0].settings)
        finished = [row for row in group if row.record is not None]
        for name in measures:
            found = [row.measure(name) for row in finished]
            values |= {f"{name}_mean": mean(found), f"{name}_sd": deviation(found), f"{name}_n": len(found)}
        values["seconds_mean"] = mean([float(row.record["seconds"]) for row in finished if row.record])
        values["not_converged"] = sum(not row.converged for row in finished)
        values |= {"failed": len(group) - len(finished), "note": NOTE}
        lines.append([text(values.get(name)) for name in lines[0]])
    return _csv(lines)


def setting_key(row: Row, without: Iterable[str] = ()) -> tuple[tuple[str, str], ...]:
    """Return a row's settings but some, as a key to group by."""
    left_out = set(without)
    return tuple((name, text(value)) for name, value in row.settings.items() if name not in left_out)


def grouped(rows: Iterable[Row], key: Callable[[Row], Any]) -> list[list[Row]]:
    """Return the rows in groups of equal key, in the order of their first row."""
    groups: dict[Any, list[Row]] = {}
    for row in rows:
        groups.setdefault(key(row), []).append(row)
    return list(groups.values())


def mean(values: Sequence[float]) -> float | None:
    """Return the mean; None of nothing. An infinite value (the PSNR of a perfect image) makes it infinite.

    Examples
    --------
    >>> mean([1.0, 2.0]), mean([])
    (1.5, None)
    """
    return sum(values) / len(values) if values else None


def deviation(values: Sequence[float]) -> float | None:
    """Return the standard deviation with n - 1; None below two values, and where a value is infinite.

    Examples
    --------
    >>> deviation([1.0, 3.0]), deviation([1.0])
    (1.4142135623730951, None)
    """
    return statistics.stdev(values) if len(values) > 1 and all(map(math.isfinite, values)) else None


def _options(case: Case) -> list[str]:
    """Names of the options of the pattern and the method among the settings."""
    names = list(case.settings)
    pattern = names[names.index("calibration") + 1 : names.index("acceleration")]
    return pattern + names[names.index("method") + 1 :]


def _distinct(rows: Sequence[Row], key: Callable[[Row], Any]) -> list[Row]:
    return list({key(row): row for row in reversed(rows)}.values())[::-1]


def _merged(orders: Iterable[Sequence[str]]) -> list[str]:
    """Merge orders of names: a name that is new goes after the one before it."""
    merged: list[str] = []
    for order in orders:
        place = 0
        for name in order:
            if name in merged:
                place = merged.index(name) + 1
            else:
                merged.insert(place, name)
                place += 1
    return merged


def _csv(lines: Iterable[Sequence[str]]) -> str:
    out = io.StringIO()
    csv.writer(out, lineterminator="\n").writerows(lines)
    return out.getvalue()
