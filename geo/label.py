"""Labels: one explicit path for every cell that can be reached, and the ring of straight ranges."""

from __future__ import annotations

from dataclasses import dataclass
from math import cos, pi, sin

import numpy as np
from numpy.typing import NDArray

from geo import front, rays, ring
from geo import layout as k
from geo.glide import LEVEL_STEP_M, Glide
from geo.grid import Grid
from perf.errors import Cancelled

Array = NDArray[np.float64]

FIRST_TURN_MAX_RAD = 210.0 * pi / 180.0  # either way round; farther round is left to the front
MAX_ANCHORS = 60_000
N_RANGES = 36
ANCHOR_SPACING_M = 90.0  # bends to one side are not tried closer together
JUMP_M = 10.0  # a label lower than its neighbour's by this much, and by the glide over
JUMP_CELLS = 2.0  # so many cells, is worth a new bend
ROOM_M = 5.0  # height above the clearance that a bend must have to spare
DETOUR_CELLS = 12.0  # cells beyond the turn that a ray may fly before it must find new ground


@dataclass(frozen=True)
class Labels:
    """What the kernels leave behind: one path for every cell reached.

    Parameters
    ----------
    top_m
        Highest point of each cell [m], +inf where blocked, shape ``(n_rows, n_cols)``.
    alt_m
        Altitude of arrival [m], ``layout.UNREACHED`` where no path arrives.
    ray
        Number of the ray behind each label, -1 where none.
    anchors
        Anchor table, shape ``(n_anchors, layout.N_ANCHOR)``.
    run
        Cells flown per metre of height, shape ``(n_levels - 1, n_tracks)``.
    par
        Scalars of the solve.
    straight
        Cells whose arrival height is kept by one straight glide after the first turn.
    reach
        Cells whose arrival height is kept by any path.
    """

    top_m: NDArray[np.float32]
    alt_m: NDArray[np.float32]
    ray: NDArray[np.int32]
    anchors: Array
    run: Array
    par: Array
    straight: NDArray[np.bool_]
    reach: NDArray[np.bool_]


def check(cancel: NDArray[np.uint8] | None) -> None:
    """Raise `Cancelled` when the flag is set."""
    if cancel is not None and cancel[0]:
        raise Cancelled


def label(
    glide: Glide, grid: Grid, top_m: NDArray[np.float32], cancel: NDArray[np.uint8],
    bend: bool = True,
) -> Labels:  # fmt: skip
    """Return the labels of every cell of a window.

    Parameters
    ----------
    glide
        The case in the frame.
    grid
        The window.
    top_m
        Highest point of each cell [m], NaN where void, shape ``(n_rows, n_cols)``.
    cancel
        One byte that stops the work when set.
    bend
        False leaves out the paths that bend round terrain.

    Raises
    ------
    Cancelled
        `cancel` was set.
    """
    void = np.isnan(top_m)
    lowest_m = float(np.nanmin(top_m, initial=np.inf))
    top = np.where(void, np.float32(np.inf), top_m)
    need_m = glide.case.margins.arrival_m
    par = _parameters(glide, grid, min(lowest_m, glide.case.alt_m) + need_m)
    alt = np.full(top.shape, k.UNREACHED, dtype=np.float32)
    ray = np.full(top.shape, -1, dtype=np.int32)
    anchors = np.zeros((MAX_ANCHORS, k.N_ANCHOR))
    run = glide.run / grid.cell_m
    # a power of two: the headings of a shorter glide are among those of a longer one, so that
    # neither more reach nor less margin loses a straight glide
    n_rays = 2 ** int(np.ceil(np.log2(_rim_cells(glide, par))))
    n_roots = _roots(glide, grid, top, run, par, anchors, n_rays)
    touched = np.empty(0, dtype=np.int32)
    for root in range(n_roots):
        front.fan(
            top, alt, ray, run, glide.entry, glide.air, par, anchors, root, touched, True, cancel
        )
    check(cancel)
    straight = alt >= top + np.float32(need_m)
    n_anchors = front.spread(
        top, alt, ray, run, glide.entry, glide.air, par, anchors, n_roots, cancel,
        max(round(ANCHOR_SPACING_M / grid.cell_m), 1),
    ) if n_roots and bend else n_roots  # fmt: skip
    check(cancel)
    reach = alt >= top + np.float32(need_m)
    return Labels(top, alt, ray, anchors[:n_anchors].copy(), run, par, straight, reach)


def _parameters(glide: Glide, grid: Grid, floor_m: float) -> Array:
    margins, par = glide.case.margins, np.zeros(k.N_PAR)
    par[k.CELL_M], par[k.CLEARANCE_M], par[k.FLOOR_M] = grid.cell_m, margins.clearance_m, floor_m
    par[k.LEVEL0_M], par[k.LEVEL_STEP_M] = glide.table.alt_m[0], LEVEL_STEP_M
    par[k.BANK_SIN], par[k.BANK_COS] = sin(margins.bank_rad), cos(margins.bank_rad)
    par[k.WIND_ERROR_MPS] = margins.wind_error_mps
    par[k.RATIO], par[k.DOWNDRAFT_MPS] = glide.table.ratio, margins.downdraft_mps
    par[k.MAX_RUN] = glide.run.max() / grid.cell_m
    loss = min(float(glide.table.loss.max()), 4.0 / glide.table.ratio)
    par[k.JUMP_M] = JUMP_M + JUMP_CELLS * grid.cell_m * loss
    dive = glide.table.tas_mps[0] ** 2 * (1.0 / par[k.BANK_COS] - 1.0) / (2.0 * k.GRAVITY_MPS2)
    par[k.ROOM_M], par[k.DETOUR_CELLS] = ROOM_M + dive, DETOUR_CELLS
    return par


def _rim_cells(glide: Glide, par: Array) -> float:
    """Return the most cells that the rim of the glide can have: as many rays are needed."""
    reach = (glide.start_alt_m - par[k.FLOOR_M]) * par[k.MAX_RUN]
    return float(2 * pi * max(reach, 8.0))


def _roots(
    glide: Glide, grid: Grid, top: NDArray[np.float32], run: Array, par: Array, anchors: Array,
    n_rays: int,
) -> int:  # fmt: skip
    """Write the fans that leave the failure itself and return how many they are.

    `n_rays` is the number of rays all round.

    With a track: one ray straight on from the failure, then the right and the left first turn
    from the end of the reaction. Without: one fan all round from the failure. None where the
    failure itself lies below the clearance; no turns where the reaction meets it.
    """
    case = glide.case
    x_m, y_m = grid.frame.to_xy_m(case.lon_deg, case.lat_deg)
    x, y = float(x_m) / grid.cell_m - grid.col0, float(y_m) / grid.cell_m - grid.row0
    z = glide.start_alt_m
    step = 2 * pi / n_rays
    root = anchors[0]
    root[k.AX], root[k.AY], root[k.AZ], root[k.PARENT] = x, y, z, -1
    root[k.HX], root[k.HY], root[k.SIDE] = 0.0, 1.0, 1.0
    if not rays.is_clear(top, par, root):
        return 0
    if glide.track_rad is None:
        root[k.COUNT], root[k.STEP] = n_rays, step
        return 1
    dx, dy = sin(glide.track_rad), cos(glide.track_rad)
    if not rays.heading_for(glide.air, par, z, dx, dy, root[k.HX : k.HY + 1]):
        root[k.HX], root[k.HY] = dx, dy  # the nose points along the track, the wind carries it off
    root[k.COUNT], root[k.STEP], root[k.SPEEDS_UP] = 1, 0.0, 1.0
    end = np.empty(3)
    if not rays.fly_on(top, run, glide.entry, glide.air, par, root, glide.figures.reaction_s, end):
        return 1
    par[k.REACTION_CELLS] = np.hypot(end[0] - x, end[1] - y)
    for j, side in ((1, 1.0), (2, -1.0)):
        turn = anchors[j]
        turn[:] = root
        turn[k.AX], turn[k.AY], turn[k.AZ], turn[k.SIDE], turn[k.TURNS] = *end, side, 1.0
        turn[k.STEP], turn[k.COUNT] = step, np.floor(FIRST_TURN_MAX_RAD / step)
        turn[k.OFFSET] = anchors[j - 1, k.OFFSET] + anchors[j - 1, k.COUNT]
    return 3


def ring_ranges(glide: Glide, grid: Grid, top: NDArray[np.float32]) -> list[tuple[float, float]]:
    """Return how far one straight glide reaches on 36 true bearings: (bearing [rad], [m]).

    One track for each cell of the edge is flown, in strides over blocks of lower ground.

    Parameters
    ----------
    glide, grid
        The case in the frame, and its window.
    top
        Highest point of each cell [m], +inf where blocked, shape ``(n_rows, n_cols)``.
    """
    need_m = glide.case.margins.arrival_m
    blocks = ring.block_maxima(top)
    par = _parameters(glide, grid, min(float(top.min()), glide.case.alt_m) + need_m)
    anchors, run = np.zeros((4, k.N_ANCHOR)), glide.run / grid.cell_m
    # the rim is a disc that the wind has carried off: its radius is the mean of all tracks' reach
    held = glide.run[glide.run > 0.0]
    share = float(held.mean() / held.max()) if held.size else 1.0
    n_rays = int(_rim_cells(glide, par) * share)
    n_roots = _roots(glide, grid, top, run, par, anchors, n_rays)
    longest = np.zeros(N_RANGES)
    for root in range(n_roots):
        # a little more than half a turn each way round: together they look all round
        count = int(min(anchors[root, k.COUNT], 1.05 * pi / max(anchors[root, k.STEP], 1e-9)))
        if glide.track_rad is None:
            count = int(anchors[root, k.COUNT])
        states = rays.starts(glide.air, par, glide.entry, anchors, root, max(count, 1))
        out = np.empty((len(states), 2))
        ring.ring(top, blocks, run, par, states, need_m, par[k.CLEARANCE_M], out)
        states, out = states[out[:, 1] > 0.0], out[out[:, 1] > 0.0]
        east = states[:, k.SX] + out[:, 1] * states[:, k.DX] - anchors[0, k.AX]
        north = states[:, k.SY] + out[:, 1] * states[:, k.DY] - anchors[0, k.AY]
        bearing = np.arctan2(east, north) - glide.convergence_rad
        sector = np.rint(bearing * N_RANGES / (2 * pi)).astype(np.int64) % N_RANGES
        np.maximum.at(longest, sector, np.hypot(east, north) * grid.cell_m)
    return [(2 * pi * i / N_RANGES, float(longest[i])) for i in range(N_RANGES)]
