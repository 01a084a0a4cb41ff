"""The JSON schema of a settings file, for editors that complete and check while one types."""

from __future__ import annotations

from typing import Any, Final, get_args

from spheru.config.models import Document, Record
from spheru.config.records import PLAIN
from spheru.config.series import SeriesTables
from spheru.material.record import Mark

__all__ = ["settings_schema"]

_DRAFT: Final = "https://json-schema.org/draft/2020-12/schema"


def settings_schema() -> dict[str, Any]:
    """Return the JSON schema of settings files.

    Quantities are strings with a pattern and an example; every key has its meaning.

    Returns
    -------
    schema : dict
        A schema in the 2020-12 draft.

    Examples
    --------
    >>> settings_schema()["required"]
    ['material', 'cooling', 'sample']
    """
    schema = _without_null(Document.model_json_schema(by_alias=True))
    record = _without_null(Record.model_json_schema(by_alias=True))
    definitions = schema.pop("$defs")
    for name, shape in definitions.items():
        definitions[name] = _with_file(shape)
    series = _without_null(SeriesTables.model_json_schema(by_alias=True))
    definitions |= series.pop("$defs")
    schema["properties"] |= series["properties"]
    for name, shape in record.pop("$defs").items():
        definitions[name] = _overridable(_with_file(shape))
    material = definitions["Material"]
    changes = _overridable(record)["properties"]
    material["properties"] |= {key: value for key, value in changes.items() if key != "name"}
    material["additionalProperties"] = False
    return {"$schema": _DRAFT, **schema, "$defs": definitions}


def _without_null(shape: Any) -> Any:
    """Leave out what TOML cannot say: a key without a value is a key that is not there."""
    if isinstance(shape, list):
        return [_without_null(part) for part in shape]
    if not isinstance(shape, dict):
        return shape
    kept = {key: _without_null(value) for key, value in shape.items()}
    kept = {key: value for key, value in kept.items() if key != "default" or value is not None}
    given = [part for part in kept.get("anyOf", ()) if part != {"type": "null"}]
    if len(given) == 1:
        del kept["anyOf"]
        return given[0] | kept
    return kept


def _with_file(shape: dict[str, Any]) -> dict[str, Any]:
    """Let the name of a file stand in place of the lists of a law."""
    if "file" not in shape.get("properties", {}):
        return shape
    lists = {key for key, value in shape["properties"].items() if value.get("type") == "array"}
    return shape | {"required": [key for key in shape.get("required", []) if key not in lists]}


def _overridable(shape: dict[str, Any]) -> dict[str, Any]:
    """Let any one value of a record be given alone, plainly or with its mark and source."""
    properties = {}
    for key, value in shape["properties"].items():
        described = {k: v for k, v in value.items() if k in ("description", "default")}
        inner = {"anyOf" if k == "oneOf" else k: v for k, v in value.items() if k not in described}
        if key in PLAIN or "$ref" in str(inner):
            properties[key] = inner | described
        else:
            properties[key] = {"anyOf": [inner, _marked(inner)], **described}
    kept = {key: value for key, value in shape.items() if key != "required"}
    return kept | {"properties": properties}


def _marked(shape: dict[str, Any]) -> dict[str, Any]:
    return {
        "type": "object",
        "properties": {
            "value": shape,
            "mark": {"enum": list(get_args(Mark))},
            "source": {"type": "string"},
        },
        "required": ["value"],
        "additionalProperties": False,
    }
