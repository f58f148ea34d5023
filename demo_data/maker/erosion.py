"""Rivers, slopes and scree: the kernels that turn an envelope of summits into a landscape.

Source: Braun and Willett 2013, Geomorphology 180-181, pages 170-179, the implicit stream-power
step in the order of the drainage tree; Barnes, Lehman and Mulla 2014, Computers and Geosciences
62, pages 117-127, flooding from the outlets so that every cell drains.
"""

from __future__ import annotations

import numpy as np
from numba import njit

_STEPS_PER_M = 8.0  # flooding works on eighths of a metre, an integer queue
_DIAGONAL = 1.4142135623730951


@njit
def _append(head, tail, link, level, i):
    """Put cell i at the end of its level's queue."""
    if head[level] < 0:
        head[level] = i
    else:
        link[tail[level]] = i
    tail[level] = i
    link[i] = -1


@njit
def _neighbours(i, rows, cols, found):
    """Fill `found` with the cells round i; return how many there are."""
    r = i // cols
    c = i % cols
    n = 0
    for dr in range(-1, 2):
        for dc in range(-1, 2):
            inside = 0 <= r + dr < rows and 0 <= c + dc < cols
            if inside and (dr != 0 or dc != 0):
                found[n] = i + dr * cols + dc
                n += 1
    return n


@njit
def _fall(height, i, j, cols):
    """Return the slope from cell i down to its neighbour j [m per cell]."""
    straight = i // cols == j // cols or i % cols == j % cols
    return (height[i] - height[j]) / (1.0 if straight else _DIAGONAL)


@njit
def drainage(height_m, outlet):
    """Return the cells from the outlets upward and the cell that each one drains to.

    `outlet` marks the cells (sea and edge) where water leaves. A cell in a hollow drains over
    the hollow's lowest sill.
    """
    rows, cols = height_m.shape
    height, leaves = height_m.ravel(), outlet.ravel()
    n = height.size
    top = np.int64(4000 * _STEPS_PER_M)
    level = np.empty(n, np.int32)
    waiting, done = np.zeros(n, np.bool_), np.zeros(n, np.bool_)
    link, receiver = np.full(n, -1, np.int32), np.full(n, -1, np.int32)
    head, tail = np.full(top, -1, np.int32), np.full(top, -1, np.int32)
    order = np.empty(n, np.int32)
    found = np.empty(8, np.int64)
    for i in range(n):
        level[i] = min(top - 1, max(0, np.int64(height[i] * _STEPS_PER_M)))
        if leaves[i]:
            waiting[i] = True
            receiver[i] = i
            _append(head, tail, link, level[i], i)
    count = 0
    for flood in range(top):
        while head[flood] >= 0:
            i = head[flood]
            head[flood] = link[i]
            order[count] = i
            count += 1
            done[i] = True
            steepest = 0.0
            for k in range(_neighbours(i, rows, cols, found)):
                j = found[k]
                if not waiting[j]:
                    waiting[j] = True
                    receiver[j] = i
                    level[j] = max(level[j], flood)
                    _append(head, tail, link, level[j], j)
                elif done[j] and receiver[i] != i and _fall(height, i, j, cols) > steepest:
                    steepest = _fall(height, i, j, cols)
                    receiver[i] = j
    return order, receiver


@njit
def drained_area(order, receiver, cell_km):
    """Return the area drained through each cell [km2], flat."""
    area = np.full(order.size, cell_km * cell_km)
    for k in range(order.size - 1, -1, -1):
        i = order[k]
        if receiver[i] != i:
            area[receiver[i]] += area[i]
    return area


@njit
def creep(height_m, fixed, share):
    """Round the slopes: move each free cell `share` of the way to its neighbours' mean."""
    old = height_m.copy()
    rows, cols = height_m.shape
    for r in range(1, rows - 1):
        for c in range(1, cols - 1):
            if fixed[r, c]:
                continue
            mean = 0.25 * (old[r - 1, c] + old[r + 1, c] + old[r, c - 1] + old[r, c + 1])
            height_m[r, c] = old[r, c] + share * (mean - old[r, c])


@njit
def _cut(height_m, envelope_m, softness, order, receiver, area, cell_m, lift, cut, scree):
    """Do one step of lifting and cutting along a given drainage, in place."""
    cols = height_m.shape[1]
    for k in range(order.size):
        i = order[k]
        j = receiver[i]
        if i == j:
            continue
        r = i // cols
        c = i % cols
        rj = j // cols
        cj = j % cols
        run_m = cell_m * (_DIAGONAL if (r != rj and c != cj) else 1.0)
        z = height_m[r, c]
        z += lift * (envelope_m[r, c] - z)
        below = height_m[rj, cj]
        force = cut * softness[r, c] * np.sqrt(area[i]) * 1000.0 / run_m
        z = (z + force * below) / (1.0 + force)
        height_m[r, c] = min(max(z, below), below + scree * run_m)


@njit
def erode(height_m, envelope_m, softness, outlet, cell_m, lift, cut, scree, share):
    """Let the ground rise towards its envelope and rivers cut it, three steps, in place.

    `lift` is the share of the gap to the envelope that is made good in a step, `cut` scales the
    rivers' work, `scree` is the steepest slope that holds [tangent], `share` is the creep.
    Finding the drainage is the slow part, so three steps use it.
    """
    order, receiver = drainage(height_m, outlet)
    area = drained_area(order, receiver, cell_m / 1000.0)
    for _ in range(3):
        _cut(height_m, envelope_m, softness, order, receiver, area, cell_m, lift, cut, scree)
        creep(height_m, outlet, share)


@njit
def _cubic(a, b, c, d, t):
    """Return the Catmull-Rom value between b and c."""
    return b + 0.5 * t * (
        c - a + t * (2.0 * a - 5.0 * b + 4.0 * c - d + t * (3.0 * (b - c) + d - a))
    )


@njit
def refine(coarse_m, first_row, first_col, rows, cols, shift_r, shift_c):
    """Return a grid of half the cell from part of a coarse one, bent by the shifts [cells]."""
    fine = np.empty((rows, cols))
    top = coarse_m.shape[0] - 1
    right = coarse_m.shape[1] - 1
    line = np.empty(4)
    for r in range(rows):
        for c in range(cols):
            y = first_row + 0.5 * r - 0.25 + shift_r[r, c]
            x = first_col + 0.5 * c - 0.25 + shift_c[r, c]
            y = min(max(y, 0.0), float(top))
            x = min(max(x, 0.0), float(right))
            iy = np.int64(y)
            ix = np.int64(x)
            for k in range(4):
                row = min(max(iy - 1 + k, 0), top)
                line[k] = _cubic(
                    coarse_m[row, max(ix - 1, 0)],
                    coarse_m[row, ix],
                    coarse_m[row, min(ix + 1, right)],
                    coarse_m[row, min(ix + 2, right)],
                    x - ix,
                )
            fine[r, c] = _cubic(line[0], line[1], line[2], line[3], y - iy)
    return fine
