"""The allowed range of a request's field in words, read from the request schema itself."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cache
from typing import Any

from pydantic import BaseModel

from service.schemas import FootprintRequest
from service.settings import TILE_ZOOM_MAX

PATH_FIELDS = {
    "z": f"a whole number, 0 to {TILE_ZOOM_MAX}",
    "x": "a whole number, 0 to 2^z - 1",
    "y": "a whole number, 0 to 2^z - 1",
    "name": "at most 64 characters",
}


@cache
def _schema(model: type[BaseModel]) -> dict[str, Any]:
    return model.model_json_schema()


def _open(node: dict[str, Any], definitions: dict[str, Any]) -> dict[str, Any]:
    """Follow a reference and step over `null` alternatives."""
    while True:
        if "$ref" in node:
            node = definitions[node["$ref"].rsplit("/", 1)[-1]]
        elif "anyOf" in node and any(part.get("type") == "null" for part in node["anyOf"]):
            node = next(part for part in node["anyOf"] if part.get("type") != "null")
        else:
            return node


def _child(node: dict[str, Any], part: str | int) -> Any:
    """Return the schema of one member or entry, or None."""
    if isinstance(part, str):
        return node.get("properties", {}).get(part)
    if "prefixItems" in node:
        items = node["prefixItems"]
        return items[part] if part < len(items) else None
    return node.get("items")


def _number(value: float) -> str:
    return f"{value:.10g}"


def _words(node: dict[str, Any]) -> str | None:
    """Return the allowed values of one schema in words."""
    if "enum" in node:
        return " or ".join(str(value) for value in node["enum"])
    if "minimum" in node and "maximum" in node:
        return f"{_number(node['minimum'])} to {_number(node['maximum'])}"
    if "prefixItems" in node:
        return f"{len(node['prefixItems'])} numbers: longitude, latitude"
    if "maxItems" in node:
        return f"at most {node['maxItems']} entries"
    if "properties" in node:
        return "an object with the fields " + ", ".join(node["properties"])
    if "maxLength" in node:
        return f"text of 1 to {node['maxLength']} characters"
    if "anyOf" in node:
        return "the id of a record in the catalog, or a record"
    return None


def allowed_at(parts: Sequence[str | int], model: type[BaseModel] = FootprintRequest) -> str | None:
    """Return what is allowed at a field, e.g. ``0 to 250``.

    Parameters
    ----------
    parts
        Names and indices from the top of the request to the field. For an unknown field the
        answer lists the fields that its object has.
    model
        The request's schema.
    """
    if len(parts) == 2 and parts[0] == "path":
        return PATH_FIELDS.get(str(parts[1]))
    schema = _schema(model)
    definitions = schema.get("$defs", {})
    node = _open(schema, definitions)
    for part in parts:
        child = _child(node, part)
        if not isinstance(child, dict):
            break
        node = _open(child, definitions)
    return _words(node)
