"""The closed forms are held to published or twice-derived numbers before they judge anything."""

from __future__ import annotations

import math

import numpy as np
import pytest
from shapely import box

from tests import closed_forms as forms


@pytest.mark.parametrize(
    ("angle_deg", "reach_m"),
    [(0, 12857.14), (30, 12371.79), (60, 11117.61), (90, 9583.15), (120, 8260.47), (180, 7142.86)],
)
def test_reach_in_constant_wind(angle_deg: float, reach_m: float) -> None:
    # Derived: V 35 m/s, sink 3.5 m/s, 1000 m, wind 10 m/s: r = T (w cos + sqrt(V^2 - w^2 sin^2))
    found_m = forms.reach_from_downwind_m(35.0, 10.0, 1000.0 / 3.5, math.radians(angle_deg))
    assert found_m == pytest.approx(reach_m, abs=0.01)


def test_disc_with_speed_along_the_path() -> None:
    # Derived: V 35 m/s, 10:1, 1000 m, wind 10 m/s: centre 2871.39 m, radius h E = 10 000 m exactly
    disc = forms.disc_at_constant_tas(35.0, 10.0, 1000.0, 10.0, 0.0)
    assert disc.x_m == pytest.approx(2871.39, abs=0.01)
    assert disc.radius_m == 10_000.0


def test_disc_at_constant_eas_takes_the_density_integral() -> None:
    # Derived: ICAO Doc 7488/3: integral of sqrt(sigma) from 3000 to 500 m is 2295.452 m
    disc = forms.disc_at_constant_eas(35.0, 10.0, 3000.0, 500.0, 10.0, 0.0)
    sink_mps = 35.0 * math.sin(math.atan(0.1))
    assert disc.x_m == pytest.approx(10.0 * 2295.452 / sink_mps, rel=1e-6)


@pytest.mark.parametrize(
    ("d", "time_s"),
    [((1000.0, 0.0), 22.2222), ((-1000.0, 0.0), 40.0), ((0.0, 1000.0), 29.814240),
     ((3000.0, 4000.0), 124.770889)],
)  # fmt: skip
def test_randers_norm(d: tuple[float, float], time_s: float) -> None:
    # Derived: closed form, confirmed with the Randers metric of another library (Mirebeau, agd)
    assert forms.time_to_go_s(*d, 35.0, 10.0, 0.0) == pytest.approx(time_s, rel=1e-5)


@pytest.mark.parametrize(
    ("wind", "upwind", "across", "downwind"),
    [(0.3, 0.714257, 0.955047, 1.309115), (0.5, 0.546605, 0.876081, 1.522358),
     (0.8, 0.347786, 0.698978, 1.848506)],
)  # fmt: skip
def test_reach_with_free_speed(wind: float, upwind: float, across: float, downwind: float) -> None:
    # Derived: union of discs over the speed; upwind equals the root of 2u^5 - 3wu^4 - 2u + w = 0
    assert forms.best_reach_by_speed(wind, math.pi) == pytest.approx(upwind, rel=1e-5)
    assert forms.best_reach_by_speed(wind, math.pi / 2) == pytest.approx(across, rel=1e-5)
    assert forms.best_reach_by_speed(wind, 0.0) == pytest.approx(downwind, rel=1e-5)


@pytest.mark.parametrize(
    ("wind", "round_m", "clear_m"),
    [((0.0, 0.0), 826.13, 800.0), ((5.0, 0.0), 726.14, 700.00), ((-5.0, 0.0), 959.47, 933.33),
     ((0.0, 5.0), 835.23, 808.29)],
)  # fmt: skip
def test_height_needed_round_a_wall(
    wind: tuple[float, float], round_m: float, clear_m: float
) -> None:
    # Derived: straight segments between extreme obstacle points (Segal, Bar-Gill, Shimkin, arXiv
    # 2304.06499); wall |y| <= 1000 m at x = 0, from (-5000, 0) to (3000, 0), V 35, sink 3.5 m/s
    def loss_m(a: forms.Point, b: forms.Point) -> float:
        return 3.5 * forms.time_to_go_s(b[0] - a[0], b[1] - a[1], 35.0, *wind)

    wall = forms.Obstacles([box(-0.1, -1000.0, 0.1, 1000.0)], loss_m)
    found_m = wall.losses_m((-5000.0, 0.0), np.array([[3000.0, 0.0], [-4000.0, 0.0]]))
    assert found_m[0] == pytest.approx(round_m, abs=0.02)  # 0.02: the wall is 0.2 m thick
    assert loss_m((-5000.0, 0.0), (3000.0, 0.0)) == pytest.approx(clear_m, abs=0.01)
    assert found_m[1] == pytest.approx(loss_m((-5000.0, 0.0), (-4000.0, 0.0)))


def test_endless_ridge() -> None:
    # Derived: h >= max(d / E, ridge + d1 / E): 1000 m, 10:1, ridge 300 m at 5 km: passed at 500 m
    ends = np.array([[4999.0, 0.0], [100.0, 8000.0]])
    loss_m = forms.ridge_losses_m(-5000.0, 1000.0, 300.0, 10.0, ends)
    assert loss_m[0] == pytest.approx(999.9)
    # crossing at y = 4898.98 m (7 km from the start), then 3102.6 m on to the point
    assert loss_m[1] == pytest.approx((7000.0 + math.hypot(100.0, 8000.0 - 4898.98)) / 10.0)
    assert np.all(np.isinf(forms.ridge_losses_m(-5000.0, 700.0, 300.0, 10.0, ends)))


def test_geodesic_area_of_a_degree_cell() -> None:
    # Derived: authalic area of the WGS 84 zone 0 .. 1 degree over 360: 1 degree cell at the equator
    e2 = 6.69437999014e-3
    e = math.sqrt(e2)
    s = math.sin(math.radians(1.0))
    zone = (1 - e2) * (s / (1 - e2 * s * s) + math.atanh(e * s) / e)
    expected_m2 = math.radians(1.0) * 6378137.0**2 / 2.0 * zone
    cell = box(0.0, 0.0, 1.0, 1.0).segmentize(0.01)
    assert forms.area_m2(cell) == pytest.approx(expected_m2, rel=1e-5)  # edges: geodesics 1.1 km
