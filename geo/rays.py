"""Numba kernels of rays and arcs: one straight glide, one turn in moving air.

A ray leaves an arc on a straight ground track and is walked through every cell that it crosses;
it raises the labels under it until it meets the clearance. Array layouts: `geo.layout`.
"""

from __future__ import annotations

from math import atan2, floor, sqrt
from typing import Any as Any_

import numpy as np
from numba import njit

from geo.layout import (
    ADVANCE,
    AIR_SPEED,
    AX,
    AY,
    AZ,
    BANK_COS,
    BANK_SIN,
    CAP,
    CELL_M,
    CLEARANCE_M,
    COS_HALF,
    DIVE,
    DOWNDRAFT_MPS,
    DX,
    DY,
    FAR,
    FLOOR_M,
    FLOWN,
    GRAVITY_MPS2,
    LEAST_GAIN_M,
    LEVEL0_M,
    LEVEL_STEP_M,
    LOSS,
    N_ARC,
    N_STATE,
    NO_LIMIT,
    OFFSET,
    RATIO,
    RUN_ON,
    SECONDS,
    SHEAR_S,
    SIDE,
    SIN_HALF,
    SPEED,
    SPEED_UP,
    SPEEDS_UP,
    STEP,
    SX,
    SY,
    SZ,
    TAS,
    TRACK,
    TURNS,
    WIND_ERROR_MPS,
    WIND_X,
    WIND_Y,
    WX,
    WX_PER_M,
    WY,
    WY_PER_M,
    Z_FROM,
)


@njit(cache=True, nogil=True)
def _air_at(air: Any_, par: Any_, z: float, out: Any_) -> None:
    """Interpolate the air table at altitude `z` into `out` (4,)."""
    f = (z - par[LEVEL0_M]) / par[LEVEL_STEP_M]
    last = air.shape[0] - 2
    i = min(max(int(f), 0), last)
    f = min(max(f - i, 0.0), 1.0)
    for j in range(4):
        out[j] = air[i, j] + f * (air[i + 1, j] - air[i, j])


@njit(cache=True, nogil=True)
def run_at(run: Any_, level: int, track: float) -> Any_:
    """Return cells flown per metre of height in a level interval on a track index."""
    n = run.shape[1]
    i = int(track)
    f = track - i
    i %= n
    a, b = run[level, i], run[level, (i + 1) % n]
    if a <= 0.0 or b <= 0.0:
        return 0.0
    return a + f * (b - a)


@njit(cache=True, nogil=True)
def glide_alt(run: Any_, par: Any_, z: float, track: float, distance: float) -> Any_:
    """Return the altitude [m] after `distance` [cells] on a track; -FAR where it cannot be held."""
    level = min(int((z - par[LEVEL0_M]) / par[LEVEL_STEP_M]), run.shape[0] - 1)
    while level >= 0:
        cells_per_m = run_at(run, level, track)
        if cells_per_m <= 0.0:
            return -FAR
        bottom = par[LEVEL0_M] + level * par[LEVEL_STEP_M]
        here = (z - bottom) * cells_per_m
        if distance <= here:
            return z - distance / cells_per_m
        distance -= here
        z = bottom
        level -= 1
    return -FAR


@njit(cache=True, nogil=True)
def cast(
    top: Any_, alt: Any_, ray: Any_, run: Any_, par: Any_, state: Any_, ray_id: int, own: int,
    allowance: int, touched: Any_, n_touched: int,
) -> int:  # fmt: skip
    """Walk one straight glide cell by cell and raise the labels under it.

    It ends at the clearance, at the map's edge, below every place's arrival height, on a track
    that cannot be held, or after `allowance` cells (then `RUN_ON`) over labels at least as high;
    labels of rays from `own` on belong to the same fan and do not count.
    Cells raised are listed in `touched` while it has room. Returns the new count, room or not.
    """
    rows, cols = top.shape
    x, y, dx, dy = state[SX], state[SY], state[DX], state[DY]
    z, cap, track = state[SZ], state[CAP], state[TRACK]
    c, r = int(floor(x)), int(floor(y))
    level = min(int((z - par[LEVEL0_M]) / par[LEVEL_STEP_M]), run.shape[0] - 1)
    if level < 0:
        return n_touched
    cells_per_m = run_at(run, level, track)
    if cells_per_m <= 0.0:
        return n_touched
    slope = 1.0 / cells_per_m
    level_end = (z - par[LEVEL0_M] - level * par[LEVEL_STEP_M]) * cells_per_m
    z_at, t_at = z, 0.0
    step_c, step_r = (1 if dx > 0 else -1), (1 if dy > 0 else -1)
    gap_x = 1.0 / abs(dx) if abs(dx) > 1e-12 else FAR
    gap_y = 1.0 / abs(dy) if abs(dy) > 1e-12 else FAR
    # along a grid line the other line is never met
    next_x = FAR if gap_x == FAR else ((c + 1 - x) if dx > 0 else (x - c)) * gap_x
    next_y = FAR if gap_y == FAR else ((r + 1 - y) if dy > 0 else (y - r)) * gap_y
    clearance, floor_m = par[CLEARANCE_M], par[FLOOR_M]
    left, prune = allowance, allowance < NO_LIMIT
    state[FLOWN] = 0.0
    gain = np.float32(LEAST_GAIN_M if prune else 0.0)
    while 0 <= r < rows and 0 <= c < cols:
        t = min(next_x, next_y)
        while t > level_end:
            z_at -= (level_end - t_at) * slope
            t_at = level_end
            level -= 1
            if level < 0:
                return n_touched
            cells_per_m = run_at(run, level, track)
            if cells_per_m <= 0.0:
                return n_touched
            slope = 1.0 / cells_per_m
            level_end = t_at + par[LEVEL_STEP_M] * cells_per_m
        z_out = np.float32(min(z_at - (t - t_at) * slope, cap))
        if z_out < top[r, c] + clearance or z_out < floor_m:
            return n_touched
        # where the centre lies beyond the exit, on the ray's line, the label is the lower one there
        beyond = max((c + 0.5 - x) * dx + (r + 0.5 - y) * dy, t)
        z_label = np.float32(min(z_at - (beyond - t_at) * slope, cap))
        if z_label > alt[r, c] + gain:
            alt[r, c] = z_label
            ray[r, c] = ray_id
            state[FLOWN] = t
            if n_touched < touched.shape[0]:
                touched[n_touched] = r * cols + c
            n_touched += 1
            if left < allowance:
                left = RUN_ON
        elif prune and ray[r, c] < own:
            left -= 1
            if left <= 0:
                return n_touched
        if next_x < next_y:
            c += step_c
            next_x += gap_x
        else:
            r += step_r
            next_y += gap_y
    return n_touched


@njit(cache=True, nogil=True)
def _begin_arc(air: Any_, par: Any_, anchor: Any_, z: float, arc: Any_) -> None:
    """Write the constants of an arc's steps at altitude `z`; they hold for one table level."""
    here, below = np.empty(4), np.empty(4)
    _air_at(air, par, z, here)
    _air_at(air, par, z - par[LEVEL_STEP_M], below)
    v, step = here[TAS], anchor[STEP]
    radius_m = v * v / (GRAVITY_MPS2 * par[BANK_SIN])
    seconds = step * v * sqrt(par[BANK_COS]) / (GRAVITY_MPS2 * par[BANK_SIN])
    turning = anchor[TURNS]  # 0: any heading, no turn charged
    arc[ADVANCE] = turning * radius_m * step / par[CELL_M]
    arc[SECONDS] = turning * seconds / par[CELL_M]
    arc[LOSS] = turning * (
        radius_m * step / (par[RATIO] * par[BANK_COS])
        + (par[DOWNDRAFT_MPS] + par[WIND_ERROR_MPS] / par[RATIO]) * seconds
    )  # the way that the wind error carries off while turning must be flown back
    arc[WX], arc[WY], arc[Z_FROM], arc[SPEED] = here[WIND_X], here[WIND_Y], z, here[AIR_SPEED]
    arc[WX_PER_M] = (here[WIND_X] - below[WIND_X]) / par[LEVEL_STEP_M]
    arc[WY_PER_M] = (here[WIND_Y] - below[WIND_Y]) / par[LEVEL_STEP_M]
    arc[COS_HALF], arc[SIN_HALF] = np.cos(0.5 * step), np.sin(0.5 * step) * anchor[SIDE]
    arc[SHEAR_S] = v / GRAVITY_MPS2
    dive = v * v * (1.0 / par[BANK_COS] - 1.0) / (2.0 * GRAVITY_MPS2)
    arc[DIVE] = max(arc[DIVE], turning * dive)


@njit(cache=True, nogil=True)
def new_arc(air: Any_, par: Any_, anchor: Any_) -> Any_:
    """Return the state of an arc that begins at an anchor: x, y, z, heading, constants."""
    arc = np.zeros(N_ARC)
    arc[:5] = anchor[:5]
    arc[SPEED_UP] = anchor[SPEEDS_UP]
    _begin_arc(air, par, anchor, arc[2], arc)
    return arc


@njit(cache=True, nogil=True)
def arc_step(air: Any_, par: Any_, anchor: Any_, arc: Any_) -> None:
    """Turn by one step in the moving air."""
    if arc[2] < arc[Z_FROM] - par[LEVEL_STEP_M]:
        _begin_arc(air, par, anchor, arc[2], arc)
    cos_h, sin_h = arc[COS_HALF], arc[SIN_HALF]
    hx, hy = arc[3] * cos_h + arc[4] * sin_h, arc[4] * cos_h - arc[3] * sin_h
    drop = arc[2] - arc[Z_FROM]
    arc[0] += arc[ADVANCE] * hx + (arc[WX] + drop * arc[WX_PER_M]) * arc[SECONDS]
    arc[1] += arc[ADVANCE] * hy + (arc[WY] + drop * arc[WY_PER_M]) * arc[SECONDS]
    fade = -(arc[WX_PER_M] * hx + arc[WY_PER_M] * hy) * arc[SHEAR_S]
    # a headwind that falls off below costs height to keep the speed; nothing is credited
    arc[2] -= arc[LOSS] * (1.0 + max(fade, 0.0))
    arc[3], arc[4] = hx * cos_h + hy * sin_h, hy * cos_h - hx * sin_h


@njit(cache=True, nogil=True)
def ray_start(arc: Any_, entry: Any_, state: Any_) -> bool:
    """Write the ray that leaves the arc here, wings level; False where no track is held.

    `entry` holds for each track the height [m] that it takes to speed up for the straight glide.
    """
    drop = arc[2] - arc[Z_FROM]
    gx = arc[SPEED] * arc[3] + arc[WX] + drop * arc[WX_PER_M]
    gy = arc[SPEED] * arc[4] + arc[WY] + drop * arc[WY_PER_M]
    speed = sqrt(gx * gx + gy * gy)
    # against a wind above the airspeed a track has two headings; the table holds the faster one
    if speed < 1e-6 or gx * arc[3] + gy * arc[4] <= 0.0:
        return False
    state[DX], state[DY] = gx / speed, gy / speed
    turns = atan2(gx, gy) / (2.0 * np.pi)
    n_tracks = entry.shape[0]
    track = (turns - floor(turns)) * n_tracks
    i = int(track) % n_tracks
    speed_up = arc[SPEED_UP] * max(entry[i], entry[(i + 1) % n_tracks])
    state[SX], state[SY], state[TRACK] = arc[0], arc[1], track
    state[SZ], state[CAP] = arc[2] - speed_up, arc[2] - arc[DIVE]
    return True


@njit(cache=True, nogil=True)
def clear(top: Any_, par: Any_, x: float, y: float, z: float) -> bool:
    """Return whether a point lies in the window and keeps the clearance."""
    r, c = int(floor(y)), int(floor(x))
    if r < 0 or c < 0 or r >= top.shape[0] or c >= top.shape[1]:
        return False
    return bool(z >= top[r, c] + par[CLEARANCE_M])


@njit(cache=True, nogil=True)
def starts(air: Any_, par: Any_, entry: Any_, anchors: Any_, a: int, count: int) -> Any_:
    """Return the starts of the first `count` rays of an anchor, shape ``(count, N_STATE)``.

    Digit for digit as the fan cast them; NaN where no track is held.
    """
    arc = new_arc(air, par, anchors[a])
    out = np.full((count, N_STATE), np.nan)
    for k in range(count):
        ray_start(arc, entry, out[k])
        arc_step(air, par, anchors[a], arc)
    return out


@njit(cache=True, nogil=True)
def replay(air: Any_, par: Any_, entry: Any_, anchors: Any_, a: int, k: int) -> Any_:
    """Return the start of ray `k` of anchor `a` again, digit for digit as the fan cast it."""
    arc, state = new_arc(air, par, anchors[a]), np.full(N_STATE, np.nan)
    for _ in range(k):
        arc_step(air, par, anchors[a], arc)
    ray_start(arc, entry, state)
    return state


@njit(cache=True, nogil=True)
def nearest_on_ray(state: Any_, r: int, c: int) -> Any_:
    """Return where on the ray [cells from its start], inside cell (r, c), its centre is nearest."""
    t_in, t_out = 0.0, FAR
    for axis in range(2):
        d = state[DX] if axis == 0 else state[DY]
        low = (c - state[SX]) if axis == 0 else (r - state[SY])
        if abs(d) > 1e-12:
            t0, t1 = low / d, (low + 1.0) / d
            t_in, t_out = max(t_in, min(t0, t1)), min(t_out, max(t0, t1))
    t = (c + 0.5 - state[SX]) * state[DX] + (r + 0.5 - state[SY]) * state[DY]
    return max(t_in, min(t, t_out))


@njit(cache=True, nogil=True)
def find_anchor(anchors: Any_, n_anchors: int, ray_id: int) -> int:
    """Return the anchor whose fan holds `ray_id` (offsets ascend)."""
    low, high = 0, n_anchors - 1
    while low < high:
        middle = (low + high + 1) // 2
        if anchors[middle, OFFSET] <= ray_id:
            low = middle
        else:
            high = middle - 1
    return low


@njit(cache=True, nogil=True)
def heading_for(air: Any_, par: Any_, z: float, dx: float, dy: float, out: Any_) -> bool:
    """Write the air heading (unit x, y) that holds ground track (dx, dy); False if none does."""
    here = np.empty(4)
    _air_at(air, par, z, here)
    across = dx * here[WIND_Y] - dy * here[WIND_X]
    rest = here[AIR_SPEED] * here[AIR_SPEED] - across * across
    if rest <= 0.0:
        return False
    along = sqrt(rest)
    out[0] = (dx * along + dy * across) / here[AIR_SPEED]
    out[1] = (dy * along - dx * across) / here[AIR_SPEED]
    return True


@njit(cache=True, nogil=True)
def is_clear(top: Any_, par: Any_, anchor: Any_) -> bool:
    """Return whether an anchor lies in the window and keeps the clearance."""
    return clear(top, par, anchor[AX], anchor[AY], anchor[AZ])


@njit(cache=True, nogil=True)
def fly_on(
    top: Any_, run: Any_, entry: Any_, air: Any_, par: Any_, anchor: Any_, seconds: float, end: Any_
) -> bool:
    """Fly straight on from an anchor for some seconds and write x, y, z of the end to `end` (3,).

    Where the track is not held the wind carries the aeroplane off with its nose where it points.
    False where the clearance is not kept on the way.
    """
    state, arc = np.empty(N_STATE), new_arc(air, par, anchor)
    held = ray_start(arc, entry, state) and run_at(run, run.shape[0] - 1, state[TRACK]) > 0.0
    sink_mps = arc[SHEAR_S] * GRAVITY_MPS2 / par[RATIO] + par[DOWNDRAFT_MPS]
    gx, gy = arc[SPEED] * arc[3] + arc[WX], arc[SPEED] * arc[4] + arc[WY]
    distance = sqrt(gx * gx + gy * gy) * seconds / par[CELL_M]
    pieces = int(distance * 4.0) + 1
    for i in range(pieces + 1):
        t = distance * i / pieces
        away = seconds * i / pieces / par[CELL_M]
        end[0], end[1] = arc[0] + gx * away, arc[1] + gy * away
        if held:
            end[2] = glide_alt(run, par, state[SZ], state[TRACK], t)
        else:
            end[2] = arc[2] - sink_mps * seconds * i / pieces
        if not clear(top, par, end[0], end[1], end[2]):
            return False
    return True


@njit(cache=True, nogil=True)
def alt_along(run: Any_, par: Any_, state: Any_, distance: float) -> Any_:
    """Return the altitude [m] of a ray after `distance` [cells]."""
    return min(glide_alt(run, par, state[SZ], state[TRACK], distance), state[CAP])


@njit(cache=True, nogil=True)
def has_room(top: Any_, air: Any_, par: Any_, anchor: Any_, to_m: float) -> bool:
    """Return whether a drifting circle loses height from an anchor to `to_m` [m] and stays clear.

    Either way round will do.
    """
    for side in (1.0, -1.0):
        anchor[SIDE] = side
        arc = new_arc(air, par, anchor)
        free = True
        while arc[2] > to_m and free:
            arc_step(air, par, anchor, arc)
            free = clear(top, par, arc[0], arc[1], max(arc[2] - arc[DIVE], to_m))
        if free:
            return True
    return False
