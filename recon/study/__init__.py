"""Studies: one TOML file stands for many cases, which are run, compared with a reference, and decided upon.

``load_study`` reads and validates a study file, ``Study.cases`` lists its cases, ``estimate`` says what they
will cost, ``run`` runs those that are not finished and writes tables and verdict, and ``study_schema`` is the
JSON Schema of the file.

Examples
--------
>>> from pathlib import Path
>>> import skipline
>>> from skipline.recon.study import load_study
>>> study = load_study(Path(skipline.__file__).parent / "configs" / "first-study.toml")
>>> study.name, len(study.cases()) > 1
('first-study', True)
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .cases import Case as Case
    from .cost import Estimate as Estimate
    from .cost import estimate as estimate
    from .plan import Study as Study
    from .plan import load_study as load_study
    from .runner import Failure as Failure
    from .runner import Outcome as Outcome
    from .runner import run as run
    from .schema import study_schema as study_schema

_HOME = {
    "Case": "cases",
    "Estimate": "cost",
    "estimate": "cost",
    "Study": "plan",
    "load_study": "plan",
    "Failure": "runner",
    "Outcome": "runner",
    "run": "runner",
    "study_schema": "schema",
}


def __getattr__(name: str) -> Any:
    """Load a public name when it is first used: reading a study file loads nothing that runs it."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_HOME[name]}", __name__), name)


__all__ = [
    "Case", "Estimate", "Failure", "Outcome", "Study", "estimate", "load_study", "run", "study_schema",
]  # fmt: skip
