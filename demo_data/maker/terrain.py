"""The terrain: an envelope of summits, eroded from coarse to fine, with its valley floors."""

from __future__ import annotations

import numpy as np
from numba import njit

from . import layout
from .erosion import erode, refine
from .noise import noise_grid


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


# Layers of noise: name, ridged, width of a feature [km], octaves, seed, strength.
LAYERS = (
    ("coast_east", False, 6.0, 3, 11, 1.5),
    ("coast_east_fine", False, 1.0, 5, 21, 0.4),
    ("coast_north", False, 6.0, 3, 31, 1.5),
    ("coast_north_fine", False, 1.0, 5, 41, 0.4),
    ("valley_east", False, 2.6, 5, 71, 0.6),
    ("valley_north", False, 2.6, 5, 91, 0.6),
    ("spine_east", False, 5.0, 5, 131, 1.3),
    ("spine_north", False, 5.0, 5, 151, 1.3),
    ("peaks", True, 4.3, 5, 171, 0.42),
    ("hills", True, 3.1, 5, 201, 260.0),
    ("rock", False, 6.0, 4, 231, 0.45),
    ("rough", False, 0.9, 4, 261, 1.0),
    ("rim", False, 1.9, 5, 281, 0.16),
)


def noise_layers(west_km, north_km, rows, cell_km):
    """Return the layers of noise by name, each (rows, rows), row 0 north."""
    return {
        name: strength * noise_grid(west_km, north_km, rows, rows, cell_km, width, ridged, n, seed)
        for name, ridged, width, n, seed, strength in LAYERS
    }


@njit
def shore_km(wx, wy, coast, islands):
    """Return about how far inland a place is [km], negative at sea."""
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
def valley_at(wx, wy, valleys):
    """Return the distance beyond the nearest valley floor's edge [km] and that floor [m]."""
    beyond = 99.0
    floor_m = 0.0
    for k in range(valleys.shape[0]):
        d, s = nearest(wx, wy, valleys[k, 0], valleys[k, 1], valleys[k, 3], valleys[k, 4])
        if d - valleys[k, 6] < beyond:
            beyond = d - valleys[k, 6]
            floor_m = valleys[k, 2] + s * (valleys[k, 5] - valleys[k, 2])
    return beyond, floor_m


@njit
def crest_at(wx, wy, spines):
    """Return the height of the mountains' envelope [m], noise apart."""
    crest = 0.0
    for k in range(spines.shape[0]):
        d, s = nearest(wx, wy, spines[k, 0], spines[k, 1], spines[k, 3], spines[k, 4])
        top = spines[k, 2] + s * (spines[k, 5] - spines[k, 2])
        t = max(0.0, 1.0 - d / (1.25 * spines[k, 6]))
        crest = max(crest, top * t * (1.75 - 0.75 * t))
    return crest


@njit
def plateau_edge(x, y, plateau, margin_km):
    """Return how far inside the plateau's rim a place is, as a share of its half width."""
    ex = (x - plateau[0]) / (plateau[2] + margin_km)
    ey = (y - plateau[1]) / (plateau[3] + margin_km)
    return 1.0 - np.sqrt(ex * ex + ey * ey)


@njit
def plateau_at(edge, plateau):
    """Return the height of the plateau and its skirt [m]."""
    skirt = smooth((edge + 0.55) / 0.5)
    cliff = smooth((edge + 0.02) / 0.12)
    return plateau[4] * (0.25 * skirt + 0.75 * cliff) + 60.0 * max(edge, 0.0)


@njit
def place_all(east, north, coast, islands, valleys, spines, shape, warps):
    """Return what the layout says of each cell: inland [km], beyond [km], floor, crest [m]."""
    rows, cols = shape
    out = np.empty((4, rows, cols))
    for r in range(rows):
        for c in range(cols):
            x, y = east[c], north[r]
            out[0, r, c] = shore_km(x + warps[0, r, c], y + warps[1, r, c], coast, islands)
            beyond, floor_m = valley_at(x + warps[2, r, c], y + warps[3, r, c], valleys)
            out[1, r, c] = beyond
            out[2, r, c] = floor_m
            out[3, r, c] = crest_at(x + warps[4, r, c], y + warps[5, r, c], spines)
    return out


@njit
def strive(east, north, placed, peaks, hills, rock, rim, plateau):
    """Return the height that the ground strives for [m] and how soft its rock is."""
    rows, cols = peaks.shape
    envelope = np.empty((rows, cols))
    softness = np.empty((rows, cols))
    for r in range(rows):
        for c in range(cols):
            inland, beyond, floor_m, crest = placed[:, r, c]
            low = 30.0 + hills[r, c] * smooth(inland / 5.0) + 12.0 * inland
            edge = plateau_edge(east[c], north[r], plateau, 0.0) + rim[r, c]
            table = plateau_at(edge, plateau) + (0.12 * hills[r, c] if edge > 0.1 else 0.0)
            top = max(max(crest * (0.8 + peaks[r, c]), low), table)
            top *= smooth(0.15 + inland / 1.1)
            near = smooth(beyond / 1.6)
            envelope[r, c] = floor_m * (1.0 - near) + max(top, floor_m) * near
            hard = plateau_edge(east[c], north[r], plateau, 0.4) + rim[r, c]
            softness[r, c] = (1.0 + rock[r, c]) * (1.0 - 0.93 * smooth(6.0 * hard))
    return envelope, softness


def make_fields(west_km, north_km, rows, cell_km):
    """Return inland, beyond [km], floor [m], envelope [m], softness and roughness of a grid."""
    layer = noise_layers(west_km, north_km, rows, cell_km)
    east = west_km + (np.arange(rows) + 0.5) * cell_km
    north = north_km - (np.arange(rows) + 0.5) * cell_km
    warps = np.stack(
        [
            layer["coast_east"] + layer["coast_east_fine"],
            layer["coast_north"] + layer["coast_north_fine"],
            layer["valley_east"], layer["valley_north"],
            layer["spine_east"], layer["spine_north"],
        ]
    )  # fmt: skip
    placed = place_all(
        east, north, layout.COAST, layout.ISLANDS, layout.VALLEYS, layout.SPINES, (rows, rows),
        warps,
    )  # fmt: skip
    envelope, softness = strive(
        east, north, placed, layer["peaks"], layer["hills"], layer["rock"], layer["rim"],
        np.array(layout.PLATEAU),
    )  # fmt: skip
    return placed[0], placed[1], placed[2], envelope, softness, layer["rough"]


@njit
def open_valleys(height_m, inland_km, beyond_km, floor_m, rough):
    """Give the main valleys their wide floors and steep trough sides, in place."""
    rows, cols = height_m.shape
    for r in range(rows):
        for c in range(cols):
            d = beyond_km[r, c]
            if inland_km[r, c] <= 0.0 or d >= 1.5:
                continue
            side = max(0.0, d + 0.12 * rough[r, c])
            trough = floor_m[r, c] + 330.0 * side + 420.0 * side * side
            height_m[r, c] = min(height_m[r, c], trough)
            if d < 0.7:
                base = floor_m[r, c] + 9.0 * rough[r, c] * smooth(0.2 + 2.0 * side)
                height_m[r, c] = max(height_m[r, c], base - 3.0)


def _bends(rows, scale, seed):
    """Return noise on a grid with features `scale` cells wide."""
    return noise_grid(0.0, 0.0, rows, rows, 1.0, scale, False, 3, seed)


def _outlets(inland_km):
    """Mark sea and edge cells."""
    outlet = inland_km <= 0.0
    outlet[0, :] = outlet[-1, :] = outlet[:, 0] = outlet[:, -1] = True
    return outlet


def _finer(height, envelope, k, rows, first):
    """Return the height on a grid of half the cell, bent and roughened a little."""
    bend_r, bend_c = 0.7 * _bends(rows, 7.0, 311 + k), 0.7 * _bends(rows, 7.0, 331 + k)
    height = refine(height, first, first, rows, rows, bend_r, bend_c)
    gap = np.minimum(np.maximum(envelope - height, 0.0), 400.0)
    return height + 0.06 * gap * _bends(rows, 6.0, 351 + k)


# cell [m], rounds of three steps, lift, cut, scree, creep
LEVELS = (
    (240.0, 30, 0.06, 0.08, 0.75, 0.02),
    (120.0, 8, 0.05, 0.07, 0.85, 0.04),
    (60.0, 3, 0.04, 0.06, 0.95, 0.06),
    (30.0, 1, 0.02, 0.03, 1.05, 0.08),
)


def make_height_m():
    """Return the eroded ground [m], row 0 north, and how far inland each cell is [km]."""
    side_km = layout.SIDE_CELLS * layout.CELL_M / 1000.0
    height = np.empty(0)
    parts: tuple = ()
    for k, (cell_m, rounds, lift, cut, scree, share) in enumerate(LEVELS):
        cell_km = cell_m / 1000.0
        pad_km = layout.PAD_KM if k < 2 else 0.0
        rows = round((side_km + 2.0 * pad_km) / cell_km)
        if k < 3:
            parts = make_fields(-pad_km, side_km + pad_km, rows, cell_km)
        else:  # the finest level takes the fields of the one before
            still = np.zeros((rows, rows))
            parts = tuple(refine(part, 0, 0, rows, rows, still, still) for part in parts)
        inland, beyond, floor_m, envelope, softness, rough = parts
        outlet = _outlets(inland)
        if k == 0:
            height = envelope * (0.25 + 0.1 * _bends(rows, 5.0, 301))
        else:
            first = round(layout.PAD_KM / (2.0 * cell_km)) if k == 2 else 0
            height = _finer(height, envelope, k, rows, first)
        height[inland <= 0.0] = 0.0
        for _ in range(rounds):
            erode(height, envelope, softness, outlet, cell_m, lift, cut, scree, share)
        open_valleys(height, inland, beyond, floor_m, rough)
    high = height > 1200.0
    height[high] = 1200.0 + 0.83 * (height[high] - 1200.0)
    return height, inland
