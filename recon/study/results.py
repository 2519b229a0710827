"""The results folder of a study: what lies in it, and whose it is.

A case folder is finished when it has its `case.json`, which is written last; without it the folder is the
rest of an interrupted run, and the case is run again.
"""

from __future__ import annotations

import json
import math
import shutil
import tempfile
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from ... import InputError
from ..files import Content, phase_encoding, read_sidecar, write_json, write_text, write_volume
from . import plan
from .cases import Case
from .document import render
from .evaluate import Evaluated
from .references import Prepared
from .settings import Reference
from .sweep import combinations


def check_folder(folder: Path, study: plan.Study) -> None:
    """Refuse a folder that cannot be this study's; nothing is written.

    Raises
    ------
    InputError
        The folder holds another study or other files, or cannot be written to.
    """
    if folder.exists() and not folder.is_dir():
        raise InputError(f"{folder} is a file; expected a folder for the results")
    if (folder / "study.toml").exists():
        _check_owner(folder, study)
    elif folder.exists() and any(not item.name.startswith(".") for item in folder.iterdir()):
        raise InputError(f"{folder} holds other files and no study; choose an empty or a new folder")
    parent = next(place for place in (folder, *folder.absolute().parents) if place.exists())
    try:
        # Permissions tell less than trying: read-only file systems, quotas, a superuser.
        with tempfile.TemporaryFile(dir=parent):
            pass
    except OSError as error:
        raise InputError(f"{folder} cannot be written to ({error.strerror}); choose another folder") from None


def open_folder(folder: Path, study: plan.Study) -> None:
    """Create the results folder and write the study as it is run: overrides applied, paths absolute."""
    check_folder(folder, study)
    text = f"# {study.document.path.name} as it was run: overrides applied, paths absolute.\n\n"
    try:
        (folder / "cases").mkdir(parents=True, exist_ok=True)
        write_text(folder / "study.toml", text + render(study.document.values))
    except OSError as error:
        raise InputError(f"{folder} cannot be written to ({error.strerror}); choose another folder") from None


def _check_owner(folder: Path, study: plan.Study) -> None:
    """Refuse another study: one of another title or seed, or with no reference in common."""
    try:
        there = tomllib.loads((folder / "study.toml").read_text(encoding="utf-8"))
        about = there["study"]
        title, seed, sources = about["title"], about["seed"], _sources(there["reference"])
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError, KeyError, TypeError):
        raise InputError(f"{folder} holds a study.toml that cannot be read; choose another folder") from None
    if title != study.about.title:
        other = f'"{title}"'
    elif seed != study.about.seed:
        other = f'"{title}" with seed {seed}'
    elif not sources & _sources(study.document.values["reference"]):
        other = f'"{title}" of another reference'
    else:
        return
    raise InputError(f"{folder} holds another study, {other}; choose another folder")


def _sources(table: Mapping[str, Any]) -> set[str]:
    return {json.dumps(one, sort_keys=True) for one in combinations(table, Reference.model_fields)}


def case_folder(folder: Path, case: Case) -> Path:
    """Return the folder of a case."""
    return folder / "cases" / case.id


def read_record(folder: Path, case: Case, measures: list[str]) -> dict[str, Any] | None:
    """Return what `case.json` of a finished case says; None when the case is yet to be run.

    Parameters
    ----------
    folder : Path
    case : Case
    measures : list of str
        The measures that a finished case must have.
    """
    try:
        record = json.loads((case_folder(folder, case) / "case.json").read_text(encoding="utf-8"))
        record["measures"] = {name: float(value) for name, value in record["measures"].items()}
    except (OSError, ValueError, KeyError, AttributeError, TypeError):
        return None
    return record if set(measures) <= record["measures"].keys() else None


def write_case(folder: Path, case: Case, prepared: Prepared, evaluated: Evaluated) -> None:
    """Write a case, its `case.json` last."""
    place = case_folder(folder, case)
    shutil.rmtree(place, ignore_errors=True)
    place.mkdir(parents=True)
    about = {"Case": case.id}
    encoded = phase_encoding(case.sampling.phase_encode or "")
    difference = "magnitude of the image minus magnitude of the reference"
    _volume(place / "image.nii.gz", evaluated.image, prepared, "image", about | {"Description": str(case)})
    _volume(place / "error.nii.gz", evaluated.error, prepared, "map", about | {"Description": difference})
    _volume(place / "mask.nii.gz", evaluated.mask, prepared, "mask", about | encoded)
    write_json(place / "case.json", finite(evaluated.record))


def is_finished(folder: Path, case: Case) -> bool:
    """Whether a case has been written to its end."""
    return (case_folder(folder, case) / "case.json").exists()


def discard_case(folder: Path, case: Case) -> None:
    """Remove what an interrupted or failed case has written."""
    shutil.rmtree(case_folder(folder, case), ignore_errors=True)


def reference_file(folder: Path, study_cases: list[Case], case: Case) -> Path:
    """Return where a case's reference image is: `reference.nii.gz` for the first of the study."""
    first = study_cases[0].reference_id == case.reference_id
    return folder / ("reference.nii.gz" if first else f"reference-{case.reference_id}.nii.gz")


def holds_reference(path: Path, case: Case) -> bool:
    """Whether a reference image is already there."""
    return path.exists() and read_sidecar(path).get("Reference") == case.reference_id


def write_reference(path: Path, case: Case, prepared: Prepared) -> None:
    """Write the coil-combined, noise-free, fully sampled reference image."""
    description = f"fully sampled reference: {case.settings['reference']}"
    _volume(
        path, prepared.image, prepared, "image", {"Reference": case.reference_id, "Description": description}
    )


def _volume(
    path: Path, data: np.ndarray, prepared: Prepared, content: Content, sidecar: dict[str, Any]
) -> None:
    write_volume(path, data, prepared.affine, content=content, sidecar=sidecar, like=prepared.like)


def finite(value: Any) -> Any:
    """Write infinite numbers and NaN as text, which JSON has no numbers for; `float` reads them back.

    Examples
    --------
    >>> finite({"psnr": float("inf"), "nrmse": 0.0})
    {'psnr': 'inf', 'nrmse': 0.0}
    """
    if isinstance(value, Mapping):
        return {key: finite(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [finite(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return str(value)
    return value
