"""Obstacles (masts, wires): read from GeoJSON, and the cells that they raise."""

from __future__ import annotations

import json
import math
import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from geo import terrain_kernels as kernels
from geo.case import FT_M
from geo.frame import Frame, frame_for
from perf.errors import TerrainError

Values = NDArray[np.float64]

SPACING_M = 15.0  # points along a wire; half of the finest usual cell
POINT_REACH_M = 30.0  # what `raise_points` takes for "one cell"
METRES_PER_DEGREE = 111_700.0  # of latitude, at the poles, where a degree is longest
ASSUMED_HORIZONTAL_FT = 250.0  # where a file states no accuracy; common practice: surveyed
ASSUMED_VERTICAL_FT = 50.0  # obstacles of middling quality are within this
SUFFIXES = (".geojson", ".json")
MAX_FILE_BYTES = 64 * 2**20
MAX_FT = 100_000.0
MAX_ACCURACY_FT = 10_000.0
ALLOWED = (
    "GeoJSON Points and LineStrings with height_ft or elevation_top_ft up to 100000, and "
    "accuracy_horizontal_ft and accuracy_vertical_ft 0 to 10000"
)


@dataclass(frozen=True)
class Obstacle:
    """A mast (one vertex) or a wire (several).

    `height_m` is above ground, `top_m` above mean sea level; at least one is not None.
    """

    lon_deg: Values
    lat_deg: Values
    height_m: float | None
    top_m: float | None
    horizontal_m: float
    vertical_m: float
    assumed: bool


@dataclass
class _Points:
    """Points along an obstacle with the height that each reaches, accuracy included."""

    lon_deg: Values
    lat_deg: Values
    reach_m: Values


@dataclass
class ObstacleField:
    """Obstacles over a terrain.

    Parameters
    ----------
    obstacles
        The obstacles.
    ground_m
        Returns the ground height at longitudes and latitudes.
    """

    obstacles: list[Obstacle]
    ground_m: Callable[[Values, Values], Values]
    _points: dict[int, _Points] = field(default_factory=dict)
    _lock: threading.Lock = field(default_factory=threading.Lock)

    def __post_init__(self) -> None:
        ends = [
            (
                o.lon_deg.min(),
                o.lon_deg.max(),
                o.lat_deg.min(),
                o.lat_deg.max(),
                o.horizontal_m,
            )
            for o in self.obstacles
        ]
        self._ends = np.asarray(ends, dtype=np.float64).reshape(-1, 5)

    def raise_cells(
        self, top_m: NDArray[np.float32], frame: Frame, cell_m: float, row0: int, col0: int
    ) -> None:
        """Raise every cell within the horizontal accuracy plus one cell of an obstacle.

        Parameters
        ----------
        top_m
            Cells [m], shape ``(rows, cols)``, changed in place; a void cell stays void.
        frame, cell_m, row0, col0
            As in `TerrainStore.window`.
        """
        rows, cols = top_m.shape
        x_m = (col0 + np.array([0.0, cols / 2, cols])) * cell_m
        y_m = (row0 + np.array([0.0, rows / 2, rows])) * cell_m
        lon, lat = frame.to_lonlat(*np.meshgrid(x_m, y_m))
        for index in self._near(lon.ravel(), lat.ravel(), cell_m):
            points = self._points_of(index)
            x_m, y_m = frame.to_xy_m(points.lon_deg, points.lat_deg)
            radius = np.full(x_m.size, self.obstacles[index].horizontal_m / cell_m + 1.0)
            kernels.raise_discs(
                top_m, x_m / cell_m - col0, y_m / cell_m - row0, radius, points.reach_m
            )

    def raise_points(self, lon_deg: Values, lat_deg: Values, height_m: Values) -> None:
        """Raise heights at places within the horizontal accuracy plus 30 m of an obstacle.

        Parameters
        ----------
        lon_deg, lat_deg, height_m
            Places [deg] and their heights [m], shape ``(k,)``; heights changed in place.
        """
        if lon_deg.size == 0:
            return
        frame = frame_for(float(lon_deg[0]), float(lat_deg[0]))
        x_m, y_m = frame.to_xy_m(lon_deg, lat_deg)
        for index in self._near(lon_deg, lat_deg, POINT_REACH_M):
            points = self._points_of(index)
            reach_m = self.obstacles[index].horizontal_m + POINT_REACH_M
            point_x_m, point_y_m = frame.to_xy_m(points.lon_deg, points.lat_deg)
            kernels.raise_places(height_m, x_m, y_m, point_x_m, point_y_m, reach_m, points.reach_m)

    def _near(self, lon_deg: Values, lat_deg: Values, more_m: float) -> list[int]:
        """Return the obstacles whose reach may meet the rectangle round the places."""
        if not len(self._ends) or not (np.isfinite(lon_deg).all() and np.isfinite(lat_deg).all()):
            return list(range(len(self._ends)))
        west, east, south, north, horizontal_m = self._ends.T
        lon = lon_deg[0] + (lon_deg - lon_deg[0] + 180.0) % 360.0 - 180.0
        grow_lat = (horizontal_m + more_m) / METRES_PER_DEGREE + 0.01
        widest = min(float(np.abs(lat_deg).max()) + 0.5, 89.5)
        grow_lon = grow_lat / math.cos(math.radians(widest))
        middle, half = (lon.min() + lon.max()) / 2.0, (lon.max() - lon.min()) / 2.0
        apart = np.abs(((west + east) / 2.0 - middle + 180.0) % 360.0 - 180.0)
        meets = apart <= (east - west) / 2.0 + half + grow_lon
        meets &= (south - grow_lat <= lat_deg.max()) & (north + grow_lat >= lat_deg.min())
        return [int(index) for index in np.flatnonzero(meets)]

    def _points_of(self, index: int) -> _Points:
        """Return the points along an obstacle, worked out once."""
        with self._lock:
            if index in self._points:
                return self._points[index]
        points = self._trace(self.obstacles[index])
        with self._lock:
            self._points[index] = points
        return points

    def _trace(self, obstacle: Obstacle) -> _Points:
        """Return points along an obstacle; a wire hangs no lower than straight from end to end."""
        corners = np.arange(obstacle.lon_deg.size, dtype=np.float64)
        at = corners
        if corners.size > 1:
            spans_m = METRES_PER_DEGREE * np.hypot(
                np.diff(obstacle.lon_deg), np.diff(obstacle.lat_deg)
            )
            at = np.concatenate(
                [
                    np.linspace(k, k + 1.0, math.ceil(span_m / SPACING_M) + 1)
                    for k, span_m in enumerate(spans_m)
                ]
            )
        lon = np.interp(at, corners, obstacle.lon_deg)
        lat = np.interp(at, corners, obstacle.lat_deg)
        reach_m = np.full(at.size, -np.inf if obstacle.top_m is None else obstacle.top_m)
        if obstacle.height_m is not None:
            hung_m = self.ground_m(obstacle.lon_deg, obstacle.lat_deg) + obstacle.height_m
            reach_m = np.fmax(reach_m, self.ground_m(lon, lat) + obstacle.height_m)
            reach_m = np.fmax(reach_m, np.interp(at, corners, hung_m))
        return _Points(lon, lat, reach_m + obstacle.vertical_m)


def obstacle_files(folder: Path) -> list[Path]:
    """Return the GeoJSON files of a folder by name, an empty list where there is no folder."""
    if not folder.is_dir():
        return []
    return sorted(path for path in folder.iterdir() if path.suffix.lower() in SUFFIXES)


def load_obstacles(path: Path) -> list[Obstacle]:
    """Return the obstacles of a GeoJSON file.

    Raises
    ------
    TerrainError
        The file or one of its features cannot be used; names the file and the feature's number.
    """
    not_one = f"The obstacle file {path.name} is not a GeoJSON FeatureCollection."
    try:
        if path.stat().st_size > MAX_FILE_BYTES:
            raise TerrainError(f"The obstacle file {path.name} is larger than 64 MB.")
        features = json.loads(path.read_text(encoding="utf-8"))["features"]
    except (OSError, ValueError, KeyError, TypeError, RecursionError):
        raise TerrainError(not_one, allowed=ALLOWED) from None
    if not isinstance(features, list):
        raise TerrainError(not_one, allowed=ALLOWED)
    found: list[Obstacle] = []
    for number, feature in enumerate(features):
        try:
            found.extend(_obstacles(feature))
        except (ValueError, KeyError, TypeError, IndexError, AttributeError):
            text = f"Feature {number} of the obstacle file {path.name} cannot be used."
            raise TerrainError(text, allowed=ALLOWED) from None
    return found


def _obstacles(feature: dict[str, Any]) -> list[Obstacle]:
    """Return the obstacles of a feature; a ValueError or KeyError where one is faulty."""
    geometry, properties = feature["geometry"], feature["properties"]
    kind, places = geometry["type"], geometry["coordinates"]
    if kind not in ("Point", "MultiPoint", "LineString", "MultiLineString"):
        raise ValueError
    lines = {"Point": [[places]], "LineString": [places]}.get(kind, places)
    if kind == "MultiPoint":
        lines = [[place] for place in places]
    height_m, top_m = _metres(properties, "height_ft"), _metres(properties, "elevation_top_ft")
    if height_m is None and top_m is None:
        raise ValueError
    accuracy_m = [_metres(properties, f"accuracy_{way}_ft") for way in ("horizontal", "vertical")]
    horizontal_m = ASSUMED_HORIZONTAL_FT * FT_M if accuracy_m[0] is None else accuracy_m[0]
    vertical_m = ASSUMED_VERTICAL_FT * FT_M if accuracy_m[1] is None else accuracy_m[1]
    found = []
    for line in lines:
        vertices = np.array([place[:2] for place in line], dtype=np.float64)
        if vertices.ndim != 2 or not (np.abs(vertices) <= (360.0, 90.0)).all():
            raise ValueError
        found.append(
            Obstacle(
                vertices[:, 0],
                vertices[:, 1],
                height_m,
                top_m,
                horizontal_m,
                vertical_m,
                None in accuracy_m,
            )
        )
    return found


def _metres(properties: dict[str, Any], key: str) -> float | None:
    """Return a length [m] given in feet, None for null or absent; a ValueError out of range."""
    value = properties.get(key)
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValueError
    lowest = -2000.0 if key == "elevation_top_ft" else 0.0
    if not lowest <= value <= (MAX_ACCURACY_FT if key.startswith("accuracy") else MAX_FT):
        raise ValueError
    return float(value) * FT_M
