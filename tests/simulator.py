"""An independent flight of a path: a point mass with a pilot, in moving air.

It shares no code with `perf` or `geo`. It reads plain numbers only: best-glide speed and ratio,
stall speed, the wind levels, the points of a path. Speed is a state, so a headwind that falls off
costs height by itself; nothing here is a table of height per metre.

Equations of a point mass in the axes of moving air (Etkin, Dynamics of Atmospheric Flight, 1972,
chapter 5, wind terms kept), `descent` the angle of the air path below the horizon:

    speed'            = g sin(descent) - drag/m - a_wind . along
    speed * descent'  = g cos(descent) - lift/m * cos(bank) - a_wind . down
    speed cos(descent) heading' = lift/m * sin(bank) - a_wind . right

with a_wind the rate of change of the wind felt. Drag over lift is (u^2/n + n/u^2) / 2E with
n = lift / (W cos(descent)): the least is 1/E at u = sqrt(n), so the straight best glide descends at
tan = 1/E and a turn at v sqrt(n) costs v^2 cos(descent) / (E g sin b cos b) per radian.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

Array = NDArray[np.float64]

GRAVITY_MPS2 = 9.80665  # standard gravity, exact (ISO 80000-3)
STEP_S = 0.25  # integration step [s]
ROLL_RATE_RAD_S = math.radians(20.0)  # unhurried roll of a light aeroplane
PITCH_RATE_RAD_S = math.radians(3.0)  # bound on the rate of the path angle
SPEED_TIME_S = 3.0  # time in which the pilot takes out a speed error
PATH_TIME_S = 1.0  # time in which the path angle follows its command
HEADING_TIME_S = 2.5  # time in which a heading error is taken out
CORRECTION_BANK_RAD = math.radians(15.0)  # largest bank used to follow a straight leg
LOOKAHEAD_M = 250.0  # the pilot steers for a point this far ahead on the leg
OVERTURN_RAD = math.radians(20.0)  # most that a pilot turns beyond the stated angle
HOLD_M = 40.0  # so near its end the leg's own direction is held

# places in the parameter vector
RATIO, GLIDE_EAS, STALL_EAS, TOP_EAS, BY_WIND, DOWNDRAFT, ISA_OFFSET, QNH, AGAINST = range(9)


@dataclass(frozen=True)
class Aeroplane:
    """Plain numbers of a glide: ratio after its margin, speeds [m/s EAS], policy."""

    ratio: float
    glide_eas_mps: float
    stall_eas_mps: float = 0.0
    top_eas_mps: float = 0.0
    by_wind: bool = False


@dataclass(frozen=True)
class Air:
    """The air: wind levels [m], components towards east and north [m/s], offsets."""

    alt_m: Array
    east_mps: Array
    north_mps: Array
    downdraft_mps: float = 0.0
    isa_offset_k: float = 0.0
    qnh_pa: float = 101325.0
    against_mps: float = 0.0

    @staticmethod
    def calm() -> Air:
        return Air.constant(0.0, 0.0)

    @staticmethod
    def constant(east_mps: float, north_mps: float) -> Air:
        return Air(np.zeros(1), np.array([east_mps]), np.array([north_mps]))


@dataclass(frozen=True)
class Flight:
    """What was flown: samples, and the state over the end of the path (closest approach)."""

    time_s: Array
    x_m: Array
    y_m: Array
    alt_m: Array
    tas_mps: Array
    arrival_alt_m: float
    miss_m: float


@njit(cache=True, nogil=True)
def _sigma(alt_m, par):
    """Return density over 1.225 kg/m3, hydrostatic under the offset temperature."""
    sea_k = 288.15 + par[ISA_OFFSET]
    if alt_m <= 11000.0:
        theta = 1.0 - 0.0065 * alt_m / sea_k
        pressure_pa = par[QNH] * theta**5.255880
        temperature_k = sea_k * theta
    else:
        temperature_k = sea_k - 71.5
        base_pa = par[QNH] * (temperature_k / sea_k) ** 5.255880
        pressure_pa = base_pa * math.exp(-0.034163195 * (alt_m - 11000.0) / temperature_k)
    return pressure_pa / (287.05287 * temperature_k) / 1.225


@njit(cache=True, nogil=True)
def _wind(alt_m, wind):
    """Return east, north [m/s] and their change with height [1/s], linear between levels."""
    last = wind.shape[0] - 1
    if alt_m <= wind[0, 0] or last == 0:
        return wind[0, 1], wind[0, 2], 0.0, 0.0
    if alt_m >= wind[last, 0]:
        return wind[last, 1], wind[last, 2], 0.0, 0.0
    i = 0
    while wind[i + 1, 0] < alt_m:
        i += 1
    depth_m = wind[i + 1, 0] - wind[i, 0]
    share = (alt_m - wind[i, 0]) / depth_m
    d_east = wind[i + 1, 1] - wind[i, 1]
    d_north = wind[i + 1, 2] - wind[i, 2]
    return (
        wind[i, 1] + share * d_east,
        wind[i, 2] + share * d_north,
        d_east / depth_m,
        d_north / depth_m,
    )


@njit(cache=True, nogil=True)
def _rates(state, path_rate, bank, par, wind):
    """Return the time derivatives of (x, y, alt, speed, descent, heading)."""
    _x, _y, alt_m, speed, descent, heading = state
    east, north, d_east, d_north = _wind(alt_m, wind)
    sin_d, cos_d = math.sin(descent), math.cos(descent)
    sin_h, cos_h = math.sin(heading), math.cos(heading)
    alt_rate = -speed * sin_d - par[DOWNDRAFT]
    a_east, a_north = d_east * alt_rate, d_north * alt_rate
    forward = a_east * sin_h + a_north * cos_h
    right = a_east * cos_h - a_north * sin_h
    lift = (GRAVITY_MPS2 * cos_d + forward * sin_d - speed * path_rate) / math.cos(bank)
    load = max(lift / (GRAVITY_MPS2 * cos_d), 0.05)
    u_sq = speed * speed * _sigma(alt_m, par) / par[GLIDE_EAS] ** 2
    drag = lift * (u_sq / load + load / u_sq) / (2.0 * par[RATIO])
    speed_rate = GRAVITY_MPS2 * sin_d - drag - forward * cos_d
    heading_rate = (lift * math.sin(bank) - right) / (speed * cos_d)
    x_rate, y_rate = speed * cos_d * sin_h + east, speed * cos_d * cos_h + north
    ground = math.hypot(x_rate, y_rate)
    if par[AGAINST] > 0.0 and ground > 0.1:
        x_rate -= par[AGAINST] * x_rate / ground
        y_rate -= par[AGAINST] * y_rate / ground
    return x_rate, y_rate, alt_rate, speed_rate, path_rate, heading_rate


@njit(cache=True, nogil=True)
def _moved(state, rates, step_s):
    return (
        state[0] + step_s * rates[0],
        state[1] + step_s * rates[1],
        state[2] + step_s * rates[2],
        state[3] + step_s * rates[3],
        state[4] + step_s * rates[4],
        state[5] + step_s * rates[5],
    )


@njit(cache=True, nogil=True)
def runge_kutta(state, path_rate, bank, par, wind, step_s):
    """Return the state one step later (classical fourth order, controls held)."""
    k1 = _rates(state, path_rate, bank, par, wind)
    k2 = _rates(_moved(state, k1, 0.5 * step_s), path_rate, bank, par, wind)
    k3 = _rates(_moved(state, k2, 0.5 * step_s), path_rate, bank, par, wind)
    k4 = _rates(_moved(state, k3, step_s), path_rate, bank, par, wind)
    half = _moved(_moved(state, k1, step_s / 6.0), k2, step_s / 3.0)
    return _moved(_moved(half, k3, step_s / 3.0), k4, step_s / 6.0)


@njit(cache=True, nogil=True)
def _wrapped(angle):
    return (angle + math.pi) % (2.0 * math.pi) - math.pi


@njit(cache=True, nogil=True)
def _heading_for(track, state, par, wind):
    """Return the heading whose ground track is `track`, crosswind cut at the air speed."""
    east, north, _a, _b = _wind(state[2], wind)
    cross = east * math.cos(track) - north * math.sin(track)
    share = cross / (state[3] * math.cos(state[4]))
    return track - math.asin(min(max(share, -0.999), 0.999))


@njit(cache=True, nogil=True)
def _speed_for_track(track, alt_m, par, wind):
    """Return the EAS [m/s] that loses least height along `track`, by plain trial."""
    east, north, _a, _b = _wind(alt_m, wind)
    along = east * math.sin(track) + north * math.cos(track)
    cross = east * math.cos(track) - north * math.sin(track)
    root = math.sqrt(_sigma(alt_m, par))
    best, best_eas = np.inf, par[TOP_EAS]
    low = 1.2 * par[STALL_EAS]
    for i in range(81):
        eas = low + (par[TOP_EAS] - low) * i / 80.0
        u_sq = (eas / par[GLIDE_EAS]) ** 2
        slope = (u_sq + 1.0 / u_sq) / (2.0 * par[RATIO])
        over = eas / root / math.sqrt(1.0 + slope * slope)
        if abs(cross) >= over:
            continue
        ground = along + math.sqrt(over * over - cross * cross) - par[AGAINST]
        if ground > 0.5 and (over * slope + par[DOWNDRAFT]) / ground < best:
            best, best_eas = (over * slope + par[DOWNDRAFT]) / ground, eas
    return best_eas


@njit(cache=True, nogil=True)
def _path_rate(state, target_eas, bank, par, wind):
    """Return the bounded rate of the path angle with which the pilot goes for a speed.

    The change of the wind felt is met at once, as a pilot who holds airspeed does.
    """
    _east, _north, d_east, d_north = _wind(state[2], wind)
    along = d_east * math.sin(state[5]) + d_north * math.cos(state[5])
    shear = -along * state[3] * math.sin(state[4]) / GRAVITY_MPS2
    sigma = _sigma(state[2], par)
    u_sq = state[3] ** 2 * sigma / par[GLIDE_EAS] ** 2
    load = 1.0 / math.cos(bank)
    slope = load * (u_sq / load + load / u_sq) / (2.0 * par[RATIO])
    error = target_eas / math.sqrt(sigma) - state[3]
    push = min(max(error / (GRAVITY_MPS2 * SPEED_TIME_S), -0.12), 0.12)
    rate = (math.atan(slope) + shear + push - state[4]) / PATH_TIME_S
    return min(max(rate, -PITCH_RATE_RAD_S), PITCH_RATE_RAD_S)


@njit(cache=True, nogil=True)
def _remaining_m(state, leg):
    """Return the distance still to go along a leg's direction [m]."""
    length = math.hypot(leg[2] - leg[0], leg[3] - leg[1])
    if length < 0.01:
        return 0.0
    ex, ey = (leg[2] - leg[0]) / length, (leg[3] - leg[1]) / length
    return (leg[2] - state[0]) * ex + (leg[3] - state[1]) * ey


@njit(cache=True, nogil=True)
def _leg_track(state, leg):
    """Return the ground track to fly now: towards a point ahead on the leg."""
    remaining = _remaining_m(state, leg)
    along = math.atan2(leg[2] - leg[0], leg[3] - leg[1])
    if remaining < HOLD_M:
        return along
    back = max(remaining - LOOKAHEAD_M, 0.0)
    aim_x, aim_y = leg[2] - back * math.sin(along), leg[3] - back * math.cos(along)
    return math.atan2(aim_x - state[0], aim_y - state[1])


@njit(cache=True, nogil=True)
def _turn_left_rad(state, leg, turn, turned, par, wind):
    """Return what is left of a turn [rad]: until the ground track points at the leg's end.

    Over an end so near that it gives no direction the stated angle is turned, and no turn goes on
    more than `OVERTURN_RAD` past its stated angle (the end may lie inside the circle).
    """
    stated = max(abs(turn[1]) - turned, 0.0)
    if math.hypot(leg[2] - state[0], leg[3] - state[1]) < HOLD_M:
        return stated
    if turned > abs(turn[1]) + OVERTURN_RAD:
        return 0.0
    sign = 1.0 if turn[1] >= 0.0 else -1.0
    track = math.atan2(leg[2] - state[0], leg[3] - state[1])
    left = sign * _wrapped(_heading_for(track, state, par, wind) - state[5])
    if left < 0.0 and turned < abs(turn[1]) - 1.0:
        left += 2.0 * math.pi
    return left


@njit(cache=True, nogil=True)
def _straight_commands(state, leg, par, wind):
    """Return bank and EAS wanted on a straight leg."""
    track = _leg_track(state, leg)
    error = _wrapped(_heading_for(track, state, par, wind) - state[5])
    bank = math.atan(state[3] * error / (GRAVITY_MPS2 * HEADING_TIME_S))
    eas = par[GLIDE_EAS]
    if par[BY_WIND] > 0.0:
        eas = _speed_for_track(track, state[2], par, wind)
    return min(max(bank, -CORRECTION_BANK_RAD), CORRECTION_BANK_RAD), eas


@njit(cache=True, nogil=True)
def _starts_turn(state, leg, turn, par, wind):
    """Tell whether to roll in now, so that half the roll is done at the leg's end."""
    east, north, _a, _b = _wind(state[2], wind)
    over = state[3] * math.cos(state[4])
    ground = math.hypot(over * math.sin(state[5]) + east, over * math.cos(state[5]) + north)
    lead_s = min(0.5 * abs(turn[0]) / ROLL_RATE_RAD_S, 0.5 * abs(turn[1]))
    return _remaining_m(state, leg) <= ground * lead_s


@njit(cache=True, nogil=True)
def fly_legs(legs, turns, state, par, wind, out):
    """Fly legs (m, 4) joined by turns (m - 1, 2); fill `out` (k, 5); return samples, last turn.

    A row of `out` is time, x, y, altitude, true air speed. The flight ends abeam the last leg's
    end, at the ground level of -500 m or when `out` is full.
    """
    leg, turning, turned, bank, mark = 0, False, 0.0, 0.0, 0
    last = legs.shape[0] - 1
    against, par = par[AGAINST], par.copy()  # a wind against the track: on straight tracks only
    if last > 0 and _remaining_m(state, legs[0]) < 1.0:  # no leg to roll in on: half the roll done
        bank = 0.5 * math.copysign(turns[0, 0], turns[0, 1])
    for k in range(out.shape[0]):
        out[k, 0], out[k, 1], out[k, 2] = k * STEP_S, state[0], state[1]
        out[k, 3], out[k, 4] = state[2], state[3]
        if not turning and leg < last and _starts_turn(state, legs[leg], turns[leg], par, wind):
            turning, turned, mark = True, 0.0, k
        if turning:
            left = _turn_left_rad(state, legs[leg + 1], turns[leg], turned, par, wind)
            rate = GRAVITY_MPS2 * math.tan(abs(bank)) / state[3]
            if left <= 0.5 * rate * abs(bank) / ROLL_RATE_RAD_S + 1e-3:
                turning, leg = False, leg + 1
        if turning:
            bank_wanted = turns[leg, 0] if turns[leg, 1] >= 0.0 else -turns[leg, 0]
            eas = par[GLIDE_EAS] / math.sqrt(math.cos(turns[leg, 0]))
        else:
            if leg == last and (_remaining_m(state, legs[last]) <= 0.0 or state[2] < -500.0):
                return k + 1, mark
            bank_wanted, eas = _straight_commands(state, legs[leg], par, wind)
        par[AGAINST] = 0.0 if turning else against
        roll = ROLL_RATE_RAD_S * STEP_S
        bank = min(max(bank_wanted, bank - roll), bank + roll)
        before = state[5]
        rate = _path_rate(state, eas, bank, par, wind)
        state = runge_kutta(state, rate, bank, par, wind, STEP_S)
        turned += abs(state[5] - before)
    return out.shape[0], mark


def parameters(aeroplane: Aeroplane, air: Air) -> Array:
    """Return the parameter vector of the jitted functions."""
    par = np.zeros(9)
    par[RATIO], par[GLIDE_EAS] = aeroplane.ratio, aeroplane.glide_eas_mps
    par[STALL_EAS], par[TOP_EAS] = aeroplane.stall_eas_mps, aeroplane.top_eas_mps
    par[BY_WIND] = 1.0 if aeroplane.by_wind else 0.0
    par[DOWNDRAFT], par[AGAINST] = air.downdraft_mps, air.against_mps
    par[ISA_OFFSET], par[QNH] = air.isa_offset_k, air.qnh_pa
    return par


def wind_levels(air: Air) -> Array:
    """Return the wind as rows of altitude, east, north; one calm level when none is given."""
    if air.alt_m.size == 0:
        return np.zeros((1, 3))
    return np.ascontiguousarray(np.column_stack([air.alt_m, air.east_mps, air.north_mps]))


def _closest(out: Array, x_m: float, y_m: float) -> tuple[float, float, int]:
    """Return altitude, distance and last sample at the closest approach, between samples too."""
    if len(out) == 1:
        return float(out[0, 3]), math.hypot(out[0, 1] - x_m, out[0, 2] - y_m), 0
    start, step = out[:-1], np.diff(out, axis=0)
    along = (x_m - start[:, 1]) * step[:, 1] + (y_m - start[:, 2]) * step[:, 2]
    share = np.clip(along / np.maximum(step[:, 1] ** 2 + step[:, 2] ** 2, 1e-9), 0.0, 1.0)
    away = np.hypot(start[:, 1] + share * step[:, 1] - x_m, start[:, 2] + share * step[:, 2] - y_m)
    i = int(np.argmin(away))
    return float(start[i, 3] + share[i] * step[i, 3]), float(away[i]), i


def fly(
    legs: Array,
    turns: Array,
    alt_m: float,
    track_rad: float,
    aeroplane: Aeroplane,
    air: Air,
    at_leg_speed: bool = False,
) -> Flight:
    """Fly straight legs joined by turns and say how it ended.

    Parameters
    ----------
    legs
        Straight legs over the ground, shape ``(m, 4)``: x, y of start and end [m], true axes.
    turns
        Turns between them, shape ``(m - 1, 2)``: bank [rad], angle [rad, positive right].
    alt_m, track_rad
        Altitude [m] and ground track [rad] at the start.
    aeroplane, air
        Plain numbers of the glide and of the air.
    at_leg_speed
        Whether the flight begins at the speed of its first leg, not at the best-glide speed.
    """
    par, wind = parameters(aeroplane, air), wind_levels(air)
    legs = np.ascontiguousarray(legs, dtype=np.float64)
    turns = np.ascontiguousarray(np.reshape(turns, (-1, 2)), dtype=np.float64)
    eas = aeroplane.glide_eas_mps
    if at_leg_speed and aeroplane.by_wind:
        eas = _speed_for_track(track_rad, float(alt_m), par, wind)
    tas = eas / math.sqrt(_sigma(alt_m, par))
    descent = math.atan(1.0 / aeroplane.ratio)
    state = (float(legs[0, 0]), float(legs[0, 1]), float(alt_m), tas, descent, 0.0)
    heading = _heading_for(track_rad, state, par, wind)
    out = np.empty((40_000, 5))
    used, mark = fly_legs(legs, turns, (*state[:5], heading), par, wind, out)
    out = out[:used].copy()
    arrival, miss, last = _closest(out[mark:], float(legs[-1, 2]), float(legs[-1, 3]))
    out = out[: mark + last + 1]  # what comes after the place is not part of the claim
    return Flight(out[:, 0], out[:, 1], out[:, 2], out[:, 3], out[:, 4], arrival, miss)
