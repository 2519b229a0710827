"""The page: everything of the report put into one HTML file."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ... import CAUTION, __version__
from ..files import write_text
from ..study.cases import text
from ..study.settings import Limit
from . import curves
from .findings import Findings, read_findings
from .montage import Montages, montages
from .provenance import provenance
from .samples import mask_rows, sampled_profile
from .table import summary_table
from .vector import inline_svg
from .wording import counted, number


def write_report(folder: str | os.PathLike[str]) -> Path:
    """Write `report.html` into a results folder.

    One file that loads nothing from elsewhere and runs no script. Equal results give equal bytes on the same
    machine. It is complete or as it was before.

    Parameters
    ----------
    folder : path
        The results folder of a study.

    Returns
    -------
    Path
        The report.

    Raises
    ------
    InputError
        The folder holds no results of a study, they cannot be read, or the report cannot be written.

    Examples
    --------
    >>> write_report("nowhere")  # doctest: +IGNORE_EXCEPTION_DETAIL
    Traceback (most recent call last):
        ...
    InputError: nowhere holds no results of a study (no verdict.json); run a study into it first
    """
    folder = Path(folder)
    path = folder / "report.html"
    write_text(path, render(read_findings(folder)))
    return path


def render(findings: Findings) -> str:
    """Return the page. Whatever the results say is text in it, and never markup."""
    from jinja2 import Environment, PackageLoader, StrictUndefined, select_autoescape
    from markupsafe import Markup

    shown = montages(findings)
    environment = Environment(
        loader=PackageLoader(__package__ or "", "."),
        autoescape=select_autoescape(default=True),
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    style = Path(__file__).with_name("report.css").read_text(encoding="utf-8")
    page = environment.get_template("report.html").render(
        style=Markup(style),
        title=findings.verdict["study"],
        description=findings.study.get("study", {}).get("description", ""),
        object=_object(findings, shown),
        profile=_profile(findings),
        verdict=findings.verdict,
        headline=_headline(findings),
        bounds=_bounds(findings),
        caution=CAUTION,
        legend=[
            (label, Markup(inline_svg(lambda style=style: curves.swatch_figure(style), label, label)))
            for label, style in curves.styles(findings.curves).items()
        ],
        conditions=[
            (condition, [_drawn(panel, f"{place}-{panel.measure}") for panel in panels])
            for place, (condition, panels) in enumerate(curves.panels(findings))
        ],
        shown=shown,
        masks=mask_rows(findings),
        table=summary_table(findings),
        provenance=provenance(findings),
        study_text=findings.study_text,
        version=__version__,
        listed=20,
    )
    # a file name may hold what is no character, which no file can
    return page.encode("utf-8", "replace").decode()


@dataclass(frozen=True)
class DrawnPanel:
    """A panel of the curves with its figure."""

    panel: curves.Panel
    svg: Any


@dataclass(frozen=True)
class Profile:
    """How many samples a mask takes at each place of its phase-encode axis, relative to the most."""

    shares: list[float]
    says: str


@dataclass(frozen=True)
class Bound:
    """A limit, and the means that it is compared with: at the verdict, and at the first failure."""

    measure: str
    limit: str
    means: tuple[tuple[str, bool], ...]


def _drawn(panel: curves.Panel, name: str) -> DrawnPanel:
    from markupsafe import Markup

    return DrawnPanel(panel, Markup(inline_svg(lambda: curves.panel_figure(panel), name, panel.says)))


def _headline(findings: Findings) -> str:
    """Return the verdict in figures: R, or that there is none."""
    acceleration = findings.verdict["acceleration"]
    return "" if acceleration is None else number(acceleration)


def _bounds(findings: Findings) -> tuple[tuple[str, ...], tuple[Bound, ...]] | None:
    """Return each limit beside the means that decide: the heads of the columns, and the rows."""
    curve = findings.deciding_curve
    if curve is None or not findings.verdict["limits"]:
        return None
    failing = (curve.first_failure or {}).get("acceleration")
    points = [point for r in (curve.acceleration, failing) if (point := curve.at(r)) is not None]
    rows = []
    for name, told in findings.verdict["limits"].items():
        limit = Limit(**told)
        means = []
        for point in points:
            found = point.statistics(name)
            means.append((number(found.mean), limit.allows(found.mean)) if found else ("–", False))
        rows.append(Bound(name, str(limit), tuple(means)))
    return tuple(f"at R = {number(point.acceleration)}" for point in points), tuple(rows)


def _object(findings: Findings, shown: Montages | None) -> list[str]:
    """Return what was measured, in a few words each."""
    conditions = [curve.condition for curve in findings.curves]
    facts = [_values(conditions, "reference")]
    if shown is not None and len({str(one.get("matrix")) for one in conditions}) == 1:
        facts.append(shown.matrix)
    coils = _values(conditions, "coils")
    facts.append(f"{coils} coil{'' if coils == '1' else 's'}")
    snr = _values(conditions, "snr", blank="none")
    facts.append("no noise" if snr == "none" else f"SNR {snr}")
    return [*facts, counted(int(findings.verdict["cases"]), "case")]


def _values(settings: Sequence[Mapping[str, Any]], name: str, blank: str = "") -> str:
    return ", ".join(dict.fromkeys(text(one.get(name)) or blank for one in settings))


def _profile(findings: Findings) -> Profile | None:
    """Return the samples of the mask that the verdict stands for, or of the first there is."""
    curve = findings.deciding_curve or next(iter(findings.curves), None)
    if curve is None:
        return None
    point = curve.at(curve.acceleration) or curve.points[0]
    case = next((case for each in (point, *curve.points) for case in each.cases), None)
    found = sampled_profile(case) if case else None
    if case is None or found is None:
        return None
    axis, shares = found
    darkest = max(shares)
    pattern = case.settings["pattern"]
    return Profile(
        [round(share / darkest, 3) for share in shares],
        f"share of samples taken along k{axis}: {pattern}, R = {number(case.acceleration)}",
    )
