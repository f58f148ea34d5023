"""Small synthetic terrains, written as GeoTIFF anywhere on Earth, and glide cases over them."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from numpy.typing import NDArray
from pyproj import CRS, Transformer
from rasterio.transform import Affine

from geo.case import GlideCase, Margins
from geo.wind import WindProfile
from perf.polar import Polar
from tests.source_surface import LocalPlane

Array = NDArray[np.float64]
HeightFunction = Callable[[Array, Array], Array]
VOID = -9999.0  # void value in the files written here
FT_M = 0.3048


@dataclass(frozen=True)
class Place:
    """A place on Earth, WGS 84 [deg]."""

    lon_deg: float
    lat_deg: float

    def plane(self) -> LocalPlane:
        """Return the true east/north plane about the place."""
        return LocalPlane(self.lon_deg, self.lat_deg)

    def local_crs(self, turned_deg: float = 0.0) -> str:
        """Return a CRS about the place whose grid north is about `turned_deg` off true north.

        The turn comes from a transverse Mercator far from its central meridian, where the
        convergence is atan(tan(dlon) sin(lat)) (Snyder, USGS Professional Paper 1395, p. 61).
        """
        offset_deg = 0.0
        if turned_deg:
            sine = math.sin(math.radians(self.lat_deg))
            offset_deg = math.degrees(math.atan(math.tan(math.radians(turned_deg)) / sine))
        return (
            f"+proj=tmerc +lat_0={self.lat_deg} +lon_0={self.lon_deg - offset_deg}"
            " +k=1 +datum=WGS84 +units=m +no_defs"
        )


def write_terrain(
    folder: Path,
    place: Place,
    height: HeightFunction,
    *,
    half_m: float,
    post_m: float,
    crs: str | None = None,
    name: str = "synthetic",
) -> Path:
    """Write `terrain/<name>.tif`: `height(x, y)` of true local x, y [m], NaN a void.

    The square reaches `half_m` from the place, its posts `post_m` apart in `crs` (metres; None
    takes one centred on the place).
    """
    system = CRS.from_user_input(crs or place.local_crs())
    to_source = Transformer.from_crs("EPSG:4326", system, always_xy=True)
    x0, y0 = to_source.transform(place.lon_deg, place.lat_deg)
    n = 2 * int(half_m / post_m) + 1
    transform = Affine(post_m, 0, x0 - n * post_m / 2, 0, -post_m, y0 + n * post_m / 2)
    column, row = np.meshgrid(np.arange(n) + 0.5, np.arange(n) + 0.5)
    east, north = _applied(transform, column, row)
    lon, lat = to_source.transform(east, north, direction="INVERSE")
    x_m, y_m = place.plane().to_xy(lon, lat)
    return write_raster(folder, height(x_m, y_m), transform, system.to_wkt(), name)


def _applied(transform: Affine, column: Array, row: Array) -> tuple[Array, Array]:
    """Return the places of pixel coordinates under a geotransform."""
    x = transform.a * column + transform.b * row + transform.c
    return x, transform.d * column + transform.e * row + transform.f


def write_raster(folder: Path, heights: Array, transform: Affine, crs: Any, name: str) -> Path:
    """Write heights [m], row 0 in the north, as `terrain/<name>.tif`; NaN becomes a void."""
    target = folder / "terrain" / f"{name}.tif"
    target.parent.mkdir(parents=True, exist_ok=True)
    profile = {"driver": "GTiff", "count": 1, "dtype": "float32", "nodata": VOID}
    profile |= {"height": heights.shape[0], "width": heights.shape[1]}
    with rasterio.open(target, "w", crs=crs, transform=transform, **profile) as out:
        out.write(np.where(np.isnan(heights), VOID, heights).astype(np.float32), 1)
        out.update_tags(SOURCE="invented", DATE="2026-01", VERTICAL_DATUM="none")
    return target


def flat(elevation_m: float = 0.0) -> HeightFunction:
    """Return flat ground."""
    return lambda x_m, _y_m: np.full(np.shape(x_m), elevation_m)


def blocks(rectangles: list[tuple[float, float, float, float, float]]) -> HeightFunction:
    """Return flat ground at 0 m with upright blocks: west, south, east, north, height [m]."""

    def height(x_m: Array, y_m: Array) -> Array:
        out = np.zeros(np.shape(x_m))
        for west, south, east, north, top in rectangles:
            inside = (x_m >= west) & (x_m <= east) & (y_m >= south) & (y_m <= north)
            out = np.where(inside, np.maximum(out, top), out)
        return out

    return height


def hills(seed: int, relief_m: float, scale_m: float, base_m: float = 0.0) -> HeightFunction:
    """Return invented hills: a sum of waves of falling length, sharpened to ridges."""
    rng = np.random.default_rng(seed)
    waves = [
        (scale_m / 1.8**k, 1.8**-k, rng.uniform(0, 2 * math.pi, 3)) for k in range(5) for _ in "ab"
    ]

    def height(x_m: Array, y_m: Array) -> Array:
        total = np.zeros(np.shape(x_m))
        for length_m, weight, (angle, phase, _spare) in waves:
            along = x_m * math.cos(angle) + y_m * math.sin(angle)
            total += weight * (1.0 - 2.0 * np.abs(np.sin(math.pi * along / length_m + phase)))
        return np.asarray(base_m + relief_m * np.maximum(total / 2.0 + 0.5, 0.0))

    return height


def polar(ratio: float = 9.0, eas_mps: float = 35.0, stall_mps: float | None = None) -> Polar:
    """Return a polar in manual form."""
    stall = 0.68 * eas_mps if stall_mps is None else stall_mps
    return Polar(best_glide_eas_mps=eas_mps, ratio=ratio, stall_eas_mps=stall, mass_kg=1000.0)


def constant_wind(east_mps: float, north_mps: float) -> WindProfile:
    """Return one wind at every level, blowing towards the components given."""
    return WindProfile(np.zeros(1), np.array([east_mps]), np.array([north_mps]))


def neutral(**changed: Any) -> Margins:
    """Return margins that take nothing off, but for those named."""
    values = {
        "ratio_factor": 1.0,
        "wind_error_mps": 0.0,
        "reaction_s": 0.0,
        "bank_rad": math.radians(30.0),
        "clearance_m": 0.0,
        "arrival_height_m": 0.0,
        "downdraft_mps": 0.0,
        "excess_speed_credit": 0.0,
    }
    return Margins(**(values | changed))


def glide_case(place: Place, alt_m: float, plane: Polar | None = None, **changed: Any) -> GlideCase:
    """Return a case from any heading with neutral margins, but for what is named."""
    plane = plane or polar()
    values: dict[str, Any] = {
        "track_rad": None,
        "polar": plane,
        "maximum_speed_eas_mps": 2.0 * plane.best_glide_eas_mps,
        "margins": neutral(),
    }
    return GlideCase(place.lon_deg, place.lat_deg, alt_m, **(values | changed))
