"""Options given as ``key=value`` texts: on the command line, for patterns, methods and study files."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING, Any

from .. import InputError

if TYPE_CHECKING:
    from pydantic import BaseModel


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
    from . import plugins

    return validated(plugins.load(kind, name), options)


def validated(
    model: type[BaseModel],
    options: Iterable[str] = (),
    flag: str = "--option",
    values: Mapping[str, Any] | None = None,
) -> Any:
    """Return a model of the given values and options.

    Parameters
    ----------
    model : type of BaseModel
    options : iterable of str
        ``key=value`` each.
    flag : str
        Where the options were given, for messages.
    values : mapping, optional
        Values that were given by command-line options of their own, which messages name.

    Raises
    ------
    InputError
        No such option, or a value that does not fit; the nearest choice is named.

    Examples
    --------
    >>> from skipline.recon.study.settings import Sampling
    >>> given = {"pattern": "regular-lines", "acceleration": 2.0}
    >>> validated(Sampling, ["partial_fourier=0.75"], "--constraint", given).partial_fourier
    0.75
    >>> validated(Sampling, [], "--constraint", given | {"acceleration": 0.5})
    Traceback (most recent call last):
        ...
    skipline.InputError: --acceleration: must be at least 1, not 0.5
    """
    from pydantic import ValidationError

    from .explain import first_problem

    given = dict(values or {})
    own = set(given)
    for option in options:
        key, equals, text = option.partition("=")
        if not equals or not key.strip():
            raise InputError(f"{flag} {option}: expected key=value, such as weight=2")
        value = parse_value(text)
        given[key.strip()] = tuple(value) if isinstance(value, list) else value
        own.discard(key.strip())
    try:
        return model.model_validate(given, strict=True)
    except ValidationError as error:
        keys, message = first_problem(error, model)
        name = ".".join(map(str, keys))
        where = f"--{name.replace('_', '-')}" if name in own else f"{flag} {name}"
        raise InputError(f"{where}: {message}") from None
