"""The standard atmosphere with a temperature offset and a QNH, and the conversions of airspeed.

Altitudes are true heights above mean sea level. They are treated as geopotential heights: at
3 km the two differ by 1.4 m, at 10 km by 16 m. Every function takes a scalar or an array and
returns the same shape.

Source: ICAO Doc 7488/3 (1993), Manual of the ICAO Standard Atmosphere, section 2; the same as
U.S. Standard Atmosphere, 1976, below 32 km.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from perf.errors import InputError

Array = NDArray[np.float64]

GRAVITY_MPS2 = 9.80665  # [m/s2] ICAO Doc 7488/3, table A
GAS_CONSTANT = 287.05287  # dry air [J/(kg K)] ICAO Doc 7488/3, table A
HEAT_CAPACITY_RATIO = 1.4  # [-] ICAO Doc 7488/3, table A
TEMPERATURE_MSL_K = 288.15  # [K] ICAO Doc 7488/3, table A
PRESSURE_MSL_PA = 101325.0  # [Pa] ICAO Doc 7488/3, table A
DENSITY_MSL_KGM3 = 1.225  # [kg/m3] ICAO Doc 7488/3, table A
LAPSE_KPM = 0.0065  # troposphere [K/m] ICAO Doc 7488/3, table D
TROPOPAUSE_M = 11_000.0  # [m geopotential] ICAO Doc 7488/3, table D
EXPONENT = GRAVITY_MPS2 / (LAPSE_KPM * GAS_CONSTANT)  # 5.25588 [-]

LOWEST_M, HIGHEST_M = -5_000.0, 20_000.0  # where the two layers of this module hold [m]
LARGEST_OFFSET_K = 100.0  # [K] keeps every temperature well above zero
LOWEST_QNH_PA, HIGHEST_QNH_PA = 80_000.0, 110_000.0  # [Pa] beyond every observed value


def temperature_k(alt_m: ArrayLike, isa_offset_k: float = 0.0) -> Array:
    """Return the air temperature [K].

    Parameters
    ----------
    alt_m
        True height [m, -5000 .. 20000].
    isa_offset_k
        Temperature less the standard one, the same at every height [K, -100 .. 100].

    Raises
    ------
    InputError
        A value is out of its range or not a number.
    """
    alt = _altitudes(alt_m, isa_offset_k)
    return TEMPERATURE_MSL_K + isa_offset_k - LAPSE_KPM * np.minimum(alt, TROPOPAUSE_M)


def pressure_pa(
    alt_m: ArrayLike, qnh_pa: float = PRESSURE_MSL_PA, isa_offset_k: float = 0.0
) -> Array:
    """Return the air pressure [Pa] from the hydrostatic equation, starting at QNH at sea level.

    Parameters
    ----------
    alt_m
        True height [m, -5000 .. 20000].
    qnh_pa
        Pressure at mean sea level [Pa, 80000 .. 110000].
    isa_offset_k
        As in `temperature_k`. A cold column is thin: its pressure falls faster with height.

    Raises
    ------
    InputError
        A value is out of its range or not a number.
    """
    alt = _altitudes(alt_m, isa_offset_k)
    _check_qnh(qnh_pa)
    msl_k = TEMPERATURE_MSL_K + isa_offset_k
    tropopause_k = msl_k - LAPSE_KPM * TROPOPAUSE_M
    low = (1.0 - LAPSE_KPM * np.minimum(alt, TROPOPAUSE_M) / msl_k) ** EXPONENT
    above_m = np.maximum(alt - TROPOPAUSE_M, 0.0)
    return qnh_pa * low * np.exp(-GRAVITY_MPS2 * above_m / (GAS_CONSTANT * tropopause_k))


def density_kgm3(
    alt_m: ArrayLike, isa_offset_k: float = 0.0, qnh_pa: float = PRESSURE_MSL_PA
) -> Array:
    """Return the density of dry air [kg/m3]; arguments and errors as `pressure_pa`."""
    pressure = pressure_pa(alt_m, qnh_pa, isa_offset_k)
    return pressure / (GAS_CONSTANT * temperature_k(alt_m, isa_offset_k))


def sigma(alt_m: ArrayLike, isa_offset_k: float = 0.0, qnh_pa: float = PRESSURE_MSL_PA) -> Array:
    """Return the density ratio [-] to 1.225 kg/m3; arguments and errors as `pressure_pa`."""
    return density_kgm3(alt_m, isa_offset_k, qnh_pa) / DENSITY_MSL_KGM3


def speed_of_sound_mps(alt_m: ArrayLike, isa_offset_k: float = 0.0) -> Array:
    """Return the speed of sound [m/s]; arguments and errors as `temperature_k`."""
    return np.sqrt(HEAT_CAPACITY_RATIO * GAS_CONSTANT * temperature_k(alt_m, isa_offset_k))


def eas_to_tas_mps(
    eas_mps: ArrayLike,
    alt_m: ArrayLike,
    isa_offset_k: float = 0.0,
    qnh_pa: float = PRESSURE_MSL_PA,
) -> Array:
    """Return true airspeed [m/s] from equivalent airspeed [m/s]: EAS / sqrt(sigma)."""
    return np.asarray(eas_mps, dtype=np.float64) / np.sqrt(sigma(alt_m, isa_offset_k, qnh_pa))


def tas_to_eas_mps(
    tas_mps: ArrayLike,
    alt_m: ArrayLike,
    isa_offset_k: float = 0.0,
    qnh_pa: float = PRESSURE_MSL_PA,
) -> Array:
    """Return equivalent airspeed [m/s] from true airspeed [m/s]: TAS sqrt(sigma)."""
    return np.asarray(tas_mps, dtype=np.float64) * np.sqrt(sigma(alt_m, isa_offset_k, qnh_pa))


def cas_to_tas_mps(
    cas_mps: ArrayLike,
    alt_m: ArrayLike,
    isa_offset_k: float = 0.0,
    qnh_pa: float = PRESSURE_MSL_PA,
) -> Array:
    """Return true airspeed [m/s] from calibrated airspeed [m/s], compressible, below Mach 1.

    Source: the pitot equation of isentropic flow, e.g. Anderson, Introduction to Flight,
    section 4.11.
    """
    impact = _impact_ratio(np.asarray(cas_mps, dtype=np.float64), _SOUND_MSL_MPS)
    ratio = impact * PRESSURE_MSL_PA / pressure_pa(alt_m, qnh_pa, isa_offset_k)
    return _mach(ratio) * speed_of_sound_mps(alt_m, isa_offset_k)


def tas_to_cas_mps(
    tas_mps: ArrayLike,
    alt_m: ArrayLike,
    isa_offset_k: float = 0.0,
    qnh_pa: float = PRESSURE_MSL_PA,
) -> Array:
    """Return calibrated airspeed [m/s] from true airspeed [m/s]; inverse of `cas_to_tas_mps`."""
    sound_mps = speed_of_sound_mps(alt_m, isa_offset_k)
    impact = _impact_ratio(np.asarray(tas_mps, dtype=np.float64), sound_mps)
    ratio = impact * pressure_pa(alt_m, qnh_pa, isa_offset_k) / PRESSURE_MSL_PA
    return _mach(ratio) * _SOUND_MSL_MPS


def isa_altitude_m(air_pressure_pa: ArrayLike) -> Array:
    """Return the standard altitude [m] with this pressure [Pa, 5475 .. 177000]: pressure altitude.

    Raises
    ------
    InputError
        The pressure is outside -5000 .. 20000 m of standard atmosphere, or not a number.
    """
    pressure = np.asarray(air_pressure_pa, dtype=np.float64)
    if not np.all((pressure >= 5474.0) & (pressure <= 177_800.0)):
        raise InputError("The pressure is out of range.", "pressure_pa", "5474 to 177800 Pa")
    low_m = TEMPERATURE_MSL_K / LAPSE_KPM * (1.0 - (pressure / PRESSURE_MSL_PA) ** (1 / EXPONENT))
    high_m = TROPOPAUSE_M - _SCALE_ABOVE_M * np.log(pressure / _PRESSURE_TROPOPAUSE_PA)
    return np.where(low_m <= TROPOPAUSE_M, low_m, high_m)[()]


def pressure_altitude_m(indicated_alt_m: ArrayLike, qnh_pa: float) -> Array:
    """Return the pressure altitude [m] of an altimeter that shows this altitude [m] on this QNH.

    The altimeter's subscale only shifts its reading, whatever the temperature.

    Source: ICAO Doc 8168, the altimeter equation; PA = indicated altitude + ISA altitude of QNH.
    """
    _check_qnh(qnh_pa)
    return np.asarray(indicated_alt_m, dtype=np.float64) + isa_altitude_m(qnh_pa)


def density_altitude_m(pressure_alt_m: ArrayLike, air_temperature_k: ArrayLike) -> Array:
    """Return the density altitude [m] of dry air, below the tropopause.

    Parameters
    ----------
    pressure_alt_m
        Pressure altitude [m, -5000 .. 11000].
    air_temperature_k
        Temperature of the air there [K, above 0].
    """
    pressure = pressure_pa(pressure_alt_m)
    density = pressure / (GAS_CONSTANT * np.asarray(air_temperature_k, dtype=np.float64))
    exponent = 1.0 / (EXPONENT - 1.0)
    return TEMPERATURE_MSL_K / LAPSE_KPM * (1.0 - (density / DENSITY_MSL_KGM3) ** exponent)


def _impact_ratio(speed_mps: Array, sound_mps: ArrayLike) -> Array:
    """Return pitot over static pressure less one [-]."""
    ratio: Array = (1.0 + 0.2 * (speed_mps / np.asarray(sound_mps)) ** 2) ** 3.5 - 1.0
    return ratio


def _mach(impact_ratio: Array) -> Array:
    """Return the Mach number [-] of a pitot over static pressure less one."""
    mach: Array = np.sqrt(5.0 * ((impact_ratio + 1.0) ** (1.0 / 3.5) - 1.0))
    return mach


def _altitudes(alt_m: ArrayLike, isa_offset_k: float) -> Array:
    """Return the altitudes as floats, or raise in words. NaN fails every comparison."""
    alt = np.asarray(alt_m, dtype=np.float64)
    if not np.all((alt >= LOWEST_M) & (alt <= HIGHEST_M)):
        raise InputError(
            "The altitude is outside the modelled atmosphere.", "alt_m", "-5000 to 20000 m"
        )
    if not abs(isa_offset_k) <= LARGEST_OFFSET_K:
        raise InputError("The temperature offset is out of range.", "isa_offset_k", "-100 to 100 K")
    return alt


def _check_qnh(qnh_pa: float) -> None:
    """Raise when QNH is out of range."""
    if not LOWEST_QNH_PA <= qnh_pa <= HIGHEST_QNH_PA:
        raise InputError("The QNH is out of range.", "qnh_pa", "80000 to 110000 Pa")


_SOUND_MSL_MPS = float(speed_of_sound_mps(0.0))  # 340.294 [m/s]
_PRESSURE_TROPOPAUSE_PA = float(pressure_pa(TROPOPAUSE_M))  # 22632.04 [Pa]
_SCALE_ABOVE_M = (
    GAS_CONSTANT * (TEMPERATURE_MSL_K - LAPSE_KPM * TROPOPAUSE_M) / GRAVITY_MPS2
)  # pressure scale height above the tropopause, 6341.6 [m]
