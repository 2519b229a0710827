"""The study file as text: read TOML, apply ``--set`` overrides, and know where each key stands.

Everything that is refused later is refused with the place it came from: file, line, table and key, or the
``--set`` it was given with.
"""

from __future__ import annotations

import copy
import json
import re
import tomllib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ... import InputError
from ...masks.variable_density import FILES as LAW_FILES
from ..options import parse_value

Keys = tuple[str | int, ...]
"""The way to a value: ``("reconstruction", 1, "weight")``."""

PATHS: dict[Keys, tuple[str, ...]] = {
    ("reference", "image"): ("",),
    ("reference", "phase"): ("",),
    ("reference", "kspace"): ("",),
    ("acquisition", "maps"): ("",),
    ("sampling", "law"): LAW_FILES,
}
"""The keys whose values are paths of files, and the endings by which a path is known from another text."""

_BARE_KEY = r"""(?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*')"""
_DOTTED_KEY = rf"{_BARE_KEY}(?:[ \t]*\.[ \t]*{_BARE_KEY})*"
_HEADER = re.compile(rf"^\s*(\[\[?)\s*({_DOTTED_KEY})\s*\]")
_ASSIGNMENT = re.compile(rf"^\s*({_DOTTED_KEY})\s*=(.*)$")


@dataclass(frozen=True)
class Document:
    r"""A study file after its overrides, before validation.

    Attributes
    ----------
    path : Path
        The file, as the user named it.
    values : dict
        The tables. Paths of files are absolute: those of the file are relative to its folder, those of an
        override to the current folder.
    lines : dict
        Line number (from 1) of each table and key of the file.
    overridden : frozenset
        The keys that ``--set`` gave.

    Examples
    --------
    >>> text = '[study]\ntitle = "Slab"\n\n[sampling]\nacceleration = [2, 4]\n'
    >>> document = parse(text, Path("slab.toml"), ["sampling.acceleration=3"])
    >>> document.values["sampling"]["acceleration"], document.lines["study", "title"]
    (3, 2)
    >>> print(document.refusal(("study", "title"), "is too short"))
    slab.toml, line 2, [study] title: is too short
    >>> print(document.refusal(("sampling", "acceleration"), "is too low"))
    --set sampling.acceleration: is too low
    """

    path: Path
    values: dict[str, Any]
    lines: dict[Keys, int]
    overridden: frozenset[Keys] = frozenset()

    def refusal(self, keys: Keys, message: str) -> InputError:
        """Return the error that says what is wrong at `keys`, and where that is."""
        if keys not in self.lines and any(name[: len(keys)] == keys for name in self.overridden):
            return InputError(f"--set {dotted(keys)}: {message}")
        for length in range(len(keys), 0, -1):
            if keys[:length] in self.overridden:
                return InputError(f"--set {dotted(keys)}: {message}")
            if keys[:length] in self.lines:
                line = self.lines[keys[:length]]
                return InputError(f"{self.path}, line {line}, {self._name(keys)}: {message}")
        return InputError(f"{self.path}, {self._name(keys)}: {message}")

    def _name(self, keys: Keys) -> str:
        table, *rest = keys
        if isinstance(self.values.get(str(table)), list):
            words = [f"number {key + 1}" if isinstance(key, int) else key for key in rest]
            return " ".join([f"[[{table}]]", *words])
        return " ".join([f"[{table}]", *([dotted(tuple(rest))] if rest else [])])


def read_document(path: str | Path, overrides: Iterable[str] = ()) -> Document:
    """Read a study file and apply overrides.

    Parameters
    ----------
    path : str or Path
        The study file.
    overrides : iterable of str
        ``key=value`` each: see `parse`.

    Raises
    ------
    InputError
        The file is missing, is not TOML, or an override cannot be applied.

    Examples
    --------
    >>> read_document("nowhere.toml")
    Traceback (most recent call last):
        ...
    skipline.InputError: nowhere.toml: there is no such study file
    """
    path = Path(path)
    try:
        text = path.read_text(encoding="utf-8")
    except FileNotFoundError:
        raise InputError(f"{path}: there is no such study file") from None
    except IsADirectoryError:
        raise InputError(f"{path}: is a folder; expected a study file (TOML)") from None
    except UnicodeDecodeError:
        raise InputError(f"{path}: is not text in UTF-8; expected a study file (TOML)") from None
    except OSError as error:
        raise InputError(f"{path}: cannot be read ({error.strerror})") from None
    return parse(text, path, overrides)


def parse(text: str, path: Path, overrides: Iterable[str] = ()) -> Document:
    r"""Parse the text of a study file and apply overrides.

    Parameters
    ----------
    text : str
        TOML.
    path : Path
        The file it came from; relative paths in the text are relative to its folder.
    overrides : iterable of str
        ``key=value``, where the key is dotted (``sampling.acceleration``; ``reconstruction.0.weight`` for an
        item of an array of tables, counted from 0) and the value is TOML, or plain text when it is not.

    Raises
    ------
    InputError
        Not TOML, or an override that cannot be applied.

    Examples
    --------
    >>> parse("[study]\nseed = 7\n", Path("slab.toml"), ["study.title=Two words"]).values
    {'study': {'seed': 7, 'title': 'Two words'}}
    >>> parse("[study\n", Path("slab.toml"))
    Traceback (most recent call last):
        ...
    skipline.InputError: slab.toml, line 1: not valid TOML: expected ']' at the end of a table declaration
    """
    try:
        values = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(_syntax_error(text, path, str(error))) from None
    _make_absolute(values, path.parent)
    values, overridden = _override(values, overrides)
    return Document(path, values, locate(text), overridden)


def _syntax_error(text: str, path: Path, message: str) -> str:
    found = re.search(r" \(at (?:line (\d+), column \d+|end of document)\)$", message)
    line = len(text.rstrip().splitlines())
    if found:
        message = message[: found.start()]
        line = int(found.group(1) or line)
    return f"{path}, line {line}: not valid TOML: {message[:1].lower()}{message[1:]}"


def _make_absolute(values: Mapping[str, Any], folder: Path) -> None:
    for (table, key), endings in PATHS.items():
        entries = values.get(str(table))
        if isinstance(entries, dict) and key in entries:
            entries[key] = _absolute(entries[key], folder, endings)


def _absolute(value: Any, folder: Path, endings: tuple[str, ...]) -> Any:
    """Return the same path or paths, relative to `folder`; what is no path is left to validation."""
    if isinstance(value, list):
        return [_absolute(item, folder, endings) for item in value]
    if isinstance(value, str) and value and value.endswith(endings):
        return str((folder / Path(value).expanduser()).absolute())
    return value


def _override(values: dict[str, Any], overrides: Iterable[str]) -> tuple[dict[str, Any], frozenset[Keys]]:
    values = copy.deepcopy(values)
    overridden: set[Keys] = set()
    for override in overrides:
        name, equals, text = override.partition("=")
        name = name.strip()
        if not equals or not name or any(not part for part in name.split(".")):
            raise InputError(f"--set {override}: expected key=value, for example sampling.acceleration=4")
        keys: Keys = tuple(int(part) if part.isdecimal() else part for part in name.split("."))
        value = parse_value(text)
        if keys in PATHS:
            value = _absolute(value, Path.cwd(), PATHS[keys])
        _put(values, keys, value)
        overridden.add(keys)
    return values, frozenset(overridden)


def _put(values: dict[str, Any], keys: Keys, value: Any) -> None:
    if len(keys) < 2:
        raise InputError(
            f"--set {dotted(keys)}: expected table.key=value, for example sampling.acceleration=4"
        )
    place: Any = values
    for i, key in enumerate(keys):
        _check_item(place, keys, i)
        if i == len(keys) - 1:
            place[key] = value
        elif isinstance(place, dict):
            place = place.setdefault(key, {})
        else:
            place = place[key]


def _check_item(place: Any, keys: Keys, i: int) -> None:
    """Refuse ``keys[i]`` where it is no item of `place`, the value at ``keys[:i]``."""
    key, so_far = keys[i], dotted(keys[:i])
    if isinstance(place, list) and all(isinstance(item, dict) for item in place):
        if not isinstance(key, int):
            raise InputError(
                f"--set {dotted(keys)}: {so_far} is an array of {len(place)}; say which, "
                f"for example {so_far}.0.{dotted(keys[i:])}"
            )
        if key >= len(place):
            raise InputError(
                f"--set {dotted(keys)}: {so_far} has {len(place)} items, counted from 0; there is no {key}"
            )
    elif not isinstance(place, dict) or isinstance(key, int):
        raise InputError(f"--set {dotted(keys)}: {so_far or 'a study file'} has no item {key!r}")


def dotted(keys: Keys) -> str:
    """Write a way to a value with dots.

    Examples
    --------
    >>> dotted(("reconstruction", 0, "weight"))
    'reconstruction.0.weight'
    """
    return ".".join(map(str, keys))


def locate(text: str) -> dict[Keys, int]:
    r"""Find the line of each table and key in valid TOML.

    Parameters
    ----------
    text : str
        Valid TOML.

    Returns
    -------
    dict
        Line numbers, from 1. Keys inside a value (an inline table) are not listed: their owner is.

    Examples
    --------
    >>> lines = locate('[study]\nseed = 7\n\n[[reconstruction]]\nmethod = "zero-filled"\n')
    >>> lines["study", "seed"], lines["reconstruction", 0, "method"]
    (2, 5)
    """
    lines: dict[Keys, int] = {}
    counts: dict[Keys, int] = {}
    table: Keys = ()
    for number, line in _logical_lines(text):
        if header := _HEADER.match(line):
            table = _numbered(_split(header.group(2)), counts)
            if header.group(1) == "[[":
                lines.setdefault(table, number)
                counts[table] = counts.get(table, -1) + 1
                table = (*table, counts[table])
            lines.setdefault(table, number)
        elif assignment := _ASSIGNMENT.match(line):
            keys = _split(assignment.group(1))
            for length in range(1, len(keys) + 1):
                lines.setdefault((*table, *keys[:length]), number)
    return lines


def _split(name: str) -> Keys:
    return tuple(part.strip("\"'") for part in re.findall(_BARE_KEY, name))


def _numbered(keys: Keys, counts: Mapping[Keys, int]) -> Keys:
    """``[a.b]`` below ``[[a]]`` belongs to the last item of ``a``."""
    way: Keys = ()
    for key in keys[:-1]:
        way = (*way, key)
        if way in counts:
            way = (*way, counts[way])
    return (*way, keys[-1])


def _logical_lines(text: str) -> Iterator[tuple[int, str]]:
    """Lines outside multi-line strings and multi-line arrays."""
    quote = ""
    depth = 0
    for number, line in enumerate(text.splitlines(), 1):
        if not quote and not depth:
            yield number, line
        rest = line
        while rest:
            if quote:
                _, closed, rest = rest.partition(quote)
                quote = "" if closed else quote
                continue
            token = re.search(r"\"\"\"|'''|\"(?:\\.|[^\"\\])*\"|'[^']*'|#|[\[\]]", rest)
            if not token or token.group() == "#":
                break
            rest = rest[token.end() :]
            if token.group() in ('"""', "'''"):
                quote = token.group()
            elif token.group() in "[]":
                depth += 1 if token.group() == "[" else -1
        depth = max(0, depth)


def render(values: Mapping[str, Any]) -> str:
    """Write tables as TOML, in the layout of the study files of the manual.

    Parameters
    ----------
    values : mapping
        Tables, and arrays of tables, of plain values.

    Returns
    -------
    str

    Examples
    --------
    >>> print(render({"study": {"seed": 7}, "limits": {"nrmse": {"at_most": 0.05}}}))
    [study]
    seed = 7
    <BLANKLINE>
    [limits]
    nrmse = { at_most = 0.05 }
    <BLANKLINE>
    """
    blocks = []
    for name, table in values.items():
        items = table if isinstance(table, list) else [table]
        header = f"[[{_key(name)}]]" if isinstance(table, list) else f"[{_key(name)}]"
        for item in items:
            entries = (f"{_key(key)} = {_toml(value)}" for key, value in item.items())
            blocks.append("\n".join([header, *entries]))
    return "\n\n".join(blocks) + "\n"


def _key(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else json.dumps(name)


def _toml(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{_key(k)} = {_toml(v)}" for k, v in value.items()) + " }"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(map(_toml, value)) + "]"
    if isinstance(value, str):
        # JSON's escapes are TOML's, but for the delete character, which JSON leaves as it is.
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    return repr(value) if isinstance(value, int | float) else str(value)
