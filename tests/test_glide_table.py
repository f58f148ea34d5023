"""The glide table against closed forms, the speed-to-fly theory and independent integrations."""

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from perf.atmosphere import GRAVITY_MPS2, sigma
from perf.errors import InputError
from perf.glide_table import GlideTable, build_glide_table
from perf.polar import Polar, glide_angle_rad, sink_mps

FLAT = Polar(30.0, 1000.0, 5.0, 500.0)  # so flat that cos(gamma) is 1 to 1e-6
TRAINER = Polar(35.0, 9.0, 23.0, 760.0)
NORTH, EAST, SOUTH, WEST = 0, 45, 90, 135  # rows of 180 tracks


def table(
    polar: Polar, east: Any = (), north: Any = (), at: Any = None, **changes: Any
) -> GlideTable:
    """Return a table of 180 tracks; a scalar wind is the same at every level."""
    if at is None:
        at, east, north = ([0.0], [east or 0.0], [north or 0.0])
    given_values: dict[str, Any] = {
        "alt_levels_m": np.linspace(0.0, 3000.0, 31),
        "wind_alt_m": at,
        "wind_east_mps": east,
        "wind_north_mps": north,
        "maximum_speed_eas_mps": 80.0,
    }
    return build_glide_table(polar, **(given_values | changes))


def test_still_air_loses_the_ratio_on_every_track() -> None:
    # Derived: tan(gamma) = 1/E whatever density and track; TAS grows with 1/sqrt(sigma).
    result = table(TRAINER, isa_offset_k=15.0, qnh_pa=99_000.0)
    assert result.loss == pytest.approx(np.full((31, 180), 1.0 / 9.0), rel=1e-12)
    root = np.sqrt(sigma(result.alt_m, 15.0, 99_000.0))
    assert result.tas_mps == pytest.approx(35.0 / root)
    assert result.sink_mps == pytest.approx(35.0 / root * math.sin(math.atan(1.0 / 9.0)))
    assert result.ratio == pytest.approx(9.0)
    assert result.gamma_rad == pytest.approx(math.atan(1.0 / 9.0))
    assert result.holdable_below_m == math.inf
    assert result.heading_rad == pytest.approx(np.broadcast_to(result.track_rad, (31, 180)))


def test_tracks_run_clockwise_from_north() -> None:
    # Derived: a wind towards east helps the track east (90 deg) and hinders west.
    result = table(TRAINER, east=10.0)
    assert result.track_rad[EAST] == pytest.approx(math.pi / 2.0)
    assert np.all(result.loss[:, EAST] < result.loss[:, NORTH])
    assert np.all(result.loss[:, NORTH] < result.loss[:, WEST])
    assert result.loss[:, NORTH] == pytest.approx(result.loss[:, SOUTH])
    # The nose points into the wind: left of north, right of south.
    assert np.all(result.heading_rad[:, NORTH] < 0.0)
    assert np.all(result.heading_rad[:, SOUTH] > math.pi)


def test_distance_law_of_the_displaced_disc() -> None:
    # Derived: reach r = T (w cos(t) + sqrt(Vh^2 - w^2 sin(t)^2)), T = h / sink: the disc of centre
    # w T and radius V T. V 35, ratio 10, h 1000, w 10: centre 2871.39 m, radius 10 000 m exactly.
    polar = Polar(35.0, 10.0, 20.0, 760.0)
    result = table(polar, east=10.0, alt_levels_m=[0.0], qnh_pa=101325.0)
    reach = 1000.0 / result.loss[0]
    x, y = reach * np.sin(result.track_rad), reach * np.cos(result.track_rad)
    radius = np.hypot(x - 2871.39, y)
    assert radius == pytest.approx(np.full(180, 10_000.0), rel=1e-6)  # centre has 6 digits


@pytest.mark.parametrize(
    ("track_deg", "reach_m"),
    [
        (90, 12857.14),
        (120, 12371.79),
        (150, 11117.61),
        (180, 9583.15),
        (210, 8260.47),
        (270, 7142.86),
    ],
)
def test_reach_by_angle_from_downwind(track_deg: int, reach_m: float) -> None:
    # Derived: the same with airspeed 35 and sink 3.5 level: a polar so that V cos(gamma) is 35.
    speed = math.hypot(35.0, 3.5)
    result = table(Polar(speed, 10.0, 20.0, 760.0), east=10.0, alt_levels_m=[0.0])
    assert 1000.0 / result.loss[0, track_deg // 2] == pytest.approx(reach_m, abs=0.01)


def test_pure_crosswind_costs() -> None:
    # Derived: sqrt(1 - 0.3^2) = 0.95394 of the still-air glide, not 1.
    result = table(FLAT, east=9.0, alt_levels_m=[0.0])
    assert 1.0 / result.loss[0, NORTH] / 1000.0 == pytest.approx(0.95394, abs=5e-6)


# headwind / V, u = V/V of best glide, ground glide / best ratio. Derived: 2u^5 - 3wu^4 - 2u + w = 0
# (parabolic drag; MacCready's construction).
HEADWIND = [
    (-0.50, 0.914568, 1.522360),
    (-0.20, 0.957624, 1.204331),
    (-0.10, 0.977039, 1.101162),
    (0.00, 1.000000, 1.000000),
    (0.10, 1.027352, 0.901349),
    (0.20, 1.060133, 0.805842),
    (0.25, 1.078938, 0.759505),
    (0.30, 1.099575, 0.714257),
    (0.40, 1.147059, 0.627509),
    (0.50, 1.203993, 0.546605),
    (0.60, 1.271605, 0.472534),
    (0.80, 1.441300, 0.347786),
    (1.00, 1.654155, 0.254997),
]


@pytest.mark.parametrize(("wind", "u", "glide"), HEADWIND)
def test_speed_to_fly_in_a_headwind(wind: float, u: float, glide: float) -> None:
    # Tolerances: 1e-5 of ratio; 1e-3 of speed, round which the ratio is flat.
    result = table(FLAT, north=-30.0 * wind, alt_levels_m=[0.0], speed_policy="wind")
    assert 1.0 / result.loss[0, NORTH] / 1000.0 == pytest.approx(glide, rel=1e-5)
    assert result.speed_eas_mps[0, NORTH] / 30.0 == pytest.approx(u, abs=1e-3)


@pytest.mark.parametrize(
    ("sink", "u", "glide"),
    [(0.25, 1.060558, 0.804734), (0.5, 1.117349, 0.679250), (1.0, 1.220744, 0.526371)],
)
def test_speed_to_fly_in_sinking_air(sink: float, u: float, glide: float) -> None:
    # Derived: u^4 - s u - 1 = 0, s = extra sink over the sink at best glide. Tolerances as above.
    downdraft = sink * float(sink_mps(FLAT, 30.0))
    result = table(FLAT, alt_levels_m=[0.0], speed_policy="wind", downdraft_mps=downdraft)
    assert 1.0 / result.loss[0] / 1000.0 == pytest.approx(np.full(180, glide), rel=1e-5)
    assert result.speed_eas_mps[0] / 30.0 == pytest.approx(np.full(180, u), abs=1e-3)


@pytest.mark.parametrize(
    ("wind", "up", "across", "down"),
    [
        (0.3, 0.714257, 0.955047, 1.309115),
        (0.5, 0.546605, 0.876081, 1.522358),
        (0.8, 0.347786, 0.698978, 1.848506),
    ],
)
def test_reach_with_the_speed_free(wind: float, up: float, across: float, down: float) -> None:
    # Derived: union over u of the discs of centre w/s(u) and radius u/s(u). Tolerance 1e-5.
    result = table(FLAT, east=30.0 * wind, alt_levels_m=[0.0], speed_policy="wind")
    ratios = 1.0 / result.loss[0] / 1000.0
    assert ratios[WEST] == pytest.approx(up, rel=1e-5)
    assert ratios[NORTH] == pytest.approx(across, rel=1e-5)
    assert ratios[EAST] == pytest.approx(down, rel=1e-5)


def test_wind_policy_keeps_its_limits_and_is_never_worse() -> None:
    # Derived: between 1.2 Vs and the maximum; the best-glide speed is one of the choices.
    wind = {"east": [0.0, 25.0], "north": [-5.0, 10.0], "at": [0.0, 3000.0]}
    slow = table(TRAINER, **wind, speed_policy="wind", maximum_speed_eas_mps=37.0)
    assert np.nanmax(slow.speed_eas_mps) == pytest.approx(37.0)
    near_stall = Polar(35.0, 9.0, 28.0, 760.0)
    tail = table(near_stall, north=20.0, alt_levels_m=[0.0], speed_policy="wind")
    assert tail.speed_eas_mps[0, NORTH] == pytest.approx(1.2 * 28.0)
    free = table(TRAINER, **wind, speed_policy="wind", maximum_speed_eas_mps=70.0)
    assert np.nanmax(free.speed_eas_mps) > 40.0
    assert np.all(free.loss <= table(TRAINER, **wind).loss * (1.0 + 1e-6))
    # Turns and the reaction are flown at the best-glide speed all the same.
    assert free.tas_mps == pytest.approx(table(TRAINER, **wind).tas_mps)


@pytest.mark.parametrize(
    ("top_m", "bottom_m", "integral_m"),
    [(3000.0, 500.0, 2295.452), (3048.0, 0.0, 2830.777), (6000.0, 0.0, 5179.747)],
)
def test_drift_with_density(top_m: float, bottom_m: float, integral_m: float) -> None:
    # Derived: at constant EAS the time down is I / s with I the integral of sqrt(sigma) dh in the
    # ICAO troposphere; a wind of 10 m/s moves the end by 10 I / s. Tolerance 1e-4.
    levels = np.linspace(bottom_m, top_m, 201)
    result = table(TRAINER, east=10.0, alt_levels_m=levels)
    sink = 35.0 * math.sin(result.gamma_rad)
    time_s = np.trapezoid(1.0 / result.sink_mps, levels)
    assert time_s * sink == pytest.approx(integral_m, rel=1e-4)
    # Downwind and upwind reach differ by twice the drift.
    ahead = np.trapezoid(1.0 / result.loss[:, EAST], levels)
    behind = np.trapezoid(1.0 / result.loss[:, WEST], levels)
    assert (ahead - behind) / 2.0 == pytest.approx(10.0 * integral_m / sink, rel=1e-4)
    # In still air density takes nothing from the reach.
    assert (ahead + behind) / 2.0 == pytest.approx(9.0 * (top_m - bottom_m), rel=1e-4)


def test_drift_with_wind_that_grows_with_height() -> None:
    # Derived: wind 5 + 0.005 h m/s, sink 3.5 m/s EAS, 3000 to 500 m: 8932.5 m of drift.
    # Tolerance 1e-4. Taken from the downwind track, where no shear is charged.
    polar = Polar(35.0, 1.0 / math.tan(math.asin(0.1)), 20.0, 760.0)
    levels = np.linspace(500.0, 3000.0, 201)
    wind = {"at": [0.0, 4000.0], "east": [5.0, 25.0], "north": [0.0, 0.0]}
    result = table(polar, **wind, alt_levels_m=levels)
    drift = np.trapezoid(1.0 / result.loss[:, EAST] - polar.ratio, levels)
    assert drift == pytest.approx(8932.5, rel=1e-4)


def fly_down(polar: Polar, top_m: float, slope: float, wind_top: float) -> float:
    """Return the ground covered down to 0 m straight into a headwind that rises by `slope` [1/s].

    A point mass with its true airspeed as a state; the pilot holds the equivalent airspeed with
    the pitch. Density after the ICAO formula written out; steps of 0.05 s.
    """
    target = polar.best_glide_eas_mps
    gamma, step_s, height, along = float(glide_angle_rad(polar, target)), 0.05, top_m, 0.0
    speed = target / (1.0 - height / 44330.77) ** 2.12794
    while height > 0.0:
        eas = speed * (1.0 - height / 44330.77) ** 2.12794
        drag_mps2 = GRAVITY_MPS2 * math.sin(float(glide_angle_rad(polar, eas)))
        sink = speed * math.sin(gamma)
        # The headwind fades as it descends, which slows the air against the aeroplane.
        fade_mps2 = slope * sink * math.cos(gamma)
        along += step_s * (speed * math.cos(gamma) - (wind_top - slope * (top_m - height)))
        speed += step_s * (GRAVITY_MPS2 * math.sin(gamma) - drag_mps2 - fade_mps2)
        gamma += step_s * 0.05 * (target - eas)
        height -= step_s * sink
    return along


@pytest.mark.parametrize("slope", [0.0, 0.005, 0.02, 0.05])
def test_shear_charge_against_a_flight_with_speed_as_a_state(slope: float) -> None:
    # Derived: independent integration of the energy equation in `fly_down`. On the low side by
    # 0 to 2.5 %: the table leaves out that true airspeed falls on the way down (1 % at 40 m/s)
    # and has V/g for V cos(gamma)/g. Without the charge the steepest case would be 20 % high.
    polar, top_m = Polar(40.0, 12.0, 25.0, 900.0), 600.0
    wind_top, levels = 2.0 + top_m * slope, np.linspace(0.0, 600.0, 121)
    wind = {"at": [0.0, top_m], "east": [0.0, 0.0], "north": [-2.0, -wind_top]}
    reach = np.trapezoid(1.0 / table(polar, **wind, alt_levels_m=levels).loss[:, NORTH], levels)
    flown = fly_down(polar, top_m, slope, wind_top)
    assert 0.975 * flown <= reach <= flown


def test_shear_charge_closed_form() -> None:
    # Derived: loss / (1 - (V/g) d(headwind)/dh), V/g for each m/s per m; downwind is not credited.
    slope = 0.03
    wind = {"at": [0.0, 3000.0], "east": [0.0, 0.0], "north": [0.0, -3000.0 * slope]}
    levels = np.linspace(0.0, 400.0, 41)
    sheared = table(TRAINER, **wind, alt_levels_m=levels)
    for i in (0, 10, 25):
        steady = table(TRAINER, north=-slope * levels[i], alt_levels_m=[levels[i]])
        divisor = 1.0 - sheared.tas_mps[i] / GRAVITY_MPS2 * slope
        assert sheared.loss[i, NORTH] == pytest.approx(steady.loss[0, NORTH] / divisor)
        assert sheared.loss[i, SOUTH] == pytest.approx(steady.loss[0, SOUTH])


def test_shear_is_charged_along_the_heading_not_the_track() -> None:
    # Derived: to hold airspeed along the heading, only the change of wind along it counts.
    wind = {"at": [0.0, 2000.0], "east": [12.0, -20.0], "north": [-6.0, -30.0]}
    sheared = table(TRAINER, **wind, alt_levels_m=[400.0, 500.0, 600.0])
    steady = table(
        TRAINER,
        east=sheared.wind_east_mps[1],
        north=sheared.wind_north_mps[1],
        alt_levels_m=[500.0],
    )
    heading = steady.heading_rad[0]
    assert np.ptp(heading - steady.track_rad) > 0.2
    slope = (32.0 * np.sin(heading) + 24.0 * np.cos(heading)) / 2000.0
    divisor = 1.0 - sheared.tas_mps[1] / GRAVITY_MPS2 * np.maximum(slope, 0.0)
    assert sheared.loss[1] == pytest.approx(steady.loss[0] / divisor, rel=1e-9)


def test_a_thin_layer_of_wind_is_not_stepped_over() -> None:
    # Derived: a jet of 8 m/s between two table levels; descending north it is a headwind that
    # appears (no credit) and fades (charged): the interval's charge is the fade over its height.
    wind = {"at": [1040.0, 1050.0, 1060.0], "east": [0.0] * 3, "north": [0.0, -8.0, 0.0]}
    result = table(TRAINER, **wind)
    row = 10  # 1000 m, the interval 1000 .. 1100 m
    divisor = 1.0 - result.tas_mps[row] / GRAVITY_MPS2 * 8.0 / 100.0
    assert result.loss[row, NORTH] == pytest.approx(1.0 / 9.0 / divisor)
    assert result.loss[row + 1, NORTH] > 1.0 / 9.0
    assert result.loss[row + 2, NORTH] == pytest.approx(1.0 / 9.0)


def test_shear_beyond_what_the_descent_can_pay_is_no_track() -> None:
    # Derived: 1 - (V/g) slope is below 0.05 at V 35 and 0.28 1/s. The limit itself is ours: the
    # path would be twenty times as steep as in still air.
    wind = {"at": [1000.0, 1050.0], "east": [0.0, 0.0], "north": [0.0, -14.0]}
    result = table(TRAINER, **wind, alt_levels_m=np.linspace(950.0, 1100.0, 16))
    assert np.all(np.isinf(result.loss[5:11, NORTH]))
    assert np.all(np.isfinite(result.loss[:, SOUTH]))
    assert result.holdable_below_m == pytest.approx(1000.0)
    for room, held in ((0.06, True), (0.04, False)):
        fade = (1.0 - room) * GRAVITY_MPS2 / 35.0
        wind = {"at": [0.0, 1.0], "east": [0.0, 0.0], "north": [0.0, -fade]}
        thin = table(TRAINER, **wind, alt_levels_m=[0.0, 1.0])
        assert math.isfinite(thin.loss[0, NORTH]) is held


def test_wind_error_comes_off_every_track() -> None:
    # Derived: ground speed less the error, sink as before.
    calm, doubtful = table(TRAINER), table(TRAINER, wind_error_mps=3.0)
    level = calm.tas_mps * math.cos(calm.gamma_rad)
    expected = calm.sink_mps / (level - 3.0)
    assert doubtful.loss == pytest.approx(np.broadcast_to(expected[:, None], (31, 180)))


def test_downdraft_adds_to_the_sink() -> None:
    # Derived: (sink + downdraft) / ground speed.
    calm, sinking = table(TRAINER), table(TRAINER, downdraft_mps=1.5)
    level = calm.tas_mps * math.cos(calm.gamma_rad)
    expected = (calm.sink_mps + 1.5) / level
    assert sinking.loss == pytest.approx(np.broadcast_to(expected[:, None], (31, 180)))


def test_tracks_that_cannot_be_held() -> None:
    # Derived: wind w > V leaves the tracks within asin(V/w) of downwind.
    result = table(TRAINER, east=60.0, alt_levels_m=[0.0, 100.0])
    level = 35.0 * math.cos(result.gamma_rad)
    off_downwind = np.abs(np.angle(np.exp(1j * (result.track_rad - math.pi / 2.0))))
    held = off_downwind < math.asin(level / 60.0)
    assert np.array_equal(np.isfinite(result.loss[0]), held)
    assert np.array_equal(np.isfinite(result.heading_rad[0]), held)
    assert np.array_equal(np.isfinite(result.speed_eas_mps[0]), held)
    assert result.holdable_below_m == 0.0


def test_lowest_level_at_which_a_track_is_lost() -> None:
    # Derived: wind reaches the ground speed limit of 1 m/s between 1700 and 1800 m: 0.02 h + 1 = V.
    wind = {"at": [0.0, 3000.0], "east": [0.0, 60.0], "north": [0.0, 0.0]}
    result = table(TRAINER, **wind)
    level = result.tas_mps * math.cos(result.gamma_rad)
    first = result.alt_m[np.argmax(0.02 * result.alt_m + 1.0 >= level)]
    assert 1700.0 < first < 2200.0
    assert result.holdable_below_m == first


def test_a_ground_speed_of_one_metre_a_second_is_the_limit() -> None:
    level = 35.0 * math.cos(math.atan(1.0 / 9.0))
    slower = table(TRAINER, north=-(level - 0.999), alt_levels_m=[0.0])
    faster = table(TRAINER, north=-(level - 1.001), alt_levels_m=[0.0])
    assert math.isinf(slower.loss[0, NORTH])
    assert math.isfinite(faster.loss[0, NORTH])


def test_wind_is_interpolated_by_component_never_by_direction() -> None:
    # Derived: 350 deg 10 below, 010 deg 10 above give 000 deg 9.85 between, not 180 deg.
    angle = np.radians([350.0, 10.0])
    wind = {"at": [0.0, 1000.0], "east": -10.0 * np.sin(angle), "north": -10.0 * np.cos(angle)}
    result = table(TRAINER, **wind, alt_levels_m=[400.0, 500.0, 600.0])
    assert result.wind_east_mps[1] == pytest.approx(0.0, abs=1e-12)
    assert result.wind_north_mps[1] == pytest.approx(-9.848, abs=1e-3)


def test_nearest_wind_level_holds_outside() -> None:
    wind = {"at": [1000.0, 2000.0], "east": [4.0, 12.0], "north": [-3.0, 5.0]}
    result = table(TRAINER, **wind)
    assert result.wind_east_mps[[0, 10, 15, 20, 30]] == pytest.approx([4.0, 4.0, 8.0, 12.0, 12.0])
    assert result.wind_north_mps[[0, 30]] == pytest.approx([-3.0, 5.0])


def test_no_wind_levels_is_calm() -> None:
    empty = table(TRAINER, at=[], east=[], north=[])
    assert np.array_equal(empty.loss, table(TRAINER).loss)


@settings(max_examples=40, deadline=None)
@given(
    east=st.floats(-25.0, 25.0),
    north=st.floats(-25.0, 25.0),
    policy=st.sampled_from(["manual", "wind"]),
    offset_k=st.floats(-30.0, 30.0),
)
def test_heading_and_speed_really_hold_the_track(
    east: float, north: float, policy: str, offset_k: float
) -> None:
    # Derived: air velocity along the heading plus wind lies along the track, and its length and
    # the sink give the loss.
    levels = [500.0, 2500.0]
    result = table(
        TRAINER, east=east, north=north, alt_levels_m=levels, speed_policy=policy,
        isa_offset_k=offset_k,
    )  # fmt: skip
    root = np.sqrt(sigma(np.array(levels), offset_k))[:, None]
    gamma = glide_angle_rad(TRAINER, result.speed_eas_mps)
    tas = result.speed_eas_mps / root
    x = tas * np.cos(gamma) * np.sin(result.heading_rad) + east
    y = tas * np.cos(gamma) * np.cos(result.heading_rad) + north
    sine, cosine = np.sin(result.track_rad), np.cos(result.track_rad)
    assert x * cosine - y * sine == pytest.approx(np.zeros((2, 180)), abs=1e-9)
    assert tas * np.sin(gamma) / (x * sine + y * cosine) == pytest.approx(result.loss, rel=1e-9)


@settings(max_examples=40, deadline=None)
@given(
    wind=st.floats(0.0, 30.0),
    more=st.floats(0.1, 3.0),
    ratio=st.floats(4.0, 60.0),
    policy=st.sampled_from(["manual", "wind"]),
)
def test_loss_grows_with_headwind_and_falls_with_ratio(
    wind: float, more: float, ratio: float, policy: str
) -> None:
    fixed = {"alt_levels_m": [0.0, 1000.0], "speed_policy": policy}
    polar, better = Polar(35.0, ratio, 20.0, 760.0), Polar(35.0, 1.1 * ratio, 20.0, 760.0)
    base = table(polar, north=-wind, **fixed).loss
    assert np.all(table(polar, north=-wind - more, **fixed).loss[:, NORTH] > base[:, NORTH])
    assert np.all(table(better, north=-wind, **fixed).loss < base)


@settings(max_examples=30, deadline=None)
@given(scale=st.floats(0.5, 2.0), east=st.floats(-8.0, 8.0), north=st.floats(-8.0, 8.0))
def test_loss_depends_only_on_wind_over_speed(scale: float, east: float, north: float) -> None:
    # Derived: with V and w multiplied by the same number (mass x its square) the loss is the same.
    first = table(Polar(35.0, 9.0, 20.0, 760.0), east=east, north=north)
    heavy = Polar(35.0 * scale, 9.0, 20.0 * scale, 760.0 * scale**2)
    second = table(heavy, east=east * scale, north=north * scale)
    assert second.loss == pytest.approx(first.loss, rel=1e-9)


@pytest.mark.parametrize(
    ("changes", "field"),
    [
        ({"alt_levels_m": [0.0, 0.0]}, "alt_levels_m"),
        ({"alt_levels_m": []}, "alt_levels_m"),
        ({"alt_levels_m": [0.0, math.nan]}, "alt_levels_m"),
        ({"alt_levels_m": [0.0, 30_000.0]}, "alt_m"),
        ({"wind_alt_m": [0.0, 1.0]}, "wind_alt_m"),
        ({"wind_alt_m": [0.0], "wind_east_mps": [math.nan]}, "wind_east_mps"),
        ({"n_tracks": 3}, "n_tracks"),
        ({"speed_policy": "fast"}, "speed_policy"),
        ({"wind_error_mps": -1.0}, "wind_error_mps"),
        ({"downdraft_mps": math.nan}, "downdraft_mps"),
        ({"speed_policy": "wind", "maximum_speed_eas_mps": math.nan}, "maximum_speed_eas_mps"),
    ],
)
def test_faulty_input_is_refused_by_name(changes: dict[str, Any], field: str) -> None:
    with pytest.raises(InputError) as caught:
        table(TRAINER, **changes)
    assert caught.value.field == field
