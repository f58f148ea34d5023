"""Numba kernels of the front: fans of rays after a turn, and the search that bends round terrain.

Every altitude label stands for one explicit path, a chain of *anchors*: fly straight to an
anchor, turn there at the set bank in the moving air, leave the arc on a straight ground track.
Each leg is walked through every cell that it crosses, so a label is never higher than the path
behind it is flown. Units and array layouts are those of `geo.layout`.
"""

from __future__ import annotations

from math import floor
from typing import Any as Any_

import numpy as np
from numba import njit

from geo.layout import (
    AX,
    AY,
    AZ,
    BLOCK_RAYS,
    CAP,
    CLEARANCE_M,
    COUNT,
    DETOUR_CELLS,
    DIVE,
    DX,
    DY,
    FLOOR_M,
    FLOWN,
    HX,
    HY,
    JUMP_M,
    LEVEL0_M,
    LEVEL_STEP_M,
    MAX_RUN,
    N_ARC,
    N_STATE,
    NO_LIMIT,
    OFFSET,
    PARENT,
    REACTION_CELLS,
    ROOM_M,
    SIDE,
    SPEEDS_UP,
    STEP,
    SX,
    SY,
    SZ,
    TRACK,
    TURNS,
    UNREACHED,
)
from geo.rays import (
    arc_step,
    cast,
    clear,
    find_anchor,
    glide_alt,
    heading_for,
    nearest_on_ray,
    new_arc,
    ray_start,
    replay,
)

SETTLED = 1.0  # share of the way on which a turn's speed is lost, flown before the next turn


@njit(cache=True, nogil=True)
def fan(
    top: Any_, alt: Any_, ray: Any_, run: Any_, entry: Any_, air: Any_, par: Any_, anchors: Any_,
    a: int, touched: Any_, thorough: bool, cancel: Any_,
) -> int:  # fmt: skip
    """Cast every ray of anchor `a` and return how many labels were raised.

    The arc is flown step by step and kept clear; where it meets the clearance the fan ends.
    `cancel` ends it early. `thorough` casts all rays to their end; otherwise one ray of each
    block is tried first.
    """
    anchor = anchors[a]
    n, offset = int(anchor[COUNT]), int(anchor[OFFSET])
    arc = new_arc(air, par, anchor)
    arcs, state = np.empty((BLOCK_RAYS, N_ARC)), np.empty(N_STATE)
    n_touched, k, open_arc = 0, 0, True
    while k < n and open_arc and not cancel[0]:
        m = 0
        while m < BLOCK_RAYS and k + m < n:
            if not clear(top, par, arc[0], arc[1], arc[2] - arc[DIVE]):
                open_arc = False
                break
            arcs[m] = arc
            m += 1
            arc_step(air, par, anchor, arc)
        allowance = NO_LIMIT if thorough else int(par[DETOUR_CELLS])
        first, every = m // 2, 1
        if m and ray_start(arcs[first], entry, state):
            before = n_touched
            n_touched = cast(
                top, alt, ray, run, par, state, offset + k + first, offset, allowance,
                touched, n_touched,
            )  # fmt: skip
            if not thorough:
                # no finer than one cell at twice the distance that the middle ray was of use
                every = (
                    m if n_touched == before else int(0.5 / (anchor[STEP] * state[FLOWN] + 1e-9))
                )
                every = min(max(every, 1), m)
        for q in range(0, m, every):
            if q != first and every < m and ray_start(arcs[q], entry, state):
                n_touched = cast(
                    top, alt, ray, run, par, state, offset + k + q, offset, allowance,
                    touched, n_touched,
                )  # fmt: skip
        k += m
    return n_touched


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
def _add_anchor(
    run: Any_, entry: Any_, air: Any_, par: Any_, anchors: Any_, n_anchors: int, ray_id: int,
    cell: int, cols: int, mask_state: Any_,
) -> bool:  # fmt: skip
    """Write anchor number `n_anchors` where ray `ray_id` passes `cell`; side still open."""
    a = find_anchor(anchors, n_anchors, ray_id)
    state = replay(air, par, entry, anchors, a, ray_id - int(anchors[a, OFFSET]))
    r, c = cell // cols, cell % cols
    t = nearest_on_ray(state, r, c)
    if ray_id == 0 and t < par[REACTION_CELLS]:
        return False  # nothing is done before the reaction time is over
    if t < SETTLED * (state[SZ] - state[CAP]) * par[MAX_RUN]:
        return False  # the speed of the last turn is not yet lost
    z = min(glide_alt(run, par, state[SZ], state[TRACK], t), state[CAP])
    new = anchors[n_anchors]
    new[AX], new[AY], new[AZ] = state[SX] + t * state[DX], state[SY] + t * state[DY], z
    new[PARENT], new[TURNS], new[SPEEDS_UP] = ray_id, 1.0, 1.0
    reach = max((z - par[FLOOR_M]) * par[MAX_RUN], 8.0)
    new[STEP] = 1.0 / reach
    new[COUNT] = floor(np.pi * reach)
    new[OFFSET] = anchors[n_anchors - 1, OFFSET] + anchors[n_anchors - 1, COUNT]
    mask_state[0], mask_state[1] = state[DX], state[DY]
    return heading_for(air, par, z, state[DX], state[DY], new[HX : HY + 1])


@njit(cache=True, nogil=True)
def spread(
    top: Any_, alt: Any_, ray: Any_, run: Any_, entry: Any_, air: Any_, par: Any_, anchors: Any_,
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
        if not _add_anchor(run, entry, air, par, anchors, n_anchors, ray[r, c], cell, cols, track):
            continue
        mask = _sides(top, alt, par, r, c, track[0], track[1]) & ~seen
        for bit in range(1, 3):
            if not mask & bit:
                continue
            anchor = anchors[n_anchors]
            if mask == 3 and bit == 2:
                anchor[:] = anchors[n_anchors - 1]
                anchor[OFFSET] += anchor[COUNT]
            anchor[SIDE] = 1.0 if bit == 1 else -1.0
            n_touched = fan(
                top, alt, ray, run, entry, air, par, anchors, n_anchors, touched, False, cancel
            )
            n_anchors += 1
            if n_touched:  # a fan that found nothing leaves the place open to its neighbours
                marks[r // spacing, c // spacing] |= bit
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
