"""What a results folder says, read back for the report."""

from __future__ import annotations

import csv
import json
import tomllib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

from ... import InputError
from ..study.tables import DRAWS, deviation, mean


@dataclass(frozen=True, eq=False)
class Finished:
    """A case that was finished.

    Attributes
    ----------
    folder : Path
        Where its volumes are.
    record : dict
        What its `case.json` says.
    """

    folder: Path
    record: Mapping[str, Any]

    @property
    def id(self) -> str:
        """The case's id, the name of its folder."""
        return self.folder.name

    @property
    def settings(self) -> Mapping[str, Any]:
        """The settings by name."""
        return self.record["settings"]

    @property
    def acceleration(self) -> float:
        """R as it was asked for."""
        return float(self.settings["acceleration"])

    @property
    def draws(self) -> tuple[int, ...]:
        """Which draw of the mask and of the noise."""
        return tuple(int(self.settings.get(name) or 0) for name in DRAWS)

    @property
    def converged(self) -> bool:
        """Whether the reconstruction met its criterion."""
        return bool(self.record.get("convergence", {}).get("converged", True))

    @cached_property
    def measures(self) -> Mapping[str, float]:
        """Value of each measure; JSON has infinite ones as text."""
        return {name: float(value) for name, value in self.record["measures"].items()}


@dataclass(frozen=True)
class Statistics:
    """A measure over the draws: mean, standard deviation (None of a single draw) and number."""

    mean: float
    deviation: float | None
    number: int


@dataclass(frozen=True, eq=False)
class Point:
    """One acceleration of a curve.

    Attributes
    ----------
    acceleration : float
        As asked for.
    cases : tuple of Finished
        The draws.
    broken : tuple of str
        The measures whose mean is outside its limit.
    """

    acceleration: float
    cases: tuple[Finished, ...]
    broken: tuple[str, ...]

    def statistics(self, measure: str) -> Statistics | None:
        """Mean and spread over the draws; None when no finished case has the measure."""
        values = [case.measures[measure] for case in self.cases if measure in case.measures]
        average = mean(values)
        return None if average is None else Statistics(average, deviation(values), len(values))


@dataclass(frozen=True, eq=False)
class Curve:
    """One choice of sampling and reconstruction under one condition, against the acceleration.

    Attributes
    ----------
    label, condition_label : str
        What tells it from the others.
    choice, condition : dict
        Its settings.
    acceleration : float or None
        The highest that passes.
    first_failure : dict or None
        What breaks first beyond it.
    points : tuple of Point
        By rising acceleration.
    """

    label: str
    condition_label: str
    choice: Mapping[str, Any]
    condition: Mapping[str, Any]
    acceleration: float | None
    first_failure: Mapping[str, Any] | None
    points: tuple[Point, ...]

    @property
    def sampling(self) -> dict[str, Any]:
        """The part of the choice that draws the mask."""
        names = list(self.choice)
        return {name: self.choice[name] for name in names[: names.index("method")]}

    @property
    def method(self) -> dict[str, Any]:
        """The part of the choice that reconstructs."""
        names = list(self.choice)
        return {name: self.choice[name] for name in names[names.index("method") :]}

    def at(self, acceleration: float | None) -> Point | None:
        """Return the point of an acceleration; None when there is none."""
        return next((point for point in self.points if point.acceleration == acceleration), None)


@dataclass(frozen=True, eq=False)
class Findings:
    """A results folder.

    Attributes
    ----------
    folder : Path
    study_text : str
        The study file as it was run.
    study, verdict : dict
        The study file and `verdict.json`.
    summary : list of dict
        The rows of `summary.csv`, as text.
    cases : tuple of Finished
        In the order of `cases.csv`.
    curves : tuple of Curve
    """

    folder: Path
    study_text: str
    study: Mapping[str, Any]
    verdict: Mapping[str, Any]
    summary: list[dict[str, str]]
    cases: tuple[Finished, ...]
    curves: tuple[Curve, ...]

    @property
    def measures(self) -> list[str]:
        """Names of the measures that some case has."""
        return list({name: None for case in self.cases for name in case.measures})

    @property
    def deciding_curve(self) -> Curve | None:
        """The curve that the verdict speaks of: the best choice in its weakest condition."""
        failure = self.verdict.get("first_failure")
        choice = self.verdict.get("choice")
        of_choice = [
            curve
            for curve in self.curves
            if (curve.choice == choice if choice else curve.label == self.verdict.get("label"))
        ]
        for curve in of_choice:
            if curve.acceleration == self.verdict.get("acceleration") and curve.first_failure == failure:
                return curve
        return of_choice[0] if of_choice else None

    def reference_of(self, case: Finished) -> Path:
        """Return where the reference image of a case is."""
        own = self.folder / f"reference-{case.record.get('reference_id')}.nii.gz"
        return own if own.exists() else self.folder / "reference.nii.gz"


def read_findings(folder: Path) -> Findings:
    """Read a results folder.

    Parameters
    ----------
    folder : Path
        As a study run leaves it.

    Raises
    ------
    InputError
        The folder does not hold the results of a study, or they cannot be read.
    """
    if not (folder / "verdict.json").is_file():
        raise InputError(f"{folder} holds no results of a study (no verdict.json); run a study into it first")
    try:
        verdict = json.loads((folder / "verdict.json").read_text(encoding="utf-8"))
        study_text = (folder / "study.toml").read_text(encoding="utf-8")
        summary = list(csv.DictReader((folder / "summary.csv").read_text(encoding="utf-8").splitlines()))
        rows = csv.DictReader((folder / "cases.csv").read_text(encoding="utf-8").splitlines())
        cases = tuple(_finished(folder / "cases" / row["id"] for row in rows))
        return Findings(
            folder, study_text, tomllib.loads(study_text), verdict, summary, cases, _curves(verdict, cases)
        )
    except (OSError, ValueError, KeyError, TypeError, AttributeError) as error:
        reason = " ".join(str(error).split())
        raise InputError(
            f"the results in {folder} cannot be read ({type(error).__name__}: {reason}); run the study again"
        ) from None


def _finished(folders: Iterable[Path]) -> Iterable[Finished]:
    for folder in folders:
        if (folder / "case.json").is_file():  # a failed case has none
            yield Finished(folder, json.loads((folder / "case.json").read_text(encoding="utf-8")))


def _curves(verdict: Mapping[str, Any], cases: tuple[Finished, ...]) -> tuple[Curve, ...]:
    """Put the draws back to the points of the verdict's curves."""
    draws: dict[str, list[Finished]] = {}
    for case in cases:
        draws.setdefault(_key(case.settings, case.acceleration), []).append(case)
    return tuple(
        Curve(
            label=told["label"],
            condition_label=told["condition_label"],
            choice=told["choice"],
            condition=told["condition"],
            acceleration=told["acceleration"],
            first_failure=told["first_failure"],
            points=tuple(
                Point(
                    float(point["acceleration"]),
                    tuple(
                        draws.get(_key({**told["choice"], **told["condition"]}, point["acceleration"]), [])
                    ),
                    tuple(point["broken"]),
                )
                for point in told["points"]
            ),
        )
        for told in verdict["curves"]
    )


def _key(settings: Mapping[str, Any], acceleration: float) -> str:
    """Return the settings of a point without the draws, whatever their order."""
    fixed = {name: value for name, value in settings.items() if name not in DRAWS}
    return json.dumps(fixed | {"acceleration": float(acceleration)}, sort_keys=True)
