"""Sweeps: a list where one value would do makes that value an axis; the table stands for all combinations."""

from __future__ import annotations

import types
from collections.abc import Iterator, Mapping
from itertools import product
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic.fields import FieldInfo

SINGLE = "one value"
"""Marks the field of a model that is not swept: ``Annotated[int, SINGLE]``."""


def axis(value: Any, field: FieldInfo | None) -> list[Any]:
    """Return the values that an entry of a table stands for.

    Parameters
    ----------
    value : object
        What the file says.
    field : FieldInfo or None
        The field that takes one value. A field that takes nothing but lists (a matrix) is swept by a list of
        lists, a field marked `SINGLE` is not swept.

    Examples
    --------
    >>> from pydantic import BaseModel
    >>> class Table(BaseModel):
    ...     acceleration: float
    ...     matrix: tuple[int, int]
    ...     draws: Annotated[int, SINGLE]
    >>> fields = Table.model_fields
    >>> axis([2, 4], fields["acceleration"]), axis(2, fields["acceleration"])
    ([2, 4], [2])
    >>> axis([256, 256], fields["matrix"]), axis([[256, 256], [128, 128]], fields["matrix"])
    ([(256, 256)], [(256, 256), (128, 128)])
    >>> axis([1, 2], fields["draws"])
    [[1, 2]]
    """
    if field is not None and SINGLE in field.metadata:
        return [value]
    sequences, only = _sequences(field.annotation) if field is not None else (set(), False)
    is_axis = isinstance(value, list) and (not only or any(isinstance(item, list) for item in value))
    values = value if is_axis else [value]
    if tuple in sequences:
        return [_as_tuple(item) for item in values]
    return list(values)


def combinations(
    table: Mapping[str, Any], fields: Mapping[str, FieldInfo], last: str | None = None
) -> Iterator[dict[str, Any]]:
    """Yield every combination of a table's values.

    Parameters
    ----------
    table : mapping
        Key to value, or list of values.
    fields : mapping
        The fields that take one value each.
    last : str, optional
        The key that varies fastest; otherwise it is the last of the table.

    Examples
    --------
    >>> from pydantic import BaseModel
    >>> class Table(BaseModel):
    ...     pattern: str
    ...     acceleration: float
    >>> for one in combinations({"acceleration": [2, 4], "pattern": "regular-lines"}, Table.model_fields):
    ...     print(one)
    {'pattern': 'regular-lines', 'acceleration': 2}
    {'pattern': 'regular-lines', 'acceleration': 4}
    """
    names = [name for name in fields if name in table] + [name for name in table if name not in fields]
    names.sort(key=lambda name: name == last)
    axes = [axis(table[name], fields.get(name)) for name in names]
    for values in product(*axes):
        yield dict(zip(names, values, strict=True))


def sweepable(field: FieldInfo) -> bool:
    """Whether a list makes this field a sweep axis."""
    return SINGLE not in field.metadata


def only_lists(field: FieldInfo) -> bool:
    """Whether a field takes nothing but lists, so that only a list of lists sweeps it."""
    return _sequences(field.annotation)[1]


def _sequences(annotation: Any) -> tuple[set[type], bool]:
    """Return the sequence types an annotation allows, and whether it allows nothing else."""
    origin = get_origin(annotation)
    if origin is Annotated:
        return _sequences(get_args(annotation)[0])
    if origin in (Union, types.UnionType):
        members = [_sequences(member) for member in get_args(annotation) if member is not type(None)]
        return set().union(*(found for found, _ in members)), all(only for _, only in members)
    kind = origin or annotation
    return ({kind}, True) if kind in (tuple, list) else (set(), False)


def _as_tuple(value: Any) -> Any:
    return tuple(map(_as_tuple, value)) if isinstance(value, list) else value
