"""The OpenAPI document: problem+json throughout, examples that work with the data loaded."""

from __future__ import annotations

from http import HTTPStatus
from typing import Any

from fastapi import FastAPI
from fastapi.openapi.utils import get_openapi

from service.answers import Problem
from service.problems import MEDIA_TYPE

DESCRIPTION = (
    "Which ground is within modelled gliding range after an engine failure. A planning aid; the "
    "flight manual, local rules, and an instructor or operator come first. Reachable does not "
    "mean landable. Errors are RFC 9457 problem+json. HEAD works wherever GET does."
)
PNG: dict[str, Any] = {
    "description": "The tile.",
    "content": {"image/png": {"schema": {"type": "string", "format": "binary"}}},
}
TEXT: dict[str, Any] = {
    "description": "Status and title.",
    "content": {"text/plain": {"schema": {"type": "string"}}},
}


def problem_responses(*statuses: int) -> dict[int | str, dict[str, Any]]:
    """Return the problems that an endpoint may answer with, for its OpenAPI entry."""
    schema = {"$ref": "#/components/schemas/Problem"}
    found: dict[int | str, dict[str, Any]] = {}
    for status in statuses:
        found[status] = {
            "description": HTTPStatus(status).phrase,
            "content": {MEDIA_TYPE: {"schema": schema}},
        }
        if status == 503:
            wait = {"description": "Seconds to wait.", "schema": {"type": "integer"}}
            found[status]["headers"] = {"Retry-After": wait}
    return found


def _examples(start: dict[str, Any]) -> dict[str, dict[str, Any]]:
    """Return example requests by path, made from the start case of the data loaded."""
    windy = {
        **start,
        "track_deg": 90,
        "wind": [{"altitude_ft": 0, "from_deg": 270, "speed_kt": 12}],
        "margins": {"arrival_height_ft": 1000, "clearance_ft": 300},
    }
    bearing = {**start, "bearing_deg": 45}
    return {
        "/api/footprint": {
            "start": {"summary": "The start case", "value": start},
            "wind": {"summary": "With track, wind and margins", "value": windy},
        },
        "/api/section": {"bearing": {"summary": "Along a bearing", "value": bearing}},
    }


def build(app: FastAPI) -> dict[str, Any]:
    """Return the document."""
    document = get_openapi(
        title=app.title,
        version=app.version,
        description=app.description,
        routes=app.routes,
    )
    schemas = document["components"]["schemas"]
    problem_schema = Problem.model_json_schema(ref_template="#/components/schemas/{model}")
    schemas.update(problem_schema.pop("$defs"))
    schemas["Problem"] = problem_schema
    for path, examples in _examples(app.state.start).items():
        content = document["paths"][path]["post"]["requestBody"]["content"]
        content["application/json"]["examples"] = examples
    return document


def install(app: FastAPI) -> None:
    """Let the application answer `/openapi.json` with this document."""

    def document() -> dict[str, Any]:
        if app.openapi_schema is None:
            app.openapi_schema = build(app)
        return app.openapi_schema

    app.openapi = document  # type: ignore[method-assign]
