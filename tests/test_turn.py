"""Turns against handbook tables and the exact steady gliding turn."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from perf import turn
from perf.atmosphere import GRAVITY_MPS2
from perf.errors import InputError
from perf.polar import Polar, eas_at_lift_coefficient_mps, sink_mps

FT_M = 0.3048
KT_MPS = 1852.0 / 3600.0
LBF_N = 4.4482216


@pytest.mark.parametrize(
    ("bank_deg", "expected"),
    [
        (10, 1.0154),
        (30, 1.1547),
        (45, 1.4142),
        (60, 2.0),
        (70, 2.9238),
        (80, 5.7588),
        (85, 11.4737),
    ],
)
def test_load_factor(bank_deg: float, expected: float) -> None:
    # Source: FAA-H-8083-25, Pilot's Handbook of Aeronautical Knowledge, load factor chart
    # (its 5.747 at 80 deg is 0.2 % low; 5.759 is 1/cos). Tolerance: last digit.
    assert turn.load_factor(math.radians(bank_deg)) == pytest.approx(expected, abs=6e-5)


@pytest.mark.parametrize(
    ("bank_deg", "speed_kt", "radius_ft"),
    [
        (15, 60, 1189.6),
        (20, 70, 1192.0),
        (30, 60, 552.1),
        (30, 70, 751.4),
        (30, 100, 1533.6),
        (30, 120, 2208.3),
        (45, 100, 885.4),
        (60, 120, 736.1),
    ],
)
def test_radius(bank_deg: float, speed_kt: float, radius_ft: float) -> None:
    # Derived: R = V^2 / (g tan(bank)), V the speed in the turn; FAA-H-8083-25 prints 2215 ft for
    # 120 kt and 30 deg with rounded constants (0.5 %). Tolerance: last digit.
    bank = math.radians(bank_deg)
    wings_level_mps = speed_kt * KT_MPS / math.sqrt(turn.load_factor(bank))
    assert turn.turn_tas_mps(wings_level_mps, bank) / KT_MPS == pytest.approx(speed_kt)
    assert turn.turn_radius_m(wings_level_mps, bank) / FT_M == pytest.approx(radius_ft, abs=0.1)


def test_handbook_radius_within_half_a_percent() -> None:
    # Source: FAA-H-8083-25, Pilot's Handbook of Aeronautical Knowledge, radius of turn: 120 kt,
    # 30 deg, 2215 ft. Tolerance 0.5 %: the handbook's constants are rounded.
    bank = math.radians(30.0)
    wings_level_mps = 120.0 * KT_MPS / math.sqrt(turn.load_factor(bank))
    assert turn.turn_radius_m(wings_level_mps, bank) / FT_M == pytest.approx(2215.0, rel=5e-3)


@pytest.mark.parametrize(
    ("speed_kt", "ratio", "losses_ft"),
    [
        (68, 9, {20: 440, 30: 330, 45: 280}),
        (105, 10, {20: 950, 30: 700, 45: 610}),
        (114, 15, {20: 750, 30: 555, 45: 480}),
    ],
)
def test_half_turn_of_three_aeroplanes(
    speed_kt: float, ratio: float, losses_ft: dict[int, float]
) -> None:
    # Derived: the steady turn at v sqrt(n) of a parabolic polar, rounded to 5 and 10 ft.
    # Tolerance 2 %: the rounding. The planning form takes tan(gamma) for sin(gamma), on the high
    # side by at most another 1.3 % here.
    polar = Polar(speed_kt * KT_MPS, ratio, 0.6 * speed_kt * KT_MPS, 1000.0)
    for bank_deg, expected_ft in losses_ft.items():
        bank = math.radians(bank_deg)
        eas = turn.turn_tas_mps(speed_kt * KT_MPS, bank)
        exact_m = math.pi * turn.steady_turn_loss_m_per_rad(polar, eas, bank)
        assert exact_m / FT_M == pytest.approx(expected_ft, rel=0.02)
        planning_m = math.pi * turn.turn_loss_m_per_rad(speed_kt * KT_MPS, ratio, bank)
        assert planning_m == pytest.approx(exact_m, rel=0.013)
        assert planning_m >= exact_m


def trainer() -> Polar:
    """Return Lowry's trainer: 2400 lbf, 174 ft2, CD0 0.037, e 0.72, AR 7.38."""
    return Polar.from_drag(
        0.037,
        1.0 / (math.pi * 0.72 * 7.38),
        174.0 * FT_M**2,
        25.0,
        2400.0 * LBF_N / GRAVITY_MPS2,
    )


def loss_at_lift_coefficient_m_per_rad(lift_coefficient: float, bank_rad: float) -> float:
    """Return the height per radian at a lift coefficient, from the polar."""
    polar = trainer()
    eas = eas_at_lift_coefficient_mps(polar, lift_coefficient, turn.load_factor(bank_rad))
    return float(turn.steady_turn_loss_m_per_rad(polar, eas, bank_rad))


@pytest.mark.parametrize("bank_deg", [15, 20, 25, 30, 35, 45, 60])
def test_steady_turn_closed_form(bank_deg: float) -> None:
    # Source: Rogers, Journal of Aircraft 32(2), 1995, 392-397; Lowry, Performance of Light
    # Aircraft, pp. 294-296. Derived exact form: 2 (W/S) / (rho g CL) k cos / [(cos^2 + k^2) sin],
    # k = CD/CL. Tolerance: rounding.
    bank, lift_coefficient = math.radians(bank_deg), 1.1
    k = 0.037 / lift_coefficient + lift_coefficient / (math.pi * 0.72 * 7.38)
    loading = 2400.0 * LBF_N / (174.0 * FT_M**2)
    expected = (2.0 * loading / (1.225 * GRAVITY_MPS2 * lift_coefficient)) * (
        k * math.cos(bank) / ((math.cos(bank) ** 2 + k**2) * math.sin(bank))
    )
    assert loss_at_lift_coefficient_m_per_rad(lift_coefficient, bank) == pytest.approx(expected)


@pytest.mark.parametrize(
    ("bank_deg", "loss_ft"), [(20, 262.2), (30, 194.1), (45, 166.6), (60, 187.5)]
)
def test_half_turn_at_the_stall(bank_deg: float, loss_ft: float) -> None:
    # Derived: the exact form above at CLmax 1.54 at sea level (CLmax from memory). Pilots' notes
    # give 150 to 350 ft for such a turn. Tolerance 0.1 %: the last digit.
    loss_m = math.pi * loss_at_lift_coefficient_m_per_rad(1.54, math.radians(bank_deg))
    assert loss_m / FT_M == pytest.approx(loss_ft, rel=1e-3)


@pytest.mark.parametrize(("factor", "loss_ft"), [(1.05, 174.5), (1.2, 205.1)])
def test_half_turn_above_the_stall(factor: float, loss_ft: float) -> None:
    # Derived: the same at 1.05 and 1.2 times the stall speed, 45 deg. Tolerance 0.2 %: a speed
    # that is set by the lift coefficient shares out cos(gamma) a little differently.
    lift_coefficient = 1.54 / factor**2
    loss_m = math.pi * loss_at_lift_coefficient_m_per_rad(lift_coefficient, math.pi / 4.0)
    assert loss_m / FT_M == pytest.approx(loss_ft, rel=2e-3)


def test_bank_of_least_height() -> None:
    # Source: Lowry (rec.aviation.student, 1 Nov 1999; his book pp. 294-296): 45.4 deg without
    # cos(gamma) in the stall speed. Derived with it: cos^2 = (1 + sqrt(1 - 8k^2))/4, 45.79 deg at
    # k 0.116. Tolerance: 45 to 46 holds both.
    banks = np.radians(np.arange(40.0, 52.0, 0.01))
    losses = [loss_at_lift_coefficient_m_per_rad(1.54, float(bank)) for bank in banks]
    best_deg = math.degrees(banks[int(np.argmin(losses))])
    assert 45.0 <= best_deg <= 46.0
    k = 0.037 / 1.54 + 1.54 / (math.pi * 0.72 * 7.38)
    exact_deg = math.degrees(math.acos(math.sqrt((1.0 + math.sqrt(1.0 - 8.0 * k**2)) / 4.0)))
    assert best_deg == pytest.approx(exact_deg, abs=0.02)


@pytest.mark.parametrize(
    ("bank_deg", "penalty"),
    [(15, 2.0), (20, 1.556), (25, 1.305), (30, 1.1547), (35, 1.064), (60, 1.1547)],
)
def test_penalty_of_another_bank(bank_deg: float, penalty: float) -> None:
    # Derived: 1 / sin(2 bank), least at 45 deg and flat there. Tolerance: last digit.
    best = turn.turn_loss_m_per_rad(35.0, 9.0, math.pi / 4.0)
    other = turn.turn_loss_m_per_rad(35.0, 9.0, math.radians(bank_deg))
    assert other / best == pytest.approx(penalty, abs=6e-4)


@given(st.floats(20.0, 80.0), st.floats(8.0, 40.0), st.floats(10.0, 45.0))
def test_planning_form_agrees_with_the_polar(v: float, ratio: float, bank_deg: float) -> None:
    # Derived: at v sqrt(n) the manual polar has tan(gamma) = n/E; the planning form takes the
    # tangent for the sine, which charges up to (n/E)^2/2 more (1.6 % at n 1.41, E 8), never less.
    bank = math.radians(bank_deg)
    polar = Polar(v, ratio, 0.6 * v, 1000.0)
    exact = turn.steady_turn_loss_m_per_rad(polar, turn.turn_tas_mps(v, bank), bank)
    planning = turn.turn_loss_m_per_rad(v, ratio, bank)
    assert exact <= planning * (1.0 + 1e-12)
    assert planning <= exact * (1.0 + 0.51 * (turn.load_factor(bank) / ratio) ** 2)


def test_loss_is_sink_over_rate_of_turn() -> None:
    # Derived: sink at the turn's speed and load factor, times the time of one radian.
    polar, bank, sigma = trainer(), math.radians(30.0), 0.8
    eas = 1.1 * polar.best_glide_eas_mps
    sink = sink_mps(polar, eas, sigma, turn.load_factor(bank))
    rate_radps = GRAVITY_MPS2 * math.tan(bank) / (eas / math.sqrt(sigma))
    loss = turn.steady_turn_loss_m_per_rad(polar, eas, bank, sigma)
    assert loss == pytest.approx(sink / rate_radps)


def test_height_for_the_speed_of_the_turn() -> None:
    # Derived: (n - 1) v^2 / 2g equals the difference of kinetic heights.
    bank, v = math.radians(40.0), 35.0
    fast = float(turn.turn_tas_mps(v, bank))
    expected = (fast**2 - v**2) / (2.0 * GRAVITY_MPS2)
    assert turn.dive_m(v, bank) == pytest.approx(expected)


@pytest.mark.parametrize("bank_rad", [0.0, -0.1, math.pi / 2.0, math.nan, math.inf])
def test_a_bank_without_a_turn_is_refused(bank_rad: float) -> None:
    for call in (
        lambda: turn.turn_radius_m(35.0, bank_rad),
        lambda: turn.turn_loss_m_per_rad(35.0, 9.0, bank_rad),
        lambda: turn.steady_turn_loss_m_per_rad(trainer(), 35.0, bank_rad),
    ):
        with pytest.raises(InputError) as caught:
            call()
        assert caught.value.field == "bank_rad"
