"""The gliding footprint: from one engine failure to the ground that can be reached.

The order of the work: the glide table of this case in the local frame, the window of terrain that
it can touch, the first seconds, the straight glides from the end of each first turn, the front
that bends round terrain, the outlines.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from math import pi

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import MultiPolygon

from geo import explain as _explain
from geo import paths as _paths
from geo.answers import Explanation, GlidePath, ProfilePoint, SiteReach
from geo.case import FT_M, KT_MPS, GlideCase, SolveLimits
from geo.frame import Frame, frame_for
from geo.glide import LOWEST_GROUND_M, Glide, GlideFigures, prepare
from geo.grid import Grid, choose_grid, reach_box_m
from geo.label import MAX_ANCHORS, N_RANGES, Labels, check, label, ring_ranges
from geo.outline import to_lonlat, trace
from geo.sites import Site
from geo.terrain import TerrainStore
from geo.terrain_source import TerrainSource
from perf.errors import TerrainError

Array = NDArray[np.float64]

RIDGE_WIND_KT = 20.0  # from here on the lee of ridges is warned of; common practice
LOWEST_SPARE_M = 30.0  # ground may be this much lower between the places sampled


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
    check(cancel)
    grid = grid_for(store, glide, frame, limits, cancel)
    size = (grid.col0, grid.row0, grid.n_cols, grid.n_rows)
    window = store.window(frame, *size, grid.cell_m, cancel)
    check(cancel)
    labels = label(glide, grid, window.top_m, cancel, bend)
    place = (frame, grid.col0, grid.row0, grid.cell_m)
    straight_cells = trace(labels.straight)
    check(cancel)
    cells = trace(labels.reach) if bend else straight_cells
    straight = to_lonlat(straight_cells, *place)
    outline = to_lonlat(cells, *place) if bend else straight
    check(cancel)
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
        check(cancel)
        ground = store.ground_m(*frame.to_lonlat(x.ravel(), y.ravel()))
        lowest_m = min(lowest_m, float(np.nanmin(ground, initial=np.inf)))
    lowest_m -= LOWEST_SPARE_M
    reach = reach_box_m(glide, lowest_m + case.margins.arrival_m)
    return choose_grid(frame, float(x_m), float(y_m), reach, limits, case.detail)


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


def warm_up(store: TerrainStore, case: GlideCase) -> None:
    """Compile every kernel by solving a small case, and explain one place of it."""
    answer = solve(store, case)
    answer.explain(case.lon_deg, case.lat_deg)
    _ = answer.straight_ranges
