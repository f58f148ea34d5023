"""Request bodies are checked before anything parses them: type, size, depth, finite numbers."""

from __future__ import annotations

import json
import math
import re
from typing import Any

from starlette.datastructures import Headers
from starlette.responses import Response
from starlette.routing import Match, Mount
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.problems import (
    BODY_TOO_LARGE,
    MALFORMED_JSON,
    NESTING_TOO_DEEP,
    NUMBER_NOT_FINITE,
    WRONG_MEDIA_TYPE,
    error_entry,
    problem,
)

STRING = re.compile(rb'"(?:[^"\\]++|\\.)*+\\?(?:"|\Z)', re.DOTALL)  # linear: it never backtracks
BRACKET = re.compile(rb"[\[\]{}]")
DIGITS_MAX = 20  # longer whole numbers are read as floating point; none of ours needs them


class _Refused(Exception):  # noqa: N818 - carries a response, not an error of the program
    """The body is refused with this response."""

    def __init__(self, response: Response) -> None:
        super().__init__()
        self.response = response


def depth_of(body: bytes, stop: int) -> int:
    """Return the nesting depth of raw JSON, text left out; counting ends beyond `stop`."""
    depth = deepest = 0
    for match in BRACKET.finditer(STRING.sub(b"", body)):
        depth += 1 if match.group() in b"[{" else -1
        deepest = max(deepest, depth)
        if deepest > stop:
            break
    return deepest


def _whole(digits: str) -> int | float:
    return int(digits) if len(digits) <= DIGITS_MAX else float(digits)


def _members(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    """Return an object, refusing a name that stands twice: which one counts would be a guess."""
    members = dict(pairs)
    if len(members) != len(pairs):
        raise ValueError("a name stands twice in one object")
    return members


def first_not_finite(value: Any, parts: tuple[str | int, ...] = ()) -> Any:
    """Return the way to the first number that is NaN or infinite, or None.

    The depth of `value` must have been checked: this recurses.
    """
    if isinstance(value, float) and not math.isfinite(value):
        return parts
    children: Any = ()
    if isinstance(value, dict):
        children = value.items()
    elif isinstance(value, list):
        children = enumerate(value)
    for key, child in children:
        found = first_not_finite(child, (*parts, key))
        if found is not None:
            return found
    return None


def _is_taken(scope: Scope) -> bool:
    """Return whether a route takes the request; others get 404 or 405, whatever the body."""
    routes = scope["app"].router.routes if "app" in scope else []
    return not routes or any(
        not isinstance(route, Mount) and route.matches(scope)[0] is Match.FULL for route in routes
    )


class BodyGuard:
    """Pure ASGI middleware that reads a request's body, checks it and hands it on.

    Parameters
    ----------
    app
        The application behind.
    max_bytes
        Largest body [byte]; reading stops at the first byte beyond.
    max_depth
        Deepest nesting of arrays and objects.
    """

    def __init__(self, app: ASGIApp, max_bytes: int, max_depth: int) -> None:
        self.app = app
        self.max_bytes = max_bytes
        self.max_depth = max_depth

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Check the body of a request that carries one."""
        if scope["type"] != "http" or scope["method"] in ("GET", "HEAD", "OPTIONS"):
            await self.app(scope, receive, send)
            return
        try:
            headers = Headers(scope=scope)
            body = await self._read(headers, receive)
            if scope["method"] == "POST" and _is_taken(scope):
                self._check_type(headers)
                self._check_json(body)
        except _Refused as refused:
            await refused.response(scope, receive, send)
            return
        if body is None:
            return
        handed = False

        async def replay() -> Message:
            nonlocal handed
            if handed:
                return await receive()
            handed = True
            return {"type": "http.request", "body": body, "more_body": False}

        await self.app(scope, replay, send)

    def _too_large(self) -> _Refused:
        words = f"at most {self.max_bytes} bytes"
        detail = f"The request body is larger than the limit of {self.max_bytes} bytes."
        return _Refused(problem(BODY_TOO_LARGE, detail, [error_entry((), detail, words)]))

    async def _read(self, headers: Headers, receive: Receive) -> bytes | None:
        """Return the body; None if the client left while sending."""
        declared = headers.get("content-length", "0")
        if declared.isdecimal() and (len(declared) > 18 or int(declared) > self.max_bytes):
            raise self._too_large()
        chunks: list[bytes] = []
        size = 0
        while True:
            message = await receive()
            if message["type"] == "http.disconnect":
                return None
            chunk = message.get("body", b"")
            size += len(chunk)
            if size > self.max_bytes:
                raise self._too_large()
            chunks.append(chunk)
            if not message.get("more_body", False):
                return b"".join(chunks)

    def _check_type(self, headers: Headers) -> None:
        media_type = headers.get("content-type", "").split(";")[0].strip().lower()
        if media_type != "application/json":
            detail = "The request body must have the content type application/json."
            entry = error_entry((), detail, "application/json")
            raise _Refused(problem(WRONG_MEDIA_TYPE, detail, [entry]))
        if headers.get("content-encoding", "identity").strip().lower() != "identity":
            detail = "The request body must not be compressed."  # RFC 9110, section 12.5.3: 415
            entry = error_entry((), detail, "identity")
            raise _Refused(
                problem(WRONG_MEDIA_TYPE, detail, [entry], {"Accept-Encoding": "identity"})
            )

    def _check_json(self, body: bytes | None) -> None:
        if body is None:
            return
        if depth_of(body, self.max_depth) > self.max_depth:
            detail = f"The request body is nested deeper than {self.max_depth} levels."
            entry = error_entry((), detail, f"at most {self.max_depth} levels")
            raise _Refused(problem(NESTING_TOO_DEEP, detail, [entry]))
        try:
            parsed = json.loads(body.decode("utf-8"), parse_int=_whole, object_pairs_hook=_members)
        except (ValueError, RecursionError):
            detail = "The request body is not JSON in UTF-8 with each name once in an object."
            entry = error_entry((), detail, "one JSON object in UTF-8")
            raise _Refused(problem(MALFORMED_JSON, detail, [entry])) from None
        parts = first_not_finite(parsed)
        if parts is not None:
            detail = "This number is not finite."
            entry = error_entry(parts, detail, "a finite number")
            raise _Refused(problem(NUMBER_NOT_FINITE, detail, [entry]))
