"""The glide polar: how steeply the aeroplane descends at each speed, for one mass and state.

Two forms of parabolic drag, CD = CD0 + K CL^2. With V the equivalent airspeed, n the load factor
and gamma the angle of the path below the horizon:

manual  tan(gamma) = (1/2E) (u^2 + n^2/u^2), u = V / V_best_glide: a flight manual's pair
drag    D = W sin(gamma), L = n W cos(gamma): exact for CD0, K and wing area

Airspeed is along the flight path: in still air the ground speed is V cos(gamma) and the sink
V sin(gamma). Forces depend on equivalent airspeed only, so gamma does not change with density.

Source: Anderson, Introduction to Flight, sections 6.8 and 6.9; Lowry, Performance of Light
Aircraft (AIAA 1999), chapter 9.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from perf.atmosphere import DENSITY_MSL_KGM3, GRAVITY_MPS2
from perf.errors import InputError

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Polar:
    """The polar of one aeroplane at one mass, propeller state and configuration.

    Parameters
    ----------
    best_glide_eas_mps
        Speed of the flattest glide, wings level [m/s EAS, above 0].
    ratio
        Ground covered over height lost at that speed in still air [-, above 0].
    stall_eas_mps
        Stall speed, wings level [m/s EAS, 0 or more].
    mass_kg
        Mass [kg, above 0].
    form
        ``manual`` or ``drag``.
    cd0, k, wing_area_m2
        Drag at no lift [-], factor of induced drag [-], wing area [m2]: drag form only.
    ratio_factor
        Share of the record's ratio that is used, already contained in `ratio` [-, above 0].

    Raises
    ------
    InputError
        A number is missing, out of its range or not finite.
    """

    best_glide_eas_mps: float
    ratio: float
    stall_eas_mps: float
    mass_kg: float
    form: str = "manual"
    cd0: float | None = None
    k: float | None = None
    wing_area_m2: float | None = None
    ratio_factor: float = 1.0

    def __post_init__(self) -> None:
        """Refuse what no glide can have, so that nothing later has to check."""
        needed = ["best_glide_eas_mps", "ratio", "mass_kg", "ratio_factor"]
        if self.form == "drag":
            needed += ["cd0", "k", "wing_area_m2"]
        elif self.form != "manual":
            raise InputError("The polar has an unknown form.", "form", "manual or drag")
        for name in needed:
            _check_positive(name, getattr(self, name))
        if not 0.0 <= self.stall_eas_mps < math.inf:
            raise InputError("The stall speed is out of range.", "stall_eas_mps", "0 or more")

    @classmethod
    def from_drag(
        cls, cd0: float, k: float, wing_area_m2: float, stall_eas_mps: float, mass_kg: float
    ) -> Polar:
        """Return the drag form; its best-glide speed keeps cos(gamma).

        Source: Lowry, Performance of Light Aircraft (AIAA 1999), equations for example 9.1.
        """
        for name, value in (("cd0", cd0), ("k", k), ("wing_area_m2", wing_area_m2)):
            _check_positive(name, value)
        _check_positive("mass_kg", mass_kg)
        ratio = 1.0 / (2.0 * math.sqrt(cd0 * k))
        lift_coefficient = math.sqrt(cd0 / k)
        loading_pa = mass_kg * GRAVITY_MPS2 / wing_area_m2
        cos_gamma = math.cos(math.atan(1.0 / ratio))
        speed_mps = math.sqrt(2.0 * loading_pa * cos_gamma / (DENSITY_MSL_KGM3 * lift_coefficient))
        return cls(speed_mps, ratio, stall_eas_mps, mass_kg, "drag", cd0, k, wing_area_m2)

    def degraded(self, ratio_factor: float) -> Polar:
        """Return the polar with its ratio multiplied at every speed; speeds unchanged."""
        return replace(
            self, ratio=self.ratio * ratio_factor, ratio_factor=self.ratio_factor * ratio_factor
        )


def drag_from_pair(
    best_glide_eas_mps: float, ratio: float, mass_kg: float, wing_area_m2: float
) -> tuple[float, float]:
    """Return CD0 [-] and K [-] of the polar with this best-glide speed [m/s EAS] and ratio [-].

    The inverse of `Polar.from_drag`.

    Derived: at best glide CD0 = K CL^2 = CL / 2E, with L = W cos(gamma).
    """
    pressure_pa = 0.5 * DENSITY_MSL_KGM3 * best_glide_eas_mps**2
    lift_n = mass_kg * GRAVITY_MPS2 * math.cos(math.atan(1.0 / ratio))
    lift_coefficient = lift_n / (pressure_pa * wing_area_m2)
    return lift_coefficient / (2.0 * ratio), 1.0 / (2.0 * lift_coefficient * ratio)


def glide_tangent(polar: Polar, eas_mps: ArrayLike, load_factor: float = 1.0) -> Array:
    """Return tan(gamma) [-], height lost per distance in still air.

    Parameters
    ----------
    polar
        The polar.
    eas_mps
        Equivalent airspeed [m/s, above 0], any shape.
    load_factor
        Lift over W cos(gamma), 1 / cos(bank) in a turn [-, 1 or more].

    Notes
    -----
    In the drag form a speed above the terminal one gives a vertical path: a very large tangent.
    """
    eas = np.asarray(eas_mps, dtype=np.float64)
    if polar.form == "manual":
        square = (eas / polar.best_glide_eas_mps) ** 2
        return (square + load_factor**2 / square) / (2.0 * polar.ratio)
    parasite, induced = _drag_over_weight(polar, eas)
    induced = induced * load_factor**2
    # sin = parasite + induced cos^2, solved for sin in the form without cancellation.
    total = parasite + induced
    sine = np.minimum(2.0 * total / (1.0 + np.sqrt(1.0 + 4.0 * induced * total)), 1.0 - 1e-12)
    tangent: Array = sine / np.sqrt(1.0 - sine**2) / polar.ratio_factor
    return tangent


def glide_angle_rad(polar: Polar, eas_mps: ArrayLike, load_factor: float = 1.0) -> Array:
    """Return gamma, the angle of the path below the horizon in still air [rad, 0 .. pi/2]."""
    return np.arctan(glide_tangent(polar, eas_mps, load_factor))


def sink_mps(
    polar: Polar, eas_mps: ArrayLike, sigma: ArrayLike = 1.0, load_factor: float = 1.0
) -> Array:
    """Return the sink in still air [m/s, positive down]: TAS sin(gamma).

    Parameters
    ----------
    polar, eas_mps, load_factor
        As in `glide_tangent`.
    sigma
        Density ratio [-, above 0]; TAS = EAS / sqrt(sigma).
    """
    tas = np.asarray(eas_mps, dtype=np.float64) / np.sqrt(np.asarray(sigma, dtype=np.float64))
    return tas * np.sin(glide_angle_rad(polar, eas_mps, load_factor))


def best_glide_eas_mps(polar: Polar, load_factor: float = 1.0) -> float:
    """Return the speed of the flattest glide at a load factor [m/s EAS].

    Derived: wings level the pair of the polar. In a turn the same lift coefficient is kept;
    gamma is steeper there, which the drag form keeps.
    """
    if polar.form == "manual" or load_factor == 1.0:
        return polar.best_glide_eas_mps * math.sqrt(load_factor)
    assert polar.cd0 is not None
    assert polar.k is not None
    return eas_at_lift_coefficient_mps(polar, math.sqrt(polar.cd0 / polar.k), load_factor)


def eas_at_lift_coefficient_mps(
    polar: Polar, lift_coefficient: float, load_factor: float = 1.0
) -> float:
    """Return the steady gliding speed at this lift coefficient [m/s EAS]; drag form only.

    Raises
    ------
    InputError
        The polar is in manual form, which knows no lift coefficient.
    """
    if polar.cd0 is None or polar.k is None or polar.wing_area_m2 is None:
        raise InputError("The manual form has no lift coefficient.", "form", "drag")
    drag_coefficient = polar.cd0 + polar.k * lift_coefficient**2
    # tan(gamma) = D/W cos = n CD/CL
    cos_gamma = math.cos(math.atan(load_factor * drag_coefficient / lift_coefficient))
    lift_n = load_factor * polar.mass_kg * GRAVITY_MPS2 * cos_gamma
    return math.sqrt(2.0 * lift_n / (DENSITY_MSL_KGM3 * polar.wing_area_m2 * lift_coefficient))


def minimum_sink_eas_mps(polar: Polar) -> float:
    """Return the speed of least sink, wings level [m/s EAS], not below the stall.

    Found by golden-section search: the closed form 3^(-1/4) of the best-glide speed drops
    cos(gamma), which is worth 0.5 % of speed at 9:1.
    """
    low = max(polar.stall_eas_mps, 0.4 * polar.best_glide_eas_mps)
    high = max(polar.best_glide_eas_mps, low)
    golden = (math.sqrt(5.0) - 1.0) / 2.0
    for _ in range(60):
        inner, outer = high - golden * (high - low), low + golden * (high - low)
        if sink_mps(polar, inner) < sink_mps(polar, outer):
            high = outer
        else:
            low = inner
    return 0.5 * (low + high)


def stall_at_load_factor_eas_mps(polar: Polar, load_factor: float) -> float:
    """Return the stall speed at a load factor [m/s EAS]: stall speed times sqrt(n)."""
    return polar.stall_eas_mps * math.sqrt(load_factor)


def _drag_over_weight(polar: Polar, eas: Array) -> tuple[Array, Array]:
    """Return parasite drag over weight and induced drag over weight for L = W [-]."""
    assert polar.cd0 is not None
    assert polar.k is not None
    assert polar.wing_area_m2 is not None
    force = 0.5 * DENSITY_MSL_KGM3 * eas**2 * polar.wing_area_m2 / (polar.mass_kg * GRAVITY_MPS2)
    return polar.cd0 * force, polar.k / force


def _check_positive(name: str, value: float | None) -> None:
    """Raise when a number is absent, not finite, or not above zero."""
    if value is None or not 0.0 < value < math.inf:
        raise InputError("The polar has a number that is out of range.", name, "above 0")
