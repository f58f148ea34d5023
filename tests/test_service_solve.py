"""The service with the real solver on a small isle: answers, limits, stopping, sections."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from geojson_validator import validate_geometries, validate_structure
from shapely.geometry import Point, shape
from starlette.testclient import TestClient

from geo.case import FT_M, GlideCase, SolveLimits
from geo.footprint import grid_for
from geo.frame import frame_for
from geo.glide import prepare
from perf.errors import Cancelled, LimitError
from service import answers
from service.app import create_app, warm_up
from service.schemas import FootprintRequest
from service.settings import Settings
from service.world import World, load_world
from tests.service_support import HILL_M, MIDDLE, REQUEST, settings_in

BARE = {"ratio_factor": 1, "wind_error_kt": 0, "reaction_s": 0, "bank_deg": 30, "clearance_ft": 0,
        "arrival_height_ft": 0, "downdraft_fpm": 0, "excess_speed_credit": 0}  # fmt: skip


@pytest.fixture(scope="module")
def settings(tmp_path_factory: pytest.TempPathFactory) -> Settings:
    return settings_in(tmp_path_factory.mktemp("solve"))


@pytest.fixture(scope="module")
def client(settings: Settings) -> Iterator[TestClient]:
    with TestClient(create_app(settings)) as found:
        yield found


def post(client: TestClient, path: str = "/api/footprint", **changes: Any) -> Any:
    return client.post(path, json={**REQUEST, **changes})


def test_a_footprint_of_the_isle(client: TestClient) -> None:
    response = post(client, altitude_ft=4500)
    assert response.status_code == 200, response.text
    answer = answers.FootprintAnswer.model_validate(response.json())
    areas = {one.properties.kind: one for one in answer.features}
    assert areas["footprint"].properties.area_km2 >= areas["straight"].properties.area_km2 > 1
    for feature in response.json()["features"]:
        assert validate_structure(feature["geometry"]) == {}
        # Source: RFC 7946, section 3.1.6
        assert validate_geometries(feature["geometry"])["invalid"] == {}
    assert answer.glide.best_glide_eas_kt == pytest.approx(68.0, abs=0.05)
    # Derived: 0.9 of the record's 9:1
    assert answer.glide.ratio_used == pytest.approx(8.1, abs=0.005)
    assert len(answer.ranges) == 36
    assert answer.data[0].file == "isle.tif"


def test_the_order_of_wind_levels_and_whole_numbers_do_not_matter(client: TestClient) -> None:
    levels = [{"altitude_ft": a, "from_deg": 270, "speed_kt": 10} for a in (4000.5, 0, 2000)]
    one = post(client, wind=levels).json()
    two = post(client, wind=levels[::-1]).json()
    assert one["features"] == two["features"]


def test_above_ground_but_below_the_margins_there_is_no_area_in_words(client: TestClient) -> None:
    answer = post(client, altitude_ft=(HILL_M + 50) / FT_M).json()
    for feature in answer["features"]:
        assert feature["geometry"] is None
        assert feature["properties"]["area_km2"] == 0
    assert any("does not mean that no landing is possible" in line for line in answer["limits"])


def test_wind_stronger_than_the_airspeed_is_answered(client: TestClient) -> None:
    storm = [{"altitude_ft": 0, "from_deg": 270, "speed_kt": 120}]
    response = post(client, wind=storm)
    assert response.status_code == 200
    assert any("too strong" in line for line in response.json()["limits"])


def test_margins_less_safe_than_their_default_are_named(client: TestClient) -> None:
    answer = post(client, margins=BARE).json()
    assert answer["margins_below_default"] == ["ratio_factor", "wind_error_kt", "reaction_s",
                                               "clearance_ft", "arrival_height_ft"]  # fmt: skip
    assert len([line for line in answer["limits"] if "less safe than its default" in line]) == 5


def test_a_section_agrees_with_the_footprint(client: TestClient) -> None:
    high = {"altitude_ft": 3500}
    area = shape(post(client, **high).json()["features"][0]["geometry"])
    checked = {True: 0, False: 0}
    for step in (0.01, 0.03, 0.05, 0.08, 0.095):
        to = [MIDDLE[0] + step, MIDDLE[1] + 0.002]
        response = post(client, "/api/section", to=to, **high)
        assert response.status_code == 200, response.text
        answer = answers.SectionAnswer.model_validate(response.json())
        assert answer.within_range == (answer.reason.code == "within_range")
        if area.boundary.distance(Point(to)) > 0.002:  # several cells from the outline
            assert answer.within_range == area.contains(Point(to))
            checked[answer.within_range] += 1
        if answer.within_range:
            assert answer.by in ("straight", "bent")
            assert answer.path is not None
            assert answer.surplus_ft is not None
            assert answer.surplus_ft >= 0
        assert answer.profile
    assert min(checked.values()) > 0


def test_a_section_off_the_terrain_says_so(client: TestClient) -> None:
    answer = post(client, "/api/section", to=[MIDDLE[0] + 0.3, MIDDLE[1]]).json()
    assert answer["within_range"] is False
    assert answer["reason"]["code"] == "off_terrain"
    along = post(client, "/api/section", bearing_deg=45)
    assert along.status_code == 200


def test_the_cell_limit_works_at_the_limit_and_is_refused_beyond(settings: Settings) -> None:
    world = load_world(settings)
    case = FootprintRequest.model_validate({**REQUEST, "altitude_ft": 20_000})
    low, high = 1, 16_000_000  # the least limit that lets this case start, by halving
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if starts(world, case, middle) else (middle, high)
    assert starts(world, case, high)
    assert not starts(world, case, high - 1)
    assert high > 100
    tight = replace(settings, solve_cells_max=high - 1)
    with TestClient(create_app(tight)) as client:
        answer = client.post("/api/footprint", json={**REQUEST, "altitude_ft": 20_000})
    assert answer.status_code == 413
    assert answer.json()["type"] == "/problems/solve-too-large"
    assert f"{high - 1}" in answer.text.replace(",", "").replace(" ", "")


def starts(world: World, case: FootprintRequest, cells: int) -> bool:
    """Return whether a solve would start: the grid is chosen, nothing else is done."""

    def begin(store: Any, asked: GlideCase, *, limits: SolveLimits, **_: Any) -> Any:
        frame = frame_for(asked.lon_deg, asked.lat_deg)
        grid_for(store, prepare(asked, frame, HILL_M), frame, limits)

    limited = replace(world, settings=replace(world.settings, solve_cells_max=cells), solver=begin)
    try:
        limited.solve(case)
    except LimitError:
        return False
    return True


def test_a_solve_stops_while_it_runs(settings: Settings) -> None:
    world = load_world(settings)
    request = FootprintRequest.model_validate({**REQUEST, "altitude_ft": 30_000})
    world.solve(request)  # compiled and the terrain kept: what is left is the solve itself
    flag = np.zeros(1, dtype=np.uint8)
    ends: list[type[BaseException]] = []

    def solve() -> None:
        while True:
            try:
                world.solve(request, flag)
            except Cancelled as error:
                ends.append(type(error))
                return

    thread = threading.Thread(target=solve, daemon=True)
    thread.start()
    flag[0] = 1
    thread.join(20.0)
    assert ends == [Cancelled]


def test_the_warm_up_solves_the_start_case_and_says_so(
    settings: Settings, caplog: pytest.LogCaptureFixture
) -> None:
    world = load_world(settings)
    with caplog.at_level("INFO", logger="engineout"):
        warm_up(world, world.start())
    assert "Preparing the solver" in caplog.text
    assert "cannot be solved" not in caplog.text
    caplog.clear()
    warm_up(world, {**world.start(), "position": [0, 0]})
    assert "cannot be solved" in caplog.text
