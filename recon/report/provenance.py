"""Where the results come from: versions, seeds, files, machine, run time, and how the cases ended."""

from __future__ import annotations

import platform
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from statistics import median
from typing import Any

from ... import __version__
from ..study.machine import cores
from .findings import Findings, Finished
from .wording import counted, duration, number


@dataclass(frozen=True)
class Trouble:
    """A case that failed or did not converge, and what is known of it."""

    id: str
    case: str
    reason: str


@dataclass(frozen=True)
class Provenance:
    """Names and values to list, the failed and the not converged cases, and how the finished ones ended."""

    facts: tuple[tuple[str, str], ...]
    failed: tuple[Trouble, ...]
    not_converged: tuple[Trouble, ...]
    endings: tuple[str, ...]


def provenance(findings: Findings) -> Provenance:
    """Return where the results come from."""
    cases = findings.cases
    return Provenance(
        tuple((name, value) for name, value in _facts(findings) if value),
        tuple(
            Trouble(told["id"], told["case"], told["error"]) for told in findings.verdict.get("failed", [])
        ),
        tuple(
            Trouble(told["id"], told["case"], _ending(told["id"], cases))
            for told in findings.verdict.get("not_converged", [])
        ),
        tuple(
            f"{counted(amount, 'case')}: {how}"
            for how, amount in Counter(_stopped(case) for case in cases).most_common()
        ),
    )


def _facts(findings: Findings) -> list[tuple[str, str]]:
    cases = findings.cases
    seconds = [float(case.record["seconds"]) for case in cases if "seconds" in case.record]
    return [
        ("Seed", ", ".join(map(str, dict.fromkeys(case.record.get("seed") for case in cases)))),
        ("Draws of the mask", _drawn([case.draws[0] for case in cases])),
        ("Draws of the noise", _drawn([case.draws[1] for case in cases])),
        ("Noise level", _noise(cases)),
        ("Versions", _versions(cases)),
        ("Machine", ", ".join(dict.fromkeys(str(m) for case in cases if (m := case.record.get("machine"))))),
        (
            "Run time",
            f"{duration(sum(seconds))} in all, summed over {counted(len(seconds), 'case')}; "
            f"median {duration(median(seconds))}, longest {duration(max(seconds))}"
            if seconds
            else "",
        ),
        *(
            (f"SHA-256 of {name}", digest)
            for name, digest in dict.fromkeys(
                (name, str(digest)) for case in cases for name, digest in case.record.get("files", {}).items()
            )
        ),
        (
            "Report written by",
            f"skipline {__version__}, Python {platform.python_version()}, on {platform.system()} "
            f"{platform.machine()}, {counted(cores(), 'core')}",
        ),
    ]


def _drawn(numbers: Sequence[int]) -> str:
    drawn = sorted(set(numbers))
    if len(drawn) < 2:
        return str(len(drawn))
    return f"{len(drawn)}, numbers {drawn[0]} to {drawn[-1]}"


def _noise(cases: Sequence[Finished]) -> str:
    """Tell sigma, and where each reconstruction had it from."""
    known = [case.record.get("convergence", {}) for case in cases]
    values = [float(one["sigma"]) for one in known if one.get("sigma") is not None]
    if not values:
        return ""
    sources = [str(one["sigma_source"]) for one in known if one.get("sigma_source") not in (None, "none")]
    low, high = number(min(values), 3), number(max(values), 3)
    spread = low if low == high else f"{low} to {high}"
    return f"sigma {spread}" + (f" ({', '.join(dict.fromkeys(sources))})" if sources else "")


def _versions(cases: Sequence[Finished]) -> str:
    found: dict[str, dict[str, None]] = {}
    for case in cases:
        for package, version in case.record.get("versions", {}).items():
            found.setdefault(package, {})[str(version)] = None
    return ", ".join(f"{package} {' and '.join(versions)}" for package, versions in found.items())


def _stopped(case: Finished) -> str:
    ending: dict[str, Any] = case.record.get("convergence", {})
    return str(ending.get("stopped", "no record of how it ended"))


def _ending(case_id: str, cases: Sequence[Finished]) -> str:
    ending = next((case.record.get("convergence", {}) for case in cases if case.id == case_id), {})
    parts = [str(ending.get("stopped", ""))]
    if ending.get("iterations") is not None:
        parts.append(counted(int(ending["iterations"]), "iteration"))
    if ending.get("optimality") is not None:
        parts.append(f"optimality residual {float(ending['optimality']):.2g}")
    return ", ".join(filter(None, parts))
