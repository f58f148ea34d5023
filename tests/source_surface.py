"""The ground as its source file has it: bilinear through the posts, in the source's own grid.

Written for the independent checks; shares nothing with `geo`.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import rasterio
from numpy.typing import NDArray
from pyproj import CRS, Proj, Transformer

Array = NDArray[np.float64]


class LocalPlane:
    """A plane about a place, x towards true east and y towards true north there [m]."""

    def __init__(self, lon_deg: float, lat_deg: float) -> None:
        self._proj = Proj(proj="aeqd", lat_0=lat_deg, lon_0=lon_deg, datum="WGS84")

    def to_xy(self, lon_deg: Array, lat_deg: Array) -> tuple[Array, Array]:
        """Return x, y [m] of places [deg]."""
        x_m, y_m = self._proj(np.asarray(lon_deg, float), np.asarray(lat_deg, float))
        return np.asarray(x_m), np.asarray(y_m)

    def to_lonlat(self, x_m: Array, y_m: Array) -> tuple[Array, Array]:
        """Return longitude and latitude [deg] of x, y [m]."""
        lon, lat = self._proj(np.asarray(x_m, float), np.asarray(y_m, float), inverse=True)
        return np.asarray(lon), np.asarray(lat)


class SourceSurface:
    """One source raster: heights [m] at any place, NaN where a post is void or there is none."""

    def __init__(self, file: Path) -> None:
        with rasterio.open(file, driver="GTiff") as source:
            band = source.read(1, masked=True)
            self._inverse = ~source.transform
            self.crs = CRS.from_user_input(source.crs.to_wkt())
        self.posts = band.astype(np.float64).filled(np.nan)
        self._to_source = Transformer.from_crs("EPSG:4326", self.crs, always_xy=True)

    def height_m(self, lon_deg: Array, lat_deg: Array) -> Array:
        """Return the bilinear height [m] at places [deg]."""
        x, y = self._to_source.transform(np.asarray(lon_deg, float), np.asarray(lat_deg, float))
        x, y, t = np.asarray(x), np.asarray(y), self._inverse
        return self._bilinear(t.a * x + t.b * y + t.c - 0.5, t.d * x + t.e * y + t.f - 0.5)

    def _bilinear(self, column: Array, row: Array) -> Array:
        n_rows, n_columns = self.posts.shape
        inside = (column >= 0) & (row >= 0) & (column <= n_columns - 1) & (row <= n_rows - 1)
        c = np.clip(np.floor(column), 0, n_columns - 2).astype(np.int64)
        r = np.clip(np.floor(row), 0, n_rows - 2).astype(np.int64)
        u, v = column - c, row - r
        upper = self.posts[r, c] * (1 - u) + self.posts[r, c + 1] * u
        lower = self.posts[r + 1, c] * (1 - u) + self.posts[r + 1, c + 1] * u
        return np.where(inside, upper * (1 - v) + lower * v, np.nan)
