"""Bodies are checked before anything parses them: type, size, depth, finite numbers."""

from __future__ import annotations

import asyncio
import json
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from starlette.responses import PlainTextResponse
from starlette.testclient import TestClient

from service.body_guard import BodyGuard, depth_of, first_not_finite
from service.settings import Settings

JSON = {"content-type": "application/json"}
MAX_BYTES, MAX_DEPTH = Settings().body_max_bytes, Settings().depth_max

values = st.recursive(
    st.none() | st.booleans() | st.integers(-9, 9) | st.text(max_size=6),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=4), inner,
                                                                max_size=3),
    max_leaves=12,
)  # fmt: skip


def depth_in_words(value: Any) -> int:
    """Return the nesting depth of parsed JSON: the plain twin of `depth_of`."""
    if isinstance(value, dict):
        return 1 + max(map(depth_in_words, value.values()), default=0)
    if isinstance(value, list):
        return 1 + max(map(depth_in_words, value), default=0)
    return 0


async def echo_length(scope: Any, receive: Any, send: Any) -> None:
    """Answer with the length of the body received."""
    message = await receive()
    await PlainTextResponse(str(len(message["body"])))(scope, receive, send)


@pytest.fixture(scope="module")
def client() -> TestClient:
    return TestClient(BodyGuard(echo_length, MAX_BYTES, MAX_DEPTH))


def test_a_compressed_body_is_refused(client: TestClient) -> None:
    answer = client.post("/", content=b"{}", headers={**JSON, "content-encoding": "gzip"})
    assert answer.status_code == 415  # Source: RFC 9110, section 15.5.16
    assert answer.headers["accept-encoding"] == "identity"
    plain = client.post("/", content=b"{}", headers={**JSON, "content-encoding": "Identity"})
    assert plain.status_code == 200


@given(values)
@settings(deadline=None)
def test_depth_is_that_of_the_parsed_value(value: Any) -> None:
    for text in (json.dumps(value), json.dumps(value, ensure_ascii=False, indent=1)):
        assert depth_of(text.encode("utf-8", "surrogatepass"), 99) == depth_in_words(value)


@given(st.binary(max_size=200))
@settings(deadline=None)
def test_depth_takes_any_bytes(body: bytes) -> None:
    assert 0 <= depth_of(body, 64) <= 65


def test_brackets_in_text_do_not_count() -> None:
    assert depth_of(b'{"a": "[[[[\\"[[[", "b": [1]}', 64) == 2  # Derived: one object, one array
    assert depth_of(b'["unfinished [[[[', 64) == 1


def test_depth_limit(client: TestClient) -> None:
    for depth, status in ((MAX_DEPTH, 200), (MAX_DEPTH + 1, 400), (100_000, 400)):
        body = b"[" * depth + b"]" * depth
        response = client.post("/", content=body, headers=JSON)
        assert response.status_code == status
    assert response.json()["type"] == "/problems/nesting-too-deep"
    assert response.json()["errors"][0]["allowed"] == f"at most {MAX_DEPTH} levels"


def test_many_quotes_without_an_end_are_read_once() -> None:
    # Derived: 127 500 escaped quotes; work that grew with the square would take minutes here
    assert depth_of(b'"' + b'\\"' * 127_500, 64) == 0


def test_size_limit(client: TestClient) -> None:
    for size, status in ((MAX_BYTES, 200), (MAX_BYTES + 1, 413)):
        response = client.post("/", content=b'"' + b"a" * (size - 2) + b'"', headers=JSON)
        assert response.status_code == status
    assert response.json()["type"] == "/problems/body-too-large"
    assert response.json()["errors"][0]["allowed"] == f"at most {MAX_BYTES} bytes"


def test_reading_stops_at_the_limit_however_much_follows() -> None:
    sent: list[Any] = []
    taken = 0

    async def receive() -> dict[str, Any]:
        nonlocal taken
        taken += 1
        return {"type": "http.request", "body": b"a" * 10_000, "more_body": True}

    async def send(message: Any) -> None:
        sent.append(message)

    scope = {"type": "http", "method": "POST", "headers": []}
    asyncio.run(BodyGuard(echo_length, MAX_BYTES, MAX_DEPTH)(scope, receive, send))
    assert sent[0]["status"] == 413
    assert taken == MAX_BYTES // 10_000 + 1  # Derived: the first chunk beyond ends the reading


def test_a_client_that_leaves_while_sending_gets_no_answer() -> None:
    sent: list[Any] = []

    async def receive() -> dict[str, Any]:
        return {"type": "http.disconnect"}

    async def send(message: Any) -> None:
        sent.append(message)

    scope = {"type": "http", "method": "POST", "headers": [(b"content-type", b"application/json")]}
    asyncio.run(BodyGuard(echo_length, MAX_BYTES, MAX_DEPTH)(scope, receive, send))
    assert sent == []


@pytest.mark.parametrize(
    "body", [b"", b"{", b"[1,]", b"\xff\xfe[]", b"\xef\xbb\xbf{}", b'{"a":1,"a":2}', b"'a'", b"01"]
)
def test_what_is_not_json_is_refused(client: TestClient, body: bytes) -> None:
    response = client.post("/", content=body, headers=JSON)
    assert response.status_code == 400
    assert response.json()["type"] == "/problems/malformed-json"


@pytest.mark.parametrize("kind", ["text/plain", "", "application/x-www-form-urlencoded"])
def test_other_content_types_are_refused(client: TestClient, kind: str) -> None:
    response = client.post("/", content=b"{}", headers={"content-type": kind})
    assert response.status_code == 415
    assert response.json()["type"] == "/problems/wrong-media-type"


def test_json_with_a_character_set_is_taken(client: TestClient) -> None:
    kind = {"content-type": "Application/JSON; charset=utf-8"}
    assert client.post("/", content=b"{}", headers=kind).text == "2"


def test_the_way_to_a_number_that_is_not_finite() -> None:
    assert first_not_finite({"a": [1.0, {"b": float("inf")}]}) == ("a", 1, "b")
    assert first_not_finite(float("nan")) == ()
    assert first_not_finite({"a": [1, None, "NaN"]}) is None
