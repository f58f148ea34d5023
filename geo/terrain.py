"""The terrain of a data folder: highest point per solver cell, ground height at any place."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

from geo import terrain_kernels as kernels
from geo.frame import Frame
from geo.raster_guard import raster_files
from geo.terrain_source import TerrainSource, group, read_header
from geo.terrain_tiles import (
    CACHE_BYTES,
    TILE_CELLS,
    Tile,
    TileCache,
    TileKey,
    block_tops,
)
from perf.errors import TerrainError

BLOCK_TILES = 4  # tiles built at once along each side

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
        paths = raster_files(Path(folder) / "terrain")
        if not paths:
            raise TerrainError("The data folder has no terrain folder with a .tif file in it.")
        headers, refused = [], []
        for path in paths:
            try:
                headers.append(read_header(path))
            except TerrainError as error:
                refused.append(error)
        self._layers, more = group(headers)
        self.refused: tuple[TerrainError, ...] = (*refused, *more)
        self._shown = [
            [(layer.describe(file)) for file, _, _ in layer.members] for layer in self._layers
        ]
        self.sources: tuple[TerrainSource, ...] = tuple(
            source for layer in self._shown for source in layer
        )
        self.notes: tuple[str, ...] = (
            "No land-cover file: tree heights are not allowed for.",
            "No obstacle file: masts and wires are not allowed for.",
        )
        self._cache = TileCache(self._build, cache_bytes)

    def window(
        self, frame: Frame, col0: int, row0: int, n_cols: int, n_rows: int, cell_m: float
    ) -> TerrainWindow:
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

        Raises
        ------
        TerrainError
            A terrain file that may be needed here is refused.
        """
        self._refuse()
        tile_rows = range(row0 // TILE_CELLS, (row0 + n_rows - 1) // TILE_CELLS + 1)
        tile_cols = range(col0 // TILE_CELLS, (col0 + n_cols - 1) // TILE_CELLS + 1)
        keys = [(frame, float(cell_m), row, col) for row in tile_rows for col in tile_cols]
        tiles = self._cache.get(keys)
        top_m = np.empty((n_rows, n_cols), dtype=np.float32)
        used: set[int] = set()
        for key, tile in tiles.items():
            into_rows, from_rows = _overlap(key[2] * TILE_CELLS - row0, n_rows)
            into_cols, from_cols = _overlap(key[3] * TILE_CELLS - col0, n_cols)
            top_m[into_rows, into_cols] = tile.top_m[from_rows, from_cols]
            used |= tile.layers
        sources = tuple(source for index in sorted(used) for source in self._shown[index])
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
        self._refuse()
        lon, lat = np.broadcast_arrays(np.asarray(lon_deg, float), np.asarray(lat_deg, float))
        out = np.full(lon.size, np.nan)
        flat_lon, flat_lat = lon.ravel(), lat.ravel()
        for layer in self._layers:
            left = np.flatnonzero(np.isnan(out) & np.isfinite(flat_lon) & np.isfinite(flat_lat))
            if left.size == 0:
                break
            out[left] = layer.heights_m(flat_lon[left], flat_lat[left])
        return out.reshape(lon.shape)

    def surface_m(self, lon_deg: ArrayLike, lat_deg: ArrayLike) -> Values:
        """Return the height of the ground with canopy and obstacles [m], NaN where void."""
        return self.ground_m(lon_deg, lat_deg)

    def _refuse(self) -> None:
        """Raise the first refusal: a refused file may be the one that is needed here."""
        if self.refused:
            raise self.refused[0]

    def _build(self, keys: list[TileKey]) -> dict[TileKey, Tile]:
        """Return tiles, built in blocks."""
        built: dict[TileKey, Tile] = {}
        blocks: dict[tuple[int, int], list[TileKey]] = {}
        for key in keys:
            blocks.setdefault((key[2] // BLOCK_TILES, key[3] // BLOCK_TILES), []).append(key)
        for block in blocks.values():
            built.update(self._build_block(block))
        return built

    def _build_block(self, keys: list[TileKey]) -> dict[TileKey, Tile]:
        """Return tiles, built as the rectangle that holds them."""
        frame, cell_m = keys[0][:2]
        row, col = min(key[2] for key in keys), min(key[3] for key in keys)
        n_rows = (max(key[2] for key in keys) - row + 1) * TILE_CELLS
        n_cols = (max(key[3] for key in keys) - col + 1) * TILE_CELLS
        row0, col0 = row * TILE_CELLS, col * TILE_CELLS
        tops, used = block_tops(self._layers, frame, cell_m, row0, col0, n_rows, n_cols)
        built = {}
        for key in keys:
            r, c = (key[2] - row) * TILE_CELLS, (key[3] - col) * TILE_CELLS
            part = tops[r : r + TILE_CELLS, c : c + TILE_CELLS]
            built[key] = Tile(_rounded_up(part), used)
        return built


def _overlap(start: int, length: int) -> tuple[slice, slice]:
    """Return where a tile that starts at `start` lies in a window, and which of it."""
    low, high = max(start, 0), min(start + TILE_CELLS, length)
    return slice(low, high), slice(low - start, high - start)


def _rounded_up(values: Values) -> NDArray[np.float32]:
    """Return float32 values that are never below the given ones, read-only."""
    out = values.astype(np.float32)
    low = out < values
    out[low] = np.nextafter(out[low], np.float32(np.inf))
    out.flags.writeable = False
    return out


def warm_up() -> None:
    """Compile every kernel of the terrain, so that the first request does not wait."""
    kernels.warm_up_terrain()
