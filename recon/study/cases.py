"""A case: one combination of a study's values, and the id that belongs to it alone."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Set
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from .encoding import CONSTRAINTS
from .settings import Acquisition, Reference, Sampling

RESULT_VERSION = 1
"""Raised whenever the same settings give another result: cases of an older number are run again."""


RESULTS = frozenset(
    {"acceleration_achieved", "iterations", "converged", "stopped", "seconds", "error", "id", "note"}
)
"""Names of results; an option of such a name is called otherwise in tables."""


@dataclass(frozen=True)
class Case:
    """Everything that determines one result.

    Attributes
    ----------
    seed : int
        The study's seed.
    reference, acquisition, sampling
        The tables, one value a key, defaults filled in.
    pattern, method
        The sampling pattern and the reconstruction method with their options.
    draw, noise_draw : int
        Which draw of the mask and of the noise, from 0.
    digests : tuple of (key, SHA-256)
        The contents of the files: a file that is moved stays the same, one that changes does not.

    Examples
    --------
    >>> class Lines(BaseModel):
    ...     power: float = 2.0
    >>> class Method(BaseModel):
    ...     weight: float = 1.0
    >>> def case(power, noise_draw=0):
    ...     reference = Reference(phantom="line-pair-slab", matrix=(64, 64), field_of_view_mm=(240.0, 240.0))
    ...     sampling = Sampling(pattern="lines", acceleration=2, phase_encode="y")
    ...     acquisition = Acquisition(coils=1)
    ...     pattern = Lines(power=power)
    ...     return Case(7, reference, acquisition, sampling, pattern, "sparse", Method(), 0, noise_draw)
    >>> case(2.0).id == case(2.0).id, case(2.0).id == case(3.0).id, len(case(2.0).id)
    (True, False, 12)
    >>> case(2.0).settings["power"], case(2.0).settings["matrix"]
    (2.0, [64, 64])
    """

    seed: int
    reference: Reference
    acquisition: Acquisition
    sampling: Sampling
    pattern: BaseModel
    method_name: str
    method: BaseModel
    draw: int
    noise_draw: int
    digests: tuple[tuple[str, str], ...] = ()
    law_digest: str = ""

    @cached_property
    def settings(self) -> dict[str, Any]:
        """The settings by name, in the order of the tables' columns.

        An option whose name is taken has its owner's before it: ``method_iterations`` is the limit that a
        method was given, ``iterations`` what it took.
        """
        sampling, draws = self._sampling, self._draws
        taken = {*self.condition, *sampling, *draws, *RESULTS}
        pattern = _named("pattern", self.pattern, taken)
        method = _named("method", self.method, taken | pattern.keys())
        return self.condition | sampling | pattern | draws | method

    @cached_property
    def condition(self) -> dict[str, Any]:
        """The settings of the object and its acquisition, as far as they are no choice of sampling."""
        condition: dict[str, Any] = {"reference": Path(self.reference.source).name}
        condition |= _plain(self.reference, "matrix", "field_of_view_mm", "slices")
        if self.reference.encoded_axes:
            condition["encoded_axes"] = self.reference.encoded_axes
        condition |= _plain(self.acquisition, "coils", "snr")
        if self.acquisition.maps:
            condition["maps"] = Path(self.acquisition.maps).name
        return condition

    @property
    def _sampling(self) -> dict[str, Any]:
        return _plain(self.sampling, "pattern", "phase_encode", *CONSTRAINTS)

    @property
    def _draws(self) -> dict[str, Any]:
        draws = {"draw": self.draw, "noise_draw": self.noise_draw, "method": self.method_name}
        return _plain(self.sampling, "acceleration") | draws

    @cached_property
    def id(self) -> str:
        """First 12 hexadecimal digits of the SHA-256 of all that determines the result."""
        pattern = self.pattern.model_dump(mode="json")
        return _hash(
            {
                "seed": self.seed,
                **self._content(self.condition | self._sampling | self._draws),
                # under keys of their own: a plug-in's option may have any name
                "pattern": pattern | ({"law": self.law_digest} if self.law_digest else {}),
                "method": self.method.model_dump(mode="json"),
            }
        )

    @cached_property
    def reference_id(self) -> str:
        """The same for the fully sampled reference image alone: noise and sampling do not touch it."""
        return _hash(self._content({k: v for k, v in self.condition.items() if k != "snr"}))

    def _content(self, settings: Mapping[str, Any]) -> dict[str, Any]:
        """Return what counts of settings: of files their contents and not their names."""
        settings = {name: value for name, value in settings.items() if name != "maps"}
        if self.reference.kind != "phantom":
            settings["reference"] = self.reference.kind
        return {"version": RESULT_VERSION, "settings": settings, "files": dict(self.digests)}

    def __str__(self) -> str:
        return ", ".join(
            f"{name} {text(value)}" for name, value in self.settings.items() if value is not None
        )


def text(value: Any) -> str:
    """Write a setting for a table.

    Examples
    --------
    >>> print(text(4.0), text([256, 192]), text(True), text("fista"), repr(text(None)))
    4 256x192 true fista ''
    """
    if value is None:
        return ""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, float):
        return f"{value:.6g}"
    if isinstance(value, list | tuple):
        return "x".join(map(text, value))
    return str(value)


def _plain(table: BaseModel, *names: str) -> dict[str, Any]:
    values = ((name, getattr(table, name)) for name in names)
    return {name: list(value) if isinstance(value, tuple) else value for name, value in values}


def _named(owner: str, options: BaseModel, taken: Set[str]) -> dict[str, Any]:
    """Return options by the names that tables have for them."""
    values = options.model_dump(mode="json")
    named: dict[str, Any] = {}
    for name, value in values.items():
        while name in taken or name in named:
            name = f"{owner}_{name}"
        named[name] = value
    return named


def _hash(content: Mapping[str, Any]) -> str:
    canonical = json.dumps(content, sort_keys=True, separators=(",", ":"), ensure_ascii=True)
    return hashlib.sha256(canonical.encode()).hexdigest()[:12]
