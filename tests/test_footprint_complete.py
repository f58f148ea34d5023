"""A brute-force search with bends anywhere finds little that the footprint has missed."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from geo.case import GlideCase, SolveLimits
from geo.footprint import Footprint, solve
from geo.terrain import TerrainStore
from tests import cases, real_terrain
from tests.brute import Window, reachable
from tests.cases import Place

DEMO = Path(__file__).parent.parent / "demo_data"
CELL_M = 60.0
HALF = 25  # the window is 51 x 51 cells
KT = 1852.0 / 3600.0


@dataclass(frozen=True)
class Spot:
    """A window: terrain, share of its box, height above ground, track, wind, bank, ratio."""

    terrain: str
    east: float
    north: float
    height_m: float
    track_deg: float | None
    wind: tuple[float, float]
    bank_deg: float = 30.0


SPOTS = [
    Spot("jacksboro", 0.62, 0.47, 190.0, None, (0.0, 0.0)),
    Spot("jacksboro", 0.30, 0.62, 230.0, 60.0, (4.0, -3.0)),
    Spot("jacksboro", 0.45, 0.40, 260.0, 250.0, (0.0, 0.0), 45.0),
    Spot("jacksboro", 0.497, 0.275, 203.0, 279.0, (0.0, 0.0)),
    Spot("jacksboro", 0.777, 0.775, 196.0, None, (0.0, 0.0)),
    Spot("jacksboro", 0.284, 0.677, 256.0, 138.0, (4.9, -7.3)),
    Spot("aletsch", 0.38, 0.55, 200.0, None, (-5.0, 2.0)),
    Spot("aletsch", 0.60, 0.35, 250.0, 140.0, (0.0, 0.0)),
    Spot("aletsch", 0.25, 0.70, 240.0, 300.0, (3.0, 6.0), 45.0),
    Spot("aletsch", 0.434, 0.434, 194.0, 284.0, (0.0, 0.0)),
    Spot("aletsch", 0.687, 0.567, 183.0, 14.0, (0.0, 0.0)),
    Spot("demo", 0.60, 0.55, 200.0, None, (0.0, 0.0)),
    Spot("demo", 0.70, 0.45, 250.0, 200.0, (-4.0, -4.0)),
    Spot("demo", 0.55, 0.70, 230.0, 30.0, (0.0, 0.0), 45.0),
    Spot("demo", 0.643, 0.45, 241.0, 205.0, (-3.8, 0.2)),
    Spot("demo", 0.729, 0.484, 177.0, None, (0.0, 0.0)),
]


@pytest.fixture(scope="module")
def folders(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    jacksboro = tmp_path_factory.mktemp("jacksboro")
    aletsch = tmp_path_factory.mktemp("aletsch")
    real_terrain.write_jacksboro(jacksboro)
    real_terrain.write_aletsch(aletsch)
    return {"jacksboro": jacksboro, "aletsch": aletsch, "demo": DEMO}


def case_at(spot: Spot, store: TerrainStore) -> GlideCase:
    west, south, east, north = store.sources[0].bbox
    lon, lat = west + spot.east * (east - west), south + spot.north * (north - south)
    ground_m = float(store.ground_m(np.array([lon]), np.array([lat]))[0])
    return cases.glide_case(
        Place(lon, lat),
        ground_m + spot.height_m,
        cases.polar(9.0, 33.0),
        track_rad=None if spot.track_deg is None else math.radians(spot.track_deg),
        wind=cases.constant_wind(*spot.wind),
        margins=cases.neutral(
            bank_rad=math.radians(spot.bank_deg), clearance_m=20.0, arrival_height_m=30.0
        ),
    )


def padded(values: NDArray, row: int, col: int, fill: float) -> NDArray:
    """Return the window around a cell, `fill` beyond the grid."""
    out = np.full((2 * HALF + 1, 2 * HALF + 1), fill, dtype=values.dtype)
    for r in range(2 * HALF + 1):
        for c in range(2 * HALF + 1):
            i, j = row - HALF + r, col - HALF + c
            if 0 <= i < values.shape[0] and 0 <= j < values.shape[1]:
                out[r, c] = values[i, j]
    return out


def searched(found: Footprint) -> tuple[NDArray[np.bool_], NDArray[np.bool_], NDArray[np.bool_]]:
    """Return what the search reaches straight and in all, and what the footprint reaches."""
    case, grid = found.case, found.grid
    x_m, y_m = (float(v) for v in grid.frame.to_xy_m(case.lon_deg, case.lat_deg))
    row, col = int(y_m // grid.cell_m) - grid.row0, int(x_m // grid.cell_m) - grid.col0
    turn = float(grid.frame.convergence_rad(case.lon_deg, case.lat_deg))
    wind = case.wind.turned(turn)
    window = Window(
        padded(found.labels.top_m.astype(np.float64), row, col, np.nan),
        grid.cell_m,
        case.polar.ratio,
        case.polar.best_glide_eas_mps,
        float(wind.east_mps[0]),
        float(wind.north_mps[0]),
        0.0,
        case.margins.bank_rad,
        case.margins.clearance_m,
        case.margins.arrival_height_m,
    )
    left_m, low_m = (grid.col0 + col - HALF) * grid.cell_m, (grid.row0 + row - HALF) * grid.cell_m
    heading = None
    if case.track_rad is not None:
        track = case.track_rad + turn
        over = case.polar.best_glide_eas_mps / (1.0 - 0.0065 * case.alt_m / 288.15) ** 2.12794
        cross = window.east_mps * math.cos(track) - window.north_mps * math.sin(track)
        heading = track - math.asin(cross / over)
    straight, bent = reachable(window, x_m - left_m, y_m - low_m, case.alt_m, heading)
    return straight, bent, padded(found.labels.reach, row, col, False)


def test_brute_force_finds_at_most_three_percent_more(folders: dict[str, Path]) -> None:
    found_by_search, missed, hidden, lines = 0, 0, 0, []
    stores = {name: TerrainStore(folder) for name, folder in folders.items()}
    for spot in SPOTS:
        store = stores[spot.terrain]
        found = solve(store, case_at(spot, store), limits=SolveLimits(cell_m=CELL_M))
        assert found.cell_m == CELL_M
        straight, bent, reach = searched(found)
        found_by_search += int(bent.sum())
        missed += int((bent & ~reach).sum())
        hidden += int((bent & ~straight).sum())
        lines.append(
            f"{spot.terrain} {spot.east} {spot.north}: {bent.sum()} found, {straight.sum()} direct;"
            f" footprint {reach.sum()}, missed {(bent & ~reach).sum()}"
        )
    print("\n" + "\n".join(lines))
    assert found_by_search > 2000
    assert hidden > 100  # the windows do hold ground that is reached by bent paths only
    # the customer's figure: at most 3 % of the reachable area may be missed
    assert missed <= 0.03 * found_by_search, "\n".join(lines)
