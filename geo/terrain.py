"""The terrain of a data folder: highest point per solver cell, ground height at any place."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from geo import terrain_kernels as kernels
from geo.canopy import NO_DATA, LandCover
from geo.frame import Frame
from geo.obstacles import (
    ASSUMED_HORIZONTAL_FT,
    ASSUMED_VERTICAL_FT,
    ObstacleField,
    load_obstacles,
    obstacle_files,
)
from geo.raster_guard import raster_files
from geo.terrain_layer import group, meets
from geo.terrain_source import NOT_STATED, Bbox, TerrainSource, known_bbox, read_header
from geo.terrain_tiles import CACHE_BYTES, TILE_CELLS, CellBlock, Tile, TileCache, TileKey
from perf.errors import Cancelled, TerrainError

Loaded = TypeVar("Loaded")
BLOCK_TILES = 2  # tiles built at once along each side: about 0.2 s, between looks at a cancel flag

Values = NDArray[np.float64]


@dataclass(frozen=True)
class TerrainWindow:
    """Cells of a frame.

    Parameters
    ----------
    top_m
        Highest ground with obstacles and canopy [m], float32, shape ``(n_rows, n_cols)``, row 0
        south, column 0 west; NaN where any part of the cell is void or off the terrain.
    frame, cell_m, row0, col0
        Cell (r, c) covers x from (col0 + c) cell_m to (col0 + c + 1) cell_m, y likewise.
    sources
        Files that gave heights.
    """

    top_m: NDArray[np.float32]
    frame: Frame
    cell_m: float
    row0: int
    col0: int
    sources: tuple[TerrainSource, ...] = ()


class TerrainStore:
    """Terrain, land cover and obstacles of a data folder. Safe to use from several threads.

    Parameters
    ----------
    folder
        Data folder; only its ``terrain`` folder is needed.
    cache_bytes
        Bound of the solver cells kept.

    Raises
    ------
    TerrainError
        The folder has no terrain file.
    """

    def __init__(self, folder: Path, cache_bytes: int = CACHE_BYTES) -> None:
        folder = Path(folder)
        paths = raster_files(folder / "terrain")
        if not paths:
            raise TerrainError("The data folder has no terrain folder with a .tif file in it.")
        self._refused: list[tuple[TerrainError, Bbox | None]] = []
        headers = [header for path in paths for header in self._try(path, read_header)]
        self._layers, without_place = group(headers)
        self._refused.extend((error, None) for error in without_place)
        self._shown = [
            [layer.describe(file) for file, _, _ in layer.members] for layer in self._layers
        ]
        covers = [
            cover
            for path in raster_files(folder / "landcover")
            for cover in self._try(path, LandCover.load)
        ]
        self._covers = sorted(covers, key=lambda cover: cover.layer.cell_m)
        found = [
            obstacle
            for path in obstacle_files(folder / "obstacles")
            for obstacles in self._try(path, load_obstacles)
            for obstacle in obstacles
        ]
        self._obstacles = ObstacleField(found, self.ground_m)
        self.tiles = TileCache(self._build_block, cache_bytes)

    @property
    def sources(self) -> tuple[TerrainSource, ...]:
        """Every terrain file that is used, the finest first."""
        return tuple(source for layer in self._shown for source in layer)

    @property
    def cached_bytes(self) -> int:
        """Bytes of solver cells now kept."""
        return self.tiles.held_bytes

    @property
    def refused(self) -> tuple[TerrainError, ...]:
        """Why files of the folder are refused; an answer that may need one is refused too."""
        return tuple(error for error, _ in self._refused)

    @property
    def notes(self) -> tuple[str, ...]:
        """Sentences on what the terrain of this folder leaves out."""
        notes = [f"{error.detail} No answer is given where it may lie." for error in self.refused]
        if self._covers:
            notes.append("Tree height is allowed for only where a land-cover file lies.")
        else:
            notes.append("No land-cover file: tree height is not allowed for.")
        if not self._obstacles.obstacles:
            notes.append("No obstacle file: masts, cranes and wires are not allowed for.")
        assumed = sum(obstacle.assumed for obstacle in self._obstacles.obstacles)
        if assumed:
            notes.append(
                f"{assumed} obstacles state no accuracy: {ASSUMED_HORIZONTAL_FT:.0f} ft "
                f"horizontally and {ASSUMED_VERTICAL_FT:.0f} ft vertically are allowed for."
            )
        silent = [s.file for s in self.sources if s.vertical_unit.endswith(f"({NOT_STATED})")]
        if silent:
            notes.append(f"Heights taken as metres, no unit is stated: {_list(silent)}.")
        return tuple(notes)

    def window(
        self, frame: Frame, col0: int, row0: int, n_cols: int, n_rows: int, cell_m: float,
        cancel: NDArray[np.uint8] | None = None,
    ) -> TerrainWindow:  # fmt: skip
        """Return the highest point of each cell of a rectangle.

        Parameters
        ----------
        frame
            Frame of the cells.
        col0, row0
            Column and row of the south-west cell, counted from the frame's centre.
        n_cols, n_rows
            Size [cells].
        cell_m
            Side of a cell [m].
        cancel
            One byte; set to 1 from another thread it stops the work.

        Raises
        ------
        TerrainError
            A terrain file that may be needed here is refused.
        Cancelled
            `cancel` was set.
        """
        x_m = (col0 + np.array([0.0, n_cols / 2, n_cols])) * cell_m
        y_m = (row0 + np.array([0.0, n_rows / 2, n_rows])) * cell_m
        lon, lat = frame.to_lonlat(*np.meshgrid(x_m, y_m))
        self._refuse(lon, lat)
        tile_rows = range(row0 // TILE_CELLS, (row0 + n_rows - 1) // TILE_CELLS + 1)
        tile_cols = range(col0 // TILE_CELLS, (col0 + n_cols - 1) // TILE_CELLS + 1)
        keys = [(frame, float(cell_m), row, col) for row in tile_rows for col in tile_cols]
        blocks: dict[tuple[int, int], list[TileKey]] = {}
        for key in keys:
            blocks.setdefault((key[2] // BLOCK_TILES, key[3] // BLOCK_TILES), []).append(key)
        tiles: dict[TileKey, Tile] = {}
        for block in blocks.values():
            if cancel is not None and cancel[0]:
                raise Cancelled
            tiles.update(self.tiles.get(block))
        top_m = np.empty((n_rows, n_cols), dtype=np.float32)
        used: set[int] = set()
        for key, tile in tiles.items():
            into_rows, from_rows = _overlap(key[2] * TILE_CELLS - row0, n_rows)
            into_cols, from_cols = _overlap(key[3] * TILE_CELLS - col0, n_cols)
            top_m[into_rows, into_cols] = tile.top_m[from_rows, from_cols]
            used |= tile.layers
        shown = [source for index in sorted(used) for source in self._shown[index]]
        sources = tuple(source for source in shown if meets(source.bbox, lon, lat))
        return TerrainWindow(top_m, frame, float(cell_m), row0, col0, sources)

    def ground_m(self, lon_deg: ArrayLike, lat_deg: ArrayLike) -> Values:
        """Return the height of the bilinear surface [m], NaN where void or off the terrain.

        Parameters
        ----------
        lon_deg, lat_deg
            Places, WGS 84 [deg], any shape.

        Raises
        ------
        TerrainError
            A terrain file that may be needed here is refused.
        """
        lon, lat, shape = _flat(lon_deg, lat_deg)
        out = np.full(lon.size, np.nan)
        known = np.isfinite(lon) & np.isfinite(lat)
        self._refuse(lon[known], lat[known])
        for layer in self._layers:
            left = np.flatnonzero(np.isnan(out) & known)
            if left.size == 0:
                break
            if layer.near(lon[left], lat[left]):
                out[left] = layer.heights_m(lon[left], lat[left])
        return out.reshape(shape)

    def surface_m(self, lon_deg: ArrayLike, lat_deg: ArrayLike) -> Values:
        """Return the height of the ground with canopy and obstacles [m], NaN where void.

        Parameters
        ----------
        lon_deg, lat_deg
            Places, WGS 84 [deg], any shape. A wire or mast counts within its horizontal
            accuracy plus 30 m.
        """
        lon, lat, shape = _flat(lon_deg, lat_deg)
        out = self.ground_m(lon, lat)
        known = np.flatnonzero(np.isfinite(out))
        lon, lat, heights_m = lon[known], lat[known], out[known]
        canopy_m = np.zeros(known.size, dtype=np.float32)
        for cover in self._covers:
            canopy_m = np.maximum(canopy_m, cover.canopy_m(cover.codes_at(lon, lat)))
        heights_m += canopy_m
        self._obstacles.raise_points(lon, lat, heights_m)
        out[known] = heights_m
        return out.reshape(shape)

    def landcover_at(self, lon_deg: ArrayLike, lat_deg: ArrayLike) -> list[str | None]:
        """Return the name of the land-cover class at each place, None where there is none.

        Parameters
        ----------
        lon_deg, lat_deg
            Places, WGS 84 [deg], any shape; the list follows their flat order.
        """
        lon, lat, _ = _flat(lon_deg, lat_deg)
        names: list[str | None] = [None] * lon.size
        for cover in reversed(self._covers):
            for place, code in enumerate(cover.codes_at(lon, lat).tolist()):
                if code != NO_DATA:
                    names[place] = cover.name_of(code)
        return names

    def _try(self, path: Path, load: Callable[[Path], Loaded]) -> list[Loaded]:
        """Return what a file holds, in a list; an empty one, and a refusal noted, if faulty."""
        try:
            return [load(path)]
        except TerrainError as error:
            self._refused.append((error, known_bbox(path)))
            return []

    def _refuse(self, lon_deg: Values, lat_deg: Values) -> None:
        """Raise the first refusal of a file that may be needed at the places."""
        for error, bbox in self._refused:
            if bbox is None or (lon_deg.size and meets(bbox, lon_deg, lat_deg)):
                raise error

    def _build_block(self, keys: list[TileKey]) -> dict[TileKey, Tile]:
        """Return tiles, built as the rectangle that holds them."""
        frame, cell_m = keys[0][:2]
        row, col = min(key[2] for key in keys), min(key[3] for key in keys)
        n_rows = (max(key[2] for key in keys) - row + 1) * TILE_CELLS
        n_cols = (max(key[3] for key in keys) - col + 1) * TILE_CELLS
        row0, col0 = row * TILE_CELLS, col * TILE_CELLS
        block = CellBlock(frame, cell_m, row0, col0, n_rows, n_cols)
        tops, used = block.composite(self._layers)
        if self._covers:
            canopy_m = np.zeros(tops.shape, dtype=np.float32)
            for cover in self._covers:
                cover.raise_cells(canopy_m, block.lon_deg, block.lat_deg, block.step)
            tops += canopy_m
        self._obstacles.raise_cells(tops, frame, cell_m, row0, col0)
        built = {}
        for key in keys:
            r, c = (key[2] - row) * TILE_CELLS, (key[3] - col) * TILE_CELLS
            part = tops[r : r + TILE_CELLS, c : c + TILE_CELLS].copy()
            part.flags.writeable = False
            built[key] = Tile(part, used)
        return built


def _overlap(start: int, length: int) -> tuple[slice, slice]:
    """Return where a tile that starts at `start` lies in a window, and which of it."""
    low, high = max(start, 0), min(start + TILE_CELLS, length)
    return slice(low, high), slice(low - start, high - start)


def _flat(lon_deg: ArrayLike, lat_deg: ArrayLike) -> tuple[Values, Values, tuple[int, ...]]:
    """Return places as two flat float64 arrays, and their shape."""
    lon, lat = np.broadcast_arrays(
        np.asarray(lon_deg, dtype=np.float64), np.asarray(lat_deg, dtype=np.float64)
    )
    return lon.ravel(), lat.ravel(), lon.shape


def _list(names: list[str]) -> str:
    """Return names in a row, at most three."""
    more = f" and {len(names) - 3} more" if len(names) > 3 else ""
    return ", ".join(names[:3]) + more


def warm_up() -> None:
    """Compile every kernel of the terrain, so that the first request does not wait."""
    kernels.warm_up_terrain()
