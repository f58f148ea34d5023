"""Layers: terrain files on one grid of posts, read as one."""

from __future__ import annotations

import math
import threading
from collections import OrderedDict
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pyproj import CRS, Geod, Transformer
from pyproj.exceptions import ProjError

from geo import terrain_kernels as kernels
from geo.raster_guard import refusal
from geo.terrain_source import NOT_STATED, Bbox, RasterFile, TerrainSource, read_heights
from perf.errors import TerrainError

Values = NDArray[np.float64]
Posts = NDArray[np.float32]
Box = tuple[int, int, int, int]

SAME_GRID_CELLS = 0.01  # files whose posts agree this well share a grid
SQUARE = 256  # side of the squares of posts that single places are read from
FAR = 1e9  # posts: no raster is so large
EDGE = 1e-6  # posts: a place so near a line of posts lies on it
NUDGES = [(du, dv) for du in (0.0, -EDGE, EDGE) for dv in (0.0, -EDGE, EDGE)][1:]
SQUARES_KEPT = 256  # of each layer, 64 MB: as many as the widest solve samples

_GEOD = Geod(ellps="WGS84")
_LOCAL = threading.local()  # Transformer objects must not be shared between threads


def transformers(crs: CRS) -> tuple[Any, Any] | None:
    """Return this thread's transforms from and to WGS 84, None where there is nothing to do."""
    held: dict[str, Any] = _LOCAL.__dict__.setdefault("held", {})
    key = crs.to_wkt()
    if key not in held:
        wgs84 = CRS.from_epsg(4326)
        if crs.is_geographic and crs.to_epsg(min_confidence=90) == 4326:
            held[key] = None
        else:
            held[key] = (
                Transformer.from_crs(wgs84, crs, always_xy=True),
                Transformer.from_crs(crs, wgs84, always_xy=True),
            )
    pair: tuple[Any, Any] | None = held[key]
    return pair


class Squares:
    """Squares of a raster with one more row and column, the least recently used dropped first.

    Parameters
    ----------
    read
        Returns the numbers of a window ``(j0, j1, i0, i1)``, None off the raster.
    """

    def __init__(self, read: Callable[[Box], NDArray[Any] | None]) -> None:
        self._read = read
        self._kept: OrderedDict[tuple[int, int], NDArray[Any]] = OrderedDict()
        self._lock = threading.Lock()

    def get(self, row: int, col: int) -> NDArray[Any] | None:
        """Return the square that starts at post (row * SQUARE, col * SQUARE)."""
        key = (row, col)
        with self._lock:
            if key in self._kept:
                self._kept.move_to_end(key)
                return self._kept[key]
        j, i = row * SQUARE, col * SQUARE
        numbers = self._read((j, j + SQUARE + 1, i, i + SQUARE + 1))
        if numbers is None:  # off the raster: known at once, not worth a place
            return None
        with self._lock:
            self._kept[key] = numbers
            while len(self._kept) > SQUARES_KEPT:
                self._kept.popitem(last=False)
        return numbers


def by_square(u: Values, v: Values) -> Iterator[tuple[int, int, NDArray[np.int64]]]:
    """Yield row and column of each square that holds places, with the indices of the places.

    Parameters
    ----------
    u, v
        Post coordinates, shape ``(k,)``; those that are not finite belong to no square.
    """
    good = np.flatnonzero(np.isfinite(u) & np.isfinite(v))
    if good.size == 0:
        return
    rows = np.floor(v[good] / SQUARE).astype(np.int64)
    cols = np.floor(u[good] / SQUARE).astype(np.int64)
    order = np.lexsort((cols, rows))
    turns = np.flatnonzero(np.diff(rows[order]) | np.diff(cols[order])) + 1
    for part in np.split(order, turns):
        yield int(rows[part[0]]), int(cols[part[0]]), good[part]


@dataclass
class Layer:
    """Files on one grid of posts. Post (j, i) of the layer is that of its first file.

    Parameters
    ----------
    first
        The file that fixes the grid.
    members
        Triples of file, row and column of its first post in the layer.
    turn
        Columns once round the Earth, 0 where the grid does not close.
    """

    first: RasterFile
    members: list[tuple[RasterFile, int, int]] = field(default_factory=list)
    turn: int = 0
    cell_m: float = 0.0
    centre_lon_deg: float = 0.0
    centre_lat_deg: float = 0.0
    per_degree: bool = False
    bboxes: list[Bbox] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.squares = Squares(lambda box: self.read(box) if self.placed(box) else None)

    @staticmethod
    def of(first: RasterFile) -> Layer:
        """Return a layer of one file.

        Raises
        ------
        TerrainError
            The file's place cannot be found.
        """
        layer = Layer(first, per_degree=first.crs.is_geographic)
        if layer.per_degree and first.transform.b == first.transform.d == 0.0:
            turn = 360.0 / abs(first.transform.a)
            layer.turn = round(turn) if abs(turn - round(turn)) < SAME_GRID_CELLS else 0
        layer.members.append((first, 0, 0))
        u, v = (first.width - 1) / 2.0, (first.height - 1) / 2.0
        try:
            lon, lat = layer.to_lonlat(np.array([u, u + 1.0, u]), np.array([v, v, v + 1.0]))
        except ProjError:
            lon = lat = np.full(3, np.nan)
        if not (np.isfinite(lon).all() and np.isfinite(lat).all() and abs(lat).max() <= 90.0):
            raise refusal(first.path, "lies outside its own coordinate system")
        _, _, spacing_m = _GEOD.inv(lon[[0, 0]], lat[[0, 0]], lon[1:], lat[1:])
        layer.cell_m = math.sqrt(float(spacing_m[0]) * float(spacing_m[1]))
        layer.centre_lon_deg, layer.centre_lat_deg = float(lon[0]), float(lat[0])
        return layer

    def takes(self, file: RasterFile) -> bool:
        """Add a file if its posts fall on those of the layer; tell whether they did."""
        mine, its = self.first.transform, file.transform
        longest = max(file.width, file.height, self.first.width, self.first.height)
        spacing = max(abs(getattr(mine, term)) for term in "abde")
        drift = max(abs(getattr(mine, term) - getattr(its, term)) for term in "abde")
        if drift * longest > SAME_GRID_CELLS * spacing or self.first.crs != file.crs:
            return False
        back = ~mine
        col, row = (
            back.a * its.c + back.b * its.f + back.c,
            back.d * its.c + back.e * its.f + back.f,
        )
        if max(abs(col - round(col)), abs(row - round(row))) > SAME_GRID_CELLS:
            return False
        self.members.append((file, round(row), round(col)))
        return True

    def to_posts(
        self, lon_deg: Values, lat_deg: Values, lon_ref_deg: float
    ) -> tuple[Values, Values]:
        """Return post coordinates u (column), v (row) of places, continuous round `lon_ref_deg`."""
        if self.per_degree:
            lon_ref_deg += _turns(self.centre_lon_deg - lon_ref_deg)
            lon_deg = lon_deg + _turns(lon_ref_deg - lon_deg)
        pair = transformers(self.first.crs)
        x, y = (lon_deg, lat_deg) if pair is None else pair[0].transform(lon_deg, lat_deg)
        if pair is not None and self.per_degree:
            with np.errstate(invalid="ignore"):
                x = np.asarray(x) + _turns(lon_deg - np.asarray(x))
        inverse = ~self.first.transform
        with np.errstate(invalid="ignore"):  # far off, the projection gives inf or nonsense
            u = inverse.a * x + inverse.b * y + (inverse.c - 0.5)
            v = inverse.d * x + inverse.e * y + (inverse.f - 0.5)
            known = (abs(u) < FAR) & (abs(v) < FAR)
        u, v = np.where(known, u, np.nan), np.where(known, v, np.nan)
        return u, v

    def to_lonlat(self, u: Values, v: Values) -> tuple[Values, Values]:
        """Return longitude and latitude [deg] of post coordinates; longitude may pass 180."""
        grid = self.first.transform
        x = grid.a * (u + 0.5) + grid.b * (v + 0.5) + grid.c
        y = grid.d * (u + 0.5) + grid.e * (v + 0.5) + grid.f
        pair = transformers(self.first.crs)
        lon, lat = (x, y) if pair is None else pair[1].transform(x, y)
        return np.asarray(lon), np.asarray(lat)

    def near(self, lon_deg: Values, lat_deg: Values) -> bool:
        """Tell whether any member may meet the rectangle that holds the places."""
        return any(meets(bbox, lon_deg, lat_deg) for bbox in self.bboxes)

    def placed(self, box: tuple[int, int, int, int]) -> list[tuple[RasterFile, int, int]]:
        """Return the members that meet a window of posts, where they lie nearest to it.

        Parameters
        ----------
        box
            ``(j0, j1, i0, i1)``, ends exclusive.
        """
        j0, j1, i0, i1 = box
        found = []
        for file, row, col in self.members:
            turns = [0]
            if self.turn:
                nearest = round(((i0 + i1) / 2 - col - file.width / 2) / self.turn)
                turns = [nearest - 1, nearest, nearest + 1]
            for k in turns:
                left = col + k * self.turn
                if row < j1 and row + file.height > j0 and left < i1 and left + file.width > i0:
                    found.append((file, row, left))
        return found

    def read(self, box: tuple[int, int, int, int]) -> Posts:
        """Return heights [m] of a window of posts, NaN where there are none.

        Parameters
        ----------
        box
            ``(j0, j1, i0, i1)``, ends exclusive.

        Raises
        ------
        TerrainError
            A file is cut short or damaged.
        """
        j0, j1, i0, i1 = box
        out = np.full((j1 - j0, i1 - i0), np.nan, dtype=np.float32)
        for file, row, col in self.placed(box):
            r0, r1 = max(j0, row), min(j1, row + file.height)
            c0, c1 = max(i0, col), min(i1, col + file.width)
            heights = read_heights(file, (r0 - row, r1 - row, c0 - col, c1 - col))
            part = out[r0 - j0 : r1 - j0, c0 - i0 : c1 - i0]
            np.copyto(part, heights, where=np.isnan(part))
        return out

    def heights_m(self, lon_deg: Values, lat_deg: Values) -> Values:
        """Return bilinear heights [m] at places, shape ``(k,)``, NaN where void or off it."""
        u, v = self.to_posts(lon_deg, lat_deg, float(lon_deg[0]))
        out = self._heights(u, v)
        missing = np.flatnonzero(np.isnan(out) & np.isfinite(u) & np.isfinite(v))
        on_line = np.maximum(abs(u[missing] % 1.0 - 0.5), abs(v[missing] % 1.0 - 0.5))
        edge = missing[on_line > 0.5 - EDGE]
        for du, dv in NUDGES:  # on a line of posts, the patch of either side will do
            if edge.size == 0:
                break
            out[edge] = self._heights(u[edge] + du, v[edge] + dv)
            edge = edge[np.isnan(out[edge])]
        return out

    def _heights(self, u: Values, v: Values) -> Values:
        """Return bilinear heights [m] at post coordinates, NaN where void or off the layer."""
        out = np.full(u.size, np.nan)
        for row, col, here in by_square(u, v):
            posts = self.squares.get(row, col)
            if posts is None:
                continue
            heights = np.full(here.size, np.nan)
            kernels.sample(posts, u[here] - col * SQUARE, v[here] - row * SQUARE, heights)
            out[here] = heights
        return out

    def describe(self, file: RasterFile) -> TerrainSource:
        """Return what to show of a member."""
        _, row, col = next(member for member in self.members if member[0] is file)
        edge = np.linspace(0.0, 1.0, 33)
        u = col + (file.width - 1) * np.concatenate([edge, edge, 0 * edge, 0 * edge + 1])
        v = row + (file.height - 1) * np.concatenate([0 * edge, 0 * edge + 1, edge, edge])
        lon, lat = self.to_lonlat(u, v)
        lon = lon[0] + _half_turn(lon - lon[0])
        west, east = float(_half_turn(lon.min())), -float(_half_turn(-lon.max()))
        tags = file.tags
        return TerrainSource(
            file=file.path.name,
            bbox=(west, float(lat.min()), east, float(lat.max())),
            cell_m=self.cell_m,
            source=tags.get("SOURCE") or tags.get("TIFFTAG_IMAGEDESCRIPTION") or NOT_STATED,
            date=tags.get("DATE") or tags.get("TIFFTAG_DATETIME") or NOT_STATED,
            vertical_datum=file.vertical_datum,
            vertical_unit=file.vertical_unit,
        )


def group(files: list[RasterFile]) -> tuple[list[Layer], list[TerrainError]]:
    """Return the layers of files, the finest first, and the refusals of files without a place."""
    layers: list[Layer] = []
    refused = []
    for file in files:
        if any(layer.takes(file) for layer in layers):
            continue
        try:
            layers.append(Layer.of(file))
        except TerrainError as error:
            refused.append(error)
    for layer in layers:
        layer.bboxes = [layer.describe(file).bbox for file, _, _ in layer.members]
    return sorted(layers, key=lambda layer: layer.cell_m), refused


def meets(bbox: Bbox, lon_deg: Values, lat_deg: Values) -> bool:
    """Tell whether a box meets the rectangle that holds the places, or comes within 0.02 deg."""
    west, south, east, north = bbox
    lon = lon_deg.flat[0] + _half_turn(lon_deg - lon_deg.flat[0])
    middle, half = (lon.min() + lon.max()) / 2.0, (lon.max() - lon.min()) / 2.0
    if not np.isfinite(half):
        return True
    wide = ((east - west) % 360.0) / 2.0 if east - west < 360.0 else 180.0
    apart = abs(float(_half_turn(west + wide - middle)))
    in_latitude = south - 0.02 <= lat_deg.max() and lat_deg.min() <= north + 0.02
    return bool(apart <= wide + half + 0.02 and in_latitude)


def _turns(angle_deg: ArrayLike) -> Any:
    """Return the whole turns in an angle [deg]: adding them to a longitude keeps its bits."""
    return 360.0 * np.round(np.asarray(angle_deg, dtype=np.float64) / 360.0)


def _half_turn(angle_deg: ArrayLike) -> Values:
    """Return an angle in -180 .. 180 (exclusive) degrees."""
    return np.asarray((np.asarray(angle_deg, dtype=np.float64) + 180.0) % 360.0 - 180.0)
