"""The path behind a cell: the chain of anchors that its label stands for, as points to fly."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, floor
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from geo import layout as k
from geo import rays
from geo.answers import GlidePath, PathPoint

if TYPE_CHECKING:
    from geo.glide import Glide
    from geo.grid import Grid
    from geo.label import Labels

Array = NDArray[np.float64]

ARC_POINT_RAD = 0.12  # spacing of the points that draw an arc
LEG_POINT_CELLS = 8.0  # spacing of the points along a straight leg


@dataclass(frozen=True)
class Leg:
    """One turn and the straight glide after it: anchor, ray number in its fan, cells flown."""

    anchor: int
    ray: int
    state: Array
    cells: float


def path_to(glide: Glide, grid: Grid, labels: Labels, lon: float, lat: float) -> GlidePath | None:
    """Return the path behind the cell that holds a place [deg], or None where there is none."""
    row, col = grid.cell_of(lon, lat)
    if not grid.inside(row, col) or labels.ray[row, col] < 0:
        return None
    ray_id = int(labels.ray[row, col])
    legs: list[Leg] = []
    at: tuple[float, float] | None = None
    while ray_id >= 0:
        leg = _leg(glide, labels, ray_id, row, col, at)
        legs.append(leg)
        at = (float(labels.anchors[leg.anchor, k.AX]), float(labels.anchors[leg.anchor, k.AY]))
        ray_id = int(labels.anchors[leg.anchor, k.PARENT])
    return _assemble(glide, grid, labels, legs[::-1], float(labels.alt_m[row, col]))


def _leg(
    glide: Glide, labels: Labels, ray_id: int, row: int, col: int, at: tuple[float, float] | None
) -> Leg:
    """Return the leg of a ray up to the cell (row, col), or up to the anchor at `at`."""
    anchor = rays.find_anchor(labels.anchors, len(labels.anchors), ray_id)
    number = ray_id - int(labels.anchors[anchor, k.OFFSET])

    state = rays.replay(glide.air, labels.par, glide.entry, labels.anchors, anchor, number)
    if at is None:
        cells = rays.nearest_on_ray(state, row, col)
    else:
        cells = (at[0] - state[k.SX]) * state[k.DX] + (at[1] - state[k.SY]) * state[k.DY]
    return Leg(anchor, number, state, float(cells))


def straight_path(
    glide: Glide, grid: Grid, labels: Labels, lon: float, lat: float
) -> GlidePath | None:
    """Return the straight glide after the first turn to a place, terrain left out of account.

    None where no first turn leads to the place. The claimed altitude is that at the end.
    """
    x_m, y_m = grid.frame.to_xy_m(lon, lat)
    x, y = float(x_m) / grid.cell_m - grid.col0, float(y_m) / grid.cell_m - grid.row0
    best: Leg | None = None
    for anchor in range(min(3, len(labels.anchors))):
        if labels.anchors[anchor, k.PARENT] >= 0:
            break
        leg = _nearest_root_leg(glide, labels, anchor, x, y)
        if leg is None:
            continue
        if best is None or _end_alt(labels, leg) > _end_alt(labels, best):
            best = leg
    if best is None:
        return None
    return _assemble(glide, grid, labels, [best], _end_alt(labels, best))


def _nearest_root_leg(glide: Glide, labels: Labels, anchor: int, x: float, y: float) -> Leg | None:
    """Return the ray of a first turn that passes nearest to a place [cells], within one cell."""
    count = int(labels.anchors[anchor, k.COUNT])
    states = rays.starts(glide.air, labels.par, glide.entry, labels.anchors, anchor, count)
    ahead_x, ahead_y = x - states[:, k.SX], y - states[:, k.SY]
    along = ahead_x * states[:, k.DX] + ahead_y * states[:, k.DY]
    across = np.abs(ahead_x * states[:, k.DY] - ahead_y * states[:, k.DX])
    across[~(along >= 0.0)] = np.inf
    number = int(np.argmin(across))
    if across[number] > 1.0:
        return None
    return Leg(anchor, number, states[number], float(along[number]))


def _end_alt(labels: Labels, leg: Leg) -> float:
    return float(rays.alt_along(labels.run, labels.par, leg.state, leg.cells))


def _assemble(
    glide: Glide, grid: Grid, labels: Labels, legs: list[Leg], claimed_alt_m: float
) -> GlidePath:
    """Return the points and the drawn line of a chain of legs, first leg first."""
    root = labels.anchors[0]
    points = [_point(grid, root[k.AX], root[k.AY], root[k.AZ], "start")]
    line = [(root[k.AX], root[k.AY], root[k.AZ])]
    for leg in legs:
        anchor, state = labels.anchors[leg.anchor], leg.state
        if anchor[k.TURNS] > 0.0:
            turn_rad = float(anchor[k.SIDE] * anchor[k.STEP] * leg.ray)
            turn = (glide.case.margins.bank_rad, turn_rad)
            points += [
                _point(grid, anchor[k.AX], anchor[k.AY], anchor[k.AZ], "turn_start", *turn),
                _point(grid, state[k.SX], state[k.SY], state[k.CAP], "turn_end", *turn),
            ]
            line += _arc_line(glide, labels, leg)
        line += _leg_line(labels, leg)
    points.append(_point(grid, *line[-1], "end"))
    lon, lat = grid.frame.to_lonlat(
        *((np.array([p[axis] for p in line]) + (grid.col0, grid.row0)[axis]) * grid.cell_m
          for axis in (0, 1))
    )  # fmt: skip
    drawn = tuple((float(a), float(b), float(p[2])) for a, b, p in zip(lon, lat, line, strict=True))
    bends = sum(1 for leg in legs if labels.anchors[leg.anchor, k.PARENT] >= 0)
    return GlidePath(tuple(points), claimed_alt_m, bends, drawn)


def _arc_line(glide: Glide, labels: Labels, leg: Leg) -> list[tuple[float, float, float]]:
    """Return points along the arc of a leg, its start included."""
    states = rays.starts(
        glide.air, labels.par, glide.entry, labels.anchors, leg.anchor, leg.ray + 1
    )
    every = max(floor(ARC_POINT_RAD / labels.anchors[leg.anchor, k.STEP]), 1)
    return [(s[k.SX], s[k.SY], s[k.CAP]) for s in states[::every]]


def _leg_line(labels: Labels, leg: Leg) -> list[tuple[float, float, float]]:
    """Return points along the straight glide of a leg, both ends included."""
    pieces = max(ceil(leg.cells / LEG_POINT_CELLS), 1)
    s = leg.state
    return [
        (s[k.SX] + t * s[k.DX], s[k.SY] + t * s[k.DY],
         float(rays.alt_along(labels.run, labels.par, s, t)))
        for t in (leg.cells * i / pieces for i in range(pieces + 1))
    ]  # fmt: skip


def _point(
    grid: Grid, x: float, y: float, alt_m: float, kind: str, bank: float = 0.0, turn: float = 0.0
) -> PathPoint:
    x_m, y_m = (x + grid.col0) * grid.cell_m, (y + grid.row0) * grid.cell_m
    lon, lat = grid.frame.to_lonlat(x_m, y_m)
    return PathPoint(float(lon), float(lat), float(x_m), float(y_m), float(alt_m), kind, bank, turn)
