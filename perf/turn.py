"""Gliding turns: radius, speed and the height they cost.

A turn is flown at v sqrt(n), v being the wings-level glide speed and n = 1 / cos(bank), so that
the margin above the stall stays what it was.

Source: Rogers, "The possible 'impossible' turn", Journal of Aircraft 32(2), 1995, 392-397;
Lowry, Performance of Light Aircraft (AIAA 1999), pages 294-296.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from perf.atmosphere import GRAVITY_MPS2
from perf.errors import InputError
from perf.polar import Polar, glide_angle_rad

Array = NDArray[np.float64]


def load_factor(bank_rad: float) -> float:
    """Return the load factor of a steady turn [-]: 1 / cos(bank).

    Raises
    ------
    InputError
        The bank is not from 0 to below 90 degrees.
    """
    if not 0.0 <= bank_rad < math.pi / 2.0:
        raise InputError("The bank is out of range.", "bank_rad", "0 to below 90 degrees")
    return 1.0 / math.cos(bank_rad)


def turn_tas_mps(tas_mps: ArrayLike, bank_rad: float) -> Array:
    """Return the speed flown in the turn [m/s]: wings-level speed [m/s] times sqrt(n)."""
    return np.asarray(tas_mps, dtype=np.float64) * math.sqrt(load_factor(bank_rad))


def turn_radius_m(tas_mps: ArrayLike, bank_rad: float) -> Array:
    """Return the radius of the turn in the air [m]: v^2 / (g sin(bank)).

    Parameters
    ----------
    tas_mps
        Wings-level glide speed [m/s TAS], any shape; the turn is flown at `turn_tas_mps`.
    bank_rad
        Bank [rad, above 0 and below pi/2].

    Raises
    ------
    InputError
        The bank is out of its range.

    Derived: radius V^2 / (g tan(bank)) at V = v sqrt(n).
    """
    return np.asarray(tas_mps, dtype=np.float64) ** 2 / (GRAVITY_MPS2 * _sine(bank_rad))


def turn_loss_m_per_rad(tas_mps: ArrayLike, ratio: float, bank_rad: float) -> Array:
    """Return the height lost per radian of heading [m]: v^2 / (E g sin(bank) cos(bank)).

    Parameters
    ----------
    tas_mps, bank_rad
        As in `turn_radius_m`.
    ratio
        Best glide ratio, margins included [-, above 0].

    Raises
    ------
    InputError
        The bank is out of its range.

    Derived: sink n V / E at V = v sqrt(n), over the rate of turn g tan(bank) / V.
    """
    speed_squared = np.asarray(tas_mps, dtype=np.float64) ** 2
    sine_cosine = _sine(bank_rad) * math.cos(bank_rad)
    return speed_squared / (ratio * GRAVITY_MPS2 * sine_cosine)


def steady_turn_loss_m_per_rad(
    polar: Polar, eas_mps: ArrayLike, bank_rad: float, sigma: ArrayLike = 1.0
) -> Array:
    """Return the height lost per radian in a steady gliding turn, from the polar itself [m].

    Parameters
    ----------
    polar
        The polar; in drag form the result is exact.
    eas_mps
        Speed flown in the turn [m/s EAS].
    bank_rad
        Bank [rad, above 0 and below pi/2].
    sigma
        Density ratio [-].

    Raises
    ------
    InputError
        The bank is out of its range.

    Derived: L cos(bank) = W cos(gamma), rate of turn g tan(bank) / V, sink V sin(gamma).
    """
    _sine(bank_rad)
    gamma = glide_angle_rad(polar, eas_mps, load_factor(bank_rad))
    tas_squared = np.asarray(eas_mps, dtype=np.float64) ** 2 / np.asarray(sigma, dtype=np.float64)
    return tas_squared * np.sin(gamma) / (GRAVITY_MPS2 * math.tan(bank_rad))


def dive_m(tas_mps: ArrayLike, bank_rad: float) -> Array:
    """Return the height that buys the speed of the turn [m]: (n - 1) v^2 / 2g.

    It comes back when the wings are level again and the speed falls to v.

    Derived: kinetic energy from v to v sqrt(n).
    """
    speed_squared = np.asarray(tas_mps, dtype=np.float64) ** 2
    return (load_factor(bank_rad) - 1.0) * speed_squared / (2.0 * GRAVITY_MPS2)


def _sine(bank_rad: float) -> float:
    """Return sin(bank), or raise when there is no turn."""
    if not 0.0 < bank_rad < math.pi / 2.0:
        raise InputError("The bank is out of range.", "bank_rad", "above 0 and below 90 degrees")
    return math.sin(bank_rad)
