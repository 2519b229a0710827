"""The report of a study: what a results folder says, as one HTML file that opens without a network.

Examples
--------
>>> from skipline.recon.report import write_report
>>> write_report("nowhere")  # doctest: +IGNORE_EXCEPTION_DETAIL
Traceback (most recent call last):
    ...
InputError: nowhere holds no results of a study (no verdict.json); run a study into it first
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .page import write_report as write_report

_HOME = {"write_report": "page"}


def __getattr__(name: str) -> Any:
    """Load a public name when it is first used: figures and templates are not needed to import this."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_HOME[name]}", __name__), name)


def __dir__() -> list[str]:
    return sorted(_HOME)


__all__ = ["write_report"]
