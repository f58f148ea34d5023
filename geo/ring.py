"""Numba kernel of the ring: how far each track can be flown straight, for every track at once.

Rays skip whole blocks of terrain whose highest point lies far enough below them and walk the
cells of the others. The answer equals that of `geo.rays.cast`; it gives ranges, not labels.
"""

from __future__ import annotations

from math import floor
from typing import Any as Any_

import numpy as np
from numba import njit

from geo.layout import CAP, DX, DY, FAR, LEVEL0_M, LEVEL_STEP_M, SX, SY, SZ, TRACK
from geo.rays import glide_alt, run_at

BLOCK = 12  # cells along the edge of a block
NUDGE = 1e-6  # cells; puts a point on an edge into the next cell


@njit(cache=True, nogil=True)
def block_maxima(top: Any_) -> Any_:
    """Return the highest cell of each block of `BLOCK` x `BLOCK` cells, shape rounded up."""
    rows, cols = top.shape
    shape = ((rows + BLOCK - 1) // BLOCK, (cols + BLOCK - 1) // BLOCK)
    out = np.full(shape, -np.inf, dtype=np.float32)
    for r in range(rows):
        line = out[r // BLOCK]
        for b in range(line.shape[0]):
            high = line[b]
            for c in range(b * BLOCK, min((b + 1) * BLOCK, cols)):
                high = max(high, top[r, c])
            line[b] = high
    return out


@njit(cache=True, nogil=True)
def ring(
    top: Any_, blocks: Any_, run: Any_, par: Any_, states: Any_, need_m: float,
    clearance_m: float, out: Any_,
) -> None:  # fmt: skip
    """Write to `out` (n, 2) how far each ray [cells] stays clear, and where it last arrives high.

    Parameters
    ----------
    top, blocks
        Highest point of each cell and of each block [m].
    states
        Ray starts, shape ``(n, N_STATE)``; NaN where no track is held.
    need_m, clearance_m
        Height over the ground that counts as arrival, and that must be kept [m].
    """
    pair = np.empty(2)
    for i in range(states.shape[0]):
        out[i, 0], out[i, 1] = 0.0, 0.0
        if states[i, DX] != states[i, DX]:
            continue
        end = _clear_until(top, blocks, run, par, states[i], clearance_m, pair)
        out[i, 0] = end
        back = 64.0
        while end > 0.0:
            begin = max(end - back, 0.0)
            z = glide_alt(run, par, states[i, SZ], states[i, TRACK], begin)
            _walk(top, run, par, states[i], begin, z, end, clearance_m, need_m, pair)
            out[i, 1] = pair[1]
            if pair[1] > 0.0 or back >= end:
                break
            back *= 4.0


@njit(cache=True, nogil=True)
def _clear_until(
    top: Any_, blocks: Any_, run: Any_, par: Any_, state: Any_, clearance_m: float, pair: Any_
) -> Any_:
    """Return how far [cells] the ray keeps the clearance, block by block."""
    rows, cols = blocks.shape
    x, y, dx, dy, cap = state[SX], state[SY], state[DX], state[DY], state[CAP]
    level = min(int((state[SZ] - par[LEVEL0_M]) / par[LEVEL_STEP_M]), run.shape[0] - 1)
    per_m = run_at(run, level, state[TRACK]) if level >= 0 else 0.0
    if per_m <= 0.0:
        return 0.0
    z_at, t_at, t, z_out, slope = state[SZ], 0.0, 0.0, state[SZ], 1.0 / per_m
    level_end = (z_at - par[LEVEL0_M] - level * par[LEVEL_STEP_M]) * per_m
    c, r = int(floor(x / BLOCK)), int(floor(y / BLOCK))
    gap_x = BLOCK / abs(dx) if abs(dx) > 1e-12 else FAR
    gap_y = BLOCK / abs(dy) if abs(dy) > 1e-12 else FAR
    next_x, next_y, step_c, step_r = FAR, FAR, (1 if dx > 0 else -1), (1 if dy > 0 else -1)
    if gap_x < FAR:
        next_x = (((c + 1) * BLOCK - x) if dx > 0 else (x - c * BLOCK)) / abs(dx)
    if gap_y < FAR:
        next_y = (((r + 1) * BLOCK - y) if dy > 0 else (y - r * BLOCK)) / abs(dy)
    while 0 <= r < rows and 0 <= c < cols:
        t_next, z_in = min(next_x, next_y), z_out
        while t_next > level_end:
            z_at, t_at, level = z_at - (level_end - t_at) * slope, level_end, level - 1
            per_m = run_at(run, level, state[TRACK]) if level >= 0 else 0.0
            if per_m <= 0.0:
                _walk(top, run, par, state, t, z_in, t_next, clearance_m, 1e30, pair)
                return pair[0]
            slope = 1.0 / per_m
            level_end = t_at + par[LEVEL_STEP_M] * per_m
        z_out = z_at - (t_next - t_at) * slope
        if min(z_out, cap) < blocks[r, c] + clearance_m:
            _walk(top, run, par, state, t, z_in, t_next, clearance_m, 1e30, pair)
            if pair[0] < t_next - 2.0 * NUDGE:
                return pair[0]
        t = t_next
        if next_x < next_y:
            c += step_c
            next_x += gap_x
        else:
            r += step_r
            next_y += gap_y
    # the last block may stick out of the map
    past_x = (x + t * dx - top.shape[1]) / max(dx, 1e-12)
    past_y = (y + t * dy - top.shape[0]) / max(dy, 1e-12)
    return t - max(past_x, past_y, 0.0)


@njit(cache=True, nogil=True)
def _walk(
    top: Any_, run: Any_, par: Any_, state: Any_, t: float, z: float, t_end: float,
    clearance_m: float, need_m: float, pair: Any_,
) -> None:  # fmt: skip
    """Walk cells from `t`, at altitude `z`, to `t_end`.

    Writes where the clearance ends and where the ray last arrives high.
    """
    pair[0], pair[1] = t, 0.0
    gap_x = 1.0 / abs(state[DX]) if abs(state[DX]) > 1e-12 else FAR
    gap_y = 1.0 / abs(state[DY]) if abs(state[DY]) > 1e-12 else FAR
    x, y = state[SX] + (t + NUDGE) * state[DX], state[SY] + (t + NUDGE) * state[DY]
    c, r = int(floor(x)), int(floor(y))
    next_x, next_y = FAR, FAR
    if gap_x < FAR:
        next_x = t + NUDGE + ((c + 1 - x) if state[DX] > 0 else (x - c)) * gap_x
    if gap_y < FAR:
        next_y = t + NUDGE + ((r + 1 - y) if state[DY] > 0 else (y - r)) * gap_y
    level = min(int((z - par[LEVEL0_M]) / par[LEVEL_STEP_M]), run.shape[0] - 1)
    per_m = run_at(run, level, state[TRACK]) if level >= 0 else 0.0
    level_end = t + (z - par[LEVEL0_M] - level * par[LEVEL_STEP_M]) * per_m
    while t < t_end - NUDGE and per_m > 0.0:
        if r < 0 or c < 0 or r >= top.shape[0] or c >= top.shape[1]:
            return
        t_next = min(next_x, next_y)
        while t_next > level_end and per_m > 0.0:
            z, t, level = z - (level_end - t) / per_m, level_end, level - 1
            per_m = run_at(run, level, state[TRACK]) if level >= 0 else 0.0
            level_end = t + par[LEVEL_STEP_M] * per_m
        if per_m <= 0.0:
            return
        z, t = z - (t_next - t) / per_m, t_next
        here = min(z, state[CAP])
        if here < top[r, c] + clearance_m:
            return
        pair[0] = t
        if here >= top[r, c] + need_m:
            pair[1] = t
        if next_x < next_y:
            c += 1 if state[DX] > 0 else -1
            next_x += gap_x
        else:
            r += 1 if state[DY] > 0 else -1
            next_y += gap_y
