"""Say in one line what is wrong with a value, what was expected, and which valid choice is nearest."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from difflib import get_close_matches
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pydantic import BaseModel, ValidationError

Problem = tuple[tuple[str | int, ...], str]
"""The way to the key inside its table, and the sentence about it."""


def nearest(word: str, choices: Iterable[str]) -> str:
    """Return the end of a sentence that names the nearest valid choice, or all of them.

    Examples
    --------
    >>> nearest("aceleration", ["acceleration", "pattern"])
    '; did you mean "acceleration"?'
    >>> nearest("q", ["acceleration", "pattern"])
    '; expected one of: acceleration, pattern'
    """
    choices = list(choices)
    if near := get_close_matches(word.lower(), choices, n=1):
        return f'; did you mean "{near[0]}"?'
    return f"; expected one of: {', '.join(choices)}" if choices else ""


def first_problem(error: ValidationError, model: type[BaseModel]) -> Problem:
    """Return where the first error of a validation is, and what to say about it.

    Parameters
    ----------
    error : ValidationError
    model : type of BaseModel
        The model that was validated; its fields are the valid keys.

    Examples
    --------
    >>> from pydantic import BaseModel, ConfigDict, Field, ValidationError
    >>> class Sampling(BaseModel):
    ...     model_config = ConfigDict(extra="forbid", strict=True)
    ...     acceleration: float = Field(ge=1)
    >>> def problem(**values):
    ...     try:
    ...         Sampling(**values)
    ...     except ValidationError as error:
    ...         return first_problem(error, Sampling)
    >>> problem(acceleration=0.5)
    (('acceleration',), 'must be at least 1, not 0.5')
    >>> problem(acceleration="four")
    (('acceleration',), 'expected a number, not "four"')
    >>> problem(acceleration=2, pattrn=1)
    (('pattrn',), 'is not a key here; expected one of: acceleration')
    """
    problems = error.errors(include_url=False)
    key = problems[0]["loc"][:1]
    same_key = [problem for problem in problems if problem["loc"][:1] == key]
    # A value of several allowed types has an error for each: the one that came furthest says most.
    chosen = next((p for p in same_key if not str(p["type"]).endswith("_type")), same_key[0])
    context = dict(chosen.get("ctx", {}))
    if "key" in context:
        return (context["key"],), str(chosen["msg"])
    # inside a list the place is the list's key
    return key, _sentence(dict(chosen), context, model, len(same_key) > 1)


def _sentence(
    problem: Mapping[str, Any], context: Mapping[str, Any], model: type[BaseModel], several: bool
) -> str:
    kind, value = str(problem["type"]), problem.get("input")
    if kind == "missing":
        return "is missing" if len(problem["loc"]) == 1 else f"expected one more item in {shown(value)}"
    if kind == "extra_forbidden":
        return f"is not a key here{nearest(str(problem['loc'][-1]), model.model_fields)}"
    if kind == "literal_error":
        expected = context["expected"].replace("'", "")
        choices = [choice for part in expected.split(", ") for choice in part.split(" or ")]
        return f"{shown(value)} is not a choice{nearest(str(value), choices)}"
    for types, expected in _EXPECTED.items():
        if kind in types and not several:
            return f"expected {expected}, not {shown(value)}"
    for bound, words in _BOUNDS.items():
        if bound in context:
            return f"must be {words} {context[bound]:g}, not {shown(value)}"
    if kind == "string_too_short":
        return "must not be empty"
    if kind in ("too_long", "too_short"):
        wanted = context.get("max_length" if kind == "too_long" else "min_length")
        return f"expected a list of {wanted}, not {shown(value)}"
    if kind == "value_error":
        return str(context.get("error", problem["msg"]))
    if several:
        return f"{shown(value)} does not fit; expected {_type_name(model, problem)}"
    message = str(problem["msg"])
    return f"{message[:1].lower()}{message[1:]}, not {shown(value)}"


_EXPECTED: dict[tuple[str, ...], str] = {
    ("int_type", "int_parsing", "int_from_float"): "a whole number",
    ("float_type", "float_parsing"): "a number",
    ("finite_number",): "a finite number",
    ("string_type",): "text in quotes",
    ("bool_type", "bool_parsing"): "true or false",
    ("tuple_type", "list_type"): "a list",
    ("model_type", "model_attributes_type", "dict_type"): "a table",
}

_BOUNDS = {"ge": "at least", "gt": "more than", "le": "at most", "lt": "less than"}


def _type_name(model: type[BaseModel], problem: Mapping[str, Any]) -> str:
    """Name the types a key may have, in words."""
    field = model.model_fields.get(str(problem["loc"][0]))
    text = str(field.annotation) if field else "another value"
    words = {"int": "a whole number", "float": "a number", "str": "text", "bool": "true or false"}
    members = [member.strip() for member in text.replace("typing.", "").split(" | ")]
    return " or ".join(words.get(m, "a list" if "[" in m else m) for m in members if m != "None")


def shown(value: Any) -> str:
    """Write a value as the study file would.

    Examples
    --------
    >>> print(shown("four"), shown(True), shown((2, 3)), shown({"a": 1}))
    "four" true [2, 3] a table
    """
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, Mapping):
        return "a table"
    if isinstance(value, list | tuple):
        return f"[{', '.join(map(shown, value))}]"
    return "nothing" if value is None else str(value)
