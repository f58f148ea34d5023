"""What an answer says of itself: strong wind, ridge wind, nothing in range, stopped solves."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
import shapely

from geo.case import KT_MPS, GlideCase, Margins
from geo.footprint import solve
from geo.terrain import TerrainStore
from geo.wind import WindProfile
from perf.errors import Cancelled
from perf.record import load_records

DEMO = Path(__file__).parent.parent / "demo_data"


@pytest.fixture(scope="module")
def store() -> TerrainStore:
    return TerrainStore(DEMO)


def case(alt_m: float = 1768.0, wind_kt: float = 0.0, **changed: object) -> GlideCase:
    record = load_records(DEMO / "aircraft")["vessim-two"]
    wind = WindProfile.from_levels([(0.0, math.radians(270), wind_kt * KT_MPS)])
    given = {"track_rad": 0.0, "wind": wind} | changed
    return GlideCase(
        -130.0115, -43.9976, alt_m, given.pop("track_rad"), record.polar(),
        record.maximum_speed_eas_mps, **given,
    )  # fmt: skip


def says(found: object, words: str) -> bool:
    return any(words in sentence for sentence in found.limits)


def test_a_wind_across_stronger_than_the_airspeed_is_answered(store: TerrainStore) -> None:
    # Common practice: a track square to a wind above the airspeed cannot be held; the trainer's
    # best glide is 68 kt EAS, 74 kt TAS here
    held, carried = solve(store, case(wind_kt=60.0)), solve(store, case(wind_kt=100.0))
    assert held.footprint_km2 > 0.0
    assert carried.footprint_km2 > 0.0
    assert says(carried, "too strong to hold some tracks")
    # Derived: where the wind is faster than the aeroplane nothing upwind is reached
    west = [m for bearing, m in carried.ranges if math.pi * 1.1 < bearing < math.pi * 1.9]
    assert max(west) < 1500.0  # the first turn's circle
    east = [m for bearing, m in carried.ranges if abs(bearing - math.pi / 2) < 0.1]
    assert min(east) > 5000.0


def test_wind_at_ridge_level_is_warned_of_from_twenty_knots(store: TerrainStore) -> None:
    # Common practice: 20 kt across ridges is where lee-side sink is warned of
    assert not says(solve(store, case(wind_kt=19.5)), "ridge level")
    assert says(solve(store, case(wind_kt=20.5)), "wind at ridge level is 20 kt")


def test_below_the_margins_is_an_answer_in_words(store: TerrainStore) -> None:
    ground_m = float(store.ground_m(np.array([-130.0115]), np.array([-43.9976]))[0])
    found = solve(store, case(alt_m=ground_m + 100.0))
    assert found.footprint.is_empty
    assert says(found, "leave nothing within modelled range")
    assert says(found, "not mean that no")
    assert found.ranges == [(pytest.approx(2 * math.pi * i / 36), 0.0) for i in range(36)]


def test_ranges_end_on_the_outline(store: TerrainStore) -> None:
    found = solve(store, case(wind_kt=15.0))
    frame = found.grid.frame
    x0, y0 = frame.to_xy_m(-130.0115, -43.9976)
    for bearing, away_m in found.ranges:
        at = bearing + found.glide.convergence_rad
        # 10 m to either side of the end: coordinates are rounded to 0.1 m
        r = np.array([away_m - 10.0, away_m + 10.0])
        lon, lat = frame.to_lonlat(x0 + r * math.sin(at), y0 + r * math.cos(at))
        beyond = shapely.contains_xy(found.footprint, lon, lat)
        assert beyond[0]
        assert not beyond[1]


def test_a_set_flag_stops_every_stage(store: TerrainStore) -> None:
    with pytest.raises(Cancelled):
        solve(store, case(), cancel=np.ones(1, dtype=np.uint8))
    cold = TerrainStore(DEMO)
    frame = solve(store, case()).grid.frame
    with pytest.raises(Cancelled):
        cold.window(frame, 0, 0, 300, 300, 30.0, np.ones(1, dtype=np.uint8))


def test_margins_in_si_default_to_the_documented_figures() -> None:
    usual = Margins()
    # Common practice: the defaults of the README's table
    assert usual.arrival_m == pytest.approx(304.8)
    assert Margins(clearance_m=400.0).arrival_m == pytest.approx(400.0)
    assert usual.wind_error_mps == pytest.approx(3.0867, abs=1e-4)
