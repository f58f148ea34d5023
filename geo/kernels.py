"""Numba kernels of the footprint: rays, fans after a turn, and the front that bends round terrain.

Every altitude label stands for one explicit path, a chain of *anchors*: fly straight to an
anchor, turn there at the set bank in the moving air, leave the arc on a straight ground track.
Each leg is walked through every cell that it crosses, so a label is never higher than the path
behind it is flown. Kernels that call one another share this file, since `cache=True` keeps old
code of a callee that lives elsewhere.

Units inside: lengths in cells, altitudes in metres, angles clockwise from grid north. Rows run
south to north. Blocked cells hold +inf. `par` is indexed by the names below.
"""

from __future__ import annotations

from math import atan2, floor, sqrt
from typing import Any

import numpy as np
from numba import njit

Any_ = Any

UNREACHED = np.float32(-1e30)  # altitude label of a cell that no path has reached
FAR = 1e30

# par[]: scalars of one solve
CELL_M, LEVEL0_M, LEVEL_STEP_M, CLEARANCE_M, FLOOR_M = 0, 1, 2, 3, 4
BANK_SIN, BANK_COS, RATIO, DOWNDRAFT_MPS, MAX_RUN = 5, 6, 7, 8, 9
JUMP_M, ROOM_M, DETOUR_CELLS, N_PAR = 10, 11, 12, 13

# air[level, ...]: glide TAS, its horizontal part, wind towards x and y, all in m/s
TAS, AIR_SPEED, WIND_X, WIND_Y = 0, 1, 2, 3

# anchors[a, ...]; TURNS is 0 where any heading may be taken without a turn
AX, AY, AZ, HX, HY, SIDE, STEP, COUNT, OFFSET, PARENT, TURNS, N_ANCHOR = range(12)

# state[...]: a ray's start: place, formula altitude, altitude cap, unit track, track index
SX, SY, SZ, CAP, DX, DY, TRACK, USABLE, N_STATE = range(9)

BLOCK_RAYS = 8  # neighbouring rays tried together once one of them finds new ground
NO_LIMIT = 1 << 30  # as an allowance: never give up
RUN_ON = 4  # cells that a ray goes on over higher labels before it gives up
GRAVITY_MPS2 = 9.80665  # standard gravity, ISO 80000-3


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
def _run_at(run: Any_, level: int, track: float) -> float:
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
def _glide_alt(run: Any_, par: Any_, z: float, track: float, distance: float) -> float:
    """Return the altitude [m] after `distance` [cells] on a track; -FAR where it cannot be held."""
    level = min(int((z - par[LEVEL0_M]) / par[LEVEL_STEP_M]), run.shape[0] - 1)
    while level >= 0:
        cells_per_m = _run_at(run, level, track)
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
def _cast(
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
    cells_per_m = _run_at(run, level, track)
    if cells_per_m <= 0.0:
        return n_touched
    slope = 1.0 / cells_per_m
    level_end = (z - par[LEVEL0_M] - level * par[LEVEL_STEP_M]) * cells_per_m
    z_at, t_at = z, 0.0
    step_c, step_r = (1 if dx > 0 else -1), (1 if dy > 0 else -1)
    gap_x = 1.0 / abs(dx) if abs(dx) > 1e-12 else FAR
    gap_y = 1.0 / abs(dy) if abs(dy) > 1e-12 else FAR
    next_x = ((c + 1 - x) if dx > 0 else (x - c)) * gap_x
    next_y = ((r + 1 - y) if dy > 0 else (y - r)) * gap_y
    clearance, floor_m = par[CLEARANCE_M], par[FLOOR_M]
    left, prune = allowance, allowance < NO_LIMIT
    while 0 <= r < rows and 0 <= c < cols:
        t = min(next_x, next_y)
        while t > level_end:
            z_at -= (level_end - t_at) * slope
            t_at = level_end
            level -= 1
            if level < 0:
                return n_touched
            cells_per_m = _run_at(run, level, track)
            if cells_per_m <= 0.0:
                return n_touched
            slope = 1.0 / cells_per_m
            level_end = t_at + par[LEVEL_STEP_M] * cells_per_m
        z_out = np.float32(min(z_at - (t - t_at) * slope, cap))
        if z_out < top[r, c] + clearance or z_out < floor_m:
            return n_touched
        if z_out > alt[r, c]:
            alt[r, c] = z_out
            ray[r, c] = ray_id
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
def _ray_start(air: Any_, par: Any_, n_tracks: int, arc: Any_, dive: float, state: Any_) -> None:
    """Fill `state` with the ray that leaves the arc (x, y, z, hx, hy) here, wings level."""
    here = np.empty(4)
    _air_at(air, par, arc[2], here)
    gx = here[AIR_SPEED] * arc[3] + here[WIND_X]
    gy = here[AIR_SPEED] * arc[4] + here[WIND_Y]
    speed = sqrt(gx * gx + gy * gy)
    state[USABLE] = 0.0
    if speed < 1e-6:
        return
    state[DX], state[DY] = gx / speed, gy / speed
    # against a wind above the airspeed a track has two headings; the table holds the faster one
    if state[DX] * arc[3] + state[DY] * arc[4] <= 0.0:
        return
    state[SX], state[SY], state[SZ], state[CAP] = arc[0], arc[1], arc[2], arc[2] - dive
    turns = atan2(state[DX], state[DY]) / (2.0 * np.pi)
    state[TRACK] = (turns - floor(turns)) * n_tracks
    state[USABLE] = 1.0


@njit(cache=True, nogil=True)
def _arc_step(air: Any_, par: Any_, arc: Any_, side: float, step: float) -> None:
    """Turn the arc state (x, y, z, hx, hy) by `step` [rad] to a side in the moving air."""
    here, below = np.empty(4), np.empty(4)
    _air_at(air, par, arc[2], here)
    v = here[TAS]
    radius_m = v * v / (GRAVITY_MPS2 * par[BANK_SIN])
    seconds = step * v * sqrt(par[BANK_COS]) / (GRAVITY_MPS2 * par[BANK_SIN])
    cos_h, sin_h = np.cos(0.5 * step), np.sin(0.5 * step) * side
    hx, hy = arc[3] * cos_h + arc[4] * sin_h, arc[4] * cos_h - arc[3] * sin_h
    arc[0] += (radius_m * step * hx + here[WIND_X] * seconds) / par[CELL_M]
    arc[1] += (radius_m * step * hy + here[WIND_Y] * seconds) / par[CELL_M]
    loss = radius_m * step / (par[RATIO] * par[BANK_COS]) + par[DOWNDRAFT_MPS] * seconds
    _air_at(air, par, arc[2] - loss, below)
    gain = (below[WIND_X] - here[WIND_X]) * hx + (below[WIND_Y] - here[WIND_Y]) * hy
    if gain > 0.0:  # the headwind falls off below: keeping the speed costs height
        loss += gain * v / GRAVITY_MPS2
    arc[2] -= loss
    arc[3], arc[4] = hx * cos_h + hy * sin_h, hy * cos_h - hx * sin_h


@njit(cache=True, nogil=True)
def dive_m(air: Any_, par: Any_, z: float) -> float:
    """Return the height [m] that it takes to speed up from v to v sqrt(n) at altitude `z` [m]."""
    here = np.empty(4)
    _air_at(air, par, z, here)
    return here[TAS] * here[TAS] * (1.0 / par[BANK_COS] - 1.0) / (2.0 * GRAVITY_MPS2)


@njit(cache=True, nogil=True)
def _clear(top: Any_, par: Any_, x: float, y: float, z: float) -> bool:
    r, c = int(floor(y)), int(floor(x))
    if r < 0 or c < 0 or r >= top.shape[0] or c >= top.shape[1]:
        return False
    return bool(z >= top[r, c] + par[CLEARANCE_M])


@njit(cache=True, nogil=True)
def fan(
    top: Any_, alt: Any_, ray: Any_, run: Any_, air: Any_, par: Any_, anchors: Any_, a: int,
    touched: Any_, thorough: bool,
) -> int:  # fmt: skip
    """Cast every ray of anchor `a` and return how many labels were raised.

    The arc is flown step by step and kept clear; where it meets the clearance the fan ends.
    `thorough` casts all rays to their end; otherwise one ray of each block is tried first.
    """
    anchor = anchors[a]
    n, turning, offset = int(anchor[COUNT]), anchor[TURNS] > 0.0, int(anchor[OFFSET])
    arc = anchor[:5].copy()
    dive = dive_m(air, par, arc[2]) if turning else 0.0
    states = np.empty((BLOCK_RAYS, N_STATE))
    allowance = NO_LIMIT if thorough else int(par[DETOUR_CELLS])
    n_touched, k, open_arc = 0, 0, True
    n_half = int(np.pi / anchor[STEP]) if anchor[STEP] > 0.0 else n
    while k < n and open_arc:
        m = 0
        while m < BLOCK_RAYS and k + m < n:
            if not _clear(top, par, arc[0], arc[1], arc[2] - dive):
                open_arc = False
                break
            _ray_start(air, par, run.shape[1], arc, dive, states[m])
            m += 1
            if turning:
                _arc_step(air, par, arc, anchor[SIDE], anchor[STEP])
            else:
                _turn_only(arc, anchor[SIDE], anchor[STEP])
        eager = thorough and k <= n_half
        if not eager and thorough:
            allowance = int(par[DETOUR_CELLS])
        first = m // 2
        before = n_touched
        if m > 0 and states[first, USABLE] > 0.0:
            n_touched = _cast(
                top, alt, ray, run, par, states[first], offset + k + first, offset,
                allowance, touched, n_touched,
            )  # fmt: skip
        if eager or n_touched > before:
            for j in range(m):
                if j != first and states[j, USABLE] > 0.0:
                    n_touched = _cast(
                        top, alt, ray, run, par, states[j], offset + k + j, offset,
                        allowance, touched, n_touched,
                    )  # fmt: skip
        k += m
    return n_touched


@njit(cache=True, nogil=True)
def _turn_only(arc: Any_, side: float, step: float) -> None:
    cos, sin = np.cos(step), np.sin(step) * side
    arc[3], arc[4] = arc[3] * cos + arc[4] * sin, arc[4] * cos - arc[3] * sin


@njit(cache=True, nogil=True)
def replay(air: Any_, par: Any_, n_tracks: int, anchors: Any_, a: int, k: int) -> Any_:
    """Return the start of ray `k` of anchor `a` again, digit for digit as the fan cast it."""
    anchor = anchors[a]
    arc = anchor[:5].copy()
    turning = anchor[TURNS] > 0.0
    dive = dive_m(air, par, arc[2]) if turning else 0.0
    for _ in range(k):
        if turning:
            _arc_step(air, par, arc, anchor[SIDE], anchor[STEP])
        else:
            _turn_only(arc, anchor[SIDE], anchor[STEP])
    state = np.empty(N_STATE)
    _ray_start(air, par, n_tracks, arc, dive, state)
    return state


@njit(cache=True, nogil=True)
def nearest_on_ray(state: Any_, r: int, c: int) -> float:
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
def _sides(top: Any_, alt: Any_, par: Any_, r: int, c: int, dx: float, dy: float) -> int:
    """Return a bit mask: 1 where lower ground lies right of the track (dx, dy), 2 where left."""
    rows, cols = top.shape
    here, mask = alt[r, c], 0
    if here < par[FLOOR_M] + par[JUMP_M]:
        return 0
    for j in range(4):
        nr, nc = r + (1, -1, 0, 0)[j], c + (0, 0, 1, -1)[j]
        if nr < 0 or nc < 0 or nr >= rows or nc >= cols:
            continue
        if here - alt[nr, nc] > par[JUMP_M] and (
            here > top[nr, nc] + par[CLEARANCE_M] + par[ROOM_M]
        ):
            across = dx * (nr - r) - dy * (nc - c)
            mask |= 2 if across > 0.0 else 1
    return mask


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
def _add_anchor(
    run: Any_, air: Any_, par: Any_, anchors: Any_, n_anchors: int, ray_id: int, cell: int,
    cols: int, mask_state: Any_,
) -> bool:  # fmt: skip
    """Write anchor number `n_anchors` where ray `ray_id` passes `cell`; side still open."""
    a = find_anchor(anchors, n_anchors, ray_id)
    state = replay(air, par, run.shape[1], anchors, a, ray_id - int(anchors[a, OFFSET]))
    r, c = cell // cols, cell % cols
    t = nearest_on_ray(state, r, c)
    z = min(_glide_alt(run, par, state[SZ], state[TRACK], t), state[CAP])
    new = anchors[n_anchors]
    new[AX], new[AY], new[AZ] = state[SX] + t * state[DX], state[SY] + t * state[DY], z
    new[PARENT], new[TURNS] = ray_id, 1.0
    reach = max((z - par[FLOOR_M]) * par[MAX_RUN], 8.0)
    new[STEP] = 1.0 / reach
    new[COUNT] = floor(np.pi * reach)
    new[OFFSET] = anchors[n_anchors - 1, OFFSET] + anchors[n_anchors - 1, COUNT]
    mask_state[0], mask_state[1] = state[DX], state[DY]
    return heading_for(air, par, z, state[DX], state[DY], new[HX : HY + 1])


@njit(cache=True, nogil=True)
def spread(
    top: Any_, alt: Any_, ray: Any_, run: Any_, air: Any_, par: Any_, anchors: Any_,
    n_anchors: int, cancel: Any_, spacing: int,
) -> int:  # fmt: skip
    """Bend paths round terrain: fans from the edge of what is reached, highest edge cell first.

    An edge cell has a neighbour that it flies clear of and whose own label is lower by more than
    `par[JUMP_M]`. `spacing` [cells] thins the anchors. Returns the number of anchors, negative
    when stopped by `cancel`.
    """
    rows, cols = top.shape
    bucket_m = 2.0
    base = par[FLOOR_M]
    n_buckets = max(int((par[LEVEL0_M] + air.shape[0] * par[LEVEL_STEP_M] - base) / bucket_m), 1)
    head = np.full(n_buckets + 1, -1, dtype=np.int32)
    link = np.full(rows * cols, -2, dtype=np.int32)
    touched = np.empty(max(rows * cols // 4, 4096), dtype=np.int32)
    marks = np.zeros((rows // spacing + 1, cols // spacing + 1), dtype=np.uint8)
    track = np.empty(2)
    for r in range(rows):
        for c in range(cols):
            if alt[r, c] > UNREACHED and _sides(top, alt, par, r, c, 1.0, 0.0):
                _push(head, link, base, bucket_m, alt[r, c], r * cols + c)
    bucket = n_buckets
    while bucket >= 0:
        cell = head[bucket]
        if cell < 0:
            bucket -= 1
            continue
        head[bucket] = link[cell]
        link[cell] = -2
        r, c = cell // cols, cell % cols
        seen = marks[r // spacing, c // spacing]
        if seen == 3 or not _sides(top, alt, par, r, c, 1.0, 0.0):
            continue
        if n_anchors + 2 > anchors.shape[0]:
            return n_anchors
        if cancel[0]:
            return -1
        if not _add_anchor(run, air, par, anchors, n_anchors, ray[r, c], cell, cols, track):
            continue
        mask = _sides(top, alt, par, r, c, track[0], track[1]) & ~seen
        marks[r // spacing, c // spacing] |= mask
        for bit in range(1, 3):
            if not mask & bit:
                continue
            anchor = anchors[n_anchors]
            if mask == 3 and bit == 2:
                anchor[:] = anchors[n_anchors - 1]
                anchor[OFFSET] += anchor[COUNT]
            anchor[SIDE] = 1.0 if bit == 1 else -1.0
            n_touched = fan(top, alt, ray, run, air, par, anchors, n_anchors, touched, False)
            n_anchors += 1
            for j in range(min(n_touched, touched.shape[0])):
                tr, tc = touched[j] // cols, touched[j] % cols
                if link[touched[j]] == -2 and _sides(top, alt, par, tr, tc, 1.0, 0.0):
                    _push(head, link, base, bucket_m, alt[tr, tc], touched[j])
    return n_anchors


@njit(cache=True, nogil=True)
def _push(head: Any_, link: Any_, base: float, bucket_m: float, z: float, cell: int) -> None:
    b = min(max(int((z - base) / bucket_m), 0), head.shape[0] - 1)
    link[cell] = head[b]
    head[b] = cell


@njit(cache=True, nogil=True)
def is_clear(top: Any_, par: Any_, anchor: Any_) -> bool:
    """Return whether an anchor lies in the window and keeps the clearance."""
    return _clear(top, par, anchor[AX], anchor[AY], anchor[AZ])


@njit(cache=True, nogil=True)
def fly_on(
    top: Any_, run: Any_, air: Any_, par: Any_, anchor: Any_, seconds: float, end: Any_
) -> bool:
    """Fly straight on from an anchor for some seconds and write x, y, z of the end to `end` (3,).

    False where the track cannot be held or the clearance is not kept on the way.
    """
    state, here = np.empty(N_STATE), np.empty(4)
    _ray_start(air, par, run.shape[1], anchor[:5], 0.0, state)
    if state[USABLE] == 0.0:
        return False
    _air_at(air, par, anchor[AZ], here)
    gx = here[AIR_SPEED] * anchor[HX] + here[WIND_X]
    gy = here[AIR_SPEED] * anchor[HY] + here[WIND_Y]
    distance = sqrt(gx * gx + gy * gy) * seconds / par[CELL_M]
    pieces = int(distance * 4.0) + 1
    for i in range(pieces + 1):
        t = distance * i / pieces
        end[0], end[1] = state[SX] + t * state[DX], state[SY] + t * state[DY]
        end[2] = _glide_alt(run, par, state[SZ], state[TRACK], t)
        if not _clear(top, par, end[0], end[1], end[2]):
            return False
    return True


@njit(cache=True, nogil=True)
def alt_along(run: Any_, par: Any_, state: Any_, distance: float) -> float:
    """Return the altitude [m] of a ray after `distance` [cells]."""
    return min(_glide_alt(run, par, state[SZ], state[TRACK], distance), state[CAP])


@njit(cache=True, nogil=True)
def starts(air: Any_, par: Any_, n_tracks: int, anchors: Any_, a: int, count: int) -> Any_:
    """Return the starts of the first `count` rays of an anchor, shape ``(count, N_STATE)``."""
    anchor = anchors[a]
    arc, turning = anchor[:5].copy(), anchor[TURNS] > 0.0
    dive = dive_m(air, par, arc[2]) if turning else 0.0
    out = np.empty((count, N_STATE))
    for k in range(count):
        _ray_start(air, par, n_tracks, arc, dive, out[k])
        if turning:
            _arc_step(air, par, arc, anchor[SIDE], anchor[STEP])
        else:
            _turn_only(arc, anchor[SIDE], anchor[STEP])
    return out


@njit(cache=True, nogil=True)
def has_room(top: Any_, air: Any_, par: Any_, arc: Any_, to_m: float) -> bool:
    """Return whether a drifting circle, either way round, loses height from the arc state down to
    `to_m` [m] and keeps the clearance. Source: the turn of `_arc_step`.
    """
    for side in (1.0, -1.0):
        here = arc.copy()
        dive = dive_m(air, par, here[2]) if here[2] > to_m else 0.0
        clear = True
        while here[2] > to_m and clear:
            _arc_step(air, par, here, side, 0.1)
            clear = _clear(top, par, here[0], here[1], max(here[2] - dive, to_m))
        if clear:
            return True
    return False
