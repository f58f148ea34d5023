"""Tiles of solver cells: built from the layers of terrain, kept under a bound in bytes."""

from __future__ import annotations

import math
import threading
from collections import OrderedDict
from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geo import terrain_kernels as kernels
from geo.frame import Frame
from geo.terrain_layer import Box, Layer

TILE_CELLS = 256
CACHE_BYTES = 256 * 2**20
LATTICE_M = 512.0  # exact projection at least this often; between, 2 cm are lost at 65 N
POSTS_AT_ONCE = 8_000_000

Tops = NDArray[np.float64]
Cells = NDArray[np.float32]
TileKey = tuple[Frame, float, int, int]  # frame, cell side [m], tile row, tile column


@dataclass(frozen=True)
class Tile:
    """Cells of one tile: `top_m` float32 ``(256, 256)`` read-only, and the layers that gave it."""

    top_m: Cells
    layers: frozenset[int]


def lattice_step(spacing_m: float, most: int = 16) -> int:
    """Return the power of two, 1 .. `most`, whose multiple of the spacing is within LATTICE_M."""
    step = most
    while step > 1 and step * spacing_m > LATTICE_M:
        step //= 2
    return step


class CellBlock:
    """A rectangle of cells of a frame, and the highest point of every source in them.

    Parameters
    ----------
    frame, cell_m
        Frame, and side of a cell [m].
    row0, col0, n_rows, n_cols
        The rectangle; its sides are multiples of 16.
    """

    def __init__(
        self, frame: Frame, cell_m: float, row0: int, col0: int, n_rows: int, n_cols: int
    ) -> None:
        self.frame, self.cell_m = frame, cell_m
        self.row0, self.col0, self.n_rows, self.n_cols = row0, col0, n_rows, n_cols
        self.step = lattice_step(cell_m)
        x_m = (col0 + np.arange(0, n_cols + 1, self.step)) * cell_m
        y_m = (row0 + np.arange(0, n_rows + 1, self.step)) * cell_m
        self.lon_deg, self.lat_deg = frame.to_lonlat(*np.meshgrid(x_m, y_m))
        self.lon_ref_deg = float(self.lon_deg[0, 0])

    def composite(self, layers: list[Layer]) -> tuple[Cells, frozenset[int]]:
        """Return the top of each cell [m], NaN where void, and the layers that gave something.

        The finest source that covers a cell whole gives its top, together with any finer one
        that covers part of it. So the top is never below the surface that `ground_m` follows;
        where a finer source ends or has a void in the cell, it may be above it.
        """
        out = np.full((self.n_rows, self.n_cols), kernels.NO_TOP)
        done = np.zeros(out.shape, dtype=np.uint8)
        used = set()
        for index, layer in enumerate(layers):
            if not layer.near(self.lon_deg, self.lat_deg):
                continue
            u, v = layer.to_posts(self.lon_deg, self.lat_deg, self.lon_ref_deg)
            box = _post_box(layer, u, v)
            if box is None:
                continue
            if (box[1] - box[0]) * (box[3] - box[2]) > POSTS_AT_ONCE:
                if min(self.n_rows, self.n_cols) <= self.step:
                    continue  # the projection is torn here (its own edge): nothing is known
                return self._by_quarters(layers)
            if kernels.merge(*self._tops(layer, u, v, box), out, done) > 0:
                used.add(index)
            if done.all():
                break
        return kernels.finish(out, done), frozenset(used)

    def _tops(self, layer: Layer, u: Tops, v: Tops, box: Box) -> tuple[Tops, NDArray[np.uint8]]:
        """Return one layer's highest point in each cell, and 1 where part of the cell is void."""
        top = np.full((self.n_rows, self.n_cols), kernels.NO_TOP)
        void = np.zeros(top.shape, dtype=np.uint8)
        posts = layer.read(box)
        kernels.walk_edges(posts, box[0], box[2], u, v, self.step, top, void)
        step = lattice_step(layer.cell_m)
        i = np.arange(box[2], box[3] + step, step, dtype=np.float64)
        j = np.arange(box[0], box[1] + step, step, dtype=np.float64)
        x_m, y_m = self.frame.to_xy_m(*layer.to_lonlat(*np.meshgrid(i, j)))
        kernels.scatter_posts(
            posts,
            x_m / self.cell_m,
            y_m / self.cell_m,
            step,
            kernels.TOUCH_M / self.cell_m,
            self.row0,
            self.col0,
            top,
            void,
        )
        return top, void

    def _by_quarters(self, layers: list[Layer]) -> tuple[Cells, frozenset[int]]:
        """Return `composite`, put together from halves of the sides."""
        out = np.empty((self.n_rows, self.n_cols), dtype=np.float32)
        used: frozenset[int] = frozenset()
        for rows in _halves(self.n_rows, self.step):
            for cols in _halves(self.n_cols, self.step):
                part = CellBlock(
                    self.frame,
                    self.cell_m,
                    self.row0 + rows.start,
                    self.col0 + cols.start,
                    rows.stop - rows.start,
                    cols.stop - cols.start,
                )
                out[rows, cols], more = part.composite(layers)
                used |= more
        return out, used


def _halves(length: int, step: int) -> list[slice]:
    """Return two slices that halve a length at a multiple of the step, or one."""
    cut = length // 2 // step * step
    return [slice(0, cut), slice(cut, length)] if cut else [slice(0, length)]


def _post_box(layer: Layer, u: Tops, v: Tops) -> Box | None:
    """Return the window of posts that a block needs, None where the layer has none of them."""
    good = np.isfinite(u) & np.isfinite(v)
    if not good.any():
        return None
    u, v = u[good], v[good]
    box = (
        math.floor(v.min()) - 1,
        math.ceil(v.max()) + 2,
        math.floor(u.min()) - 1,
        math.ceil(u.max()) + 2,
    )
    placed = layer.placed(box)
    if not placed:
        return None
    step = lattice_step(layer.cell_m)  # starts on the lattice of posts: one answer for any block
    j0 = max(box[0], min(row for _, row, _ in placed)) // step * step
    i0 = max(box[2], min(col for _, _, col in placed)) // step * step
    j1 = min(box[1], max(row + file.height for file, row, _ in placed))
    i1 = min(box[3], max(col + file.width for file, _, col in placed))
    return j0, j1, i0, i1


class TileCache:
    """Tiles by key, the least recently used dropped first; each built once at a time.

    Parameters
    ----------
    build
        Called with keys of one frame and cell size; returns their tiles.
    max_bytes
        Bound of the cells kept. Tiles in use are not counted twice: windows are copies.
    """

    def __init__(
        self,
        build: Callable[[list[TileKey]], dict[TileKey, Tile]],
        max_bytes: int = CACHE_BYTES,
    ) -> None:
        self.build = build
        self._max_bytes = max_bytes
        self._bytes = 0
        self._tiles: OrderedDict[TileKey, Tile] = OrderedDict()
        self._building: dict[TileKey, threading.Event] = {}
        self._lock = threading.Lock()

    @property
    def held_bytes(self) -> int:
        """Bytes of cells now kept."""
        return self._bytes

    def get(self, keys: Iterable[TileKey]) -> dict[TileKey, Tile]:
        """Return the tiles, building those that are missing; waits for those being built."""
        wanted = list(keys)
        found: dict[TileKey, Tile] = {}
        while len(found) < len(wanted):
            mine, waiting = self._claim(wanted, found)
            if mine:
                found.update(self._build_claimed(mine))
            elif waiting:
                waiting[0].wait()
        return found

    def _claim(
        self, wanted: list[TileKey], found: dict[TileKey, Tile]
    ) -> tuple[list[TileKey], list[threading.Event]]:
        """Move kept tiles to `found`; return the missing ones, now ours, and events of others."""
        mine, waiting = [], []
        with self._lock:
            for key in wanted:
                if key in found:
                    continue
                if key in self._tiles:
                    self._tiles.move_to_end(key)
                    found[key] = self._tiles[key]
                elif key in self._building:
                    waiting.append(self._building[key])
                else:
                    self._building[key] = threading.Event()
                    mine.append(key)
        return mine, waiting

    def _build_claimed(self, keys: list[TileKey]) -> dict[TileKey, Tile]:
        """Build tiles, keep them, and let those who wait go on, also after a failure."""
        built: dict[TileKey, Tile] = {}
        try:
            built = self.build(keys)
        finally:
            with self._lock:
                for key, tile in built.items():
                    self._tiles[key] = tile
                    self._bytes += tile.top_m.nbytes
                while self._bytes > self._max_bytes and self._tiles:
                    self._bytes -= self._tiles.popitem(last=False)[1].top_m.nbytes
                for key in keys:
                    self._building.pop(key).set()
        return built
