"""Shaded relief of the terrain as web-mercator tiles: the only base map there is offline."""

from __future__ import annotations

import hashlib
import io
import threading
from collections import OrderedDict
from dataclasses import dataclass
from functools import lru_cache
from math import atan, cos, degrees, log2, pi, sinh

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from geo.terrain import TerrainStore
from geo.terrain_source import TerrainSource

Array = NDArray[np.float64]

TILE_PX = 256
MARGIN = 1  # samples beyond the edge that the cubic needs; one more follows on the far side
INTERVALS_MAX = 252  # 252 + 3 samples a side: 65 025 in all
INTERVALS_MIN = 4
EQUATOR_M = 2.0 * pi * 6378137.0  # circumference of the sphere that web mercator uses [m]

SUN_AZIMUTH_RAD = 315.0 * pi / 180.0  # north-west, where readers expect the light
SUN_ALTITUDE_RAD = 45.0 * pi / 180.0
SHADE_STRENGTH = 0.66
SHADOW_SOFTNESS = 0.6
SEA_LOW_M, SEA_HIGH_M = -0.5, 0.25  # flat ground between these is drawn as sea
SEA_SLOPE = 0.004
SEA_RGB = (196.0, 207.0, 216.0)
VOID_RGB = (206.0, 204.0, 200.0)
HATCH_RGB = (150.0, 148.0, 146.0)
HATCH = np.add.outer(np.arange(TILE_PX), np.arange(TILE_PX)) % 8 < 2  # runs on from tile to tile

SPECK_CELLS = 40.0  # posts a pixel from which a terrain smaller than a sample is a plain speck
SPECK_RGBA = (214.0, 207.0, 192.0, 255.0)

# Land like paper: pale at the shore, warm grey-buff higher up, nearly white on the tops.
TINT_M = np.array([0.0, 150.0, 500.0, 1000.0, 1800.0, 3000.0, 5000.0])
TINT_RGB = np.array(
    [
        [233.0, 230.0, 219.0],
        [230.0, 226.0, 212.0],
        [222.0, 216.0, 200.0],
        [214.0, 207.0, 192.0],
        [208.0, 203.0, 194.0],
        [224.0, 222.0, 219.0],
        [246.0, 246.0, 247.0],
    ]
)


@dataclass(frozen=True)
class Tile:
    """A finished tile: PNG and its entity tag."""

    png: bytes
    etag: str


def tile_count(z: int) -> int:
    """Return the number of tiles along each side of the world at zoom `z`."""
    return 1 << z


def tile_longitude_deg(x: Array | float, z: int) -> Array:
    """Return the longitude [deg] of a tile coordinate, whole numbers being tile edges."""
    return np.asarray(x) / tile_count(z) * 360.0 - 180.0


def tile_latitude_deg(y: float, z: int) -> float:
    """Return the latitude [deg] of a tile coordinate, counted from the north.

    Source
    ------
    OGC 17-083r2, Two Dimensional Tile Matrix Set, annex D.1 (WebMercatorQuad); Snyder, USGS
    Professional Paper 1395 (1987), p. 44, eq. 7-4.
    """
    return degrees(atan(sinh(pi * (1.0 - 2.0 * y / tile_count(z)))))


def intervals_for(tile_m: float, cell_m: float) -> int:
    """Return the number of sample intervals along a tile: no finer than the posts or the pixels.

    A power of two (or the greatest), so that neighbouring tiles share their edge samples.
    """
    wanted = tile_m / max(cell_m, 0.1)
    if wanted > 181.0:  # nearer to the greatest than to 128
        return INTERVALS_MAX
    power = round(log2(max(wanted, 1.0)))
    return int(min(max(1 << power, INTERVALS_MIN), 128))


@lru_cache(maxsize=16)
def cubic(intervals: int) -> tuple[Array, Array]:
    """Return the weights of the samples at pixel centres, and their slopes per sample interval.

    Both have shape ``(256, intervals + 3)``. Uniform cubic B-spline: slope and curvature are
    continuous, so the posts leave no facets; nothing overshoots.

    Source
    ------
    de Boor, A Practical Guide to Splines (1978), chapter IX, uniform knots.
    """
    at = (np.arange(TILE_PX) + 0.5) / TILE_PX * intervals
    first = np.minimum(at.astype(np.int64), intervals - 1)
    t = at - first
    value = np.stack([
        (1 - t) ** 3, 3 * t**3 - 6 * t**2 + 4, -3 * t**3 + 3 * t**2 + 3 * t + 1, t**3,
    ]) / 6.0  # fmt: skip
    slope = np.stack([
        -((1 - t) ** 2), 3 * t**2 - 4 * t, -3 * t**2 + 2 * t + 1, t**2,
    ]) / 2.0  # fmt: skip
    weights = np.zeros((TILE_PX, intervals + 3))
    slopes = np.zeros_like(weights)
    rows = np.arange(TILE_PX)
    for k in range(4):
        weights[rows, first + k] = value[k]
        slopes[rows, first + k] = slope[k]
    return weights, slopes


def fill_voids(ground_m: Array) -> Array:
    """Return the samples with each NaN replaced by a neighbour along its row, then its column."""
    filled = ground_m.copy()
    for _ in range(2):
        for view in (filled, filled[:, ::-1]):
            known = ~np.isnan(view)
            last = np.maximum.accumulate(np.where(known, np.arange(view.shape[1]), 0), axis=1)
            view[:] = np.take_along_axis(view, last, axis=1)
        filled = filled.T
    return filled


def shade(east_slope: Array, north_slope: Array) -> Array:
    """Return brightness [about 0.4 .. 1.2] of slopes [m/m]; flat ground is 1.

    Source
    ------
    Horn, Hill shading and the reflectance map, Proc. IEEE 69(1) (1981), Lambertian form; slopes
    away from the light are compressed rather than cut off, so that their shape still shows.
    """
    light_east = np.sin(SUN_AZIMUTH_RAD) * np.cos(SUN_ALTITUDE_RAD)
    light_north = np.cos(SUN_AZIMUTH_RAD) * np.cos(SUN_ALTITUDE_RAD)
    up = np.sin(SUN_ALTITUDE_RAD)
    facing = up - east_slope * light_east - north_slope * light_north
    change = facing / np.sqrt(1.0 + east_slope**2 + north_slope**2) - up
    return np.asarray(1.0 + SHADE_STRENGTH * change / (1.0 + SHADOW_SOFTNESS * np.abs(change)))


def colour(ground_m: Array, east_slope: Array, north_slope: Array, exaggeration: float) -> Array:
    """Return RGB [0 .. 255], shape ``(256, 256, 3)``, of a tile's ground."""
    tint = np.stack([np.interp(ground_m, TINT_M, TINT_RGB[:, c]) for c in range(3)], axis=-1)
    tint *= shade(east_slope * exaggeration, north_slope * exaggeration)[..., None]
    flat = np.hypot(east_slope, north_slope) < SEA_SLOPE
    sea = flat & (ground_m > SEA_LOW_M) & (ground_m < SEA_HIGH_M)
    tint[sea] = SEA_RGB
    return np.asarray(np.clip(tint, 0.0, 255.0))


def _box(bbox: tuple[float, float, float, float]) -> tuple[float, float, float, float]:
    """Return west, south, east, north [deg] with east beyond west, also across the date line."""
    west, south, east, north = bbox
    return west, south, west + (east - west) % 360.0, north


def _within(sources: list[TerrainSource], z: int, x: int, y: int) -> NDArray[np.bool_]:
    """Return the pixels within the box of a source: unknown ground there is a void."""
    middles = (np.arange(TILE_PX) + 0.5) / TILE_PX
    lon = tile_longitude_deg(x + middles, z)
    lat = np.array([tile_latitude_deg(y + middle, z) for middle in middles])
    within = np.zeros((TILE_PX, TILE_PX), dtype=np.bool_)
    for source in sources:
        west, south, east, north = _box(source.bbox)
        columns = (lon - west) % 360.0 <= east - west
        rows = (lat >= south) & (lat <= north)
        if not columns.any():  # narrower than a pixel: the nearest one
            columns[np.argmin(np.abs((lon - west + 180.0) % 360.0 - 180.0))] = True
        if not rows.any():
            rows[np.argmin(np.abs(lat - south))] = True
        within |= rows[:, None] & columns
    return within


def _finished(rgba: Array) -> Tile:
    """Return RGBA [0 .. 255] as a tile."""
    channels = 3 if (rgba[..., 3] == 255.0).all() else 4
    out = io.BytesIO()
    Image.fromarray(rgba[..., :channels].astype(np.uint8)).save(out, "PNG", compress_level=3)
    png = out.getvalue()
    return Tile(png, f'"{hashlib.sha256(png).hexdigest()[:24]}"')


class Relief:
    """Draws relief tiles from a terrain store and keeps the last ones.

    Parameters
    ----------
    store
        The terrain.
    cache_bytes
        Finished tiles kept [byte].
    """

    def __init__(self, store: TerrainStore, cache_bytes: int) -> None:
        self._store = store
        self._cache_bytes = cache_bytes
        self._kept: OrderedDict[tuple[int, int, int], Tile | None] = OrderedDict()
        self._size = 0
        self._lock = threading.Lock()

    def tile(self, z: int, x: int, y: int) -> Tile | None:
        """Return a tile, or None off the box of every source. Safe to call from several threads."""
        key = (z, x, y)
        with self._lock:
            if key in self._kept:
                self._kept.move_to_end(key)
                return self._kept[key]
        tile = self._draw(z, x, y)
        with self._lock:
            if key not in self._kept:
                self._kept[key] = tile
                self._size += self._weight(tile)
            while self._size > self._cache_bytes and self._kept:
                self._size -= self._weight(self._kept.popitem(last=False)[1])
        return tile

    def cached(self, z: int, x: int, y: int) -> Tile | None:
        """Return a tile that is at hand, without drawing."""
        with self._lock:
            return self._kept.get((z, x, y))

    @staticmethod
    def _weight(tile: Tile | None) -> int:
        return 512 + (len(tile.png) if tile else 0)

    def _draw(self, z: int, x: int, y: int) -> Tile | None:
        west, east = float(tile_longitude_deg(x, z)), float(tile_longitude_deg(x + 1, z))
        north, south = tile_latitude_deg(y, z), tile_latitude_deg(y + 1, z)
        sources = self._meeting(west, south, east, north)
        if not sources:
            return None
        cell_m = min(source.cell_m for source in sources)
        tile_m = EQUATOR_M / tile_count(z) * cos((north + south) * pi / 360.0)
        intervals = intervals_for(tile_m, cell_m)
        ground_m = self._sample(z, x, y, intervals)
        within = _within(sources, z, x, y)
        if not np.isnan(ground_m).all():
            return _finished(self._picture(ground_m, within, tile_m))
        if tile_m / TILE_PX < SPECK_CELLS * cell_m:
            within[:] = False  # a box is wider than slanting or voided ground: clear, not missing
        return _finished(np.where(within[..., None], SPECK_RGBA, 0.0))

    def _meeting(self, west: float, south: float, east: float, north: float) -> list[TerrainSource]:
        """Return the sources whose box meets this one [deg]."""
        found = []
        for source in self._store.sources:
            left, bottom, right, top = _box(source.bbox)
            for shift in (-360.0, 0.0, 360.0):
                apart = left + shift > east or right + shift < west
                if not apart and bottom <= north and top >= south:
                    found.append(source)
                    break
        return found

    def _sample(self, z: int, x: int, y: int, intervals: int) -> Array:
        """Return ground [m] at the sample points, row 0 in the north, NaN off the terrain."""
        steps = (np.arange(intervals + 3) - MARGIN) / intervals
        lon = tile_longitude_deg(x + steps, z)
        lat = np.array([tile_latitude_deg(y + step, z) for step in steps])
        lons, lats = np.meshgrid((lon + 180.0) % 360.0 - 180.0, np.clip(lat, -85.06, 85.06))
        ground = self._store.ground_m(lons.ravel(), lats.ravel())
        return np.asarray(ground, dtype=np.float64).reshape(lons.shape)

    def _picture(self, ground_m: Array, within: NDArray[np.bool_], tile_m: float) -> Array:
        """Return RGBA [0 .. 255] of sampled ground."""
        intervals = ground_m.shape[1] - 3
        weights, slopes = cubic(intervals)
        known = weights @ (~np.isnan(ground_m)).astype(np.float64) @ weights.T
        filled = fill_voids(ground_m)
        by_row = weights @ filled
        smooth_m = by_row @ weights.T
        step_m = tile_m / intervals
        east_slope = by_row @ slopes.T / step_m
        north_slope = -(slopes @ filled @ weights.T) / step_m
        pixel_m = tile_m / TILE_PX
        exaggeration = 1.3 + 0.9 * np.clip(np.log2(pixel_m / 30.0) / 3.0, 0.0, 1.5)
        rgb = colour(smooth_m, east_slope, north_slope, float(exaggeration))
        void = known < 0.5
        rgb[void] = VOID_RGB
        rgb[void & HATCH] = HATCH_RGB
        return np.dstack([rgb, np.where(void & ~within, 0.0, 255.0)])
