"""Terrain files: what each says about itself, and its heights in metres."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from affine import Affine
from numpy.typing import NDArray
from pyproj import CRS
from pyproj.exceptions import CRSError
from rasterio.errors import RasterioError
from rasterio.warp import transform_bounds

from geo.raster_guard import (
    DRIVERS,
    HEIGHT_TYPES,
    open_raster,
    open_unchecked,
    read_window,
    refusal,
)

Posts = NDArray[np.float32]
Bbox = tuple[float, float, float, float]

NOT_STATED = "not stated"
LOWEST_M, HIGHEST_M = -500.0, 9000.0  # land lies between -430 m and 8849 m; outside is a void
_FOOT_M, _SURVEY_FOOT_M = 0.3048, 1200.0 / 3937.0  # NIST Special Publication 811 (2008), B.6
UNITS_M = {
    **dict.fromkeys(("m", "metre", "meter", "metres", "meters"), ("m", 1.0)),
    **dict.fromkeys(("ft", "foot", "feet", "international foot"), ("ft", _FOOT_M)),
    **dict.fromkeys(
        ("us survey foot", "us survey feet", "us-ft", "ftus", "foot_us", "survey foot"),
        ("US survey ft", _SURVEY_FOOT_M),
    ),
}


@dataclass(frozen=True)
class TerrainSource:
    """A terrain file as shown to people.

    `bbox` is west, south, east, north [deg] of its posts, west > east across the 180th meridian;
    `cell_m` the distance of its posts [m]. What the file does not say is ``not stated``.
    """

    file: str
    bbox: Bbox
    cell_m: float
    source: str
    date: str
    vertical_datum: str
    vertical_unit: str


@dataclass(frozen=True)
class RasterFile:
    """A raster file's grid and the meaning of its numbers: metres = number * scale + offset."""

    path: Path
    width: int
    height: int
    transform: Affine
    crs: CRS
    scale_m: float
    offset_m: float
    tags: dict[str, str]
    vertical_datum: str
    vertical_unit: str


def read_header(path: Path, dtypes: tuple[str, ...] = HEIGHT_TYPES) -> RasterFile:
    """Return what a file says about itself, without reading its cells.

    Raises
    ------
    TerrainError
        The file is refused; says why.
    """
    with open_raster(path, dtypes) as data:
        tags = {str(k).upper(): str(v)[:200] for k, v in {**data.tags(), **data.tags(1)}.items()}
        unit, wkt = data.units[0], data.crs.to_wkt()
        scale, offset, transform = data.scales[0], data.offsets[0], data.transform
        width, height = data.width, data.height
    if min(width, height) < 2:
        raise refusal(path, "has fewer than two rows or columns")
    try:
        horizontal, vertical = _split(CRS.from_wkt(wkt))
    except CRSError:
        raise refusal(path, "has a coordinate system that is not known") from None
    name, unit_m = _vertical_unit(path, tags.get("VERTICAL_UNIT") or unit, vertical)
    datum = tags.get("VERTICAL_DATUM") or (vertical.name if vertical else NOT_STATED)
    return RasterFile(
        path,
        width,
        height,
        transform,
        horizontal,
        scale * unit_m,
        offset * unit_m,
        tags,
        datum,
        name,
    )


def _split(crs: CRS) -> tuple[CRS, CRS | None]:
    """Return the horizontal and the vertical part of a coordinate system."""
    if crs.is_compound:
        parts = crs.sub_crs_list
        return parts[0].to_2d(), parts[1]
    return crs.to_2d(), None


def _vertical_unit(path: Path, stated: str | None, vertical: CRS | None) -> tuple[str, float]:
    """Return name and length [m] of the height unit: of tag, else band, else CRS, else metre."""
    if stated:
        if stated.strip().lower() not in UNITS_M:
            raise refusal(
                path, "states a height unit that is not known (m, ft, US survey foot are)"
            )
        return UNITS_M[stated.strip().lower()]
    if vertical is not None and vertical.axis_info:
        axis = vertical.axis_info[0]
        return UNITS_M.get(
            axis.unit_name.lower(), (axis.unit_name, float(axis.unit_conversion_factor))
        )
    return f"m ({NOT_STATED})", 1.0


def read_heights(file: RasterFile, window: tuple[int, int, int, int]) -> Posts:
    """Return heights [m] of a window ``(row0, row1, column0, column1)`` of a file, NaN for voids.

    Raises
    ------
    TerrainError
        The file is cut short or damaged.
    """
    with open_raster(file.path) as data:
        raw = read_window(data, file.path, window)
    values: NDArray[Any] = np.ma.getdata(raw)
    if (file.scale_m, file.offset_m) == (1.0, 0.0):
        heights = values.astype(np.float32)
    else:
        heights = (values * file.scale_m + file.offset_m).astype(np.float32)
    heights[np.ma.getmaskarray(raw) | ~((heights >= LOWEST_M) & (heights <= HIGHEST_M))] = np.nan
    return heights


def known_bbox(path: Path) -> Bbox | None:
    """Return where a refused file lies, None if that cannot be told."""
    if path.suffix.lower() not in DRIVERS:
        return None
    try:
        with open_unchecked(path) as data:
            if data.crs is None or data.transform.is_identity:
                return None
            west, south, east, north = transform_bounds(data.crs, "EPSG:4326", *data.bounds)
    except (RasterioError, OSError, ValueError):
        return None
    return float(west), float(south), float(east), float(north)
