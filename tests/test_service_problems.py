"""Every bad input gets a problem that names the field and what is allowed, and echoes nothing."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from starlette.exceptions import HTTPException
from starlette.testclient import TestClient

from perf.errors import Cancelled, InputError, LimitError, ModelError, RecordError, TerrainError
from perf.record_form import MASS_KG
from service import problems
from service.app import create_app
from tests.service_support import MIDDLE, REQUEST, VOID, settings_in, stand_in

JSON = {"content-type": "application/json"}
SECRET = "Zq7secretZq7"


def solver(store: Any, case: Any, **given: Any) -> Any:
    """Fail in the way that the case's mass asks for; else answer."""
    failures = {
        501.0: RuntimeError(f"{SECRET} /etc/passwd"),
        502.0: ModelError(SECRET),
        503.0: LimitError("The solve would be too large.", "altitude_ft", "at most 16000000 cells"),
        504.0: Cancelled(),
    }
    if case.polar.mass_kg in failures:
        raise failures[case.polar.mass_kg]
    return stand_in(store, case, **given)


@pytest.fixture(scope="module")
def client(tmp_path_factory: pytest.TempPathFactory) -> Iterator[TestClient]:
    app = create_app(settings_in(tmp_path_factory.mktemp("service")), solver)
    with TestClient(app) as found:
        yield found


def check(response: Any, status: int, slug: str, pointer: str | None) -> dict[str, Any]:
    """Return a problem after checking its form and that it echoes nothing."""
    assert response.status_code == status, response.text
    # Source: RFC 9457, section 3 and its media type
    assert response.headers["content-type"] == "application/problem+json"
    body = response.json()
    assert set(body) == {"type", "title", "status", "detail", "errors"}
    assert body["status"] == status
    assert body["type"] == f"/problems/{slug}"
    assert SECRET not in response.text
    assert "/tmp" not in response.text
    if pointer is not None:
        assert [entry["pointer"] for entry in body["errors"]] == [pointer]
        assert body["errors"][0]["allowed"]
    return body


def post(client: TestClient, changes: dict[str, Any], path: str = "/api/footprint") -> Any:
    return client.post(path, json={**REQUEST, **changes})


def wind(speed_kt: float = 10.0, altitude_ft: float = 0.0) -> dict[str, float]:
    return {"altitude_ft": altitude_ft, "from_deg": 270, "speed_kt": speed_kt}


BAD: list[tuple[dict[str, Any], str, str]] = [
    ({"altitude_ft": 1000}, "invalid-value", "/altitude_ft"),  # the hill is 340 m (1115 ft) high
    ({"position": [0, 0]}, "no-terrain", "/position"),
    ({"position": list(VOID)}, "no-terrain", "/position"),
    ({"position": [MIDDLE[0]]}, "invalid-request", "/position/1"),
    ({"position": [*MIDDLE, 3]}, "invalid-request", "/position"),
    ({"position": SECRET}, "invalid-request", "/position"),
    ({"position": {SECRET: 1}}, "invalid-request", "/position"),
    ({"position": [181, 50]}, "latitude-limit", "/position/0"),
    ({"altitude_ft": None}, "invalid-request", "/altitude_ft"),
    ({"altitude_ft": "2500"}, "invalid-request", "/altitude_ft"),
    ({"altitude_ft": True}, "invalid-request", "/altitude_ft"),
    ({"track_deg": 361}, "invalid-request", "/track_deg"),
    ({"track_deg": -1}, "invalid-request", "/track_deg"),
    ({"aircraft": SECRET}, "faulty-record", "/aircraft"),
    ({"aircraft": "../test-two"}, "faulty-record", "/aircraft"),
    ({"aircraft": ["test-two"]}, "invalid-request", "/aircraft"),
    ({"aircraft": {"name": SECRET}}, "faulty-record", "/aircraft/mass"),
    ({"mass_kg": 499}, "invalid-value", "/mass_kg"),
    ({"mass_kg": 751}, "invalid-value", "/mass_kg"),
    ({"propeller": SECRET}, "invalid-value", "/propeller"),
    ({"configuration": SECRET}, "invalid-value", "/configuration"),
    ({"speed_policy": SECRET}, "invalid-request", "/speed_policy"),
    ({"speed_at_failure_kt": 0}, "invalid-request", "/speed_at_failure_kt"),
    ({"detail": SECRET}, "invalid-request", "/detail"),
    ({"isa_offset_c": 61}, "invalid-request", "/isa_offset_c"),
    ({"qnh_hpa": 849}, "invalid-request", "/qnh_hpa"),
    ({"wind": SECRET}, "invalid-request", "/wind"),
    ({"wind": [wind(), wind()]}, "invalid-value", "/wind"),
    ({"wind": [wind(-1)]}, "wind-speed-limit", "/wind/0/speed_kt"),
    ({"wind": [{**wind(), "gust_kt": 3}]}, "invalid-request", "/wind/0/gust_kt"),
    ({"margins": {"bank_deg": 61}}, "invalid-request", "/margins/bank_deg"),
    ({"margins": {"ratio_factor": 1.01}}, "invalid-request", "/margins/ratio_factor"),
    ({"margins": {"reserve": 1}}, "invalid-request", "/margins/reserve"),
    ({"margins": [1]}, "invalid-request", "/margins"),
    ({"flaps": SECRET}, "invalid-request", "/flaps"),
    ({SECRET: 1}, "invalid-request", ""),
]


@pytest.mark.parametrize(("changes", "slug", "pointer"), BAD, ids=lambda value: str(value)[:40])
def test_a_bad_field_is_named_with_what_is_allowed(
    client: TestClient, changes: dict[str, Any], slug: str, pointer: str
) -> None:
    check(post(client, changes), 422, slug, pointer)
    assert client.get("/health").json() == {"status": "ok", "solving": 0, "waiting": 0}


LIMITS: list[tuple[dict[str, Any], dict[str, Any], str, str]] = [
    ({"altitude_ft": 60_000}, {"altitude_ft": 60_001}, "altitude-limit", "/altitude_ft"),
    ({"wind": [wind(250)]}, {"wind": [wind(251)]}, "wind-speed-limit", "/wind/0/speed_kt"),
    (
        {"wind": [wind(10, 100.0 * i) for i in range(50)]},
        {"wind": [wind(10, 100.0 * i) for i in range(51)]},
        "wind-levels-limit",
        "/wind",
    ),
]


@pytest.mark.parametrize(("under", "over", "slug", "pointer"), LIMITS, ids=["alt", "kt", "levels"])
def test_each_limit_works_at_the_limit_and_is_refused_beyond(
    client: TestClient, under: dict[str, Any], over: dict[str, Any], slug: str, pointer: str
) -> None:
    assert post(client, under).status_code == 200
    check(post(client, over), 422, slug, pointer)


def test_latitude_limit(client: TestClient) -> None:
    # there is no terrain so far north, which is another problem than the limit
    check(post(client, {"position": [0, 80]}), 422, "no-terrain", "/position")
    check(post(client, {"position": [0, 81]}), 422, "latitude-limit", "/position/1")
    check(post(client, {"position": [0, -81]}), 422, "latitude-limit", "/position/1")


def test_several_faults_are_all_named(client: TestClient) -> None:
    body = post(client, {"altitude_ft": 60_001, "track_deg": 400}).json()
    assert {entry["pointer"] for entry in body["errors"]} == {"/altitude_ft", "/track_deg"}
    assert body["type"] == "/problems/invalid-request"


def test_missing_fields_are_named(client: TestClient) -> None:
    body = client.post("/api/footprint", json={}).json()
    pointers = {entry["pointer"] for entry in body["errors"]}
    assert pointers == {"/position", "/altitude_ft", "/aircraft"}


@pytest.mark.parametrize("text", ["NaN", "Infinity", "-Infinity", "1e999", "-1e999", "9" * 400])
def test_numbers_that_are_not_finite_are_named(client: TestClient, text: str) -> None:
    raw = json.dumps({**REQUEST, "wind": [{"altitude_ft": 0, "from_deg": 0, "speed_kt": "@"}]})
    response = client.post("/api/footprint", content=raw.replace('"@"', text), headers=JSON)
    check(response, 422, "number-not-finite", "/wind/0/speed_kt")


def test_an_inline_record_is_checked_like_a_file(client: TestClient) -> None:
    record = {"name": "Own", "mass": {"minimum_kg": MASS_KG[1] + 1, "maximum_kg": 1, "source": "x"}}
    response = post(client, {"aircraft": {**record, "speeds": {}, "glide": {}}})
    check(response, 422, "faulty-record", "/aircraft/mass/minimum_kg")


def test_the_section_wants_a_place_or_a_bearing(client: TestClient) -> None:
    check(post(client, {}, "/api/section"), 422, "invalid-value", "/to")
    both = {"to": list(MIDDLE), "bearing_deg": 10}
    check(post(client, both, "/api/section"), 422, "invalid-value", "/to")
    check(post(client, {"to": [0, 81]}, "/api/section"), 422, "latitude-limit", "/to/1")
    check(post(client, {"to": list(MIDDLE)}), 422, "invalid-request", "/to")


def test_a_defect_is_answered_without_its_text(client: TestClient) -> None:
    check(post(client, {"mass_kg": 501}), 500, "internal", None)
    check(post(client, {"mass_kg": 502}), 500, "internal", None)
    assert post(client, {}).status_code == 200


def test_a_solve_that_is_too_large_names_the_limit(client: TestClient) -> None:
    body = check(post(client, {"mass_kg": 503}), 413, "solve-too-large", "/altitude_ft")
    assert "16000000 cells" in body["errors"][0]["allowed"]


def test_a_stopped_solve_may_be_tried_again(client: TestClient) -> None:
    response = post(client, {"mass_kg": 504})
    check(response, 503, "solve-stopped", None)
    assert int(response.headers["retry-after"]) > 0


def test_http_errors_are_problems_and_keep_their_headers(client: TestClient) -> None:
    roads = ["GET /nowhere 404", "GET /static/none.js 404", "DELETE /health 405"]
    for road in [*roads, "GET /api/footprint 405"]:
        method, path, status = road.split()
        response = client.request(method, path)
        assert response.status_code == int(status)
        assert response.headers["content-type"] == "application/problem+json"
        assert response.json()["type"] == "about:blank"  # Source: RFC 9457, section 4.2.1
    assert client.delete("/health").headers["allow"] == "GET, HEAD"
    kept = problems.from_http(HTTPException(401, headers={"WWW-Authenticate": "Basic"}))
    assert kept.headers["www-authenticate"] == "Basic"


def test_every_domain_error_has_a_type_and_every_type_a_page(client: TestClient) -> None:
    for error in (InputError("x"), RecordError("x"), TerrainError("x"), LimitError("x")):
        assert problems.kind_of(error).status in (413, 422)
    slugs = [kind.slug for kind in problems.ALL_TYPES]
    assert len(slugs) == len(set(slugs)) == 17  # Derived: the table in problems.py
    for kind in problems.ALL_TYPES:
        page = client.get(kind.uri)
        assert page.status_code == 200
        assert str(kind.status) in page.text
    assert client.get("/problems/none").status_code == 404


def test_pointers_follow_rfc_6901_and_stop_at_names_of_the_client() -> None:
    # Source: RFC 6901, section 3; the stop is our own rule
    assert problems.pointer(["wind", 3, "speed_kt"]) == "/wind/3/speed_kt"
    assert problems.pointer(["margins", "<b>", "x"]) == "/margins"
    assert problems.pointer([]) == ""


def test_tile_numbers_are_checked(client: TestClient) -> None:
    check(client.get("/api/tiles/relief/18/0/0.png"), 422, "invalid-request", "/path/z")
    check(client.get(f"/api/tiles/relief/3/{SECRET}/0.png"), 422, "invalid-request", "/path/x")


def test_paths_out_of_the_static_folder_are_not_found(client: TestClient, tmp_path: Path) -> None:
    for path in ("/static/../pyproject.toml", "/static/%2e%2e/%2e%2e/etc/passwd", "/static//etc"):
        assert client.get(path).status_code == 404
