"""The table of everything a study file may name."""

from __future__ import annotations

from typing import Any

from . import plugins


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
    skipline.InputError: there is no kind "phantom"; did you mean "phantoms"?
    """
    from rich.console import Console
    from rich.text import Text

    listed = {each: plugins.names(each) for each in (plugins.KINDS if kind is None else (kind,))}
    console = Console(highlight=False, soft_wrap=True)
    for each, names in listed.items():
        console.print(Text(each, style="bold"))
        for name in names:
            found = plugins.load(each, name)
            console.print(Text(f"  {name}", style="cyan"), Text(_summary(each, found)), sep="  ")
            for line in _options(found):
                console.print(Text(f"      {line}"))
        console.print()
    for problem in plugins.problems():
        console.print(Text(problem, style="yellow"))


def _summary(kind: str, found: Any) -> str:
    if kind == "measures":
        unit = f", in {found.unit}" if found.unit else ""
        return f"{found.description} ({found.better} is better{unit})"
    return (found.__doc__ or "").strip().split("\n")[0]


def _options(found: Any) -> list[str]:
    if not hasattr(found, "model_json_schema"):
        return []
    schema = found.model_json_schema()
    return [
        f"{name}: {_about(described, name in schema.get('required', ()))}"
        for name, described in schema.get("properties", {}).items()
    ]


def _about(described: dict[str, Any], required: bool) -> str:
    parts = [described.get("description", "")]
    parts += [" | ".join(map(str, described["enum"]))] if "enum" in described else []
    bounds = {
        "minimum": "at least",
        "exclusiveMinimum": "above",
        "maximum": "at most",
        "exclusiveMaximum": "below",
    }
    for kind in (described, *described.get("anyOf", ())):
        parts += [f"{words} {kind[bound]:g}" for bound, words in bounds.items() if bound in kind]
    default = described.get("default")
    parts.append("required" if required else f"default {'chosen' if default is None else default}")
    return "; ".join(filter(None, parts))
