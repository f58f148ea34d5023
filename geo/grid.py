"""The window of the cell lattice that one solve needs."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np

from geo import layout as k
from geo.case import SolveLimits
from geo.frame import Frame
from geo.glide import LEVEL_STEP_M, Glide
from perf.errors import LimitError

REACH_MAX_M = 110_000.0  # frames are good to 150 km from centres at most 40 km away
COARSE_FACTOR = 4
CELL_LADDER = (1.0, 1.5, 2.0, 3.0, 4.0)  # cell sizes tried, in units of the cell wanted


@dataclass(frozen=True)
class Grid:
    """A window of a frame's cell lattice: row 0 in the south, column 0 in the west."""

    frame: Frame
    col0: int
    row0: int
    n_cols: int
    n_rows: int
    cell_m: float

    def cell_of(self, lon: float, lat: float) -> tuple[int, int]:
        """Return row and column of the cell that holds a place; may lie outside the window."""
        x, y = self.frame.to_xy_m(lon, lat)
        return int(y // self.cell_m) - self.row0, int(x // self.cell_m) - self.col0

    def inside(self, row: int, col: int) -> bool:
        """Return whether a cell lies in the window."""
        return 0 <= row < self.n_rows and 0 <= col < self.n_cols


def reach_box_m(glide: Glide, floor_m: float) -> tuple[float, float, float, float]:
    """Return west, south, east, north [m] of what can be touched from the start, flat out.

    The ends of straight glides down to `floor_m` [m], widened by the reaction and the first turn.
    """
    table, case = glide.table, glide.case
    heights = np.clip(table.alt_m[1:] - np.maximum(table.alt_m[:-1], floor_m), 0.0, LEVEL_STEP_M)
    distance = heights @ glide.run * 1.005 + 4 * 30.0
    tas, wind = float(glide.air[-1, k.TAS]), float(np.abs(glide.air[:, 2:]).max(initial=0.0))
    if glide.track_rad is not None:
        radius = tas * tas / (k.GRAVITY_MPS2 * np.sin(case.margins.bank_rad))
        turning_s = 2 * pi * radius / tas
        distance = distance + 2 * radius + (glide.figures.reaction_s + turning_s) * wind
        distance = distance + tas * glide.figures.reaction_s
    x, y = distance * np.sin(table.track_rad), distance * np.cos(table.track_rad)
    return float(x.min()), float(y.min()), float(x.max()), float(y.max())


def choose_grid(
    frame: Frame, x_m: float, y_m: float, reach: tuple[float, float, float, float],
    limits: SolveLimits, detail: str,
) -> Grid:  # fmt: skip
    """Return the finest grid of the ladder that fits the limits.

    Raises
    ------
    LimitError
        The reach is beyond the frames, or even the coarsest cell gives too many cells.
    """
    if max(abs(edge) for edge in reach) > REACH_MAX_M:
        raise LimitError(
            "The glide reaches farther than one solve covers. Give a lower altitude.",
            "altitude_ft",
            f"a reach of at most {REACH_MAX_M / 1000:.0f} km",
        )
    factor = COARSE_FACTOR if detail == "coarse" else 1
    for step in CELL_LADDER:
        cell_m = limits.cell_m * step * factor
        col0, row0 = int((x_m + reach[0]) // cell_m) - 1, int((y_m + reach[1]) // cell_m) - 1
        n_cols = int((x_m + reach[2]) // cell_m) + 2 - col0
        n_rows = int((y_m + reach[3]) // cell_m) + 2 - row0
        if n_cols * n_rows <= limits.max_cells:
            return Grid(frame, col0, row0, n_cols, n_rows, cell_m)
    raise LimitError(
        "This glide needs more cells than one solve may have. Give a lower altitude.",
        "altitude_ft",
        f"at most {limits.max_cells} cells of {limits.cell_m * CELL_LADDER[-1]:.0f} m",
    )
