"""A plain search of small windows: straight glides with up to two bends at any cell.

It knows one air (constant wind and density of each leg's mean height) and one rule: fly over the
bend point, then turn at the set bank until the ground track points at the next point. Slow, and
shares nothing with `geo` but the grid of cell tops it is given.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

Array = NDArray[np.float64]
G = 9.80665  # standard gravity [m/s2]
TURN_STEP_RAD = math.radians(5.0)
SECTORS = 12  # arrivals kept per cell, by direction

# places in the parameter vector
CELL, RATIO, EAS, EAST, NORTH, AGAINST, BANK, CLEARANCE, ARRIVAL = range(9)


@dataclass(frozen=True)
class Window:
    """A square of solver cells and the case flown over it.

    `top_m` (n, n) row 0 in the south; x and y are metres from its south-west corner.
    """

    top_m: Array
    cell_m: float
    ratio: float
    eas_mps: float
    east_mps: float
    north_mps: float
    against_mps: float
    bank_rad: float
    clearance_m: float
    arrival_m: float

    def parameters(self) -> Array:
        """Return the numbers of the search as a vector."""
        arrival = max(self.arrival_m, self.clearance_m)
        return np.array(
            [self.cell_m, self.ratio, self.eas_mps, self.east_mps, self.north_mps,
             self.against_mps, self.bank_rad, self.clearance_m, arrival]
        )  # fmt: skip


@njit(cache=True, nogil=True)
def _tas(alt_m, par):
    """Return the true air speed [m/s] in the standard atmosphere (ICAO Doc 7488/3)."""
    return par[EAS] / (1.0 - 0.0065 * alt_m / 288.15) ** 2.12794


@njit(cache=True, nogil=True)
def _clear(x, y, alt_m, top, par):
    """Tell whether a point keeps the clearance over a known cell."""
    r, c = math.floor(y / par[CELL]), math.floor(x / par[CELL])
    if r < 0 or c < 0 or r >= top.shape[0] or c >= top.shape[1]:
        return False
    return alt_m >= top[r, c] + par[CLEARANCE]  # False for NaN


@njit(cache=True, nogil=True)
def _heading(track, alt_m, par):
    """Return the heading that holds a track, NaN where none does."""
    over = _tas(alt_m, par) * par[RATIO] / math.hypot(1.0, par[RATIO])
    cross = par[EAST] * math.cos(track) - par[NORTH] * math.sin(track)
    if abs(cross) >= over:
        return np.nan
    return track - math.asin(cross / over)


@njit(cache=True, nogil=True)
def _loss_per_m(track, alt_m, par):
    """Return the height lost per metre of ground track, inf where it cannot be held."""
    tas = _tas(alt_m, par)
    over = tas * par[RATIO] / math.hypot(1.0, par[RATIO])
    cross = par[EAST] * math.cos(track) - par[NORTH] * math.sin(track)
    if abs(cross) >= over:
        return np.inf
    along = par[EAST] * math.sin(track) + par[NORTH] * math.cos(track)
    ground = along + math.sqrt(over * over - cross * cross) - par[AGAINST]
    return over / par[RATIO] / ground if ground > 1.0 else np.inf


@njit(cache=True, nogil=True)
def _straight(x, y, alt_m, end_x, end_y, top, par):
    """Glide straight to a point; return the altitude over it, -inf if something is touched."""
    length = math.hypot(end_x - x, end_y - y)
    if length < 1e-6:
        return alt_m
    track = math.atan2(end_x - x, end_y - y)
    loss = _loss_per_m(track, alt_m, par)
    if loss == np.inf:
        return -np.inf
    loss = _loss_per_m(track, alt_m - 0.5 * loss * length, par)
    if loss == np.inf:
        return -np.inf
    n = int(length / (0.5 * par[CELL])) + 1
    for i in range(1, n + 1):
        share = i / n
        if not _clear(
            x + share * (end_x - x), y + share * (end_y - y), alt_m - loss * share * length,
            top, par,
        ):  # fmt: skip
            return -np.inf
    return alt_m - loss * length


@njit(cache=True, nogil=True)
def _fly(x, y, alt_m, heading, side, end_x, end_y, top, par):
    """Turn to one side until the track points at the end, then glide; return altitude, heading."""
    bank = par[BANK]
    turned = 0.0
    while turned < 2.0 * math.pi + 0.2:
        wanted = _heading(math.atan2(end_x - x, end_y - y), alt_m, par)
        if math.isnan(wanted):
            return -np.inf, 0.0
        left = (side * (wanted - heading)) % (2.0 * math.pi)
        if left < 1e-9 or left > 2.0 * math.pi - 0.5 * TURN_STEP_RAD:
            return _straight(x, y, alt_m, end_x, end_y, top, par), wanted
        step = min(left, TURN_STEP_RAD)
        tas = _tas(alt_m, par)
        fast = tas / math.sqrt(math.cos(bank))
        time_s = step * fast / (G * math.tan(bank))
        mid = heading + side * 0.5 * step
        x += (fast * math.sin(mid) + par[EAST]) * time_s
        y += (fast * math.cos(mid) + par[NORTH]) * time_s
        alt_m -= step * tas * tas / (par[RATIO] * G * math.sin(bank) * math.cos(bank))
        heading += side * step
        turned += step
        if not _clear(x, y, alt_m, top, par):
            return -np.inf, 0.0
        if step == left and step < 0.25 * TURN_STEP_RAD:
            return _straight(x, y, alt_m, end_x, end_y, top, par), heading
    return -np.inf, 0.0


@njit(cache=True, nogil=True)
def _best_turn(x, y, alt_m, heading, end_x, end_y, top, par):
    """Return the better of both sides."""
    right, right_heading = _fly(x, y, alt_m, heading, 1.0, end_x, end_y, top, par)
    left, left_heading = _fly(x, y, alt_m, heading, -1.0, end_x, end_y, top, par)
    if right >= left:
        return right, right_heading
    return left, left_heading


@njit(cache=True, nogil=True)
def _note(r, c, alt_m, heading, held_alt, held_heading, reached, top, par):
    """Keep an arrival, the best of its direction; mark the cell if the height is enough."""
    if alt_m == -np.inf:
        return
    if alt_m >= top[r, c] + par[ARRIVAL]:
        reached[r, c] = True
    sector = int((heading % (2.0 * math.pi)) / (2.0 * math.pi) * SECTORS) % SECTORS
    if alt_m > held_alt[r, c, sector]:
        held_alt[r, c, sector], held_heading[r, c, sector] = alt_m, heading


@njit(cache=True, nogil=True)
def _from_start(x, y, alt_m, heading, held_alt, held_heading, reached, top, par):
    """Fly from the start to every cell; heading NaN means any."""
    for r in range(top.shape[0]):
        for c in range(top.shape[1]):
            end_x, end_y = (c + 0.5) * par[CELL], (r + 0.5) * par[CELL]
            if math.isnan(heading):
                alt = _straight(x, y, alt_m, end_x, end_y, top, par)
                course = _heading(math.atan2(end_x - x, end_y - y), alt_m, par)
            else:
                alt, course = _best_turn(x, y, alt_m, heading, end_x, end_y, top, par)
            _note(r, c, alt, course, held_alt, held_heading, reached, top, par)


@njit(cache=True, nogil=True)
def _from_bends(stride, old_alt, old_heading, held_alt, held_heading, reached, wanted, top, par):
    """Bend at every `stride`-th cell and fly on to cells not reached yet or `wanted`."""
    n_rows, n_cols = top.shape
    over = par[EAS] * par[RATIO] / math.hypot(1.0, par[RATIO])  # slowest, at sea level
    least_loss = over / par[RATIO] / (over + math.hypot(par[EAST], par[NORTH]))
    for i in range(stride // 2, n_rows, stride):
        for j in range(stride // 2, n_cols, stride):
            x, y = (j + 0.5) * par[CELL], (i + 0.5) * par[CELL]
            for s in range(SECTORS):
                alt = old_alt[i, j, s]
                if alt == -np.inf:
                    continue
                for r in range(n_rows):
                    for c in range(n_cols):
                        if reached[r, c] and not wanted[r, c]:
                            continue
                        end_x, end_y = (c + 0.5) * par[CELL], (r + 0.5) * par[CELL]
                        least = math.hypot(end_x - x, end_y - y) * least_loss
                        need = par[CLEARANCE] if wanted[r, c] else par[ARRIVAL]
                        if not alt - least >= top[r, c] + need:  # no turn could make it cheaper
                            continue
                        got, course = _best_turn(
                            x, y, alt, old_heading[i, j, s], end_x, end_y, top, par
                        )
                        _note(r, c, got, course, held_alt, held_heading, reached, top, par)


def reachable(
    window: Window, x_m: float, y_m: float, alt_m: float, heading_rad: float | None, stride: int = 3
) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Return the cells reached straight, and those reached with up to two bends.

    Parameters
    ----------
    window
        Cell tops and the case.
    x_m, y_m, alt_m, heading_rad
        Where the flight starts in the window; None means any heading.
    stride
        Bends are tried at every such cell in both directions.
    """
    top, par = np.ascontiguousarray(window.top_m, dtype=np.float64), window.parameters()
    shape = (*top.shape, SECTORS)
    reached = np.zeros(top.shape, dtype=np.bool_)
    alt0, heading0 = np.full(shape, -np.inf), np.zeros(shape)
    start_heading = math.nan if heading_rad is None else heading_rad
    _from_start(x_m, y_m, alt_m, start_heading, alt0, heading0, reached, top, par)
    straight = reached.copy()
    alt1, heading1 = np.full(shape, -np.inf), np.zeros(shape)
    wanted = np.zeros(top.shape, dtype=np.bool_)
    wanted[stride // 2 :: stride, stride // 2 :: stride] = True  # the next bends: arrivals are kept
    _from_bends(stride, alt0, heading0, alt1, heading1, reached, wanted, top, par)
    wanted[:] = False
    _from_bends(stride, alt1, heading1, alt1.copy(), heading1.copy(), reached, wanted, top, par)
    return straight, reached
