"""The table of everything a study file may name."""

from __future__ import annotations

from typing import Any

from .. import InputError
from . import plugins

KINDS = ("patterns", "phantoms", "methods", "measures")


def print_listing(kind: str | None = None) -> None:
    """Print names, descriptions and options of one kind, or of all.

    Raises
    ------
    InputError
        There is no such kind.

    Examples
    --------
    >>> print_listing("phantom")
    Traceback (most recent call last):
        ...
    skipline.InputError: 'phantom' is not a kind; expected one of: patterns, phantoms, methods, measures
    """
    from rich.console import Console
    from rich.text import Text

    if kind is not None and kind not in KINDS:
        raise InputError(f"{kind!r} is not a kind; expected one of: {', '.join(KINDS)}")
    console = Console(highlight=False, soft_wrap=True)
    for each in KINDS if kind is None else (kind,):
        console.print(Text(each, style="bold"))
        for name in getattr(plugins, each)():
            found = plugins.load(each, name)
            console.print(Text(f"  {name}", style="cyan"), Text(_summary(each, found)), sep="  ")
            for line in _options(found):
                console.print(Text(f"      {line}"))
        console.print()
    for problem in plugins.problems():
        console.print(Text(problem, style="yellow"))


def _summary(kind: str, found: Any) -> str:
    if kind == "measures":
        unit = "" if found.unit == "1" else f", in {found.unit}"
        return f"{found.description} ({found.better} is better{unit})"
    return (found.__doc__ or "").strip().split("\n")[0]


def _options(found: Any) -> list[str]:
    lines = []
    for name, field in getattr(found, "model_fields", {}).items():
        default = "required" if field.is_required() else f"default {field.default}"
        limits = [str(limit) for limit in field.metadata]
        about = "; ".join([*filter(None, [field.description]), default, *limits])
        lines.append(f"{name}: {about}")
    return lines
