"""The OpenAPI document is complete and true: fuzzed against the service itself."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any

import jsonschema
import pytest
import schemathesis
from fastapi.routing import APIRoute
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from schemathesis import GenerationMode
from schemathesis.config import GenerationConfig, ProjectConfig, ProjectsConfig, SchemathesisConfig
from schemathesis.specs.openapi.checks import positive_data_acceptance
from starlette.testclient import TestClient

from service.app import create_app
from service.routes import router
from service.schemas import FootprintRequest
from tests.service_support import REQUEST, settings_in, stand_in

JSON = {"content-type": "application/json"}
QUICK = settings(
    max_examples=12,
    deadline=None,
    suppress_health_check=list(HealthCheck),
    database=None,
    derandomize=True,
)


@pytest.fixture(scope="module")
def client(tmp_path_factory: pytest.TempPathFactory) -> Iterator[TestClient]:
    app = create_app(settings_in(tmp_path_factory.mktemp("service")), stand_in)
    with TestClient(app) as found:
        yield found


@pytest.fixture(scope="module")
def document(client: TestClient) -> Any:
    return client.get("/openapi.json").json()


def test_every_route_is_described_and_every_error_is_a_problem(document: Any) -> None:
    routes = {route.path for route in router.routes if isinstance(route, APIRoute)}
    assert routes - {"/"} == set(document["paths"])
    for path, operations in document["paths"].items():
        for operation in operations.values():
            for status, response in operation["responses"].items():
                if status >= "400":
                    assert list(response["content"]) == ["application/problem+json"], path
    text = json.dumps(document)
    assert "HTTPValidationError" not in text  # the framework's own 422
    assert '"application/geo+json"' in text


def test_every_reference_leads_somewhere(document: Any) -> None:
    text = json.dumps(document)
    for name in {part.split('"')[0] for part in text.split("#/components/schemas/")[1:]}:
        assert name in document["components"]["schemas"]


def test_every_number_of_a_request_is_bounded(document: Any) -> None:
    seen = 0

    def walk(node: Any) -> None:
        nonlocal seen
        if isinstance(node, dict):
            if node.get("type") in ("number", "integer"):
                seen += 1
                assert {"minimum", "maximum"} <= set(node), node
            for child in node.values():
                walk(child)
        elif isinstance(node, list):
            for child in node:
                walk(child)

    for name in ("FootprintRequest", "SectionRequest", "MarginsRequest", "WindLevel"):
        schema = next(
            found
            for key, found in document["components"]["schemas"].items()
            if key in (name, f"{name}-Input")
        )
        assert schema["additionalProperties"] is False
        walk(schema)
    assert seen > 30


def test_the_examples_work_when_pasted(client: TestClient, document: Any) -> None:
    pasted = 0
    for path, operations in document["paths"].items():
        for method, operation in operations.items():
            if method != "post":
                continue
            content = operation["requestBody"]["content"]["application/json"]
            for example in content["examples"].values():
                answer = client.post(path, json=example["value"])
                assert answer.status_code == 200, (path, answer.text)
                pasted += 1
    assert pasted == 3  # Derived: two for a footprint, one for a section


def test_answers_follow_the_document(client: TestClient, document: Any) -> None:
    def check(path: str, method: str, media: str, answer: Any) -> None:
        responses = document["paths"][path][method]["responses"]
        schema = responses["200"]["content"][media]["schema"]
        jsonschema.validate(answer, {**schema, "components": document["components"]})

    footprint = client.post("/api/footprint", json=REQUEST).json()
    check("/api/footprint", "post", "application/geo+json", footprint)
    section = client.post("/api/section", json={**REQUEST, "bearing_deg": 5}).json()
    check("/api/section", "post", "application/json", section)
    for path in ("/api/catalog", "/api/start", "/health"):
        check(path, "get", "application/json", client.get(path).json())


@given(st.binary(max_size=120) | st.text(max_size=60).map(lambda text: text.encode()))
@settings(QUICK, max_examples=80)
def test_any_bytes_get_a_problem(client: TestClient, body: bytes) -> None:
    response = client.post("/api/footprint", content=body, headers=JSON)
    assert response.status_code in (400, 422)
    assert response.headers["content-type"] == "application/problem+json"


@given(st.dictionaries(
    st.sampled_from([*FootprintRequest.model_fields, "other"]),
    st.recursive(st.none() | st.booleans() | st.floats() | st.text(max_size=5)
                 | st.integers(-10**30, 10**30),
                 lambda inner: st.lists(inner, max_size=3)
                 | st.dictionaries(st.text(max_size=5), inner, max_size=2), max_leaves=6),
    max_size=4))  # fmt: skip
@settings(QUICK, max_examples=150)
def test_any_json_gets_an_answer_or_a_problem(client: TestClient, changes: Any) -> None:
    body = json.dumps({**REQUEST, **changes})
    response = client.post("/api/footprint", content=body.encode(), headers=JSON)
    assert response.status_code in (200, 422), response.text
    if response.status_code == 422:
        assert response.json()["errors"]


def _schema(client: TestClient) -> Any:
    modes = [GenerationMode.POSITIVE, GenerationMode.NEGATIVE]
    generation = GenerationConfig(modes=modes)
    projects = ProjectsConfig(default=ProjectConfig(generation=generation))
    config = SchemathesisConfig(projects=projects)
    return schemathesis.openapi.from_asgi("/openapi.json", client.app, config=config)


@pytest.mark.parametrize(
    ("method", "path"),
    [("POST", "/api/footprint"), ("POST", "/api/section"), ("GET", "/api/catalog"),
     ("GET", "/api/start"), ("GET", "/health"), ("GET", "/api/tiles/relief/{z}/{x}/{y}.png"),
     ("GET", "/problems/{name}")],
)  # fmt: skip
def test_the_service_keeps_to_its_document(client: TestClient, method: str, path: str) -> None:
    operation = _schema(client)[path][method]

    @given(case=operation.as_strategy())
    @settings(QUICK)
    def fuzz(case: Any) -> None:
        # whether a record or a place exists is the data's to say, not the document's
        case.call_and_validate(excluded_checks=[positive_data_acceptance])

    fuzz()
