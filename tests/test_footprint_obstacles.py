"""Upright obstacles: the footprint against shortest ways round them.

The aeroplane is a slow one (12 m/s, 45 degrees of bank: a circle of 42 m), so that its turns are
small against a cell; ground must be in reach where it is with the turns at the corners paid
(v^2 / E g sin b cos b per radian), and must not be where it is not with turns for nothing.
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
import shapely
from shapely import Polygon, box

from geo.footprint import Footprint, solve
from geo.terrain import TerrainStore
from tests import cases
from tests.cases import Place
from tests.closed_forms import LossFunction, Obstacles, ridge_losses_m, turn_loss_per_rad_m

EAS_MPS, RATIO, CELL_M = 12.0, 10.0, 30.0
BANK_RAD = math.radians(45.0)
PLACE = Place(15.2, 46.1)
TWO_CELLS_M = 2.0 * CELL_M / RATIO  # height that two cells of distance are worth
TOUCHED_M = CELL_M + 15.0  # an obstacle blocks the cells that it or its slope of one post touches
WALL_M = 2000.0  # higher than any aeroplane here
ROUND_M = 826.13  # height needed round the wall of Segal, Bar-Gill, Shimkin (arXiv 2304.06499)


def boxes_as_blocks(shapes: list[Polygon], top_m: float) -> cases.HeightFunction:
    return cases.blocks([(*shape.bounds, top_m) for shape in shapes])


def solved(
    folder: Path,
    height: cases.HeightFunction,
    alt_m: float,
    *,
    wind: tuple[float, float] = (0.0, 0.0),
    half_m: float = 10_500.0,
    turned_deg: float = 0.0,
) -> Footprint:
    crs = PLACE.local_crs(turned_deg)
    cases.write_terrain(folder, PLACE, height, half_m=half_m, post_m=15.0, crs=crs)
    plane = cases.polar(RATIO, EAS_MPS, 6.0)
    margins = cases.neutral(bank_rad=BANK_RAD)
    case = cases.glide_case(
        PLACE, alt_m, plane, margins=margins, wind=cases.constant_wind(*wind)
    )  # fmt: skip
    return solve(TerrainStore(folder), case)


def reached(found: Footprint, ends: np.ndarray) -> np.ndarray:
    lon, lat = PLACE.plane().to_lonlat(ends[:, 0], ends[:, 1])
    return np.asarray(shapely.contains_xy(found.footprint, lon, lat))


def sample(radius_m: float, count: int = 3000, seed: int = 5) -> np.ndarray:
    rng = np.random.default_rng(seed)
    away, angle = radius_m * np.sqrt(rng.uniform(0, 1, count)), rng.uniform(0, 2 * math.pi, count)
    return np.column_stack([away * np.cos(angle), away * np.sin(angle)])


def check_no_crossing(found: Footprint, shapes: list[Polygon]) -> None:
    """No outline may cover ground more than one cell inside an obstacle."""
    plane = PLACE.plane()
    core = shapely.unary_union([shape.buffer(-CELL_M, join_style="mitre") for shape in shapes])
    lonlat = shapely.transform(core, lambda xy: np.column_stack(plane.to_lonlat(*xy.T)))
    assert core.area > 0.0
    for outline in (found.footprint, found.straight):
        assert outline.is_valid
        assert outline.intersection(lonlat).is_empty


def check_round(
    found: Footprint,
    shapes: list[Polygon],
    alt_m: float,
    wind: tuple[float, float] = (0.0, 0.0),
    window: tuple[float, float, float, float] | None = None,
    grown_m: float = 0.0,
) -> int:
    """Hold sampled ground to the shortest way round; return how many hidden points are reached.

    `grown_m` is by how much the obstacles may look larger: a U-turn round the end of a thin wall
    is longer by four times that, which two cells of distance do not cover.
    """
    loss = LossFunction(RATIO, EAS_MPS * 1.02, *wind)  # density half way down, about 400 m
    ends = sample(RATIO * alt_m * (1.1 + math.hypot(*wind) / EAS_MPS))
    solid = shapely.unary_union(shapes)
    ends = ends[shapely.distance(solid, shapely.points(ends)) > 2.0 * CELL_M]
    if window:
        west, south, east, north = window
        keep = (ends[:, 0] > west) & (ends[:, 0] < east)
        ends = ends[keep & (ends[:, 1] > south) & (ends[:, 1] < north)]
    obstacles = Obstacles(shapes, loss)
    lost_m = obstacles.losses_m((0.0, 0.0), ends)
    per_rad_m = turn_loss_per_rad_m(EAS_MPS * 1.02, RATIO, BANK_RAD)
    grown = [shape.buffer(grown_m, join_style="mitre") for shape in shapes]
    paid_m = Obstacles(grown, loss).losses_m((0.0, 0.0), ends, per_rad_m)
    inside = reached(found, ends)
    # a metre of height is worth more ground downwind: two cells of the cheapest track
    tolerance_m = TWO_CELLS_M / (1.0 - math.hypot(*wind) / EAS_MPS)
    false = inside & (lost_m > alt_m + tolerance_m)
    missed = ~inside & (paid_m < alt_m - tolerance_m)
    assert not false.any(), f"{false.sum()} false, worst {np.max(lost_m[false]) - alt_m:.1f} m"
    assert not missed.any(), f"{missed.sum()} missed, worst {alt_m - np.min(paid_m[missed]):.1f} m"
    assert inside.any()
    hidden = [not obstacles.sees((0.0, 0.0), (float(x), float(y))) for x, y in ends[inside]]
    return sum(hidden)


WALL = [box(4955.0, -1000.0, 5045.0, 1000.0)]


def test_wall_is_passed_just_behind_at_the_published_height(tmp_path: Path) -> None:
    found = solved(tmp_path, boxes_as_blocks(WALL, WALL_M), ROUND_M)
    # Derived: wall |y| <= 1000 m, 5 km ahead, 10:1, still air: the place 3 km behind it needs
    # (sqrt(26) + sqrt(10)) km / 10 = 826.13 m (structure: Segal, Bar-Gill, Shimkin, arXiv
    # 2304.06499), so from there the ground on the axis ends there
    along_m = np.arange(5100.0, 10_000.0, 2.0)
    axis = np.column_stack([along_m, np.zeros_like(along_m)])
    behind_m = along_m[reached(found, axis)]
    assert behind_m.min() == pytest.approx(5100.0, abs=2 * CELL_M)
    assert behind_m.max() == pytest.approx(8000.0, abs=2 * CELL_M)
    assert len(behind_m) == pytest.approx((behind_m.max() - behind_m.min()) / 2.0, abs=2)


@pytest.mark.parametrize("share", [(0.0, 0.0), (1 / 7, 0.0), (-1 / 7, 0.0), (0.0, 1 / 7)])
def test_wall_in_wind(tmp_path: Path, share: tuple[float, float]) -> None:
    wind = (share[0] * EAS_MPS, share[1] * EAS_MPS)
    found = solved(tmp_path, boxes_as_blocks(WALL, WALL_M), ROUND_M, wind=wind)
    assert check_round(found, WALL, ROUND_M, wind) > 20
    check_no_crossing(found, WALL)


def test_wall_is_where_it_is_when_grid_north_is_14_degrees_off(tmp_path: Path) -> None:
    wall = [box(-1500.0, 3000.0, 500.0, 3090.0)]
    found = solved(tmp_path, boxes_as_blocks(wall, WALL_M), 600.0, turned_deg=14.0, half_m=7000.0)
    assert check_round(found, wall, 600.0) > 50
    check_no_crossing(found, wall)


def test_wall_with_a_gap(tmp_path: Path) -> None:
    walls = [box(3000.0, -9900.0, 3090.0, 1300.0), box(3000.0, 1700.0, 3090.0, 9900.0)]
    found = solved(tmp_path, boxes_as_blocks(walls, WALL_M), 700.0)
    assert check_round(found, walls, 700.0) > 100
    check_no_crossing(found, walls)


def test_high_mesa(tmp_path: Path) -> None:
    mesa = [box(1500.0, -1200.0, 3500.0, 800.0)]
    found = solved(tmp_path, boxes_as_blocks(mesa, WALL_M), 600.0, half_m=7000.0)
    assert check_round(found, mesa, 600.0) > 50
    check_no_crossing(found, mesa)


def test_top_of_a_low_mesa(tmp_path: Path) -> None:
    top_m, alt_m = 300.0, 600.0
    mesa = box(1500.0, -3000.0, 5500.0, 3000.0)
    found = solved(tmp_path, boxes_as_blocks([mesa], top_m), alt_m, half_m=7000.0)
    ends = sample(RATIO * alt_m)
    ends = ends[shapely.contains(mesa.buffer(-2.0 * CELL_M), shapely.points(ends))]
    lost_m = np.hypot(*ends.T) / RATIO
    inside = reached(found, ends)
    # Derived: the top is reached where h - d / E >= its height
    assert not np.any(inside & (lost_m > alt_m - top_m + TWO_CELLS_M))
    assert np.all(inside[lost_m < alt_m - top_m - TWO_CELLS_M])


CANYON = [
    box(2000.0, -890.0, 2090.0, 890.0),
    box(2000.0, 800.0, 4500.0, 890.0),
    box(2000.0, -890.0, 4500.0, -800.0),
]


def test_box_canyon_seen_from_behind_its_end_is_entered_by_its_mouth(tmp_path: Path) -> None:
    shapes = [shapely.unary_union(CANYON)]
    found = solved(tmp_path, boxes_as_blocks(CANYON, WALL_M), 650.0, half_m=7500.0)
    inner = (2150.0, -740.0, 4500.0, 740.0)
    # all of the ground inside is hidden: it is reached round the arms or not at all
    assert check_round(found, shapes, 650.0, window=inner, grown_m=TOUCHED_M) > 20
    check_round(found, shapes, 650.0, grown_m=TOUCHED_M)
    check_no_crossing(found, CANYON)


def test_box_canyon_holds_what_starts_in_it(tmp_path: Path) -> None:
    # the mouth is 3 km west of the aeroplane, the closed end 500 m east of it
    canyon = [
        box(500.0, -890.0, 590.0, 890.0),
        box(-3000.0, 800.0, 590.0, 890.0),
        box(-3000.0, -890.0, 590.0, -800.0),
    ]
    shapes = [shapely.unary_union(canyon)]
    found = solved(tmp_path, boxes_as_blocks(canyon, WALL_M), 600.0, half_m=7000.0)
    assert check_round(found, shapes, 600.0, grown_m=TOUCHED_M) > 50
    check_no_crossing(found, canyon)
    beyond = np.array([[800.0, 0.0], [0.0, 1200.0], [0.0, -1200.0], [2000.0, 500.0]])
    assert not reached(found, beyond).any()


def test_endless_ridge_is_crossed_only_where_height_is_left(tmp_path: Path) -> None:
    ridge_m, alt_m, at_m = 300.0, 800.0, 3500.0
    ridge = cases.blocks([(at_m - 8.0, -10_400.0, at_m + 8.0, 10_400.0, ridge_m)])
    found = solved(tmp_path, ridge, alt_m)
    ends = sample(RATIO * alt_m * 1.05)
    ends = ends[np.abs(ends[:, 0] - at_m) > 2 * CELL_M]
    inside = reached(found, ends)
    near = ends[:, 0] < at_m
    assert np.array_equal(
        inside[near & (np.abs(np.hypot(*ends.T) - RATIO * alt_m) > 2 * CELL_M)],
        (np.hypot(*ends.T) < RATIO * alt_m)[
            near & (np.abs(np.hypot(*ends.T) - RATIO * alt_m) > 2 * CELL_M)
        ],
    )
    # Derived: crossed where h - d / E >= ridge, then on by the shortest way from that stretch
    far = ends[~near] - np.array([at_m, 0.0])
    rich = ridge_losses_m(-at_m, alt_m + TWO_CELLS_M, ridge_m, RATIO, far)
    poor = ridge_losses_m(-at_m, alt_m - TWO_CELLS_M, ridge_m, RATIO, far)
    assert not np.any(inside[~near] & (rich > alt_m + TWO_CELLS_M))
    assert np.all(inside[~near][poor < alt_m - TWO_CELLS_M])
    assert np.sum(inside[~near]) > 100
