"""The polar against worked examples in print, closed forms and its own inverse."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from perf.atmosphere import DENSITY_MSL_KGM3, GRAVITY_MPS2
from perf.errors import InputError
from perf.polar import (
    Polar,
    best_glide_eas_mps,
    drag_from_pair,
    eas_at_lift_coefficient_mps,
    glide_angle_rad,
    glide_tangent,
    minimum_sink_eas_mps,
    sink_mps,
    stall_at_load_factor_eas_mps,
)

FT_M = 0.3048
KT_MPS = 1852.0 / 3600.0
LBF_N = 4.4482216  # pound-force [N]
SLUG_FT3_KGM3 = 515.3788  # slug per cubic foot [kg/m3]


def lowry_polar() -> Polar:
    """Return the aeroplane of Lowry's example 9.1: 2400 lbf, 174 ft2, AR 7.38, 0.037, e 0.72."""
    return Polar.from_drag(
        cd0=0.037,
        k=1.0 / (math.pi * 0.72 * 7.38),
        wing_area_m2=174.0 * FT_M**2,
        stall_eas_mps=20.0,
        mass_kg=2400.0 * LBF_N / GRAVITY_MPS2,
    )


def test_lowry_example_9_1() -> None:
    # Source: Lowry, Performance of Light Aircraft (AIAA 1999), example 9.1, 4000 ft; the figures
    # recomputed from its formulae to more digits. Tolerance 1e-4: the digits given.
    polar = lowry_polar()
    sigma = 0.00211089 * SLUG_FT3_KGM3 / DENSITY_MSL_KGM3
    speed = polar.best_glide_eas_mps
    assert speed / math.sqrt(sigma) / KT_MPS == pytest.approx(76.234, rel=1e-4)
    assert math.degrees(glide_angle_rad(polar, speed)) == pytest.approx(5.37905, rel=1e-4)
    assert polar.ratio == pytest.approx(10.62034, rel=1e-4)
    assert sink_mps(polar, speed, sigma) / FT_M * 60.0 == pytest.approx(723.71, rel=1e-4)
    drag_lbf = 2400.0 * math.sin(glide_angle_rad(polar, speed))
    assert drag_lbf == pytest.approx(224.986, rel=1e-4)
    # L = 2389.43 lbf, CL 0.785906, CD 0.074: the speed at that lift coefficient is the same.
    assert eas_at_lift_coefficient_mps(polar, 0.785906) == pytest.approx(speed, rel=1e-5)


def test_lowry_minimum_sink() -> None:
    # Source: the same example: 58.05 KTAS and 639.19 ft/min without cos(gamma). Derived: at the
    # same lift coefficient speed has a factor cos(gamma)^(1/2), sink cos(gamma)^(3/2), with
    # tan(gamma) = 2 / (sqrt(3) 10.62). Tolerance: the best lift coefficient moves by 0.8 %,
    # where the sink is flat.
    polar = lowry_polar()
    sigma = 0.00211089 * SLUG_FT3_KGM3 / DENSITY_MSL_KGM3
    speed = minimum_sink_eas_mps(polar)
    cos_gamma = math.cos(math.atan(2.0 / (math.sqrt(3.0) * 10.62034)))
    assert speed / math.sqrt(sigma) / KT_MPS == pytest.approx(58.05, rel=0.01)
    sink_fpm = sink_mps(polar, speed, sigma) / FT_M * 60.0
    assert sink_fpm == pytest.approx(639.19 * cos_gamma**1.5, rel=2e-4)


@pytest.mark.parametrize(("rho", "expected_mps"), [(0.905, 53.133), (1.155, 47.033)])
def test_anderson_cp1(rho: float, expected_mps: float) -> None:
    # Source: Anderson, Introduction to Flight, examples 6.1, 6.7 and 6.9 (SI): W 13127.5 N,
    # S 16.165 m2, CL 0.634, theta 4.2 deg. Tolerance 1e-4: theta is printed as 4.2, not 4.204.
    ratio_of_drag = math.tan(math.radians(4.2))
    cd0 = 0.025
    polar = Polar.from_drag(
        cd0=cd0,
        k=(ratio_of_drag * 0.634 - cd0) / 0.634**2,
        wing_area_m2=16.165,
        stall_eas_mps=20.0,
        mass_kg=13127.5 / GRAVITY_MPS2,
    )
    eas = eas_at_lift_coefficient_mps(polar, 0.634)
    assert eas / math.sqrt(rho / DENSITY_MSL_KGM3) == pytest.approx(expected_mps, rel=1e-4)
    assert math.degrees(glide_angle_rad(polar, eas)) == pytest.approx(4.2, rel=1e-9)


@pytest.mark.parametrize(
    ("cd0", "efficiency", "aspect", "weight_n", "area_m2", "ratio", "gamma_deg"),
    [
        (0.025, 0.8, 7.366, 13127.5, 16.165, 13.606, 4.204),
        (0.02, 0.81, 16.25**2 / 29.54, 88176.75, 29.54, 16.86, 3.39),
    ],
)
def test_anderson_best_ratio(
    cd0: float,
    efficiency: float,
    aspect: float,
    weight_n: float,
    area_m2: float,
    ratio: float,
    gamma_deg: float,
) -> None:
    # Source: Anderson, Introduction to Flight, sections 6.7 and 6.9, aeroplanes CP-1 and CJ-1:
    # (L/D)max 13.6 and 16.9, 4.2 and 3.39 deg. Tolerance: the digits recomputed.
    k = 1.0 / (math.pi * efficiency * aspect)
    polar = Polar.from_drag(cd0, k, area_m2, 20.0, weight_n / GRAVITY_MPS2)
    assert polar.ratio == pytest.approx(ratio, rel=5e-4)
    gamma = glide_angle_rad(polar, polar.best_glide_eas_mps)
    assert math.degrees(gamma) == pytest.approx(gamma_deg, abs=5e-3)


def test_anderson_cp1_range() -> None:
    # Source: Anderson, Introduction to Flight, example 6.8: 136 000 ft from 10 000 ft with
    # L/D 13.6. Tolerance 0.1 %: L/D is 13.606.
    polar = Polar.from_drag(0.025, 1.0 / (math.pi * 0.8 * 7.366), 16.165, 20.0, 1338.6)
    reach_ft = 10_000.0 / float(glide_tangent(polar, polar.best_glide_eas_mps))
    assert reach_ft == pytest.approx(136_000.0, rel=1e-3)


def test_examination_polar() -> None:
    # Source: examination problem on CD = 0.025 + 0.0415 CL^2: (L/D)max 15.52, (CL^3/CD^2)max
    # 242.95. Tolerance: the digits given.
    polar = Polar.from_drag(0.025, 0.0415, 20.0, 20.0, 1500.0)
    assert polar.ratio == pytest.approx(15.52, abs=0.005)
    # Derived: least sink is at sqrt(3) of the best lift coefficient; there CL^3/CD^2 of the
    # sink found is 2 W / (rho S s^2) without cos(gamma), which is worth 0.6 %.
    sink = float(sink_mps(polar, minimum_sink_eas_mps(polar)))
    loading = 2.0 * 1500.0 * GRAVITY_MPS2 / (DENSITY_MSL_KGM3 * 20.0)
    assert loading / sink**2 == pytest.approx(242.95, rel=0.015)


def test_inverse_problem() -> None:
    # Derived: CL = 2W/(rho S V^2), CD0 = CL/(2 L/D), K = 1/(2 CL L/D) without cos(gamma):
    # 1111 kg, 16.2 m2, 65 kt, 9.1:1 give CL 0.9820, CD0 0.05396, K 0.05595. Ours keeps
    # cos(gamma), 0.6 % at 9.1:1.
    cd0, k = drag_from_pair(65.0 * KT_MPS, 9.1, 1111.0, 16.2)
    cos_gamma = math.cos(math.atan(1.0 / 9.1))
    assert cd0 / cos_gamma == pytest.approx(0.05396, abs=6e-6)
    assert k * cos_gamma == pytest.approx(0.05595, abs=6e-6)
    polar = Polar.from_drag(cd0, k, 16.2, 20.0, 1111.0)
    assert polar.best_glide_eas_mps / KT_MPS == pytest.approx(65.0, rel=1e-12)
    assert polar.ratio == pytest.approx(9.1, rel=1e-12)


def test_normalised_sink_of_the_manual_form() -> None:
    # Derived: s(u)/s(1) = (u^3 + 1/u)/2; least at u = 3^(-1/4) = 0.759836, where it is
    # 2 x 3^(-3/4) = 0.877383 and the ratio sqrt(3)/2 of the best. Tolerance 1e-4: a ratio of 70
    # leaves 1 - cos(gamma) = 1e-4.
    polar = Polar(30.0, 70.0, 10.0, 400.0)
    u = np.array([0.7, 0.9, 1.0, 1.3, 1.8])
    relative = sink_mps(polar, 30.0 * u) / sink_mps(polar, 30.0)
    assert relative == pytest.approx((u**3 + 1.0 / u) / 2.0, rel=4e-4)
    least = minimum_sink_eas_mps(polar)
    assert least / 30.0 == pytest.approx(0.759836, rel=1e-4)
    assert sink_mps(polar, least) / sink_mps(polar, 30.0) == pytest.approx(0.877383, rel=1e-4)
    assert polar.ratio * glide_tangent(polar, least) == pytest.approx(2 / math.sqrt(3), rel=1e-4)


def test_minimum_sink_is_not_below_the_stall() -> None:
    assert minimum_sink_eas_mps(Polar(30.0, 20.0, 27.0, 400.0)) == pytest.approx(27.0, rel=1e-9)


def test_gliding_arithmetic() -> None:
    # Source: FAA glider knowledge test: 23:1 over 8 NM costs 2113 ft (printed 2100), and glide
    # angle 2.06 deg at 100 km/h and 1 m/s. Tolerance: the digits given.
    assert 8.0 * 1852.0 / FT_M * glide_tangent(Polar(27.0, 23.0, 15.0, 400.0), 27.0) == (
        pytest.approx(2113.4, abs=0.1)
    )
    polar = Polar(100.0 / 3.6, 100.0 / 3.6, 15.0, 400.0)
    angle = math.degrees(glide_angle_rad(polar, polar.best_glide_eas_mps))
    assert angle == pytest.approx(2.0618, abs=1e-4)


def test_both_forms_agree_off_the_best_speed() -> None:
    # Derived: the forms differ by cos^2(gamma) on the induced part only: below 2 % at 9:1.
    cd0, k = drag_from_pair(35.0, 9.0, 760.0, 12.0)
    drag = Polar.from_drag(cd0, k, 12.0, 22.0, 760.0)
    manual = Polar(35.0, 9.0, 22.0, 760.0)
    speeds = np.linspace(25.0, 60.0, 20)
    assert glide_tangent(drag, speeds) == pytest.approx(glide_tangent(manual, speeds), rel=0.02)


@given(st.floats(25.0, 80.0), st.floats(1.0, 2.0))
def test_drag_form_keeps_its_forces_in_balance(eas: float, load_factor: float) -> None:
    # Derived: L = n W cos(gamma) and D = W sin(gamma), written out from CL and CD.
    polar = lowry_polar()
    gamma = float(glide_angle_rad(polar, eas, load_factor))
    pressure = 0.5 * DENSITY_MSL_KGM3 * eas**2 * 174.0 * FT_M**2
    weight = 2400.0 * LBF_N
    lift_coefficient = load_factor * weight * math.cos(gamma) / pressure
    drag = pressure * (0.037 + lift_coefficient**2 / (math.pi * 0.72 * 7.38))
    assert weight * math.sin(gamma) == pytest.approx(drag, rel=1e-9)


@given(st.floats(0.5, 1.0), st.floats(0.6, 2.0), st.sampled_from(["manual", "drag"]))
def test_degraded_ratio_at_every_speed(factor: float, u: float, form: str) -> None:
    # Derived: the ratio times the factor at every speed, in turns too; speeds unchanged.
    polar = lowry_polar() if form == "drag" else Polar(35.0, 9.0, 22.0, 760.0)
    worse = polar.degraded(factor)
    eas = u * polar.best_glide_eas_mps
    assert worse.best_glide_eas_mps == polar.best_glide_eas_mps
    assert worse.stall_eas_mps == polar.stall_eas_mps
    assert worse.ratio == pytest.approx(factor * polar.ratio)
    for load_factor in (1.0, 1.4):
        expected = glide_tangent(polar, eas, load_factor) / factor
        assert glide_tangent(worse, eas, load_factor) == pytest.approx(expected)


@given(st.floats(600.0, 1400.0), st.floats(0.3, 1.0))
def test_scaling_with_mass_and_density(mass_kg: float, sigma: float) -> None:
    # Derived: V ~ sqrt(W), E free of W and rho, sink ~ sqrt(W / sigma).
    first = Polar.from_drag(0.037, 0.06, 16.0, 20.0, 1000.0)
    second = Polar.from_drag(0.037, 0.06, 16.0, 20.0, mass_kg)
    root = math.sqrt(mass_kg / 1000.0)
    assert second.best_glide_eas_mps == pytest.approx(root * first.best_glide_eas_mps)
    assert second.ratio == first.ratio
    sink = sink_mps(second, second.best_glide_eas_mps, sigma)
    expected = sink_mps(first, first.best_glide_eas_mps) * root / math.sqrt(sigma)
    assert sink == pytest.approx(expected)


@given(st.floats(0.4, 3.0), st.sampled_from(["manual", "drag"]))
def test_nothing_glides_flatter_than_best_glide(u: float, form: str) -> None:
    polar = lowry_polar() if form == "drag" else Polar(35.0, 9.0, 22.0, 760.0)
    tangent = glide_tangent(polar, u * polar.best_glide_eas_mps)
    assert tangent >= (1.0 - 1e-12) / polar.ratio


@pytest.mark.parametrize("form", ["manual", "drag"])
def test_best_glide_in_a_turn_is_the_flattest(form: str) -> None:
    # Derived: the lift coefficient of best glide is kept, so V grows with sqrt(n) and tan(gamma)
    # with n. In the drag form cos(gamma) takes a little of that speed.
    polar = lowry_polar() if form == "drag" else Polar(35.0, 9.0, 22.0, 760.0)
    best = best_glide_eas_mps(polar, 1.5)
    around = glide_tangent(polar, best * np.array([0.99, 1.0, 1.01]), 1.5)
    assert around[1] < around[0]
    assert around[1] < around[2]
    assert around[1] == pytest.approx(1.5 / polar.ratio, rel=1e-9)
    assert best == pytest.approx(polar.best_glide_eas_mps * math.sqrt(1.5), rel=0.01)


def test_stall_speed_in_a_turn() -> None:
    # Source: FAA-H-8083-25, Pilot's Handbook of Aeronautical Knowledge, load factor and stall
    # speed: 50 kt at 45 deg of bank become 59.5 kt. Tolerance: last digit.
    polar = Polar(35.0, 9.0, 50.0 * KT_MPS, 760.0)
    stall = stall_at_load_factor_eas_mps(polar, 1.0 / math.cos(math.radians(45.0)))
    assert stall / KT_MPS == pytest.approx(59.46, abs=0.01)


def test_terminal_speed_gives_a_vertical_path_not_a_nan() -> None:
    polar = lowry_polar()
    assert math.degrees(glide_angle_rad(polar, 400.0)) == pytest.approx(90.0, abs=0.01)


@pytest.mark.parametrize(
    ("changes", "field"),
    [
        ({"ratio": math.nan}, "ratio"),
        ({"best_glide_eas_mps": 0.0}, "best_glide_eas_mps"),
        ({"mass_kg": math.inf}, "mass_kg"),
        ({"stall_eas_mps": -1.0}, "stall_eas_mps"),
        ({"form": "other"}, "form"),
        ({"form": "drag"}, "cd0"),
    ],
)
def test_a_faulty_polar_is_refused_by_name(changes: dict[str, object], field: str) -> None:
    numbers = {"best_glide_eas_mps": 35.0, "ratio": 9.0, "stall_eas_mps": 22.0, "mass_kg": 760.0}
    with pytest.raises(InputError) as caught:
        Polar(**(numbers | changes))  # type: ignore[arg-type]
    assert caught.value.field == field


def test_the_manual_form_knows_no_lift_coefficient() -> None:
    with pytest.raises(InputError):
        eas_at_lift_coefficient_mps(Polar(35.0, 9.0, 22.0, 760.0), 0.8)
