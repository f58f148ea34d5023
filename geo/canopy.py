"""Land cover: the class of the ground at a place, and how high its trees may stand."""

from __future__ import annotations

import json
import math
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from geo import terrain_kernels as kernels
from geo.case import FT_M
from geo.raster_guard import CLASS_TYPES, open_raster, read_window, refusal
from geo.terrain_layer import SQUARE, Box, Layer, Squares, by_square
from geo.terrain_source import NOT_STATED, read_header
from perf.errors import TerrainError

Values = NDArray[np.float64]
Posts = NDArray[np.float32]

MAX_CANOPY_FT = 400.0  # the tallest trees known stand 380 ft
MAX_LEGEND_BYTES = 1_000_000
LEGEND = 'a .json of the same name: {"classes": {"10": {"name": ..., "canopy_ft": 0 to 400}}}'
NO_DATA = -1  # code of a pixel without a class


@dataclass(frozen=True)
class CoverClass:
    """A class of a legend: its name, kind (free text, such as ``water``) and tree height [m]."""

    name: str
    kind: str
    canopy_m: float


@dataclass
class LandCover:
    """A land-cover raster with its legend."""

    layer: Layer
    legend: dict[int, CoverClass]
    source: str
    date: str
    squares: Squares = field(init=False, compare=False)

    def __post_init__(self) -> None:
        self.squares = Squares(lambda box: self.codes(box) if self.layer.placed(box) else None)

    @staticmethod
    def load(path: Path) -> LandCover:
        """Return the land cover of a raster file and the legend beside it.

        Raises
        ------
        TerrainError
            The raster or its legend is refused.
        """
        legend, about = _read_legend(path)
        layer = Layer.of(read_header(path, CLASS_TYPES))
        layer.bboxes = [layer.describe(layer.first).bbox]
        return LandCover(layer, legend, *about)

    def codes(self, box: Box) -> NDArray[np.int32]:
        """Return the class codes of a window of pixels, NO_DATA where there are none."""
        j0, j1, i0, i1 = box
        out = np.full((j1 - j0, i1 - i0), NO_DATA, dtype=np.int32)
        for file, row, col in self.layer.placed(box):
            r0, r1 = max(j0, row), min(j1, row + file.height)
            c0, c1 = max(i0, col), min(i1, col + file.width)
            with open_raster(file.path, CLASS_TYPES) as data:
                raw = read_window(data, file.path, (r0 - row, r1 - row, c0 - col, c1 - col))
            part = np.ma.filled(raw.astype(np.int32), NO_DATA)
            out[r0 - j0 : r1 - j0, c0 - i0 : c1 - i0] = part
        return out

    def canopy_m(self, codes: NDArray[np.int32]) -> Posts:
        """Return the tree height [m] of codes; one that the legend lacks gets its tallest."""
        known = np.array(sorted({*self.legend, NO_DATA, 0}), dtype=np.int32)
        bare = CoverClass(NOT_STATED, "", 0.0)
        heights = [self.legend.get(int(code), bare).canopy_m for code in known]
        tallest = max((entry.canopy_m for entry in self.legend.values()), default=0.0)
        at = np.minimum(np.searchsorted(known, codes), known.size - 1)
        found = np.asarray(heights)[at]
        return np.where(known[at] == codes, found, tallest).astype(np.float32)

    def raise_cells(self, canopy_m: Posts, lon_deg: Values, lat_deg: Values, step: int) -> None:
        """Raise each cell's tree height to the tallest of the pixels that it touches.

        Parameters
        ----------
        canopy_m
            Tree height [m], shape ``(rows, cols)``, changed in place.
        lon_deg, lat_deg
            Every `step`-th cell corner [deg].
        step
            Cells from one point of the lattice to the next.
        """
        if not self.layer.near(lon_deg, lat_deg):
            return
        u, v = self.layer.to_posts(lon_deg, lat_deg, float(lon_deg[0, 0]))
        if not (np.isfinite(u).all() and np.isfinite(v).all()):
            return
        file = self.layer.first
        j0, i0 = max(math.floor(v.min()), 0), math.floor(u.min())
        j1, i1 = min(math.ceil(v.max()) + 2, file.height), math.ceil(u.max()) + 2
        if not self.layer.turn:
            i0, i1 = max(i0, 0), min(i1, file.width)
        if j1 > j0 and i1 > i0:
            values = self.canopy_m(self.codes((j0, j1, i0, i1)))
            kernels.touched(values, j0, i0, u + 0.5, v + 0.5, step, canopy_m)

    def codes_at(self, lon_deg: Values, lat_deg: Values) -> NDArray[np.int32]:
        """Return the class code at each place, shape ``(k,)``, NO_DATA off the raster."""
        out = np.full(lon_deg.size, NO_DATA, dtype=np.int32)
        if lon_deg.size == 0 or not self.layer.near(lon_deg, lat_deg):
            return out
        u, v = self.layer.to_posts(lon_deg, lat_deg, float(lon_deg[0]))
        u, v = u + 0.5, v + 0.5
        for row, col, here in by_square(u, v):
            codes = self.squares.get(row, col)
            if codes is not None:
                j = np.floor(v[here]).astype(np.int64) - row * SQUARE
                i = np.floor(u[here]).astype(np.int64) - col * SQUARE
                out[here] = codes[j, i]
        return out

    def name_of(self, code: int) -> str:
        """Return the name of a class code."""
        return self.legend[code].name if code in self.legend else f"class {code}"


def _read_legend(path: Path) -> tuple[dict[int, CoverClass], tuple[str, str]]:
    """Return the classes, and source and date, of the legend beside a raster."""
    beside = path.with_suffix(".json")
    try:
        if beside.stat().st_size > MAX_LEGEND_BYTES:
            raise refusal(path, "has a legend larger than 1 MB")
        content = json.loads(beside.read_text(encoding="utf-8"))
        classes = {int(code): _class(entry) for code, entry in content["classes"].items()}
    except (OSError, ValueError, KeyError, TypeError, AttributeError, RecursionError):
        text = f"The land-cover file {path.name} has no legend, or a faulty one, beside it."
        raise TerrainError(text, allowed=LEGEND) from None
    source, date = (str(content.get(key) or NOT_STATED)[:200] for key in ("source", "date"))
    return classes, (source, date)


def _class(entry: dict[str, Any]) -> CoverClass:
    """Return a class; a ValueError or KeyError where its name or its tree height is missing."""
    kind = str(entry.get("kind", ""))
    canopy_ft = float(entry["canopy_ft"] if kind == "trees" else entry.get("canopy_ft") or 0.0)
    if not 0.0 <= canopy_ft <= MAX_CANOPY_FT:
        raise ValueError
    return CoverClass(str(entry["name"]), kind, canopy_ft * FT_M)
