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
AX, AY, AZ, HX, HY, SIDE, STEP, COUNT, OFFSET, PARENT, TURNS, FOUND, N_ANCHOR = range(13)

# state[...]: a ray's start: place, formula altitude, altitude cap, unit track, track index
SX, SY, SZ, CAP, DX, DY, TRACK, N_STATE = range(8)

# arc[...]: x, y, z, heading x, heading y, then the constants of its steps
ADVANCE, SECONDS, LOSS, WX, WY, Z_FROM, SPEED, WX_PER_M, WY_PER_M = range(5, 14)
COS_HALF, SIN_HALF, SHEAR_S, DIVE, N_ARC = range(14, 19)

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
        radius_m * step / (par[RATIO] * par[BANK_COS]) + par[DOWNDRAFT_MPS] * seconds
    )
    arc[WX], arc[WY], arc[Z_FROM], arc[SPEED] = here[WIND_X], here[WIND_Y], z, here[AIR_SPEED]
    arc[WX_PER_M] = (here[WIND_X] - below[WIND_X]) / par[LEVEL_STEP_M]
    arc[WY_PER_M] = (here[WIND_Y] - below[WIND_Y]) / par[LEVEL_STEP_M]
    arc[COS_HALF], arc[SIN_HALF] = np.cos(0.5 * step), np.sin(0.5 * step) * anchor[SIDE]
    arc[SHEAR_S] = v / GRAVITY_MPS2
    dive = v * v * (1.0 / par[BANK_COS] - 1.0) / (2.0 * GRAVITY_MPS2)
    arc[DIVE] = max(arc[DIVE], turning * dive)


@njit(cache=True, nogil=True)
def _new_arc(air: Any_, par: Any_, anchor: Any_) -> Any_:
    """Return the state of an arc that begins at an anchor: x, y, z, heading, constants."""
    arc = np.zeros(N_ARC)
    arc[:5] = anchor[:5]
    _begin_arc(air, par, anchor, arc[2], arc)
    return arc


@njit(cache=True, nogil=True)
def _arc_step(air: Any_, par: Any_, anchor: Any_, arc: Any_) -> None:
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
def _ray_start(arc: Any_, n_tracks: int, state: Any_) -> bool:
    """Write the ray that leaves the arc here, wings level; False where no track is held."""
    drop = arc[2] - arc[Z_FROM]
    gx = arc[SPEED] * arc[3] + arc[WX] + drop * arc[WX_PER_M]
    gy = arc[SPEED] * arc[4] + arc[WY] + drop * arc[WY_PER_M]
    speed = sqrt(gx * gx + gy * gy)
    # against a wind above the airspeed a track has two headings; the table holds the faster one
    if speed < 1e-6 or gx * arc[3] + gy * arc[4] <= 0.0:
        return False
    state[DX], state[DY] = gx / speed, gy / speed
    state[SX], state[SY], state[SZ], state[CAP] = arc[0], arc[1], arc[2], arc[2] - arc[DIVE]
    turns = atan2(gx, gy) / (2.0 * np.pi)
    state[TRACK] = (turns - floor(turns)) * n_tracks
    return True


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
    n, offset = int(anchor[COUNT]), int(anchor[OFFSET])
    arc, n_tracks = _new_arc(air, par, anchor), run.shape[1]
    arcs, state = np.empty((BLOCK_RAYS, N_ARC)), np.empty(N_STATE)
    half = int(np.pi / anchor[STEP]) if anchor[TURNS] > 0.0 else n
    n_touched, k, open_arc = 0, 0, True
    while k < n and open_arc:
        m = 0
        while m < BLOCK_RAYS and k + m < n:
            if not _clear(top, par, arc[0], arc[1], arc[2] - arc[DIVE]):
                open_arc = False
                break
            arcs[m] = arc
            m += 1
            _arc_step(air, par, anchor, arc)
        eager = thorough and k <= half
        allowance = NO_LIMIT if eager else int(par[DETOUR_CELLS])
        first, before = m // 2, n_touched
        for j in range(m):
            # the middle ray goes first; the others follow where it has found new ground
            q = first if j == 0 else (j - 1 if j <= first else j)
            if j == 1 and not eager and n_touched == before:
                break
            if _ray_start(arcs[q], n_tracks, state):
                n_touched = _cast(
                    top, alt, ray, run, par, state, offset + k + q, offset, allowance,
                    touched, n_touched,
                )  # fmt: skip
        k += m
    return n_touched


@njit(cache=True, nogil=True)
def starts(air: Any_, par: Any_, n_tracks: int, anchors: Any_, a: int, count: int) -> Any_:
    """Return the starts of the first `count` rays of an anchor, shape ``(count, N_STATE)``.

    Digit for digit as the fan cast them; NaN where no track is held.
    """
    arc = _new_arc(air, par, anchors[a])
    out = np.full((count, N_STATE), np.nan)
    for k in range(count):
        _ray_start(arc, n_tracks, out[k])
        _arc_step(air, par, anchors[a], arc)
    return out


@njit(cache=True, nogil=True)
def replay(air: Any_, par: Any_, n_tracks: int, anchors: Any_, a: int, k: int) -> Any_:
    """Return the start of ray `k` of anchor `a` again, digit for digit as the fan cast it."""
    arc, state = _new_arc(air, par, anchors[a]), np.full(N_STATE, np.nan)
    for _ in range(k):
        _arc_step(air, par, anchors[a], arc)
    _ray_start(arc, n_tracks, state)
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
            anchor[FOUND] = n_touched
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
    state, arc = np.empty(N_STATE), _new_arc(air, par, anchor)
    if not _ray_start(arc, run.shape[1], state):
        return False
    gx, gy = arc[SPEED] * arc[3] + arc[WX], arc[SPEED] * arc[4] + arc[WY]
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
def has_room(top: Any_, air: Any_, par: Any_, anchor: Any_, to_m: float) -> bool:
    """Return whether a drifting circle, either way round, loses height from an anchor down to
    `to_m` [m] and keeps the clearance.
    """
    for side in (1.0, -1.0):
        anchor[SIDE] = side
        arc = _new_arc(air, par, anchor)
        clear = True
        while arc[2] > to_m and clear:
            _arc_step(air, par, anchor, arc)
            clear = _clear(top, par, arc[0], arc[1], max(arc[2] - arc[DIVE], to_m))
        if clear:
            return True
    return False
