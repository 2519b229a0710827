"""Reconstruction methods: each a frozen object with options, and `reconstruct(data, threads)`."""

from __future__ import annotations

from typing import ClassVar, Protocol

from pydantic import BaseModel

from ..acquired import Acquired
from ..result import Reconstruction


class Method(Protocol):
    """What a reconstruction method offers; its options are the fields of a pydantic model.

    A class that inherits `pydantic.BaseModel`, with the options as fields, a `name`, a docstring whose first
    line says what it does, and `reconstruct` is a method. One that cannot work on every image has also
    ``check(shape)``, which raises `InputError`; it is asked before a study starts.
    """

    name: ClassVar[str]

    def reconstruct(self, data: Acquired, threads: int = 1) -> Reconstruction:
        """Return the image of the acquired data."""
        ...


__all__ = ["Acquired", "BaseModel", "Method", "Reconstruction"]
