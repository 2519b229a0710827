"""The table of means: `summary.csv` with its constant columns told once."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ..study.settings import Limit
from .findings import Findings
from .wording import number, with_spread

_ALWAYS = ("acceleration", "method")
_SHORT = {"acceleration": "R"}


@dataclass(frozen=True)
class Cell:
    """A cell: its text, the spread in smaller type, and whether it is outside its limit."""

    text: str
    spread: str = ""
    broken: bool = False
    numeric: bool = False


@dataclass(frozen=True)
class Table:
    """A table: what is the same in all rows, the heads of the columns, the rows."""

    constants: str
    heads: tuple[Cell, ...]
    rows: tuple[tuple[Cell, ...], ...]


def summary_table(findings: Findings) -> Table | None:
    """Return the means of `summary.csv`; None when it has none.

    A setting with one value is told above the table. So is an option that only some methods or patterns
    have, when those agree, and one that follows from the pattern.
    """
    rows = findings.summary
    if not rows:
        return None
    columns = list(rows[0])
    measures = [name.removesuffix("_sd") for name in columns if name.endswith("_sd")]
    if not measures:
        return None
    settings = columns[: columns.index(f"{measures[0]}_mean")]
    limits = {name: Limit(**limit) for name, limit in findings.verdict["limits"].items()}
    varying: list[str] = []
    constants: list[str] = []
    options = False
    for name in settings:
        values = dict.fromkeys(row[name] for row in rows)
        if options:
            # of an option, blank says that the pattern or the method has none; before, it is a value
            values.pop("", None)
        if name not in _ALWAYS and len(values) <= 1:
            constants += [f"{name} {value}" for value in values if value]
        elif options and name not in _ALWAYS and (by_pattern := _by_pattern(rows, name)):
            constants.append(f"{name} {by_pattern}")
        else:
            varying.append(name)
        options = options or name == "pattern"
    heads = [Cell(_SHORT.get(name, name), numeric=_numeric(rows, name)) for name in varying]
    heads += [Cell(name, numeric=True) for name in measures]
    troubles = [name for name in ("not_converged", "failed") if any(row[name] != "0" for row in rows)]
    ends = ("n", "seconds", *(name.replace("_", " ") for name in troubles))
    heads += [Cell(name, numeric=True) for name in ends]
    body = []
    for row in rows:
        cells = [Cell(row[name] or "–", numeric=_numeric(rows, name)) for name in varying]
        cells += [_mean(row, name, limits.get(name)) for name in measures]
        cells.append(Cell(row[f"{measures[0]}_n"], numeric=True))
        cells.append(Cell(number(row["seconds_mean"] or None, 3), numeric=True))
        cells += [_count(row[name]) for name in troubles]
        body.append(tuple(cells))
    return Table(", ".join(constants), tuple(heads), tuple(body))


def _by_pattern(rows: Sequence[Mapping[str, str]], name: str) -> str:
    """Tell the value of an option of each pattern; nothing when some pattern has several."""
    pairs = list(dict.fromkeys((row["pattern"], row[name]) for row in rows))
    if len(pairs) > len(dict(pairs)):
        return ""
    return ", ".join(f"{value or 'none'} of {pattern}" for pattern, value in pairs)


def _mean(row: Mapping[str, str], measure: str, limit: Limit | None) -> Cell:
    if not row[f"{measure}_mean"]:
        return Cell("–", numeric=True)
    mean = float(row[f"{measure}_mean"])
    deviation = float(row[f"{measure}_sd"]) if row[f"{measure}_sd"] else None
    broken = limit is not None and not limit.allows(mean)
    return Cell(*with_spread(mean, deviation), broken, numeric=True)


def _count(amount: str) -> Cell:
    return Cell("–" if amount == "0" else amount, numeric=True, broken=amount != "0")


def _numeric(rows: Sequence[Mapping[str, str]], name: str) -> bool:
    def is_number(value: str) -> bool:
        try:
            float(value)
        except ValueError:
            return not value
        return True

    return all(is_number(row[name]) for row in rows)
