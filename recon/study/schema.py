"""The JSON Schema of the study file, for editors that complete and check TOML."""

from __future__ import annotations

import copy
from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from .. import plugins
from .settings import About, Acquisition, Limit, Reference, Sampling
from .sweep import only_lists, sweepable

DRAFT = "https://json-schema.org/draft/2020-12/schema"


def study_schema() -> dict[str, Any]:
    """Return the JSON Schema of a study file, with the options of every installed pattern and method.

    Returns
    -------
    dict

    Examples
    --------
    >>> schema = study_schema()
    >>> sorted(schema["properties"])
    ['acquisition', 'limits', 'reconstruction', 'reference', 'sampling', 'study']
    >>> schema["properties"]["sampling"]["properties"]["acceleration"]["anyOf"][1]["type"]
    'array'
    """
    definitions: dict[str, Any] = {}
    sampling = _table(Sampling, definitions)
    options: dict[str, Any] = {}
    for name in _sorted_names("patterns"):
        for key, schema in _properties(plugins.load("patterns", name), definitions).items():
            schema["description"] = f"{name}: {schema.get('description', '')}".rstrip(": ")
            options.setdefault(key, []).append(schema)
    for key, schemas in options.items():
        sampling["properties"].setdefault(key, schemas[0] if len(schemas) == 1 else {"anyOf": schemas})
    sampling["properties"]["pattern"] = _choice("patterns", "Name of a sampling pattern.")
    reference = _table(Reference, definitions)
    reference["properties"]["phantom"] = _choice("phantoms", "Name of a numerical phantom.")
    limit = _table(Limit, definitions)
    return {
        "$schema": DRAFT,
        "title": "skipline study",
        "description": "A list where one value would do makes that value a sweep axis.",
        "type": "object",
        "properties": {
            "study": _table(About, definitions),
            "reference": reference,
            "acquisition": _table(Acquisition, definitions),
            "sampling": sampling,
            "reconstruction": {
                "description": "Reconstruction methods and their options.",
                "type": "array",
                "minItems": 1,
                "items": {"anyOf": [_method(name, definitions) for name in _sorted_names("methods")]},
            },
            "limits": {
                "description": "Acceptance bounds on measures.",
                "type": "object",
                "properties": {name: copy.deepcopy(limit) for name in _sorted_names("measures")},
                "additionalProperties": False,
            },
        },
        "required": ["study", "reference", "sampling", "reconstruction"],
        "additionalProperties": False,
        "$defs": definitions,
    }


def _table(model: type[BaseModel], definitions: dict[str, Any]) -> dict[str, Any]:
    required = [name for name, field in model.model_fields.items() if field.is_required()]
    table: dict[str, Any] = {
        "description": (model.__doc__ or "").strip().split("\n")[0],
        "type": "object",
        "properties": _properties(model, definitions),
        "additionalProperties": False,
    }
    return table | ({"required": required} if required else {})


def _method(name: str, definitions: dict[str, Any]) -> dict[str, Any]:
    """Options of one method; a table of several methods at once is rare enough to be left to `check`."""
    table = _table(plugins.load("methods", name), definitions)
    named = {"description": "Name of the reconstruction method.", "const": name}
    table["properties"] = {"method": named, **table["properties"]}
    return table | {"required": ["method", *table.get("required", [])]}


def _properties(model: type[BaseModel], definitions: dict[str, Any]) -> dict[str, Any]:
    schema = model.model_json_schema()
    definitions |= schema.get("$defs", {})
    properties = {}
    for name, field in model.model_fields.items():
        one = schema["properties"][name]
        described = {"description": one.pop("description")} if "description" in one else {}
        if one.get("default", ...) is not None and "default" in one:
            described["default"] = one["default"]
        properties[name] = described | _swept(_without_null(one), field)
    return properties


def _swept(one: dict[str, Any], field: FieldInfo) -> dict[str, Any]:
    """One value, or a list of them."""
    if not sweepable(field):
        return one
    item = one if only_lists(field) else _scalar(one)
    return {"anyOf": [item, {"type": "array", "items": one, "minItems": 1}]}


def _scalar(one: dict[str, Any]) -> dict[str, Any]:
    """Where a list is a sweep, a value that may be a list itself is given in a list of lists only."""
    members = [member for member in one.get("anyOf", []) if member.get("type") != "array"]
    return members[0] if len(members) == 1 else {"anyOf": members} if members else one


def _without_null(one: Mapping[str, Any]) -> dict[str, Any]:
    """TOML has no null: what may be None may be left out."""
    schema = {key: value for key, value in one.items() if key not in ("title", "default")}
    members = [member for member in schema.get("anyOf", []) if member.get("type") != "null"]
    if not members:
        return schema
    rest = {key: value for key, value in schema.items() if key != "anyOf"}
    return rest | (members[0] if len(members) == 1 else {"anyOf": members})


def _choice(kind: str, description: str) -> dict[str, Any]:
    one = {"enum": _sorted_names(kind)}
    return {"description": description, "anyOf": [one, {"type": "array", "items": one, "minItems": 1}]}


def _sorted_names(kind: str) -> list[str]:
    return sorted(getattr(plugins, kind)())
