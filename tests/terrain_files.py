"""Small terrain folders for the tests."""

from __future__ import annotations

import json
import math

import numpy as np
import rasterio
from affine import Affine

from geo.frame import frame_for
from geo.terrain import TerrainStore

UTM32 = "EPSG:32632"
ORIGIN = (500_000.0, 5_100_000.0)  # on the central meridian of UTM zone 32, near 46 N


def write_raster(path, heights, transform=None, crs=UTM32, *, dtype="float32", **options):
    """Write heights (row 0 first) as a GeoTIFF; keys in capitals become tags; return the path.

    `transform` is an Affine, or the side of square cells whose north-west corner is ORIGIN.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    heights = np.asarray(heights, dtype=dtype)
    if not isinstance(transform, Affine):
        side = float(transform or 30.0)
        transform = Affine(side, 0.0, ORIGIN[0], 0.0, -side, ORIGIN[1])
    tags = {key: options.pop(key) for key in list(options) if key.isupper()}
    units = options.pop("units", None)
    with rasterio.open(
        path, "w", driver="GTiff", width=heights.shape[1], height=heights.shape[0], count=1,
        dtype=dtype, crs=crs, transform=transform, **options,
    ) as out:  # fmt: skip
        out.write(heights, 1)
        out.update_tags(**tags)
        if units:
            out.units = (units,)
    return path


def turned(side_m, turn_rad, origin=ORIGIN):
    """Return the transform of a grid whose columns run `turn_rad` clockwise of grid east."""
    cos, sin = side_m * math.cos(turn_rad), side_m * math.sin(turn_rad)
    return Affine(cos, -sin, origin[0], -sin, -cos, origin[1])


def store_of(folder, heights, transform=None, crs=UTM32, **options):
    """Return the store of a folder with one more terrain file, `a.tif`."""
    write_raster(folder / "terrain" / "a.tif", heights, transform, crs, **options)
    return TerrainStore(folder)


def window_about(store, lon, lat, n_cells=64, cell_m=30.0):
    """Return the window whose middle is a place."""
    frame = frame_for(lon, lat)
    x_m, y_m = frame.to_xy_m(lon, lat)
    col0, row0 = int(x_m // cell_m) - n_cells // 2, int(y_m // cell_m) - n_cells // 2
    return store.window(frame, col0, row0, n_cells, n_cells, cell_m)


def places_in(window, seed=0, count=4000):
    """Return (longitude, latitude, row, column) of random places in a window."""
    rng = np.random.default_rng(seed)
    n_rows, n_cols = window.top_m.shape
    x, y = rng.uniform(0, n_cols, count), rng.uniform(0, n_rows, count)
    lon, lat = window.frame.to_lonlat(
        (window.col0 + x) * window.cell_m, (window.row0 + y) * window.cell_m
    )
    return lon, lat, y.astype(int), x.astype(int)


def write_json(path, content):
    """Write JSON; return the path."""
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(json.dumps(content), encoding="utf-8")
    return path
