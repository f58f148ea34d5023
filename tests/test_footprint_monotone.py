"""What must never lose ground, and what must never gain any, while every track can be held."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import shapely

from geo.case import GlideCase, SolveLimits
from geo.footprint import Footprint, solve
from geo.terrain import TerrainStore
from geo.wind import WindProfile
from tests import cases
from tests.cases import Place

PLACE = Place(-70.3, -44.2)
LIMITS = SolveLimits(cell_m=60.0)
HILLS = cases.hills(11, 900.0, 5000.0)
WIND = WindProfile(np.array([0.0, 1500.0]), np.array([4.0, 9.0]), np.array([-2.0, 3.0]))
ALT_M = 1250.0


def ground(folder: Path, height: cases.HeightFunction = HILLS) -> TerrainStore:
    cases.write_terrain(folder, PLACE, height, half_m=14_000.0, post_m=60.0)
    return TerrainStore(folder)


def case(
    alt_m: float = ALT_M, ratio: float = 9.0, track: float | None = 0.7, **margins: Any
) -> GlideCase:
    usual = {
        "clearance_m": 40.0,
        "arrival_height_m": 100.0,
        "reaction_s": 4.0,
        "ratio_factor": 0.95,
    }
    return cases.glide_case(
        PLACE,
        alt_m,
        cases.polar(ratio),
        track_rad=track,
        wind=WIND,
        margins=cases.neutral(**(usual | margins)),
    )


def on_lattice(found: Footprint, half: int = 260) -> np.ndarray:
    """Return the cells reached on a square of the lattice about the place."""
    grid = found.grid
    x_m, y_m = grid.frame.to_xy_m(PLACE.lon_deg, PLACE.lat_deg)
    row, col = int(y_m // grid.cell_m) - half, int(x_m // grid.cell_m) - half
    out = np.zeros((2 * half, 2 * half), dtype=bool)
    top, left = grid.row0 - row, grid.col0 - col
    n_rows, n_cols = found.labels.reach.shape
    assert top >= 0
    assert left >= 0
    assert top + n_rows <= 2 * half
    assert left + n_cols <= 2 * half
    out[top : top + n_rows, left : left + n_cols] = found.labels.reach
    return out


def lost(less: Footprint, more: Footprint) -> int:
    """Return how many cells the better case has lost."""
    assert less.cell_m == more.cell_m == LIMITS.cell_m
    return int(np.sum(on_lattice(less) & ~on_lattice(more)))


BETTER: dict[str, Callable[[float], GlideCase]] = {
    "more height": lambda step: case(alt_m=ALT_M + step),
    "less arrival height": lambda step: case(arrival_height_m=100.0 - step),
    "less clearance": lambda step: case(clearance_m=40.0 - 0.4 * step, arrival_height_m=40.0),
    "less delay": lambda step: case(reaction_s=4.0 - 0.04 * step),
    "better ratio": lambda step: case(ratio=9.0 + 0.02 * step),
    "less ratio margin": lambda step: case(ratio_factor=0.95 + 0.0005 * step),
    "less wind margin": lambda step: case(wind_error_mps=3.0 - 0.03 * step),
    "less sinking air": lambda step: case(downdraft_mps=0.5 - 0.005 * step),
    "more height, any heading": lambda step: case(alt_m=ALT_M + step, track=None),
}


@pytest.mark.parametrize("name", list(BETTER))
def test_a_better_case_never_loses_ground(tmp_path: Path, name: str) -> None:
    # Derived: every flight of the worse case can be flown in the better one
    store = ground(tmp_path)
    found = [solve(store, BETTER[name](step), limits=LIMITS) for step in (0.0, 7.0, 60.0)]
    assert found[0].labels.reach.any()
    losses = [lost(found[0], found[1]), lost(found[1], found[2]), lost(found[0], found[2])]
    assert losses == [0, 0, 0], f"{name}: cells lost {losses}"
    assert on_lattice(found[2]).sum() > on_lattice(found[0]).sum()


def test_any_heading_reaches_all_that_a_track_does(tmp_path: Path) -> None:
    store = ground(tmp_path)
    free = solve(store, case(track=None), limits=LIMITS)
    for track in (0.0, 2.0, 4.0):
        # Derived: with a track, reaction and turn are charged; with none they are not
        assert lost(solve(store, case(track=track), limits=LIMITS), free) == 0


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_raising_ground_never_gains_any(tmp_path: Path, seed: int) -> None:
    # Derived: a flight that clears the raised ground clears the ground that was there before
    rng = np.random.default_rng(seed)
    bumps = rng.uniform(-5000.0, 5000.0, (12, 2))

    def raised(x_m: np.ndarray, y_m: np.ndarray) -> np.ndarray:
        height = HILLS(x_m, y_m)
        for x, y in bumps:
            near = np.hypot(x_m - x, y_m - y) < 300.0
            height = np.where(near, height + 250.0, height)
        return height

    track = None if seed == 1 else 1.0 * seed
    before = solve(ground(tmp_path / "a"), case(track=track), limits=LIMITS)
    after = solve(ground(tmp_path / "b", raised), case(track=track), limits=LIMITS)
    assert lost(after, before) == 0
    assert on_lattice(after).sum() < on_lattice(before).sum()


def holed(x_m: np.ndarray, y_m: np.ndarray) -> np.ndarray:
    height = HILLS(x_m, y_m)
    hole = (np.hypot(x_m - 2000.0, y_m - 500.0) < 500.0) | (np.abs(x_m + 1500.0) < 40.0)
    return np.where(hole, np.nan, height)


@pytest.mark.parametrize("track", [None, 2.5])
def test_a_void_is_never_reached(tmp_path: Path, track: float | None) -> None:
    found = solve(ground(tmp_path, holed), case(track=track), limits=LIMITS)
    assert found.labels.reach.any()
    assert not np.any(found.labels.reach & np.isnan(found.labels.top_m))
    lon, lat = PLACE.plane().to_lonlat(np.array([2000.0, -1500.0]), np.array([500.0, 300.0]))
    assert not shapely.contains_xy(found.footprint, lon, lat).any()
    for place in zip(lon, lat, strict=True):
        told = found.explain(float(place[0]), float(place[1]))
        assert not told.within_range
        assert told.code == "void"
        assert found.path_to(float(place[0]), float(place[1])) is None


@pytest.mark.parametrize("track", [None, 2.5])
def test_a_void_never_gains_ground(tmp_path: Path, track: float | None) -> None:
    before = solve(ground(tmp_path / "a"), case(track=track), limits=LIMITS)
    after = solve(ground(tmp_path / "b", holed), case(track=track), limits=LIMITS)
    assert lost(after, before) == 0


def test_more_height_in_steps_never_loses_a_cell(tmp_path: Path) -> None:
    store = ground(tmp_path)
    older = None
    for alt_m in (900.0, 950.0, 1100.0, 1101.0, 1500.0):
        newer = solve(store, case(alt_m=alt_m, track=math.pi), limits=LIMITS)
        if older is not None:
            assert lost(older, newer) == 0
        older = newer
