"""RFC 9457 problems for all four roads: domain error, validation, HTTP error, anything else."""

from __future__ import annotations

import json
import logging
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from http import HTTPStatus
from typing import Any

from fastapi import FastAPI
from fastapi.exceptions import RequestValidationError
from pydantic import BaseModel
from starlette.exceptions import HTTPException
from starlette.requests import Request
from starlette.responses import Response
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from perf.errors import Cancelled, InputError, LimitError, ModelError, RecordError, TerrainError
from service.allowed import allowed_at
from service.schemas import FootprintRequest, SectionRequest

logger = logging.getLogger("engineout")
SECTION_PATH = "/api/section"
MEDIA_TYPE = "application/problem+json"
NAME = re.compile(r"[a-z][a-z0-9_]{0,39}")  # only such names may come back in a pointer


@dataclass(frozen=True)
class ProblemType:
    """One kind of problem: its name in the type URI, status and title."""

    slug: str
    status: int
    title: str

    @property
    def uri(self) -> str:
        """Return the type's URI, relative to the service; a GET on it explains the type."""
        return f"/problems/{self.slug}"


INVALID_REQUEST = ProblemType("invalid-request", 422, "The request has a field that is not allowed")
INVALID_VALUE = ProblemType("invalid-value", 422, "A value is outside what the model accepts")
FAULTY_RECORD = ProblemType("faulty-record", 422, "The aircraft record is faulty or unknown")
NO_TERRAIN = ProblemType("no-terrain", 422, "There is no usable terrain here")
SOLVE_TOO_LARGE = ProblemType("solve-too-large", 413, "The solve would exceed the cell limit")
SOLVE_STOPPED = ProblemType("solve-stopped", 503, "The solve was stopped")
TOO_BUSY = ProblemType("too-busy", 503, "All places for solves are taken")
BODY_TOO_LARGE = ProblemType("body-too-large", 413, "The request body is too large")
NESTING_TOO_DEEP = ProblemType("nesting-too-deep", 400, "The request body is nested too deeply")
MALFORMED_JSON = ProblemType("malformed-json", 400, "The request body is not JSON")
NUMBER_NOT_FINITE = ProblemType("number-not-finite", 422, "A number is not finite")
WRONG_MEDIA_TYPE = ProblemType("wrong-media-type", 415, "The request body must be JSON")
ALTITUDE_LIMIT = ProblemType("altitude-limit", 422, "The altitude is outside the limits")
LATITUDE_LIMIT = ProblemType("latitude-limit", 422, "The position is outside the limits")
WIND_LEVELS_LIMIT = ProblemType("wind-levels-limit", 422, "There are too many wind levels")
WIND_SPEED_LIMIT = ProblemType("wind-speed-limit", 422, "The wind speed is outside the limits")
INTERNAL = ProblemType("internal", 500, "The service failed on this request")

DOMAIN: dict[type[ModelError], ProblemType] = {
    InputError: INVALID_VALUE,
    RecordError: FAULTY_RECORD,
    TerrainError: NO_TERRAIN,
    LimitError: SOLVE_TOO_LARGE,
    Cancelled: SOLVE_STOPPED,
    ModelError: INTERNAL,
}
BY_POINTER: tuple[tuple[re.Pattern[str], frozenset[str], ProblemType], ...] = (
    (re.compile("/altitude_ft"), frozenset({"less_than_equal", "greater_than_equal"}),
     ALTITUDE_LIMIT),
    (re.compile("/(position|to)/[01]"), frozenset({"less_than_equal", "greater_than_equal"}),
     LATITUDE_LIMIT),
    (re.compile("/wind"), frozenset({"too_long"}), WIND_LEVELS_LIMIT),
    (re.compile(r"/wind/\d+/speed_kt"), frozenset({"less_than_equal", "greater_than_equal"}),
     WIND_SPEED_LIMIT),
)  # fmt: skip
ALL_TYPES: tuple[ProblemType, ...] = tuple(
    value for value in list(globals().values()) if isinstance(value, ProblemType)
)

WORDS: dict[str, str] = {
    "missing": "This field is required.",
    "extra_forbidden": "The service knows no such field.",
    "less_than_equal": "This number is too large.",
    "greater_than_equal": "This number is too small.",
    "finite_number": "This number is not finite.",
    "float_type": "This must be a number.",
    "int_parsing": "This must be a whole number.",
    "literal_error": "This is none of the allowed values.",
    "string_type": "This must be text.",
    "too_long": "There are too many entries.",
    "too_short": "There are too few entries.",
    "list_type": "This must be a list.",
    "tuple_type": "This must be a list of numbers.",
    "model_attributes_type": "This must be an object.",
    "model_type": "This must be an object.",
    "dict_type": "This must be an object.",
    "aircraft_type": "This must be a record's id or a record.",
}


def pointer(parts: Iterable[str | int]) -> str:
    """Return the RFC 6901 pointer to a field.

    It stops before the first name that is not a plain lower-case word, so that nothing a client
    wrote comes back except the name of a field.
    """
    kept: list[str] = []
    for part in parts:
        if isinstance(part, str) and not part.isdecimal() and not NAME.fullmatch(part):
            break
        kept.append(str(part))
    return "".join(f"/{part}" for part in kept)


def error_entry(parts: Sequence[str | int], detail: str, allowed: str | None) -> dict[str, Any]:
    """Return one entry of a problem's `errors`."""
    return {"pointer": pointer(parts), "detail": detail, "allowed": allowed}


def problem(
    kind: ProblemType,
    detail: str,
    errors: Sequence[Mapping[str, Any]] = (),
    headers: Mapping[str, str] | None = None,
) -> Response:
    """Return a problem as a response."""
    body: dict[str, Any] = {
        "type": kind.uri,
        "title": kind.title,
        "status": kind.status,
        "detail": detail,
        "errors": list(errors),
    }
    kept = {key: value for key, value in (headers or {}).items() if key.lower() != "content-type"}
    return Response(json.dumps(body), kind.status, kept, MEDIA_TYPE)


def kind_of(error: ModelError) -> ProblemType:
    """Return the problem type of a domain error, by the nearest class in the table."""
    return next(DOMAIN[cls] for cls in type(error).__mro__ if cls in DOMAIN)


def from_domain(error: ModelError, retry_after_s: int = 2) -> Response:
    """Return the problem of a domain error."""
    kind = kind_of(error)
    if kind is INTERNAL:
        return from_unexpected()
    errors = []
    if error.field is not None:
        parts = [part for part in re.split(r"[.\[\]/]+", error.field) if part]
        errors.append(error_entry(parts, error.detail, error.allowed))
    headers = {"Retry-After": str(retry_after_s)} if kind.status == 503 else None
    return problem(kind, error.detail, errors, headers)


def _validation_kind(error: Mapping[str, Any], where: str) -> ProblemType:
    """Return the limit that one validation error names, or the general type."""
    for pattern, types, kind in BY_POINTER:
        if pattern.fullmatch(where) and error["type"] in types:
            return kind
    return INVALID_REQUEST


def from_validation(
    found: Sequence[Mapping[str, Any]], model: type[BaseModel] = FootprintRequest
) -> Response:
    """Return the problem of a request that the schemas refuse; pydantic's input never shows."""
    entries: list[dict[str, Any]] = []
    kinds: set[ProblemType] = set()
    for error in list(found)[:20]:
        parts = list(error["loc"])
        parts = parts[1:] if parts[:1] == ["body"] else parts
        detail = WORDS.get(error["type"], "This value is not allowed.")
        entry = error_entry(parts, detail, allowed_at(parts, model))
        kinds.add(_validation_kind(error, entry["pointer"]))
        entries.append(entry)
    kind = kinds.pop() if len(kinds) == 1 else INVALID_REQUEST
    first = entries[0]
    place = first["pointer"] or "the body"
    allowed = f" Allowed: {first['allowed']}." if first["allowed"] else ""
    return problem(kind, f"{place}: {first['detail']}{allowed}", entries)


def from_http(error: HTTPException) -> Response:
    """Return the problem of an HTTP error with its headers kept; HEAD is allowed where GET is."""
    phrase = HTTPStatus(error.status_code).phrase
    headers = dict(error.headers or {})
    allow = next((key for key in headers if key.lower() == "allow"), None)
    if allow and "GET" in headers[allow] and "HEAD" not in headers[allow]:
        headers[allow] += ", HEAD"
    body = {
        "type": "about:blank",
        "title": phrase,
        "status": error.status_code,
        "detail": f"{phrase}.",
        "errors": [],
    }
    kept = {key: value for key, value in headers.items() if key.lower() != "content-type"}
    return Response(json.dumps(body), error.status_code, kept, MEDIA_TYPE)


def from_unexpected() -> Response:
    """Return the problem of a defect; what went wrong is in the log, not in the answer."""
    return problem(INTERNAL, "Something went wrong in the service. The log has the details.")


def install(app: FastAPI, retry_after_s: int) -> None:
    """Register the handlers of the first three roads; `CatchAll` is the fourth."""

    async def on_domain(_: Request, error: Exception) -> Response:
        assert isinstance(error, ModelError)
        if kind_of(error) is INTERNAL:
            logger.error("domain error without a problem type", exc_info=error)
        return from_domain(error, retry_after_s)

    async def on_validation(request: Request, error: Exception) -> Response:
        assert isinstance(error, RequestValidationError)
        model = SectionRequest if request.url.path == SECTION_PATH else FootprintRequest
        return from_validation(error.errors(), model)

    async def on_http(_: Request, error: Exception) -> Response:
        assert isinstance(error, HTTPException)
        return from_http(error)

    app.add_exception_handler(ModelError, on_domain)
    app.add_exception_handler(RequestValidationError, on_validation)
    app.add_exception_handler(HTTPException, on_http)


class CatchAll:
    """Pure ASGI middleware: any other exception is logged and answered without its text."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Pass the request on and answer what escapes."""
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        started = False

        async def watch(message: Message) -> None:
            nonlocal started
            started = started or message["type"] == "http.response.start"
            await send(message)

        try:
            await self.app(scope, receive, watch)
        except Exception:
            logger.exception("a request failed")
            if started:
                raise
            await from_unexpected()(scope, receive, send)
