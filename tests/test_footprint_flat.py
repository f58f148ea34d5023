"""Flat ground: the footprint against exact discs, free speed, wind by level and the first turn."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
import shapely
from shapely.geometry.base import BaseGeometry

from geo.case import SolveLimits
from geo.footprint import Footprint, solve
from geo.terrain import TerrainStore
from geo.wind import WindProfile
from tests import cases
from tests import closed_forms as forms
from tests.cases import FT_M, Place

EAS_MPS = 35.0
RATIO = 9.0
HIGH_M = 5000.0 * FT_M
PLACES = {
    "equator": Place(10.1, 0.05),
    "45 north": Place(-30.2, 45.1),
    "65 north": Place(-40.3, 64.9),
    "40 south": Place(80.2, -40.2),
    "180th meridian": Place(179.97, 52.1),
}


def footprint_over(
    folder: Path, place: Place, alt_m: float, ground_m: float = 0.0, **changed: object
) -> Footprint:
    crs = changed.pop("crs", None)
    half_m = float(changed.pop("half_m", 30_000.0))  # type: ignore[arg-type]
    limits = changed.pop("limits", SolveLimits())
    cases.write_terrain(
        folder, place, cases.flat(ground_m), half_m=half_m, post_m=500.0, crs=crs  # type: ignore[arg-type]
    )  # fmt: skip
    case = cases.glide_case(place, alt_m, **changed)
    return solve(TerrainStore(folder), case, limits=limits)  # type: ignore[arg-type]


def vertices(shape: BaseGeometry, place: Place) -> tuple[np.ndarray, np.ndarray]:
    lon, lat = shapely.get_coordinates(shape).T
    return place.plane().to_xy(lon, lat)


def reach_m(shape: BaseGeometry, place: Place, bearing_rad: float) -> float:
    """Return the distance [m] to which the ground along a bearing lies in the shape."""
    along_m = np.arange(30.0, 40_000.0, 5.0)
    lon, lat = place.plane().to_lonlat(
        along_m * math.sin(bearing_rad), along_m * math.cos(bearing_rad)
    )
    return float(along_m[shapely.contains_xy(shape, lon, lat)].max())


@pytest.mark.parametrize("share", [0.0, 0.3, 0.6])
@pytest.mark.parametrize("name", list(PLACES))
def test_constant_wind_gives_the_exact_disc(tmp_path: Path, name: str, share: float) -> None:
    place = PLACES[name]
    towards_rad = math.radians(37.0 + 100.0 * list(PLACES).index(name))
    east = share * EAS_MPS * math.sin(towards_rad)
    north = share * EAS_MPS * math.cos(towards_rad)
    found = footprint_over(tmp_path, place, HIGH_M, wind=cases.constant_wind(east, north))
    # Derived: Zermelo's problem in constant wind: disc of radius E h (tan gamma = 1/E) carried by
    # w T; T with the density of ICAO Doc 7488/3 because it is the EAS that is held
    disc = forms.disc_at_constant_eas(EAS_MPS, RATIO, HIGH_M, 0.0, east, north)
    expected_m2 = math.pi * disc.radius_m**2
    for shape in (found.footprint, found.straight):
        assert forms.area_m2(shape) == pytest.approx(expected_m2, rel=5e-3)  # the customer's 0.5 %
        outside_m = disc.outside_m(*vertices(shape, place))
        assert outside_m.max() <= found.cell_m  # nothing outside by more than one cell
    assert found.footprint_km2 == pytest.approx(
        forms.area_m2(found.footprint) / 1e6,
        rel=1e-3,  # the outline is thinned within a cell
    )


def test_disc_on_abutting_tiles_across_the_180th_meridian(tmp_path: Path) -> None:
    place = PLACES["180th meridian"]
    step = 0.005
    for name, west in (("east", -180.0), ("west", 179.0)):
        transform = cases.Affine(step, 0, west, 0, -step, place.lat_deg + 0.5)
        cases.write_raster(tmp_path, np.zeros((200, 200)), transform, "EPSG:4326", name)
    case = cases.glide_case(place, HIGH_M)
    found = solve(TerrainStore(tmp_path), case, limits=SolveLimits())
    # Derived: still air: disc of radius E h; the ground on both sides of the meridian is one
    assert forms.area_m2(found.footprint) == pytest.approx(math.pi * (9 * HIGH_M) ** 2, rel=5e-3)


def test_outline_below_sea_level_is_the_same_disc(tmp_path: Path) -> None:
    place = PLACES["45 north"]
    found = footprint_over(tmp_path, place, 600.0, ground_m=-400.0)
    assert forms.area_m2(found.footprint) == pytest.approx(math.pi * 9000.0**2, rel=5e-3)
    assert forms.Disc(0, 0, 9000.0).outside_m(*vertices(found.footprint, place)).max() <= 30.0


@pytest.mark.parametrize("towards_deg", [0.0, 90.0, 217.0])
def test_wind_blows_the_right_way_where_grid_north_is_14_degrees_off(
    tmp_path: Path, towards_deg: float
) -> None:
    place = PLACES["45 north"]
    towards = math.radians(towards_deg)
    east, north = 15.0 * math.sin(towards), 15.0 * math.cos(towards)
    found = footprint_over(
        tmp_path,
        place,
        1000.0,
        wind=cases.constant_wind(east, north),
        crs=place.local_crs(turned_deg=14.0),
    )
    # Derived: disc of 9 km about w T; a wind turned by 14 degrees would move it by 0.9 km
    disc = forms.disc_at_constant_eas(EAS_MPS, RATIO, 1000.0, 0.0, east, north)
    assert disc.outside_m(*vertices(found.footprint, place)).max() <= found.cell_m
    assert forms.area_m2(found.footprint) == pytest.approx(math.pi * 9000.0**2, rel=5e-3)


@pytest.mark.parametrize(("bearing_deg", "per_ratio"), [(270, 0.714257), (0, 0.955047)])
def test_free_speed_reaches_the_union_of_discs(
    tmp_path: Path, bearing_deg: int, per_ratio: float
) -> None:
    # Derived: largest reach over the speed, parabolic polar, wind 0.3 of the best-glide speed:
    # upwind the root of 2u^5 - 3wu^4 - 2u + w = 0 (Reichmann, Cross-Country Soaring, 1978)
    assert forms.best_reach_by_speed(0.3, math.radians(90 - bearing_deg)) == pytest.approx(
        per_ratio, rel=1e-5
    )
    place, ratio = PLACES["45 north"], 20.0
    tas_mps = EAS_MPS / (1.0 - 0.0065 * 200.0 / 288.15) ** 2.12794  # half way down
    found = footprint_over(
        tmp_path,
        place,
        400.0,
        plane=cases.polar(ratio, EAS_MPS, 15.0),
        wind=cases.constant_wind(0.3 * tas_mps, 0.0),
        speed_policy="wind",
    )
    expected_m = 400.0 * ratio * per_ratio
    # one cell, and 0.2 % for the path angle at 20:1 and the density of 400 m
    got_m = reach_m(found.footprint, place, math.radians(bearing_deg))
    assert got_m == pytest.approx(expected_m, abs=found.cell_m + 0.002 * expected_m)


def test_wind_by_level_follows_the_integral_downwind_and_is_charged_upwind(tmp_path: Path) -> None:
    place, high_m = PLACES["45 north"], 1500.0
    wind = WindProfile(np.array([0.0, 2000.0]), np.array([5.0, 15.0]), np.zeros(2))
    found = footprint_over(tmp_path, place, high_m, wind=wind)
    alt_m = np.linspace(0.0, high_m, 3001)
    tas = EAS_MPS / (1.0 - 0.0065 * alt_m / 288.15) ** 2.12794
    gamma = math.atan(1 / RATIO)
    east = 5.0 + 0.005 * alt_m
    # Derived: downwind E h + integral of w dt; a tailwind that falls off is not credited
    downwind_m = np.trapezoid((tas * math.cos(gamma) + east) / (tas * math.sin(gamma)), alt_m)
    # Derived: upwind each metre of height lasts (1 - V/g dw/dh) as long: holding airspeed while the
    # headwind falls off costs V/g per m/s
    share = 1.0 - tas / 9.80665 * 0.005
    upwind_m = np.trapezoid((tas * math.cos(gamma) - east) * share / (tas * math.sin(gamma)), alt_m)
    for bearing_deg, expected_m in ((90.0, downwind_m), (270.0, upwind_m)):
        got_m = reach_m(found.footprint, place, math.radians(bearing_deg))
        assert got_m == pytest.approx(expected_m, abs=found.cell_m + 0.002 * expected_m)


def test_first_turn_costs_the_closed_form(tmp_path: Path) -> None:
    place, alt_m = PLACES["40 south"], 900.0
    found = footprint_over(tmp_path, place, alt_m, track_rad=0.0)
    bank = math.radians(30.0)
    tas_mps = EAS_MPS / (1.0 - 0.0065 * alt_m / 288.15) ** 2.12794
    per_rad_m = forms.turn_loss_per_rad_m(tas_mps, RATIO, bank)
    radius_m = tas_mps**2 / (forms.G * math.sin(bank))
    assert found.figures.turn_180_loss_m == pytest.approx(math.pi * per_rad_m, rel=0.02)
    for behind_m in (2500.0, 4000.0):
        lon, lat = place.plane().to_lonlat(np.array([0.0]), np.array([-behind_m]))
        got = found.explain(float(lon[0]), float(lat[0]))
        assert got.alt_m is not None
        # Derived: tangents from a point to a circle are equal: straight leg = D exactly and turn =
        # 180 degrees + 2 atan(R/D) (geometry behind Rogers, J. Aircraft 32(2), 1995, 392-397)
        turn_m = (math.pi + 2.0 * math.atan(radius_m / behind_m)) * per_rad_m
        paid_m = alt_m - behind_m / RATIO - got.alt_m
        # 2 % (the customer's figure) and half a cell: the label is the cell's, at its centre
        assert paid_m == pytest.approx(turn_m, abs=0.02 * turn_m + 0.5 * found.cell_m / RATIO)
    ahead = found.explain(*(float(v[0]) for v in place.plane().to_lonlat(
        np.array([0.0]), np.array([4000.0]))))  # fmt: skip
    assert ahead.alt_m == pytest.approx(alt_m - 4000.0 / RATIO, abs=found.cell_m / RATIO)


def test_reaction_is_flown_straight_on(tmp_path: Path) -> None:
    place = PLACES["40 south"]
    prompt = footprint_over(tmp_path, place, 900.0, track_rad=math.pi / 2)
    late = footprint_over(
        tmp_path, place, 900.0, track_rad=math.pi / 2, margins=cases.neutral(reaction_s=10.0)
    )
    flown_m = (
        10.0 * EAS_MPS / (1.0 - 0.0065 * 900.0 / 288.15) ** 2.12794 * math.cos(math.atan(1 / 9))
    )
    # Derived: behind, the reach shrinks by the way out and the way back; ahead nothing is lost
    behind = [reach_m(f.footprint, place, 1.5 * math.pi) for f in (prompt, late)]
    assert behind[0] - behind[1] == pytest.approx(2.0 * flown_m, abs=2.0 * prompt.cell_m)
    ahead = [reach_m(f.footprint, place, 0.5 * math.pi) for f in (prompt, late)]
    assert ahead[1] == pytest.approx(ahead[0], abs=prompt.cell_m)


@pytest.mark.parametrize(
    ("speed_mps", "credit", "share"),
    [(28.0, 0.0, 1.0), (50.0, 0.0, 0.0), (50.0, 0.5, 0.5), (28.0, 0.5, 1.0)],
)
def test_speed_at_failure_is_charged_in_full_and_credited_only_when_asked(
    tmp_path: Path, speed_mps: float, credit: float, share: float
) -> None:
    place, alt_m = PLACES["40 south"], 600.0
    usual = footprint_over(tmp_path, place, alt_m)
    found = footprint_over(
        tmp_path,
        place,
        alt_m,
        speed_eas_mps=speed_mps,
        margins=cases.neutral(excess_speed_credit=credit),
    )
    lon, lat = (float(v[0]) for v in place.plane().to_lonlat(np.array([0.0]), np.array([3000.0])))
    before, after = usual.explain(lon, lat).alt_m, found.explain(lon, lat).alt_m
    assert before is not None
    assert after is not None
    # Derived: kinetic height (V^2 - Vg^2) / 2g at the TAS of the height of failure; a deficit in
    # full, an excess not at all or by the share asked for
    sigma = (1.0 - 0.0065 * alt_m / 288.15) ** 4.255880
    kinetic_m = (speed_mps**2 - EAS_MPS**2) / sigma / (2.0 * forms.G)
    assert after - before == pytest.approx(share * kinetic_m, abs=0.02 * abs(kinetic_m) + 0.01)
