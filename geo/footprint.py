"""The gliding footprint: from one engine failure to the ground that can be reached.

The order of the work: the glide table of this case in the local frame, the window of terrain that
it can touch, the first seconds, the straight glides from the end of each first turn, the front
that bends round terrain, the outlines.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from math import cos, pi, sin

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import MultiPolygon

from geo import explain as _explain
from geo import front, rays, ring
from geo import layout as k
from geo import paths as _paths
from geo.answers import Explanation, GlidePath, ProfilePoint, SiteReach
from geo.case import FT_M, KT_MPS, GlideCase, SolveLimits
from geo.frame import Frame, frame_for
from geo.glide import LEVEL_STEP_M, LOWEST_GROUND_M, Glide, GlideFigures, prepare
from geo.grid import Grid, choose_grid, reach_box_m
from geo.outline import to_lonlat, trace
from geo.sites import Site
from geo.terrain import TerrainStore
from geo.terrain_source import TerrainSource
from perf.errors import Cancelled, TerrainError

Array = NDArray[np.float64]

FIRST_TURN_MAX_RAD = 210.0 * pi / 180.0  # either way round; farther round is left to the front
MAX_ANCHORS = 60_000
ANCHOR_SPACING_M = 90.0  # bends to one side are not tried closer together
JUMP_M = 10.0  # a label lower than its neighbour's by this much, and by the glide over
JUMP_CELLS = 2.0  # so many cells, is worth a new bend
ROOM_M = 5.0  # height above the clearance that a bend must have to spare
DETOUR_CELLS = 12.0  # cells beyond the turn that a ray may fly before it must find new ground
N_RANGES = 36
RIDGE_WIND_KT = 20.0  # from here on the lee of ridges is warned of; common practice
LOWEST_SPARE_M = 30.0  # ground may be this much lower between the places sampled


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


@dataclass(frozen=True)
class Footprint:
    """The answer to one case. See the properties and methods; SI inside, degrees in outlines."""

    case: GlideCase
    glide: Glide
    grid: Grid
    store: TerrainStore
    labels: Labels
    ground_m: float
    footprint: MultiPolygon
    straight: MultiPolygon
    cells: MultiPolygon
    sources: tuple[TerrainSource, ...]
    limits: list[str]
    landing_sites: tuple[Site, ...] = ()

    @property
    def figures(self) -> GlideFigures:
        """The numbers behind the picture."""
        return self.glide.figures

    @property
    def cell_m(self) -> float:
        """Edge of a solver cell [m]."""
        return self.grid.cell_m

    @property
    def footprint_km2(self) -> float:
        """Area of the cells reached by any path [km2]."""
        return float(self.labels.reach.sum()) * self.cell_m**2 / 1e6

    @property
    def straight_km2(self) -> float:
        """Area of the cells reached by one straight glide after the first turn [km2]."""
        return float(self.labels.straight.sum()) * self.cell_m**2 / 1e6

    @cached_property
    def ranges(self) -> list[tuple[float, float]]:
        """How far the outline reaches on 36 true bearings: (bearing [rad], distance [m])."""
        return _ranges(self)

    @cached_property
    def straight_ranges(self) -> list[tuple[float, float]]:
        """Farthest place by one straight glide on 36 true bearings: (bearing [rad], [m])."""
        return ring_ranges(self.glide, self.grid, self.labels.top_m)

    @cached_property
    def sites(self) -> list[SiteReach]:
        """Landing sites within the window, nearest first."""
        return _explain.sites_in_reach(self, self.landing_sites)

    def path_to(self, lon: float, lat: float) -> GlidePath | None:
        """Return the path behind the cell of a place [deg], or None where no path arrives."""
        return _paths.path_to(self.glide, self.grid, self.labels, lon, lat)

    def explain(self, lon: float, lat: float) -> Explanation:
        """Say why a place [deg] is in or out of range."""
        return _explain.explain(self, lon, lat)

    def section(self, lon: float, lat: float) -> list[ProfilePoint]:
        """Return ground, clearance and glide line straight from the failure to a place [deg]."""
        return _explain.straight_section(self, lon, lat)

    def path_profile(self, path: GlidePath) -> list[ProfilePoint]:
        """Return ground, clearance and glide line along a path."""
        return _explain.path_profile(self, path)


def solve(
    store: TerrainStore,
    case: GlideCase,
    *,
    sites: Sequence[Site] = (),
    limits: SolveLimits | None = None,
    cancel: NDArray[np.uint8] | None = None,
    bend: bool = True,
) -> Footprint:
    """Return the footprint of one case.

    Parameters
    ----------
    store
        Terrain, obstacles and land cover.
    case
        Aeroplane, air, place and margins.
    sites
        Landing sites to report on.
    limits
        Largest solve that is started.
    cancel
        One byte; set to 1 from another thread it stops the solve.
    bend
        False leaves out the paths that bend round terrain: both outlines are the straight one.

    Raises
    ------
    TerrainError
        There is no terrain at the position.
    InputError
        The altitude is at or below the ground.
    LimitError
        The solve would be too large.
    Cancelled
        `cancel` was set.
    """
    limits = limits or SolveLimits()
    cancel = np.zeros(1, dtype=np.uint8) if cancel is None else cancel
    frame = frame_for(case.lon_deg, case.lat_deg)
    ground_m = float(store.ground_m(np.array([case.lon_deg]), np.array([case.lat_deg]))[0])
    if np.isnan(ground_m):
        raise TerrainError(
            "There is no terrain at this position.", "position", "a place on the terrain loaded"
        )
    glide = prepare(case, frame, ground_m)
    _check(cancel)
    grid = grid_for(store, glide, frame, limits, cancel)
    size = (grid.col0, grid.row0, grid.n_cols, grid.n_rows)
    window = store.window(frame, *size, grid.cell_m, cancel)
    _check(cancel)
    labels = label(glide, grid, window.top_m, cancel, bend)
    place = (frame, grid.col0, grid.row0, grid.cell_m)
    straight_cells = trace(labels.straight)
    _check(cancel)
    cells = trace(labels.reach) if bend else straight_cells
    straight = to_lonlat(straight_cells, *place)
    outline = to_lonlat(cells, *place) if bend else straight
    _check(cancel)
    return Footprint(
        case, glide, grid, store, labels, ground_m,
        outline, straight, cells,
        window.sources, _sentences(store, glide, grid, labels, outline), tuple(sites),
    )  # fmt: skip


def grid_for(
    store: TerrainStore, glide: Glide, frame: Frame, limits: SolveLimits,
    cancel: NDArray[np.uint8] | None = None,
) -> Grid:  # fmt: skip
    """Return the window that the glide can touch, down to the lowest ground sampled in it."""
    case = glide.case
    x_m, y_m = frame.to_xy_m(case.lon_deg, case.lat_deg)
    west, south, east, north = reach_box_m(glide, LOWEST_GROUND_M)
    xs, ys = np.meshgrid(np.linspace(west, east, 49) + x_m, np.linspace(south, north, 49) + y_m)
    lowest_m = case.alt_m
    for x, y in zip(np.array_split(xs, 12), np.array_split(ys, 12), strict=True):
        _check(cancel)
        ground = store.ground_m(*frame.to_lonlat(x.ravel(), y.ravel()))
        lowest_m = min(lowest_m, float(np.nanmin(ground, initial=np.inf)))
    lowest_m -= LOWEST_SPARE_M
    reach = reach_box_m(glide, lowest_m + case.margins.arrival_m)
    return choose_grid(frame, float(x_m), float(y_m), reach, limits, case.detail)


def _check(cancel: NDArray[np.uint8] | None) -> None:
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
    _check(cancel)
    straight = alt >= top + np.float32(need_m)
    n_anchors = front.spread(
        top, alt, ray, run, glide.entry, glide.air, par, anchors, n_roots, cancel,
        max(round(ANCHOR_SPACING_M / grid.cell_m), 1),
    ) if n_roots and bend else n_roots  # fmt: skip
    _check(cancel)
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


def _sentences(
    store: TerrainStore, glide: Glide, grid: Grid, labels: Labels, outline: MultiPolygon
) -> list[str]:
    """Return what this answer leaves out, in sentences."""
    sentences = [*glide.notes, *store.notes, *_ridge_wind(glide, labels)]
    if outline.is_empty:
        sentences.append(
            "These margins leave nothing within modelled range here. That does not mean that no"
            " landing is possible."
        )
    if len(labels.anchors) >= MAX_ANCHORS - 1:
        sentences.append("The search for bent paths was cut short; more ground may be in reach.")
    return [*sentences, f"Solved on cells of {grid.cell_m:.0f} m."]


def _ridge_wind(glide: Glide, labels: Labels) -> list[str]:
    """Return a warning where the wind at the highest terrain in the window is strong."""
    solid = labels.top_m[np.isfinite(labels.top_m)]
    if solid.size == 0:
        return []
    top_m = np.array([float(solid.max())])
    east, north = glide.case.wind.at(top_m)
    speed_kt = float(np.hypot(east, north)[0]) / KT_MPS
    if speed_kt < RIDGE_WIND_KT:
        return []
    margins = glide.case.margins
    return [
        f"The wind at ridge level is {speed_kt:.0f} kt: the air can sink fast in the lee of ridges."
        f" This answer allows {margins.downdraft_mps * 60 / FT_M:.0f} ft/min of downdraft,"
        f" {margins.wind_error_mps / KT_MPS:.0f} kt of wind error and"
        f" {margins.clearance_m / FT_M:.0f} ft of clearance; usual over hills are 10 kt, and 500 ft"
        " near ridges."
    ]


def _ranges(answer: Footprint) -> list[tuple[float, float]]:
    """Return how far the outline reaches on each of 36 true bearings."""
    grid, case = answer.grid, answer.case
    x_m, y_m = grid.frame.to_xy_m(case.lon_deg, case.lat_deg)
    x, y = float(x_m) / grid.cell_m - grid.col0, float(y_m) / grid.cell_m - grid.row0
    bearings = 2 * pi * np.arange(N_RANGES) / N_RANGES
    at, far = bearings + answer.glide.convergence_rad, np.hypot(grid.n_cols, grid.n_rows)
    ends = np.column_stack((x + far * np.sin(at), y + far * np.cos(at)))
    lines = [shapely.LineString([(x, y), end]) for end in ends]
    found = []
    for bearing, shown in zip(bearings, shapely.intersection(lines, answer.cells), strict=True):
        points = shapely.get_coordinates(shown)
        away = np.hypot(points[:, 0] - x, points[:, 1] - y).max(initial=0.0)
        found.append((float(bearing), float(away) * grid.cell_m))
    return found


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
    par = _parameters(glide, grid, min(float(top.min()), glide.case.alt_m) + need_m)
    anchors, run = np.zeros((4, k.N_ANCHOR)), glide.run / grid.cell_m
    n_roots = _roots(glide, grid, top, run, par, anchors, int(_rim_cells(glide, par)))
    blocks = ring.block_maxima(top)
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


def warm_up(store: TerrainStore, case: GlideCase) -> None:
    """Compile every kernel by solving a small case, and explain one place of it."""
    answer = solve(store, case)
    answer.explain(case.lon_deg, case.lat_deg)
    _ = answer.straight_ranges
