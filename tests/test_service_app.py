"""The routes: answers of the promised shape, HEAD, headers, folders that are missing."""

from __future__ import annotations

import hashlib
import json
import shutil
from collections.abc import Iterator
from importlib import resources
from pathlib import Path
from typing import Any

import pytest
from starlette.testclient import TestClient

from service import answers
from service.app import create_app
from service.cautions import CAUTIONS
from service.settings import Settings, SettingsError, default_data
from tests.service_support import MIDDLE, REQUEST, settings_in, stand_in


@pytest.fixture(scope="module")
def client(tmp_path_factory: pytest.TempPathFactory) -> Iterator[TestClient]:
    app = create_app(settings_in(tmp_path_factory.mktemp("service")), stand_in)
    with TestClient(app) as found:
        yield found


def test_a_footprint_has_the_promised_shape(client: TestClient) -> None:
    response = client.post("/api/footprint", json=REQUEST)
    assert (
        response.headers["content-type"] == "application/geo+json"
    )  # Source: RFC 7946, section 12
    answer = answers.FootprintAnswer.model_validate(response.json())
    assert [feature.properties.kind for feature in answer.features] == ["footprint", "straight"]
    assert [one.bearing_deg for one in answer.ranges] == [10.0 * i for i in range(36)]
    assert answer.sites[0].surplus_ft == 420  # Derived: 128 m / 0.3048
    assert set(CAUTIONS) <= set(answer.limits)
    assert answer.data[0].file == "isle.tif"
    assert answer.cell_m == 30.0
    coarse = client.post("/api/footprint", json={**REQUEST, "detail": "coarse"}).json()
    assert (coarse["detail"], coarse["cell_m"]) == ("coarse", 120.0)


def test_inputs_are_the_request_with_its_defaults(client: TestClient) -> None:
    inputs = client.post("/api/footprint", json=REQUEST).json()["inputs"]
    assert inputs["mass_kg"] == 750
    assert (inputs["propeller"], inputs["configuration"]) == ("windmilling", "clean")
    # Source: the margins' table of the README; 2500 ft is more than 1000 ft above the hill
    assert inputs["margins"] == {
        "ratio_factor": 0.9, "wind_error_kt": 6, "reaction_s": 10, "bank_deg": 30,
        "clearance_ft": 200, "arrival_height_ft": 1000, "downdraft_fpm": 0,
        "excess_speed_credit": 0,
    }  # fmt: skip
    again = client.post("/api/footprint", json=inputs)
    assert again.status_code == 200
    assert again.json()["inputs"] == inputs
    low = client.post("/api/footprint", json={**REQUEST, "altitude_ft": 1800}).json()
    assert low["inputs"]["margins"]["reaction_s"] == 4
    part = client.post("/api/footprint", json={**REQUEST, "margins": {"bank_deg": 45}}).json()
    assert part["inputs"]["margins"] == {**inputs["margins"], "bank_deg": 45}
    assert part["margins_below_default"] == ["bank_deg"]
    assert part["limits"][0].startswith("The bank in turns is less safe")


def test_inputs_keep_every_digit_given(client: TestClient) -> None:
    given = {"bank_deg": 30.123456789012345, "wind_error_kt": 1 / 3}
    asked = {**REQUEST, "mass_kg": 600.123456789, "margins": given}
    answer = client.post("/api/footprint", json=asked).json()
    assert answer["inputs"]["mass_kg"] == 600.123456789
    assert given.items() <= answer["inputs"]["margins"].items()
    assert client.post("/api/footprint", json=answer["inputs"]).json() == answer


def test_a_section_has_the_promised_shape(client: TestClient) -> None:
    to = [MIDDLE[0] + 0.05, MIDDLE[1]]
    response = client.post("/api/section", json={**REQUEST, "to": to})
    answer = answers.SectionAnswer.model_validate(response.json())
    assert answer.to == pytest.approx(to, abs=1e-6)  # rounded to 6 decimals
    # Derived: due east by 0.05 deg; at 49.9 N a degree of longitude is 71.87 km on WGS 84
    assert answer.bearing_deg == pytest.approx(90.0, abs=0.05)
    assert answer.distance_nm == pytest.approx(0.05 * 71.87 / 1.852, abs=0.005)
    assert answer.reason.code == "ridge"
    assert answer.reason.ridge is not None
    assert answer.reason.ridge.short_ft == 98  # Derived: 30 m / 0.3048
    assert 300 < len(answer.profile) <= 400
    assert answer.profile[0].ground_ft is None
    assert answer.path is not None
    assert len(answer.path.properties.bends) == 1
    assert answer.path.geometry.coordinates[-1][2] == 400.0


def test_a_section_along_a_bearing_goes_beyond_the_range(client: TestClient) -> None:
    answer = client.post("/api/section", json={**REQUEST, "bearing_deg": 123}).json()
    assert answer["bearing_deg"] == pytest.approx(123.0, abs=0.1)
    assert answer["distance_nm"] == pytest.approx(3.3, abs=0.01)  # Derived: 3 nm and a tenth


def test_the_catalog_has_the_promised_shape(client: TestClient) -> None:
    answer = answers.CatalogAnswer.model_validate(client.get("/api/catalog").json())
    assert [one.id for one in answer.aircraft] == ["test-two"]
    assert answer.aircraft[0].best_glide_eas_kt == 68.0
    assert answer.margins["bank_deg"].default == 30
    assert answer.margins["reaction_s"].default is None
    assert answer.sites == {"type": "FeatureCollection", "features": []}


def test_the_start_case_works(client: TestClient) -> None:
    start = client.get("/api/start").json()
    assert client.post("/api/footprint", json=start).status_code == 200
    # Derived: the middle of the file's box
    assert start["position"] == pytest.approx(list(MIDDLE), abs=0.001)


GETS = ["/", "/health", "/api/catalog", "/api/start", "/openapi.json", "/problems/too-busy",
        "/static/index.html", "/static/lib/map/leaflet.js", "/api/tiles/relief/8/113/86.png",
        "/nowhere"]  # fmt: skip


@pytest.mark.parametrize("path", GETS)
def test_head_is_get_without_the_body(client: TestClient, path: str) -> None:
    get, head = client.get(path), client.head(path)
    assert head.status_code == get.status_code
    assert head.content == b""
    for name in ("content-type", "content-length", "etag"):
        assert head.headers.get(name) == get.headers.get(name)


@pytest.mark.parametrize("body", [b"", b"{", b"{}"])
def test_a_post_where_there_is_none_is_refused_as_such(client: TestClient, body: bytes) -> None:
    for path in GETS[:-1]:
        answer = client.post(path, content=body)
        assert answer.status_code == 405
        assert set(answer.headers["allow"].split(", ")) == {"GET", "HEAD"}
    assert client.post("/nowhere", content=body).status_code == 404


def test_no_answer_is_a_redirect(client: TestClient) -> None:
    for path in ("/api/footprint/", "/health/", "/api/catalog/"):
        answer = client.get(path, headers={"host": "elsewhere.example"}, follow_redirects=False)
        assert answer.status_code == 404
        assert answer.headers["content-type"] == "application/problem+json"


@pytest.mark.parametrize("path", GETS)
def test_every_answer_keeps_the_page_to_itself(client: TestClient, path: str) -> None:
    headers = client.get(path).headers
    assert "default-src 'self'" in headers["content-security-policy"]
    assert "unsafe-inline" not in headers["content-security-policy"]
    assert headers["x-content-type-options"] == "nosniff"
    assert headers["referrer-policy"] == "no-referrer"


def test_no_page_of_the_framework_is_served(client: TestClient) -> None:
    assert client.get("/docs").status_code == 404  # they load scripts from another host
    assert client.get("/redoc").status_code == 404


def test_the_map_library_is_the_installed_one_unchanged(client: TestClient) -> None:
    folder = resources.files("js_lib_leaflet") / "static" / "js_lib_leaflet"
    for name in ("leaflet.js", "leaflet.css", "images/marker-icon.png"):
        served = client.get(f"/static/lib/map/{name}")
        wanted = hashlib.sha256(folder.joinpath(name).read_bytes()).hexdigest()
        assert hashlib.sha256(served.content).hexdigest() == wanted


def test_a_tile_at_hand_is_not_sent_again(client: TestClient) -> None:
    path = "/api/tiles/relief/8/113/86.png"
    first = client.get(path)
    again = client.get(path, headers={"if-none-match": first.headers["etag"]})
    assert (again.status_code, again.content) == (304, b"")  # Source: RFC 9110, section 13.1.2
    assert client.get(path, headers={"if-none-match": '"other"'}).status_code == 200
    assert client.get("/api/tiles/relief/8/200/86.png").status_code == 404
    assert client.get("/api/tiles/relief/2/4/0.png").status_code == 404


@pytest.mark.parametrize(
    ("part", "words"),
    [("data/terrain", "terrain/"), ("data/aircraft", "aircraft/"), ("data", "data folder"),
     ("static", "page's folder"), ("static/index.html", "index.html")],
)  # fmt: skip
def test_a_missing_folder_is_an_error_in_words(tmp_path: Path, part: str, words: str) -> None:
    settings = settings_in(tmp_path)
    gone = tmp_path / part
    shutil.rmtree(gone) if gone.is_dir() else gone.unlink()
    with pytest.raises(SettingsError, match=words):
        create_app(settings)


def test_a_data_folder_without_records_is_an_error_in_words(tmp_path: Path) -> None:
    settings = settings_in(tmp_path)
    (settings.data / "aircraft" / "test-two.toml").unlink()
    with pytest.raises(SettingsError, match="no record"):
        create_app(settings)


def test_a_start_file_is_used_or_refused(tmp_path: Path) -> None:
    settings = settings_in(tmp_path)
    start = settings.data / "start.json"
    start.write_text('{"position": [-19.9, 49.9], "altitude_ft": 3000, "aircraft": "test-two", '
                     '"note": "for people"}')  # fmt: skip
    app = create_app(settings, stand_in)
    assert app.state.start["altitude_ft"] == 3000
    assert "note" not in app.state.start
    good = {"position": [-19.9, 49.9], "altitude_ft": 3000, "aircraft": "test-two"}
    for case in ({"aircraft": "none"}, {"aircraft": {}}, {"altitude_ft": 9}, {"position": [0, 0]},
                 {"mass_kg": 1}):  # fmt: skip
        start.write_text(json.dumps({**good, **case}))
        with pytest.raises(SettingsError, match=f"cannot be used: {next(iter(case))}"):
            create_app(settings, stand_in)
    for text in ("[]", "{", '{"position": 1}', json.dumps(good) + " " * 65_536):
        start.write_text(text)
        with pytest.raises(SettingsError, match=r"start\.json"):
            create_app(settings, stand_in)


def test_a_start_over_a_faulty_terrain_file_does_not_stop_the_service(tmp_path: Path) -> None:
    settings = settings_in(tmp_path)
    (settings.data / "start.json").write_text(json.dumps(REQUEST))
    terrain = settings.data / "terrain" / "isle.tif"
    terrain.write_bytes(terrain.read_bytes()[:200_000])
    assert create_app(settings, stand_in).state.start == REQUEST


def test_the_data_folder_comes_from_the_environment(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("ENGINEOUT_DATA", "/somewhere")
    assert default_data() == Path("/somewhere")
    assert Settings().data == Path("/somewhere")
    monkeypatch.delenv("ENGINEOUT_DATA")
    assert default_data().name == "demo_data"


@pytest.mark.parametrize("kind", ["points elsewhere", "truncated"])
def test_a_bad_terrain_file_is_named_and_the_service_goes_on(tmp_path: Path, kind: str) -> None:
    settings = settings_in(tmp_path)
    good = (settings.data / "terrain" / "isle.tif").read_bytes()
    text = b'<VRTDataset rasterXSize="9" rasterYSize="9"><SRS>EPSG:4326</SRS></VRTDataset>'
    bad = settings.data / "terrain" / "bad.tif"
    bad.write_bytes(text if kind == "points elsewhere" else good[: len(good) // 2])
    with TestClient(create_app(settings, stand_in)) as client:
        answer: Any = client.post("/api/footprint", json=REQUEST)
        assert answer.status_code == 422
        assert answer.json()["type"] == "/problems/no-terrain"
        assert "bad.tif" in answer.json()["detail"]
        assert str(tmp_path) not in answer.text
        assert client.get("/health").status_code == 200
