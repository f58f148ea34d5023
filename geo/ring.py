"""Numba kernel of the ring: how far each track can be flown straight, for every track at once.

Rays skip whole blocks of terrain whose highest point lies far enough below them. The answer
equals that of `geo.rays.cast` within a cell; it gives ranges, not labels.
"""

from __future__ import annotations

from math import floor
from typing import Any as Any_

import numpy as np
from numba import njit

from geo.layout import CAP, DX, DY, LEVEL0_M, LEVEL_STEP_M, SX, SY, SZ, TRACK
from geo.rays import run_at

BLOCK = 16  # cells along the edge of a small block
SUPER = 128  # cells along the edge of a large block


@njit(cache=True, nogil=True)
def block_maxima(top: Any_, size: int) -> Any_:
    """Return the highest cell of each block of `size` x `size` cells, shape rounded up."""
    rows, cols = top.shape
    out = np.full(((rows + size - 1) // size, (cols + size - 1) // size), -np.inf, dtype=np.float32)
    for r in range(rows):
        line = out[r // size]
        for b in range(line.shape[0]):
            high = line[b]
            for c in range(b * size, min((b + 1) * size, cols)):
                high = max(high, top[r, c])
            line[b] = high
    return out


@njit(cache=True, nogil=True)
def ring(
    top: Any_, blocks: Any_, supers: Any_, run: Any_, par: Any_, states: Any_, need_m: float,
    clearance_m: float, out: Any_,
) -> None:  # fmt: skip
    """Write to `out` (n, 2) how far each ray [cells] stays clear, and where it last arrives high.

    Parameters
    ----------
    top, blocks, supers
        Highest point of each cell and of each block [m].
    states
        Ray starts, shape ``(n, N_STATE)``; NaN where no track is held.
    need_m, clearance_m
        Height over the ground that counts as arrival, and that must be kept [m].
    """
    for i in range(states.shape[0]):
        out[i, 0], out[i, 1] = 0.0, 0.0
        if states[i, DX] == states[i, DX]:
            _one(top, blocks, supers, run, par, states[i], need_m, clearance_m, out[i])


@njit(cache=True, nogil=True)
def _exit(x: float, y: float, state: Any_, size: int) -> float:
    """Return how far [cells] from (x, y) the ray leaves its block of `size` cells."""
    t = 1e30
    if abs(state[DX]) > 1e-12:
        edge = (floor(x / size) + (1.0 if state[DX] > 0.0 else 0.0)) * size
        t = (edge - x) / state[DX]
    if abs(state[DY]) > 1e-12:
        edge = (floor(y / size) + (1.0 if state[DY] > 0.0 else 0.0)) * size
        t = min(t, (edge - y) / state[DY])
    return t


@njit(cache=True, nogil=True)
def _one(
    top: Any_, blocks: Any_, supers: Any_, run: Any_, par: Any_, state: Any_, need_m: float,
    clearance_m: float, out: Any_,
) -> None:  # fmt: skip
    rows, cols = top.shape
    level = min(int((state[SZ] - par[LEVEL0_M]) / par[LEVEL_STEP_M]), run.shape[0] - 1)
    per_m = run_at(run, level, state[TRACK]) if level >= 0 else 0.0
    z_at, t_at, t = state[SZ], 0.0, 0.0
    level_end = (z_at - par[LEVEL0_M] - level * par[LEVEL_STEP_M]) * per_m
    while per_m > 0.0:
        # a nudge along the ray puts the point inside the next cell, not on its edge
        x, y = state[SX] + (t + 1e-7) * state[DX], state[SY] + (t + 1e-7) * state[DY]
        c, r = int(floor(x)), int(floor(y))
        if r < 0 or c < 0 or r >= rows or c >= cols:
            return
        size = SUPER
        while True:
            t_next = t + 1e-7 + _exit(x, y, state, size)
            while t_next > level_end and per_m > 0.0:
                z_at, t_at, level = z_at - (level_end - t_at) / per_m, level_end, level - 1
                per_m = run_at(run, level, state[TRACK]) if level >= 0 else 0.0
                level_end = t_at + par[LEVEL_STEP_M] * per_m
            z = min(z_at - (t_next - t_at) / per_m, state[CAP]) if per_m > 0.0 else -1e30
            if size == 1:
                break
            high = (
                supers[r // SUPER, c // SUPER] if size == SUPER else blocks[r // BLOCK, c // BLOCK]
            )
            if z >= high + need_m:
                break
            size = BLOCK if size == SUPER else 1
        if size == 1 and z < top[r, c] + clearance_m:
            return
        t = t_next
        out[0] = t
        if size > 1 or z >= top[r, c] + need_m:
            out[1] = t
