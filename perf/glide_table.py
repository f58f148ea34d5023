"""The glide table: height lost per metre of ground track, by altitude and track.

This table is all that the solvers learn about the aeroplane in straight flight. Equivalent
airspeed is held, so true airspeed falls as the aeroplane descends; the little height which that
gives back (0.6 % at 70 kt) is not credited.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from perf.atmosphere import GRAVITY_MPS2, PRESSURE_MSL_PA, sigma
from perf.errors import InputError
from perf.polar import Polar, glide_angle_rad, glide_tangent
from perf.shear import TrackWind, ascending

Array = NDArray[np.float64]

SLOWEST_MPS = 1.0  # a track with less ground speed than this is not held [m/s]
LEAST_SHEAR_ROOM = 0.05  # below this share of the drag left for the descent the charge diverges [-]
SLOWEST_STALL_FACTOR = 1.2  # the wind policy stays above this multiple of the stall speed [-]
N_SPEEDS = 12  # speeds tried by the wind policy before it refines


@dataclass(frozen=True)
class GlideTable:
    """Height lost over the ground, by altitude level and track.

    Parameters
    ----------
    alt_m
        Levels, true height [m], ascending, shape ``(n,)``.
    track_rad
        True tracks [rad], uniform from 0, clockwise from north, shape ``(n_tracks,)``.
    loss
        Metres of height lost per metre of ground track, shape ``(n, n_tracks)``; inf where the
        track cannot be held.
    heading_rad
        Air heading that holds the track [rad, not wrapped], shape ``(n, n_tracks)``; NaN if none.
    speed_eas_mps
        Speed flown along each track [m/s EAS], shape ``(n, n_tracks)``; NaN where not held.
    tas_mps
        Best-glide speed [m/s TAS], shape ``(n,)``; used in turns and in the reaction time.
    sink_mps
        Sink in still air at that speed [m/s], shape ``(n,)``.
    gamma_rad
        Angle of the path below the horizon at that speed in still air [rad].
    ratio
        Glide ratio at that speed, margins included [-].
    wind_east_mps, wind_north_mps
        Motion of the air towards east and north at the levels [m/s], shape ``(n,)``.
    holdable_below_m
        Lowest level at which some track cannot be held [m]; inf if there is none.
    """

    alt_m: Array
    track_rad: Array
    loss: Array
    heading_rad: Array
    speed_eas_mps: Array
    tas_mps: Array
    sink_mps: Array
    gamma_rad: float
    ratio: float
    wind_east_mps: Array
    wind_north_mps: Array
    holdable_below_m: float


def build_glide_table(
    polar: Polar,
    *,
    alt_levels_m: ArrayLike,
    wind_alt_m: ArrayLike,
    wind_east_mps: ArrayLike,
    wind_north_mps: ArrayLike,
    n_tracks: int = 180,
    speed_policy: str = "manual",
    maximum_speed_eas_mps: float,
    isa_offset_k: float = 0.0,
    qnh_pa: float = PRESSURE_MSL_PA,
    wind_error_mps: float = 0.0,
    downdraft_mps: float = 0.0,
) -> GlideTable:
    """Return the glide table of an aeroplane in this air.

    Parameters
    ----------
    polar
        The polar, already degraded by the ratio margin.
    alt_levels_m
        Levels of the table, true height [m], ascending and distinct, shape ``(n,)``.
    wind_alt_m, wind_east_mps, wind_north_mps
        Wind levels [m], ascending and distinct, and the motion of the air towards east and north
        [m/s], shape ``(k,)``; empty means calm. Each component is linear between the levels and
        holds its nearest value outside them.
    n_tracks
        Number of tracks [4 or more].
    speed_policy
        ``manual``: best-glide speed. ``wind``: for each level and track the speed between 1.2
        times the stall speed and the maximum that loses least height over the ground.
    maximum_speed_eas_mps
        Highest speed that the wind policy may choose [m/s EAS].
    isa_offset_k, qnh_pa
        The air, as in `perf.atmosphere`.
    wind_error_mps
        Taken off every track's ground speed [m/s, 0 or more].
    downdraft_mps
        Sinking of the air, everywhere [m/s, 0 or more].

    Raises
    ------
    InputError
        A value is out of its range, or the arrays do not fit together.
    """
    alt = ascending("alt_levels_m", alt_levels_m)
    if n_tracks < 4:
        raise InputError("There are too few tracks.", "n_tracks", "4 or more")
    if speed_policy not in ("manual", "wind"):
        raise InputError("The speed policy is unknown.", "speed_policy", "manual or wind")
    for name, value in (("wind_error_mps", wind_error_mps), ("downdraft_mps", downdraft_mps)):
        if not 0.0 <= value < math.inf:
            raise InputError("A margin is out of range.", name, "0 or more")
    track: Array = np.arange(n_tracks, dtype=np.float64) * (2.0 * math.pi / n_tracks)
    tas_per_eas = 1.0 / np.sqrt(sigma(alt, isa_offset_k, qnh_pa))
    wind = TrackWind(wind_alt_m, wind_east_mps, wind_north_mps, alt, track)
    air = _Air(polar, wind, tas_per_eas[:, None], wind_error_mps, downdraft_mps)
    eas: float | Array = polar.best_glide_eas_mps
    if speed_policy == "wind":
        eas = _best_speed(air, polar, maximum_speed_eas_mps)
    loss = air.loss(eas)
    return _table(air, alt, track, eas, loss)


class _Air:
    """Everything that the loss depends on except the speed flown."""

    def __init__(
        self,
        polar: Polar,
        wind: TrackWind,
        tas_per_eas: Array,
        wind_error_mps: float,
        downdraft_mps: float,
    ) -> None:
        self.polar, self.wind, self.tas_per_eas = polar, wind, tas_per_eas
        self.wind_error_mps, self.downdraft_mps = wind_error_mps, downdraft_mps

    def horizontal_speed(self, eas: float | Array) -> tuple[Array, Array]:
        """Return V cos(gamma) and V sin(gamma) [m/s], shaped to the table."""
        tangent = glide_tangent(self.polar, eas)
        level = np.asarray(eas * self.tas_per_eas / np.sqrt(1.0 + tangent**2))
        return level, level * tangent

    def loss(self, eas: float | Array) -> Array:
        """Return the loss [m/m] at this speed [m/s EAS], a scalar or one for each entry."""
        level, sink = self.horizontal_speed(eas)
        room = level**2 - self.wind.across**2
        root = np.sqrt(np.maximum(room, 0.0))
        ground = self.wind.along + root - self.wind_error_mps
        held = (room > 0.0) & (ground > SLOWEST_MPS)
        share = self.shear_room(eas, level, root)
        held &= share > LEAST_SHEAR_ROOM
        fall = (sink + self.downdraft_mps) / np.where(held, ground * share, 1.0)
        return np.where(held, fall, np.inf)

    def shear_room(self, eas: float | Array, level: Array, root: Array) -> float | Array:
        """Return the divisor of the shear charge [-]: 1 - (V/g) d(headwind)/d(height).

        Derived: the air slows by sink x d(wind)/d(height); to hold airspeed the aeroplane makes
        up that deceleration with a steeper path, on which the wind changes the faster.
        """
        if not self.wind.sheared:
            return 1.0
        slope = self.wind.headwind_slope(level, root)
        return 1.0 - eas * self.tas_per_eas / GRAVITY_MPS2 * slope


def _best_speed(air: _Air, polar: Polar, maximum_eas_mps: float) -> Array:
    """Return the speed of least loss for each level and track [m/s EAS], shape of the table.

    A grid of speeds, then two parabolas through three points each; the loss is flat round its
    minimum, so that its own error is below 1e-5.
    """
    if not 0.0 < maximum_eas_mps < math.inf:
        raise InputError("The maximum speed is out of range.", "maximum_speed_eas_mps", "above 0")
    low = min(SLOWEST_STALL_FACTOR * polar.stall_eas_mps, maximum_eas_mps)
    low = max(low, 0.3 * min(polar.best_glide_eas_mps, maximum_eas_mps))
    speeds = np.linspace(low, maximum_eas_mps, N_SPEEDS)
    best = np.full(air.wind.along.shape, speeds[0])
    least = air.loss(float(speeds[0]))
    for speed in speeds[1:]:
        loss = air.loss(float(speed))
        better = loss < least
        np.copyto(best, speed, where=better)
        np.copyto(least, loss, where=better)
    step = (maximum_eas_mps - low) / (N_SPEEDS - 1)
    for width in (step, 0.15 * step):
        best, least = _refine(air, best, least, width, (low, maximum_eas_mps))
    return best


def _refine(
    air: _Air, best: Array, least: Array, width: float, limits: tuple[float, float]
) -> tuple[Array, Array]:
    """Return speed and loss after one parabola through three speeds a `width` [m/s] apart."""
    middle = np.clip(best, limits[0] + width, max(limits[1] - width, limits[0] + width))
    losses = [air.loss(middle - width), air.loss(middle), air.loss(middle + width)]
    with np.errstate(invalid="ignore", divide="ignore"):
        bend = losses[0] - 2.0 * losses[1] + losses[2]
        shift = 0.5 * width * (losses[0] - losses[2]) / bend
    shift = np.where(np.isfinite(shift) & (bend > 0.0), shift, 0.0)
    vertex = np.clip(middle + np.clip(shift, -width, width), *limits)
    loss = air.loss(vertex)
    better = loss < least
    return np.where(better, vertex, best), np.where(better, loss, least)


def _table(air: _Air, alt: Array, track: Array, eas: float | Array, loss: Array) -> GlideTable:
    """Return the table for the speeds chosen."""
    held = np.isfinite(loss)
    level, _ = air.horizontal_speed(eas)
    crab = np.arcsin(np.clip(air.wind.across / level, -1.0, 1.0))
    gamma = float(glide_angle_rad(air.polar, air.polar.best_glide_eas_mps))
    tas = air.polar.best_glide_eas_mps * air.tas_per_eas[:, 0]
    lost = alt[~held.all(axis=1)]
    return GlideTable(
        alt_m=alt,
        track_rad=track,
        loss=loss,
        heading_rad=np.where(held, track - crab, np.nan),
        speed_eas_mps=np.where(held, eas, np.nan),
        tas_mps=tas,
        sink_mps=tas * math.sin(gamma),
        gamma_rad=gamma,
        ratio=1.0 / math.tan(gamma),
        wind_east_mps=air.wind.east,
        wind_north_mps=air.wind.north,
        holdable_below_m=float(lost[0]) if lost.size else math.inf,
    )
