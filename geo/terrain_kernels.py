"""Kernels of the terrain: the highest point of a bilinear surface in every cell.

Coordinates in a source are those of its posts: post (j, i) lies at v = j, u = i, and the patch
(j, i) reaches from there to post (j + 1, i + 1). A patch with a void (NaN) post is void.

A bilinear patch is a saddle and has no maximum inside. So the highest point of a cell is a post
in it, or lies on its edges: at an end, where the edge meets a line of posts, or at the vertex of
the parabola that the surface is along the edge between two such points.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit
from numpy.typing import NDArray

Posts = NDArray[np.float32]
Values = NDArray[np.float64]
Flags = NDArray[np.uint8]

NO_TOP = -np.inf  # no valid point of the surface has been found in the cell
SKIN = 1e-3  # of a pixel: a cell that shares no more than a side with a pixel does not touch it
TOUCH_M = 0.05  # posts this close to a cell count as in it: covers the mapping's interpolation


@njit(nogil=True, cache=True, error_model="numpy")
def segment_top(
    posts: Posts,
    j0: int,
    i0: int,
    u0: float,
    v0: float,
    u1: float,
    v1: float,
    patch_j: int,
    patch_i: int,
    ta: float,
    tb: float,
) -> float:
    """Return the highest value on part of a segment within one patch, NaN where it is void.

    The segment runs from (u0, v0) at t = 0 to (u1, v1) at t = 1; the part is ta .. tb, t in 0 .. 1.
    Row 0 and column 0 of `posts` are post (j0, i0).
    """
    last_i, last_j = i0 + posts.shape[1] - 1, j0 + posts.shape[0] - 1
    if patch_i == last_i and max(u0, u1) <= last_i:
        patch_i -= 1
    if patch_j == last_j and max(v0, v1) <= last_j:
        patch_j -= 1
    if patch_i < i0 or patch_j < j0 or patch_i >= last_i or patch_j >= last_j:
        return math.nan
    i, j = patch_i - i0, patch_j - j0
    corner = float(posts[j, i])
    east = float(posts[j, i + 1]) - corner
    north = float(posts[j + 1, i]) - corner
    twist = float(posts[j + 1, i + 1]) - corner - east - north
    if math.isnan(twist):
        return math.nan
    du, dv, start_u, start_v = u1 - u0, v1 - v0, u0 - patch_i, v0 - patch_j
    # f(t) = base + slope t + bend t^2
    base = corner + east * start_u + north * start_v + twist * start_u * start_v
    slope = east * du + north * dv + twist * (start_u * dv + start_v * du)
    bend = twist * du * dv
    rise_a, rise_b = ta * (slope + bend * ta), tb * (slope + bend * tb)
    top = base + (rise_a if rise_a > rise_b else rise_b)
    if slope + 2.0 * bend * ta > 0.0 > slope + 2.0 * bend * tb:
        top = base - 0.25 * slope * slope / bend
    return top


@njit(nogil=True, cache=True, error_model="numpy")
def edge_top(
    posts: Posts, j0: int, i0: int, u0: float, v0: float, u1: float, v1: float
) -> tuple[float, int]:
    """Return (highest valid value, 1 if any of it is void else 0) along a straight edge."""
    if not (math.isfinite(u0) and math.isfinite(u1) and math.isfinite(v0) and math.isfinite(v1)):
        return NO_TOP, 1
    du, dv = u1 - u0, v1 - v0
    step_u = 1.0 / abs(du) if du != 0.0 else math.inf
    step_v = 1.0 / abs(dv) if dv != 0.0 else math.inf
    next_u = next_v = math.inf
    if du != 0.0:
        next_u = (math.floor(u0) + 1.0 - u0 if du > 0.0 else u0 - math.ceil(u0) + 1.0) * step_u
    if dv != 0.0:
        next_v = (math.floor(v0) + 1.0 - v0 if dv > 0.0 else v0 - math.ceil(v0) + 1.0) * step_v
    top, void, ta = NO_TOP, 0, 0.0
    while True:
        tb = min(next_u, next_v, 1.0)
        middle = 0.5 * (ta + tb)
        i, j = math.floor(u0 + middle * du), math.floor(v0 + middle * dv)
        value = segment_top(posts, j0, i0, u0, v0, u1, v1, j, i, ta, tb)
        if math.isnan(value):
            void = 1
        elif value > top:
            top = value
        if tb >= 1.0:
            return top, void
        if next_u <= tb:
            next_u += step_u
        if next_v <= tb:
            next_v += step_v
        ta = tb


@njit(nogil=True, cache=True, error_model="numpy")
def fill_row(lattice: Values, row: int, step: int, out: Values) -> None:
    """Write a row of vertices, interpolated from a lattice with a point every `step` vertices."""
    upper = min(row // step, lattice.shape[0] - 2)
    share = (row - upper * step) / step
    for k in range(lattice.shape[1] - 1):
        left = lattice[upper, k] + share * (lattice[upper + 1, k] - lattice[upper, k])
        right = lattice[upper, k + 1] + share * (lattice[upper + 1, k + 1] - lattice[upper, k + 1])
        for m in range(step):
            out[k * step + m] = left + (right - left) * m / step
        out[(k + 1) * step] = right


@njit(nogil=True, cache=True, error_model="numpy")
def raise_to(top: Values, void: Flags, row: int, col: int, value: float, missing: int) -> None:
    """Take an edge's or a post's value into the cell, if the cell is one of the grid."""
    if 0 <= row < top.shape[0] and 0 <= col < top.shape[1]:
        if value > top[row, col]:
            top[row, col] = value
        void[row, col] |= missing


@njit(nogil=True, cache=True, error_model="numpy")
def walk_edges(
    posts: Posts,
    j0: int,
    i0: int,
    lattice_u: Values,
    lattice_v: Values,
    step: int,
    top: Values,
    void: Flags,
) -> None:
    """Raise every cell to the highest point along its edges; mark those that touch a void.

    Parameters
    ----------
    posts
        Heights [m], shape ``(n, m)``, NaN where void.
    j0, i0
        Post that row 0 and column 0 of `posts` are. Coordinates are never shifted by it, so that
        the same cell gets the same bits whatever is read with it.
    lattice_u, lattice_v
        Post coordinates of every `step`-th cell corner, shape ``(rows/step + 1, cols/step + 1)``.
    step
        Cells from one point of the lattice to the next.
    top, void
        Float64 and uint8, shape ``(rows, cols)``, changed in place.
    """
    n_rows, n_cols = top.shape
    u_row, v_row = np.empty(n_cols + 1), np.empty(n_cols + 1)
    u_next, v_next = np.empty(n_cols + 1), np.empty(n_cols + 1)
    fill_row(lattice_u, 0, step, u_row)
    fill_row(lattice_v, 0, step, v_row)
    for row in range(n_rows + 1):
        for col in range(n_cols):
            value, missing = edge_top(
                posts, j0, i0, u_row[col], v_row[col], u_row[col + 1], v_row[col + 1]
            )
            raise_to(top, void, row, col, value, missing)
            raise_to(top, void, row - 1, col, value, missing)
        if row == n_rows:
            break
        fill_row(lattice_u, row + 1, step, u_next)
        fill_row(lattice_v, row + 1, step, v_next)
        for col in range(n_cols + 1):
            value, missing = edge_top(
                posts, j0, i0, u_row[col], v_row[col], u_next[col], v_next[col]
            )
            raise_to(top, void, row, col, value, missing)
            raise_to(top, void, row, col - 1, value, missing)
        u_row, u_next = u_next, u_row
        v_row, v_next = v_next, v_row


@njit(nogil=True, cache=True, error_model="numpy")
def scatter_posts(
    posts: Posts,
    lattice_x: Values,
    lattice_y: Values,
    step: int,
    touch: float,
    row0: int,
    col0: int,
    top: Values,
    void: Flags,
) -> None:
    """Raise every cell to the posts in it; mark the cells that hold a void post.

    Parameters
    ----------
    posts
        Heights [m], shape ``(n, m)``, NaN where void.
    lattice_x, lattice_y
        Cell coordinates (column, row) of every `step`-th post, covering all of `posts`.
    step
        Posts from one point of the lattice to the next.
    touch
        Posts outside a cell by no more than this [cells] count as in it.
    row0, col0
        Cell that row 0 and column 0 of `top` are.
    top, void
        Float64 and uint8, shape ``(rows, cols)``, changed in place.
    """
    n_rows, n_cols = posts.shape
    xs = np.empty((lattice_x.shape[1] - 1) * step + 1)
    ys = np.empty(xs.size)
    for j in range(n_rows):
        fill_row(lattice_x, j, step, xs)
        fill_row(lattice_y, j, step, ys)
        for i in range(n_cols):
            x, y = xs[i], ys[i]
            in_rows = row0 - 1.0 < y < row0 + top.shape[0] + 1.0
            if not (in_rows and col0 - 1.0 < x < col0 + top.shape[1] + 1.0):
                continue
            value, missing = float(posts[j, i]), 0
            if math.isnan(value):
                value, missing = NO_TOP, 1
            for row in range(math.floor(y - touch), math.floor(y + touch) + 1):
                for col in range(math.floor(x - touch), math.floor(x + touch) + 1):
                    raise_to(top, void, row - row0, col - col0, value, missing)


@njit(nogil=True, cache=True, error_model="numpy")
def merge(top: Values, void: Flags, out: Values, done: Flags) -> int:
    """Take a coarser source's cells into those that finer ones did not cover whole.

    Parameters
    ----------
    top, void
        Of the source, as the other kernels leave them.
    out, done
        Highest point so far (float64) and 1 where a source has covered the whole cell (uint8).

    Returns
    -------
    Number of cells that took something from this source.
    """
    taken = 0
    for row in range(out.shape[0]):
        for col in range(out.shape[1]):
            if done[row, col] == 0 and top[row, col] > NO_TOP:
                taken += 1
                out[row, col] = max(out[row, col], top[row, col])
                if void[row, col] == 0:
                    done[row, col] = 1
    return taken


@njit(nogil=True, cache=True, error_model="numpy")
def finish(top: Values, done: Flags) -> Posts:
    """Return the tops as float32, never below the given ones; NaN where a cell is not covered."""
    out = np.empty(top.shape, dtype=np.float32)
    for row in range(top.shape[0]):
        for col in range(top.shape[1]):
            value = np.float32(top[row, col]) if done[row, col] else np.float32(np.nan)
            if value < top[row, col]:
                value = np.nextafter(value, np.float32(np.inf))
            out[row, col] = value
    return out


@njit(nogil=True, cache=True, error_model="numpy")
def sample(posts: Posts, u: Values, v: Values, out: Values) -> None:
    """Write the bilinear height at each point whose `out` is NaN, where the patch is not void.

    Parameters
    ----------
    posts
        Heights [m], shape ``(n, m)``.
    u, v
        Post coordinates, shape ``(k,)``.
    out
        Heights [m], shape ``(k,)``, changed in place.
    """
    n_rows, n_cols = posts.shape
    for k in range(u.size):
        if not (math.isnan(out[k]) and 0.0 <= u[k] <= n_cols - 1 and 0.0 <= v[k] <= n_rows - 1):
            continue
        i, j = min(math.floor(u[k]), n_cols - 2), min(math.floor(v[k]), n_rows - 2)
        s, t = u[k] - i, v[k] - j
        south = float(posts[j, i]) * (1.0 - s) + float(posts[j, i + 1]) * s
        north = float(posts[j + 1, i]) * (1.0 - s) + float(posts[j + 1, i + 1]) * s
        out[k] = south * (1.0 - t) + north * t


@njit(nogil=True, cache=True, error_model="numpy")
def touched(
    values: Posts, j0: int, i0: int, lattice_u: Values, lattice_v: Values, step: int, out: Posts
) -> None:
    """Raise `out` to the largest value of the pixels that each cell touches.

    Parameters
    ----------
    values
        One number per pixel, shape ``(n, m)``; pixel (j, i) reaches from (j, i) to (j+1, i+1).
    j0, i0
        Pixel that row 0 and column 0 of `values` are.
    lattice_u, lattice_v
        Pixel coordinates of every `step`-th cell corner.
    step
        Cells from one point of the lattice to the next.
    out
        Shape ``(rows, cols)``, changed in place.
    """
    n_rows, n_cols = out.shape
    u_row, v_row = np.empty(n_cols + 1), np.empty(n_cols + 1)
    u_next, v_next = np.empty(n_cols + 1), np.empty(n_cols + 1)
    for row in range(n_rows):
        fill_row(lattice_u, row, step, u_row)
        fill_row(lattice_v, row, step, v_row)
        fill_row(lattice_u, row + 1, step, u_next)
        fill_row(lattice_v, row + 1, step, v_next)
        for k in range(n_cols):
            west = min(u_row[k], u_row[k + 1], u_next[k], u_next[k + 1])
            east = max(u_row[k], u_row[k + 1], u_next[k], u_next[k + 1])
            low = min(v_row[k], v_row[k + 1], v_next[k], v_next[k + 1])
            high = max(v_row[k], v_row[k + 1], v_next[k], v_next[k + 1])
            if not (math.isfinite(east - west) and math.isfinite(high - low)):
                continue
            i1, i2 = math.floor(west + SKIN) - i0, math.floor(east - SKIN) + 1 - i0
            j1, j2 = math.floor(low + SKIN) - j0, math.floor(high - SKIN) + 1 - j0
            for j in range(max(j1, 0), min(j2, values.shape[0])):
                for i in range(max(i1, 0), min(i2, values.shape[1])):
                    out[row, k] = max(out[row, k], values[j, i])


@njit(nogil=True, cache=True, error_model="numpy")
def raise_discs(top: Posts, x: Values, y: Values, radius: Values, height_m: Values) -> None:
    """Raise every cell that comes within the radius of a point to the point's height.

    Parameters
    ----------
    top
        Cells [m], shape ``(rows, cols)``, changed in place; a void cell stays void.
    x, y, radius
        Points and radii in cells, from the south-west corner of the grid, shape ``(k,)``.
    height_m
        Height of each point [m]; NaN raises nothing.
    """
    n_rows, n_cols = top.shape
    for k in range(x.size):
        reach = radius[k]
        for row in range(
            max(math.floor(y[k] - reach), 0), min(math.floor(y[k] + reach) + 1, n_rows)
        ):
            dy = max(row - y[k], y[k] - row - 1.0, 0.0)
            for col in range(
                max(math.floor(x[k] - reach), 0), min(math.floor(x[k] + reach) + 1, n_cols)
            ):
                dx = max(col - x[k], x[k] - col - 1.0, 0.0)
                if dx * dx + dy * dy <= reach * reach and height_m[k] > top[row, col]:
                    top[row, col] = height_m[k]


@njit(nogil=True, cache=True, error_model="numpy")
def raise_places(
    height_m: Values,
    x: Values,
    y: Values,
    point_x: Values,
    point_y: Values,
    reach: float,
    top: Values,
) -> None:
    """Raise every place within reach of a point to the point's height.

    Parameters
    ----------
    height_m
        Heights of the places [m], shape ``(n,)``, changed in place.
    x, y
        Places [m], shape ``(n,)``.
    point_x, point_y, top
        Points and their heights [m], shape ``(k,)``; NaN raises nothing.
    reach
        Reach of every point [m].
    """
    west, east = point_x.min() - reach, point_x.max() + reach
    south, north = point_y.min() - reach, point_y.max() + reach
    for n in range(x.size):
        if not (west <= x[n] <= east and south <= y[n] <= north):
            continue
        for k in range(point_x.size):
            if top[k] > height_m[n] and math.hypot(x[n] - point_x[k], y[n] - point_y[k]) <= reach:
                height_m[n] = top[k]


def warm_up_terrain() -> None:
    """Compile every kernel of this file (or load it from the cache) on a tiny input."""
    posts = np.zeros((3, 3), dtype=np.float32)
    lattice = np.zeros((2, 2))
    top, void = np.full((2, 2), NO_TOP), np.zeros((2, 2), dtype=np.uint8)
    walk_edges(posts, 0, 0, lattice, lattice, 2, top, void)
    scatter_posts(posts, lattice, lattice, 2, 0.01, 0, 0, top, void)
    merge(top, void, np.full((2, 2), NO_TOP), np.zeros((2, 2), dtype=np.uint8))
    cells = finish(top, void)
    touched(posts, 0, 0, lattice, lattice, 2, cells)
    one = np.zeros(1)
    raise_places(one, one, one, one, one, 1.0, one)
    raise_discs(cells, np.zeros(1), np.zeros(1), np.ones(1), np.zeros(1))
    sample(posts, np.zeros(1), np.zeros(1), np.full(1, np.nan))
