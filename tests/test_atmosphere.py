"""The atmosphere against the standard's own table, two independent libraries and altimetry."""

from collections.abc import Callable

import numpy as np
import pytest
from ambiance import Atmosphere
from fluids.atmosphere import ATMOSPHERE_1976
from hypothesis import given
from hypothesis import strategies as st

from perf import atmosphere as air
from perf.errors import InputError

FT_M = 0.3048
KT_MPS = 1852.0 / 3600.0

# H m, T K, p hPa, rho kg/m3, a m/s
# Source: ICAO Doc 7488/3 (1993), main table by geopotential height in metres.
STANDARD = [
    (0, 288.150, 1013.250, 1.225000, 340.294),
    (500, 284.900, 954.608, 1.167269, 338.369),
    (1000, 281.650, 898.746, 1.111643, 336.434),
    (2000, 275.150, 794.952, 1.006490, 332.529),
    (3000, 268.650, 701.085, 0.909122, 328.578),
    (5000, 255.650, 540.199, 0.736116, 320.529),
    (6000, 249.150, 471.810, 0.659697, 316.428),
    (8000, 236.150, 355.998, 0.525167, 308.063),
    (10000, 223.150, 264.362, 0.412706, 299.463),
    (11000, 216.650, 226.320, 0.363918, 295.069),
    (12000, 216.650, 193.304, 0.310828, 295.069),
]

# ft, T C, p hPa, a kt, sqrt(sigma)
# Source: ICAO Doc 7488/3 (1993), main table by geopotential height in feet.
STANDARD_FT = [
    (1000, 13.019, 977.166, 659.20, 0.98543),
    (2000, 11.038, 942.129, 656.92, 0.97097),
    (5000, 5.094, 843.073, 650.01, 0.92826),
    (8000, -0.850, 752.624, 643.03, 0.88658),
    (10000, -4.812, 696.816, 638.33, 0.85935),
    (18000, -20.662, 505.998, 619.20, 0.75493),
    (20000, -24.624, 465.632, 614.32, 0.72994),
    (25000, -34.530, 376.009, 601.95, 0.66942),
]


@pytest.mark.parametrize(("alt_m", "t_k", "p_hpa", "rho", "sound"), STANDARD)
def test_standard_table_in_metres(
    alt_m: float, t_k: float, p_hpa: float, rho: float, sound: float
) -> None:
    # Tolerance: the digits printed in the table.
    assert air.temperature_k(alt_m) == pytest.approx(t_k, abs=5e-4)
    assert air.pressure_pa(alt_m) / 100.0 == pytest.approx(p_hpa, abs=6e-4)
    assert air.density_kgm3(alt_m) == pytest.approx(rho, abs=6e-7)
    assert air.speed_of_sound_mps(alt_m) == pytest.approx(sound, abs=6e-4)


@pytest.mark.parametrize(("alt_ft", "t_c", "p_hpa", "sound_kt", "root"), STANDARD_FT)
def test_standard_table_in_feet(
    alt_ft: float, t_c: float, p_hpa: float, sound_kt: float, root: float
) -> None:
    # Tolerance: the digits printed in the table.
    alt_m = alt_ft * FT_M
    assert air.temperature_k(alt_m) - 273.15 == pytest.approx(t_c, abs=6e-4)
    assert air.pressure_pa(alt_m) / 100.0 == pytest.approx(p_hpa, abs=6e-4)
    assert air.speed_of_sound_mps(alt_m) / KT_MPS == pytest.approx(sound_kt, abs=6e-3)
    assert np.sqrt(air.sigma(alt_m)) == pytest.approx(root, abs=6e-6)


@pytest.mark.parametrize("alt_m", [-1000.0, 0.0, 1000.0, 3000.0, 9000.0, 11500.0, 18000.0])
def test_agrees_with_two_independent_libraries(alt_m: float) -> None:
    # Source: packages ambiance 1.3 and fluids 1.3. Both take geometric height; ours is
    # geopotential, so theirs are asked at the geometric height of the same geopotential.
    geometric_m = float(Atmosphere.geop2geom_height(np.array([alt_m]))[0])
    first, second = Atmosphere(geometric_m), ATMOSPHERE_1976(geometric_m)
    # Tolerance 2e-6: the libraries themselves differ by 1e-6.
    assert air.pressure_pa(alt_m) == pytest.approx(first.pressure[0], rel=2e-6)
    assert air.density_kgm3(alt_m) == pytest.approx(first.density[0], rel=2e-6)
    assert air.temperature_k(alt_m) == pytest.approx(first.temperature[0], rel=2e-6)
    assert air.pressure_pa(alt_m) == pytest.approx(second.P, rel=2e-6)
    assert air.density_kgm3(alt_m) == pytest.approx(second.rho, rel=2e-6)
    assert air.speed_of_sound_mps(alt_m) == pytest.approx(second.v_sonic, rel=2e-6)


def test_geopotential_is_meant() -> None:
    # Source: U.S. Standard Atmosphere, 1976, table I: geometric 1000 m is geopotential 999.843 m,
    # pressure 898.76 hPa (898.746 hPa at geopotential 1000 m). Tolerance: the printed digits.
    assert air.pressure_pa(999.8427) / 100.0 == pytest.approx(898.763, abs=1e-3)
    assert air.pressure_pa(1000.0) / 100.0 == pytest.approx(898.746, abs=6e-4)


@pytest.mark.parametrize(
    ("elevation_ft", "qnh_hpa", "expected_ft"),
    [(2000, 1030, 1545.6), (600, 997, 1046.7), (1600, 1023, 1334.8), (780, 1008, 923.7)],
)
def test_pressure_altitude_from_qnh(
    elevation_ft: float, qnh_hpa: float, expected_ft: float
) -> None:
    # Derived: elevation + 145442.16 ft (1 - (QNH/1013.25)^0.190263). Tolerance: last digit.
    altitude_m = air.pressure_altitude_m(elevation_ft * FT_M, qnh_hpa * 100.0)
    assert altitude_m / FT_M == pytest.approx(expected_ft, abs=0.06)


@pytest.mark.parametrize(
    ("pressure_alt_ft", "temperature_c", "expected_ft"),
    [
        (6000, 13, 7147),
        (1600, 13, 1738),
        (5000, -12, 2892),
        (1000, 35, 3490),
        (5000, 30, 7801),
        (8000, 25, 10898),
    ],
)
def test_density_altitude(pressure_alt_ft: float, temperature_c: float, expected_ft: float) -> None:
    # Derived: ICAO Doc 7488/3 solved for the height of the same dry density. Tolerance 1 ft.
    altitude_m = air.density_altitude_m(pressure_alt_ft * FT_M, temperature_c + 273.15)
    assert altitude_m / FT_M == pytest.approx(expected_ft, abs=1.0)
    # Common practice: 120 ft for each degree off the standard is the high side of the exact
    # figure, by at most 210 ft in these cases.
    rule_ft = pressure_alt_ft + 120.0 * (temperature_c - (15.0 - 0.0019812 * pressure_alt_ft))
    assert 0.0 <= rule_ft - altitude_m / FT_M <= 210.0


def test_density_altitude_grows_120_ft_for_each_degree() -> None:
    # Source: FAA-H-8083-25, Pilot's Handbook of Aeronautical Knowledge, density altitude: 120 ft
    # for each degree; the exact slope near the standard is 118.8 ft. Tolerance 1.5 % holds both.
    warm, standard = air.density_altitude_m(0.0, 289.15), air.density_altitude_m(0.0, 288.15)
    assert (warm - standard) / FT_M == pytest.approx(119.4, rel=0.015)


def test_calibrated_equivalent_and_true_airspeed() -> None:
    # Source: Lowry, Performance of Light Aircraft (AIAA 1999), example 9.1: 71.86 KCAS is
    # 76.23 KTAS at 4000 ft. Derived: the equivalent speed 71.84 kt. Tolerance: last digit.
    alt_m = 4000.0 * FT_M
    assert air.cas_to_tas_mps(71.858 * KT_MPS, alt_m) / KT_MPS == pytest.approx(76.234, abs=2e-3)
    assert air.tas_to_cas_mps(76.234 * KT_MPS, alt_m) / KT_MPS == pytest.approx(71.858, abs=2e-3)
    assert air.eas_to_tas_mps(71.84 * KT_MPS, alt_m) / KT_MPS == pytest.approx(76.234, abs=6e-3)


def test_true_airspeed_at_8000_ft() -> None:
    # Source: ICAO Doc 7488/3, sqrt(sigma) 0.88658 at 8000 ft: true airspeed 12.8 % above
    # equivalent, and so a turn 27 % wider. Tolerance: the digits given.
    ratio = float(air.eas_to_tas_mps(1.0, 8000.0 * FT_M))
    assert ratio == pytest.approx(1.128, abs=6e-4)
    assert ratio**2 == pytest.approx(1.272, abs=6e-4)


def test_cold_air_lowers_true_height_by_the_published_formula() -> None:
    # Source: ICAO Doc 8168 (PANS-OPS) Vol. I part III, temperature correction: with -30 C at a
    # sea-level aerodrome 3000 ft of true height need 562 ft more on the altimeter. Tolerance
    # 10 ft: the formula takes the mean temperature, ours the hydrostatic integral.
    correction_ft = 3000.0 * 45.0 / (273.0 - 30.0 - 0.5 * 0.00198 * 3000.0)
    true_ft = 3000.0
    indicated_m = air.isa_altitude_m(air.pressure_pa(true_ft * FT_M, isa_offset_k=-45.0))
    assert indicated_m / FT_M == pytest.approx(true_ft + correction_ft, abs=10.0)


@given(
    alt_m=st.floats(0.0, 9000.0),
    offset_k=st.floats(-40.0, 40.0),
    qnh_pa=st.floats(95_000.0, 105_000.0),
)
def test_pressure_is_hydrostatic(alt_m: float, offset_k: float, qnh_pa: float) -> None:
    # Derived: dp/dz = -rho g, by central difference over 2 m (its error is below 1e-6).
    slope = (
        air.pressure_pa(alt_m + 1.0, qnh_pa, offset_k)
        - air.pressure_pa(alt_m - 1.0, qnh_pa, offset_k)
    ) / 2.0
    expected = -air.density_kgm3(alt_m, offset_k, qnh_pa) * 9.80665
    assert slope == pytest.approx(expected, rel=1e-5)


@given(st.floats(-4000.0, 19_000.0))
def test_altitude_of_pressure_is_the_inverse(alt_m: float) -> None:
    assert air.isa_altitude_m(air.pressure_pa(alt_m)) == pytest.approx(alt_m, abs=1e-6)


@given(st.floats(1.0, 200.0), st.floats(0.0, 9000.0), st.floats(-30.0, 30.0))
def test_speed_conversions_return(speed_mps: float, alt_m: float, offset_k: float) -> None:
    tas_mps = air.cas_to_tas_mps(speed_mps, alt_m, offset_k)
    assert air.tas_to_cas_mps(tas_mps, alt_m, offset_k) == pytest.approx(speed_mps, rel=1e-7)
    tas_mps = air.eas_to_tas_mps(speed_mps, alt_m, offset_k)
    assert air.tas_to_eas_mps(tas_mps, alt_m, offset_k) == pytest.approx(speed_mps, rel=1e-12)


def test_arrays_keep_their_shape() -> None:
    alt_m = np.array([[0.0, 5000.0, 11000.0], [12000.0, 15000.0, 20000.0]])
    assert air.sigma(alt_m).shape == alt_m.shape
    assert air.isa_altitude_m(air.pressure_pa(alt_m)) == pytest.approx(alt_m, abs=1e-6)


@pytest.mark.parametrize(
    ("call", "field"),
    [
        (lambda: air.temperature_k(float("nan")), "alt_m"),
        (lambda: air.pressure_pa(np.array([0.0, 20_001.0])), "alt_m"),
        (lambda: air.density_kgm3(0.0, float("inf")), "isa_offset_k"),
        (lambda: air.sigma(0.0, 0.0, 79_999.0), "qnh_pa"),
        (lambda: air.pressure_altitude_m(0.0, float("nan")), "qnh_pa"),
        (lambda: air.isa_altitude_m(0.0), "pressure_pa"),
    ],
)
def test_out_of_range_is_refused_by_name(call: Callable[[], object], field: str) -> None:
    with pytest.raises(InputError) as caught:
        call()
    assert caught.value.field == field
    assert caught.value.allowed
