"""Options given as ``key=value`` texts: on the command line, for patterns, methods and study files."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable
from typing import Any

from .. import InputError


def parse_value(text: str) -> Any:
    """Return a TOML value, or the text itself: nobody should have to quote quotes in a shell.

    Examples
    --------
    >>> parse_value("2.5"), parse_value("[1, 2]"), parse_value("db4"), parse_value('"db4"')
    (2.5, [1, 2], 'db4', 'db4')
    """
    try:
        parsed = tomllib.loads(f"value = {text}")
    except tomllib.TOMLDecodeError:
        return text
    return parsed["value"] if parsed.keys() == {"value"} else text


def with_options(kind: str, name: str, options: Iterable[str]) -> Any:
    """Return a pattern or a method with the given options.

    Parameters
    ----------
    kind : "patterns" or "methods"
    name : str
    options : iterable of str
        ``key=value`` each.

    Raises
    ------
    InputError
        No such name, no such option, or a value that does not fit; the nearest choice is named.

    Examples
    --------
    >>> with_options("methods", "wavelet-sparse", ["weight=3", "wavelet=sym8"]).weight
    3.0
    >>> with_options("methods", "wavelet-sparse", ["weigth=3"])
    Traceback (most recent call last):
        ...
    skipline.InputError: --option weigth: is not a key here; did you mean "weight"?
    """
    from pydantic import ValidationError

    from . import plugins
    from .study.explain import first_problem

    model = plugins.load(kind, name)
    values = {}
    for option in options:
        key, equals, text = option.partition("=")
        if not equals or not key.strip():
            raise InputError(f"--option {option}: expected key=value, such as weight=2")
        values[key.strip()] = parse_value(text)
    try:
        return model.model_validate(values, strict=True)
    except ValidationError as error:
        keys, message = first_problem(error, model)
        raise InputError(f"--option {'.'.join(map(str, keys))}: {message}") from None
