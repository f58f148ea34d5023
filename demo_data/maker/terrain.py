"""The terrain: an envelope of summits, eroded from coarse to fine, with its valley floors."""

from __future__ import annotations

import numpy as np
from numba import njit

from . import layout
from .erosion import creep, erode, refine
from .noise import fractal_noise, ridged_noise


@njit
def smooth(t):
    """Return the smooth step of t: 0 below 0, 1 above 1."""
    t = min(1.0, max(0.0, t))
    return t * t * (3.0 - 2.0 * t)


@njit
def nearest(x, y, x0, y0, x1, y1):
    """Return the distance to a stretch and how far along it the nearest point lies (0 to 1)."""
    dx = x1 - x0
    dy = y1 - y0
    s = ((x - x0) * dx + (y - y0) * dy) / (dx * dx + dy * dy)
    s = min(1.0, max(0.0, s))
    ex = x - x0 - s * dx
    ey = y - y0 - s * dy
    return np.sqrt(ex * ex + ey * ey), s


@njit
def shore_km(x, y, coast, islands):
    """Return about how far inland a place is [km], negative at sea."""
    wx = x + 1.5 * fractal_noise(x / 6.0, y / 6.0, 3, 11) + 0.4 * fractal_noise(x, y, 5, 21)
    wy = y + 1.5 * fractal_noise(x / 6.0, y / 6.0, 3, 31) + 0.4 * fractal_noise(x, y, 5, 41)
    best = -99.0
    for k in range(coast.shape[0] - 1):
        if coast[k, 0] <= wy <= coast[k + 1, 0]:
            s = smooth((wy - coast[k, 0]) / (coast[k + 1, 0] - coast[k, 0]))
            best = wx - (coast[k, 1] + s * (coast[k + 1, 1] - coast[k, 1]))
    for k in range(islands.shape[0]):
        ex = (wx - islands[k, 0]) / islands[k, 2]
        ey = (wy - islands[k, 1]) / islands[k, 3]
        inside = (1.0 - np.sqrt(ex * ex + ey * ey)) * min(islands[k, 2], islands[k, 3])
        best = max(best, inside)
    return best


@njit
def valley_at(x, y, valleys):
    """Return the distance beyond the nearest valley floor's edge [km] and that floor [m]."""
    wx = x + 0.6 * fractal_noise(x / 2.6, y / 2.6, 5, 71)
    wy = y + 0.6 * fractal_noise(x / 2.6, y / 2.6, 5, 91)
    beyond = 99.0
    floor_m = 0.0
    for k in range(valleys.shape[0]):
        d, s = nearest(wx, wy, valleys[k, 0], valleys[k, 1], valleys[k, 3], valleys[k, 4])
        if d - valleys[k, 6] < beyond:
            beyond = d - valleys[k, 6]
            floor_m = valleys[k, 2] + s * (valleys[k, 5] - valleys[k, 2])
    return beyond, floor_m


@njit
def envelope_at(x, y, inland_km, spines, plateau):
    """Return the height that the ground strives for [m]."""
    wx = x + 1.3 * fractal_noise(x / 5.0, y / 5.0, 5, 131)
    wy = y + 1.3 * fractal_noise(x / 5.0, y / 5.0, 5, 151)
    crest = 0.0
    for k in range(spines.shape[0]):
        d, s = nearest(wx, wy, spines[k, 0], spines[k, 1], spines[k, 3], spines[k, 4])
        top = spines[k, 2] + s * (spines[k, 5] - spines[k, 2])
        t = max(0.0, 1.0 - d / (1.25 * spines[k, 6]))
        crest = max(crest, top * t * (1.75 - 0.75 * t))
    crest *= 0.8 + 0.42 * ridged_noise(x / 4.3, y / 4.3, 5, 171)
    hills = 30.0 + 260.0 * ridged_noise(x / 3.1, y / 3.1, 5, 201) * smooth(inland_km / 5.0)
    rise = 12.0 * inland_km
    px = (wx - plateau[0]) / plateau[2]
    py = (wy - plateau[1]) / plateau[3]
    edge = 1.0 - np.sqrt(px * px + py * py)
    top = plateau[4] * (0.25 * smooth((edge + 0.55) / 0.5) + 0.75 * smooth((edge + 0.02) / 0.12))
    top += 60.0 * edge if edge > 0.0 else 0.0
    return max(max(crest, hills + rise), top) * smooth(0.15 + inland_km / 1.1)


@njit
def fields(west_km, north_km, rows, cols, cell_km, coast, islands, spines, valleys, plateau):
    """Return inland distance, envelope, softness, distance to valleys and their floors."""
    inland = np.empty((rows, cols))
    envelope = np.empty((rows, cols))
    softness = np.empty((rows, cols))
    beyond = np.empty((rows, cols))
    floor_m = np.empty((rows, cols))
    for r in range(rows):
        y = north_km - (r + 0.5) * cell_km
        for c in range(cols):
            x = west_km + (c + 0.5) * cell_km
            inland[r, c] = shore_km(x, y, coast, islands)
            beyond[r, c], floor_m[r, c] = valley_at(x, y, valleys)
            top = envelope_at(x, y, inland[r, c], spines, plateau)
            near = smooth(beyond[r, c] / 1.6)
            envelope[r, c] = floor_m[r, c] * (1.0 - near) + max(top, floor_m[r, c]) * near
            rock = fractal_noise(x / 6.0, y / 6.0, 4, 231)
            px = (x - plateau[0]) / (plateau[2] + 0.4)
            py = (y - plateau[1]) / (plateau[3] + 0.4)
            hard = smooth(6.0 * (1.0 - np.sqrt(px * px + py * py)))
            softness[r, c] = (1.0 + 0.45 * rock) * (1.0 - 0.93 * hard)
    return inland, envelope, softness, beyond, floor_m


@njit
def open_valleys(height_m, beyond_km, floor_m, inland_km, west_km, north_km, cell_km):
    """Give the main valleys their wide floors and steep trough sides, in place."""
    rows, cols = height_m.shape
    for r in range(rows):
        y = north_km - (r + 0.5) * cell_km
        for c in range(cols):
            x = west_km + (c + 0.5) * cell_km
            if inland_km[r, c] <= 0.0:
                continue
            d = beyond_km[r, c]
            rough = fractal_noise(x / 0.9, y / 0.9, 4, 261)
            side = max(0.0, d + 0.12 * rough)
            trough = floor_m[r, c] + 330.0 * side + 420.0 * side * side
            base = floor_m[r, c] + 9.0 * rough * smooth(0.2 + 2.0 * side)
            if d < 1.5:
                height_m[r, c] = min(height_m[r, c], trough)
            if d < 0.7:
                height_m[r, c] = max(height_m[r, c], base - 3.0)


def _fields(west_km, north_km, rows, cell_km):
    """Return the fields of a square grid."""
    return fields(
        west_km, north_km, rows, rows, cell_km, layout.COAST, layout.ISLANDS, layout.SPINES,
        layout.VALLEYS, np.array(layout.PLATEAU),
    )  # fmt: skip


@njit
def _noise_grid(rows, cols, scale, seed):
    """Return fractal noise on a grid, features `scale` cells wide."""
    out = np.empty((rows, cols))
    for r in range(rows):
        for c in range(cols):
            out[r, c] = fractal_noise(c / scale, r / scale, 3, seed)
    return out


def _outlets(inland_km):
    """Mark sea and edge cells."""
    outlet = inland_km <= 0.0
    outlet[0, :] = outlet[-1, :] = outlet[:, 0] = outlet[:, -1] = True
    return outlet


# cell [m], steps, lift, cut, scree, creep
LEVELS = (
    (240.0, 120, 0.06, 0.08, 0.75, 0.02),
    (120.0, 40, 0.05, 0.07, 0.85, 0.04),
    (60.0, 12, 0.04, 0.06, 0.95, 0.06),
    (30.0, 4, 0.02, 0.03, 1.05, 0.08),
)


def make_height_m():
    """Return the eroded ground [m], row 0 north, and how far inland each cell is [km]."""
    side_km = layout.SIDE_CELLS * layout.CELL_M / 1000.0
    height = None
    for k, (cell_m, steps, lift, cut, scree, share) in enumerate(LEVELS):
        cell_km = cell_m / 1000.0
        pad_km = layout.PAD_KM if k < 2 else 0.0
        rows = round((side_km + 2.0 * pad_km) / cell_km)
        west_km, north_km = -pad_km, side_km + pad_km
        if k < 3:
            parts = _fields(west_km, north_km, rows, cell_km)
        else:
            still = np.zeros((rows, rows))
            parts = tuple(refine(part, 0, 0, rows, rows, still, still) for part in parts)
        inland, envelope, softness, beyond, floor_m = parts
        outlet = _outlets(inland)
        if height is None:
            height = envelope * (0.25 + 0.1 * _noise_grid(rows, rows, 5.0, 301))
        else:
            first = round(layout.PAD_KM / (2.0 * cell_km)) if k == 2 else 0
            bend_r = 0.7 * _noise_grid(rows, rows, 7.0, 311 + k)
            bend_c = 0.7 * _noise_grid(rows, rows, 7.0, 331 + k)
            height = refine(height, first, first, rows, rows, bend_r, bend_c)
            height += (envelope - height).clip(0.0, 400.0) * 0.06 * _noise_grid(
                rows, rows, 6.0, 351 + k
            )
        height[inland <= 0.0] = 0.0
        for _ in range(steps):
            erode(height, envelope, softness, outlet, cell_m, lift, cut, scree)
            creep(height, outlet, share)
        open_valleys(height, beyond, floor_m, inland, west_km, north_km, cell_km)
    high = height > 1200.0
    height[high] = 1200.0 + 0.83 * (height[high] - 1200.0)
    return height, inland
