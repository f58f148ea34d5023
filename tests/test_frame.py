"""Frames against published geodesics, geographiclib, closed forms and finite differences."""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic
from hypothesis import given
from hypothesis import strategies as st

from geo.frame import Frame, frame_for

WGS84 = Geodesic.WGS84
# Equator, 65 N, 40 S, both sides of the 180th meridian, near the highest latitude that is taken.
PLACES = [(0.1, 0.2), (24.9, 65.1), (-71.3, -40.2), (179.9, 51.6), (-179.8, -17.3), (12.4, 79.9)]


@pytest.mark.parametrize(
    ("start", "end", "distance_m", "azimuth_deg"),
    [
        # Source: GeographicLib, GeodSolve(1) manual, example JFK to LHR.
        ((40.6, -73.8), (51.6, -0.5), 5_551_759.400, 51.198883),
        # Source: GeographicLib for Python manual, "Examples", Wellington to Salamanca.
        ((-41.32, 174.81), (40.96, -5.50), 19_959_679.267, 161.06766998616),
    ],
)
def test_distance_and_direction_from_the_centre_are_geodesic(start, end, distance_m, azimuth_deg):
    x_m, y_m = Frame(start[1], start[0]).to_xy_m(end[1], end[0])
    # Tolerances: half of the last published digit.
    assert math.hypot(x_m, y_m) == pytest.approx(distance_m, abs=5e-4)
    assert math.degrees(math.atan2(x_m, y_m)) == pytest.approx(azimuth_deg, abs=5e-7)


@pytest.mark.parametrize(
    ("radius_m", "stretch"),
    # Source: Snyder, USGS Professional Paper 1395 (1987), eq. 25-2: c / sin c = 1 + c^2/6 on the
    # sphere; Derived: (s/R)^2/6 with R = 6371 km.
    [(20e3, 1.64e-6), (50e3, 1.024e-5), (100e3, 4.10e-5), (150e3, 9.24e-5)],
)
def test_tangential_stretch(radius_m, stretch):
    frame = Frame(9.0, 46.0)
    ends = [WGS84.Direct(46.0, 9.0, azimuth, radius_m) for azimuth in (40.0, 40.5)]
    xs, ys = frame.to_xy_m([end["lon2"] for end in ends], [end["lat2"] for end in ends])
    ground_m = WGS84.Inverse(ends[0]["lat2"], ends[0]["lon2"], ends[1]["lat2"], ends[1]["lon2"])
    chord_m = math.hypot(xs[1] - xs[0], ys[1] - ys[0])
    # 0.5 %: the ellipsoid's radius of curvature against the sphere's, 0.25 % each way, squared.
    assert chord_m / ground_m["s12"] - 1.0 == pytest.approx(stretch, rel=0.01)


@pytest.mark.parametrize(("lon", "lat"), PLACES)
def test_convergence_is_the_change_of_azimuth_along_the_radius(lon, lat):
    frame = frame_for(lon, lat)
    place = WGS84.Direct(frame.lat0_deg, frame.lon0_deg, 73.0, 60e3)
    line = WGS84.Inverse(frame.lat0_deg, frame.lon0_deg, place["lat2"], place["lon2"])
    expected = math.radians(math.remainder(line["azi1"] - line["azi2"], 360.0))
    got = frame.convergence_rad(place["lon2"], place["lat2"])
    assert float(got) == pytest.approx(expected, abs=1e-12)  # Source: geographiclib (Karney 2013)


@pytest.mark.parametrize(("lon", "lat"), PLACES)
@pytest.mark.parametrize("track_deg", [0.0, 57.0, 180.0, 301.0])
def test_frame_track_is_true_track_plus_convergence(lon, lat, track_deg):
    frame = frame_for(lon, lat)
    place = WGS84.Direct(frame.lat0_deg, frame.lon0_deg, 222.0, 120e3)
    ends = [WGS84.Direct(place["lat2"], place["lon2"], track_deg, s) for s in (-5.0, 5.0)]
    xs, ys = frame.to_xy_m([end["lon2"] for end in ends], [end["lat2"] for end in ends])
    moved = math.atan2(xs[1] - xs[0], ys[1] - ys[0])
    turned = math.radians(track_deg) + float(frame.convergence_rad(place["lon2"], place["lat2"]))
    # Derived: the stretch of (s/R)^2/6 = 5.9e-5 at 120 km turns a track by half of it at most.
    assert abs(math.remainder(moved - turned, math.tau)) < 3.0e-5


def test_convergence_has_the_sign_of_the_meridians():
    # Derived: meridians meet at the pole, so east of the centre in the north they lean left, by
    # (longitude difference) sin(latitude).
    frame = Frame(20.0, 65.0)
    assert float(frame.convergence_rad(20.5, 65.0)) == pytest.approx(
        -math.radians(0.5) * math.sin(math.radians(65.0)), rel=1e-3
    )
    assert float(frame.convergence_rad(20.0, 65.0)) == 0.0


@given(steps=st.integers(-180 * 2048, 180 * 2048), lat=st.floats(-80.0, 80.0))
def test_every_place_is_near_a_lattice_point(steps, lat):
    lon = steps / 2048.0  # exact in binary, so that a whole turn more changes nothing
    frame = frame_for(lon, lat)
    x_m, y_m = frame.to_xy_m(lon, lat)
    # Derived: half of 0.5 deg latitude (27.9 km) and half a longitude step, 0.25 deg / cos(lat0)
    # widened by at most 1/125 for whole steps in the circle and by cos(lat)/cos(lat0), 2.5 % at 80.
    assert math.hypot(x_m, y_m) < 40.5e3
    assert frame == frame_for(lon + 360.0, lat)
    assert frame is frame_for(lon, lat)
    back_lon, back_lat = frame.to_lonlat(x_m, y_m)
    assert math.remainder(float(back_lon) - lon, 360.0) == pytest.approx(0.0, abs=1e-8)
    assert float(back_lat) == pytest.approx(lat, abs=1e-8)


def test_the_date_line_is_no_edge():
    frame = frame_for(179.95, -17.0)
    x_m, _ = frame.to_xy_m([179.99, -179.99], [-17.0, -17.0])
    # Source: GeographicLib; the short way across the line, not round the Earth.
    assert x_m[1] - x_m[0] == pytest.approx(
        WGS84.Inverse(-17.0, 179.99, -17.0, 180.01)["s12"], rel=1e-4
    )
    lon, _ = frame.to_lonlat([0.0, 60e3], [0.0, 0.0])
    assert np.all(np.abs(lon) <= 180.0)


def test_shapes_follow_the_input():
    frame = frame_for(7.0, 46.0)
    x_m, y_m = frame.to_xy_m(np.full((2, 3), 7.1), 46.0)
    assert x_m.shape == y_m.shape == (2, 3)
    assert frame.convergence_rad(7.0, np.full((4,), 46.1)).shape == (4,)
    assert frame.to_lonlat(0.0, 0.0)[0].shape == ()


def test_threads_get_the_same_answers():
    rng = np.random.default_rng(3)
    lon, lat = rng.uniform(6.0, 9.0, 20_000), rng.uniform(45.0, 48.0, 20_000)
    frames = [frame_for(6.0 + k / 2.0, 46.0) for k in range(8)]
    alone = [frame.to_xy_m(lon, lat) for frame in frames]
    with ThreadPoolExecutor(4) as pool:
        together = list(pool.map(lambda frame: frame.to_xy_m(lon, lat), frames * 3))
    for number, (x_m, y_m) in enumerate(together):
        assert np.array_equal(x_m, alone[number % 8][0])
        assert np.array_equal(y_m, alone[number % 8][1])
