"""Levelling of sites and the lake, and land cover."""

from __future__ import annotations

import numpy as np
from numba import njit

from . import layout, places
from .noise import fractal_noise, hash_cell
from .terrain import smooth

SIDE_KM = layout.SIDE_CELLS * layout.CELL_M / 1000.0
# Unit vectors of grid bearings come from this table of sines, one a degree, so that no
# library's sine takes part: 1 degree at a time by the addition rule.
_SIN_1, _COS_1 = 0.01745240643728351, 0.9998476951563913


def unit_vector(bearing_deg):
    """Return east and north components of a whole-degree grid bearing."""
    east, north = 0.0, 1.0
    for _ in range(round(bearing_deg) % 360):
        east, north = east * _COS_1 + north * _SIN_1, north * _COS_1 - east * _SIN_1
    return east, north


def cell_of(east_km, north_km):
    """Return the row and column of a place."""
    cell_km = layout.CELL_M / 1000.0
    return int((SIDE_KM - north_km) / cell_km), int(east_km / cell_km)


@njit
def _level(height_m, east, north, ux, uy, half_m, side_m, apron_m, elevation_m, slope, cell_m):
    """Lay a plane strip into the ground and blend it over the apron, in place."""
    rows, cols = height_m.shape
    reach = np.int64((half_m + side_m + apron_m) / cell_m) + 2
    r0 = np.int64((60_000.0 - north) / cell_m)
    c0 = np.int64(east / cell_m)
    for r in range(max(0, r0 - reach), min(rows, r0 + reach + 1)):
        for c in range(max(0, c0 - reach), min(cols, c0 + reach + 1)):
            dx = (c + 0.5) * cell_m - east
            dy = 60_000.0 - (r + 0.5) * cell_m - north
            along = dx * ux + dy * uy
            across = abs(dx * uy - dy * ux)
            over_x = max(0.0, abs(along) - half_m)
            over_y = max(0.0, across - side_m)
            w = smooth(1.0 - np.sqrt(over_x * over_x + over_y * over_y) / apron_m)
            plane = elevation_m + slope * min(max(along, -half_m), half_m)
            height_m[r, c] += w * (plane - height_m[r, c])


def level_sites(height_m):
    """Level the ground at each site, in place; return the elevations [m] by id."""
    elevations = {}
    for site in places.RUNWAYS + places.AREAS:
        name, kind, east, north, bearing, length_m = site[0], site[2], *site[4:8]
        width_m, slope_pct = site[8][0], site[8][2] or 0.0
        if kind == "water":
            elevations[name] = layout.LAKE[4] if name == "lake-ilvane" else 0.0
            continue
        row, col = cell_of(east, north)
        elevation_m = float(np.round(height_m[row, col]))
        if name == "tarvane-15-33":
            elevation_m = elevations["tarvane-09-27"]
        elevations[name] = elevation_m
        ux, uy = unit_vector(bearing)
        _level(
            height_m, east * 1000.0, north * 1000.0, ux, uy, 0.5 * length_m + 90.0,
            0.5 * width_m + 60.0, 240.0, elevation_m, slope_pct / 100.0, layout.CELL_M,
        )  # fmt: skip
    for site in places.POINTS:
        elevations[site[0]] = float(height_m[cell_of(site[4], site[5])])
    return elevations


@njit
def _lake(height_m, lake, x, y, half, width, level_m, cell_km):
    """Sink a lake into the ground and mark it, in place."""
    rows, cols = height_m.shape
    for r in range(rows):
        ky = 60.0 - (r + 0.5) * cell_km - y
        if abs(ky) > 3.0 * width:
            continue
        for c in range(cols):
            kx = (c + 0.5) * cell_km - x
            if abs(kx) > 1.5 * half:
                continue
            wx = kx + 0.5 * fractal_noise(kx / 1.7, ky / 1.7, 6, 401)
            wy = ky + 0.4 * fractal_noise(kx / 1.7, ky / 1.7, 6, 421)
            ex = wx / half
            ey = wy / width
            d = np.sqrt(ex * ex + ey * ey)
            if d < 1.0:
                height_m[r, c] = level_m
                lake[r, c] = True
            elif d < 1.25:
                bank = level_m + 1.0 + 12.0 * (d - 1.0)
                w = smooth((1.25 - d) / 0.25)
                height_m[r, c] += w * (bank - height_m[r, c])


def sink_lake(height_m):
    """Sink the lake, in place; return where it is."""
    lake = np.zeros(height_m.shape, np.bool_)
    _lake(height_m, lake, *layout.LAKE, layout.CELL_M / 1000.0)
    return lake


TREES, SCRUB, GRASS, CROPS, BUILT, BARE, SNOW, WATER = 10, 20, 30, 40, 50, 60, 70, 80
LEGEND = {
    TREES: ("tree cover", "trees", 65),
    SCRUB: ("scrub", "shrub", None),
    GRASS: ("grass", "grass", None),
    CROPS: ("crops", "crops", None),
    BUILT: ("built-up", "built-up", None),
    BARE: ("rock and scree", "bare", None),
    SNOW: ("snow and ice", "snow", None),
    WATER: ("water", "water", None),
}


@njit
def _cover(z, slope, x, y):
    """Return the class of dry open ground."""
    patch = fractal_noise(x / 1.4, y / 1.4, 4, 441)
    high = z + 170.0 * fractal_noise(x / 2.2, y / 2.2, 3, 461)
    if high > 2050.0 and slope < 0.8:
        return SNOW
    if high > 1650.0 or slope > 0.95:
        return BARE
    if high > 1150.0:
        return GRASS if patch > -0.15 else SCRUB
    if slope > 0.09:
        return TREES if patch > -0.3 else (SCRUB if patch < -0.55 else GRASS)
    if z < 330.0:
        u = (0.94 * x + 0.34 * y) / 0.33
        v = (0.94 * y - 0.34 * x) / 0.24
        field = hash_cell(np.int64(u), np.int64(v), 481) & np.uint64(7)
        if patch > 0.75:
            return TREES
        return CROPS if field < np.uint64(4) else GRASS
    return GRASS if patch < 0.3 else TREES


@njit
def _land_cover(height_m, water, towns, clear, cell_km):
    """Return the class of each cell."""
    rows, cols = height_m.shape
    out = np.empty((rows, cols), np.uint8)
    for r in range(rows):
        y = 60.0 - (r + 0.5) * cell_km
        for c in range(cols):
            x = (c + 0.5) * cell_km
            if water[r, c]:
                out[r, c] = WATER
                continue
            north = height_m[max(r - 1, 0), c] - height_m[min(r + 1, rows - 1), c]
            east = height_m[r, max(c - 1, 0)] - height_m[r, min(c + 1, cols - 1)]
            slope = np.sqrt(north * north + east * east) / (2000.0 * cell_km)
            out[r, c] = _cover(height_m[r, c], slope, x, y)
            for k in range(clear.shape[0]):
                ex = x - clear[k, 0]
                ey = y - clear[k, 1]
                if ex * ex + ey * ey < clear[k, 2] * clear[k, 2] and out[r, c] <= SCRUB:
                    out[r, c] = GRASS
            for k in range(towns.shape[0]):
                ex = x - towns[k, 0]
                ey = y - towns[k, 1]
                d = np.sqrt(ex * ex + ey * ey) / towns[k, 2]
                if d + 0.5 * fractal_noise(x / 0.4, y / 0.4, 3, 491) < 0.8 and slope < 0.2:
                    out[r, c] = BUILT
    return out


def make_land_cover(height_m, water):
    """Return land-cover classes (uint8), row 0 north."""
    towns = np.array([places.TOWN, *places.VILLAGES])
    clear = np.array([(s[4], s[5], 0.0005 * s[7] + 0.25) for s in places.RUNWAYS + places.AREAS])
    return _land_cover(height_m, water, towns, clear, layout.CELL_M / 1000.0)
