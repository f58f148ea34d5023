"""The brute-force search is held to closed forms on ground where they are known."""

from __future__ import annotations

import math

import numpy as np
from shapely import box

from tests.brute import Window, reachable
from tests.closed_forms import LossFunction, Obstacles, turn_loss_per_rad_m

N, CELL_M = 31, 60.0
MIDDLE_M = 15.5 * CELL_M


def window(top: np.ndarray, east_mps: float = 0.0, eas_mps: float = 12.0) -> Window:
    return Window(top, CELL_M, 10.0, eas_mps, east_mps, 0.0, 0.0, math.radians(45), 0.0, 0.0)


def centres() -> np.ndarray:
    along = (np.arange(N) + 0.5) * CELL_M
    x_m, y_m = np.meshgrid(along, along)
    return np.column_stack([x_m.ravel(), y_m.ravel()])


def test_flat_ground_gives_the_disc() -> None:
    straight, bent = reachable(window(np.zeros((N, N))), MIDDLE_M, MIDDLE_M, 80.0, None)
    # Derived: still air, radius = E h = 800 m
    inside = np.hypot(*(centres() - MIDDLE_M).T).reshape(N, N) <= 800.0
    assert np.array_equal(straight, inside)
    assert np.array_equal(bent, inside)  # a bend never gains on flat ground


def test_constant_wind_moves_the_disc() -> None:
    straight, _ = reachable(window(np.zeros((N, N)), 4.0), MIDDLE_M, MIDDLE_M, 60.0, None)
    # Derived: loss on a straight ground track in constant wind; 1 % covers the density of 60 m
    loss = LossFunction(10.0, 12.0, 4.0)
    lost_m = np.array([loss((MIDDLE_M, MIDDLE_M), tuple(end)) for end in centres()]).reshape(N, N)
    assert np.all(straight[lost_m < 59.4])
    assert not np.any(straight[lost_m > 60.6])


def test_ground_behind_a_wall_is_found_round_its_end() -> None:
    top = np.zeros((N, N))
    top[8:23, 18] = 500.0
    straight, bent = reachable(window(top), 11.5 * CELL_M, MIDDLE_M, 110.0, None, stride=1)
    wall = Obstacles(
        [box(18 * CELL_M, 8 * CELL_M, 19 * CELL_M, 23 * CELL_M)], LossFunction(10.0, 12.0)
    )
    lost_m = wall.losses_m((11.5 * CELL_M, MIDDLE_M), centres()).reshape(N, N)
    hidden = (lost_m < 110.0) & ~straight & (top == 0.0)
    assert hidden.sum() > 20
    # Derived: shortest way round; a turn of at most 90 degrees and bends at cell centres cost
    # 2 m of height each way at 12 m/s, and the corner is passed a cell away (6 m)
    per_turn_m = turn_loss_per_rad_m(12.0, 10.0, math.radians(45)) * math.pi / 2
    sure = (lost_m < 110.0 - per_turn_m - 8.0) & (top == 0.0)
    assert np.all(bent[sure])
    assert not np.any(bent & (lost_m > 110.0 + 1e-6))


def test_a_first_turn_costs_its_height() -> None:
    flat = window(np.zeros((N, N)), eas_mps=25.0)
    ahead, _ = reachable(flat, MIDDLE_M, MIDDLE_M, 85.0, 0.0)
    y = np.arange(N)
    behind_m = (15 - int(y[ahead[:, 15]].min())) * CELL_M
    ahead_m = (int(y[ahead[:, 15]].max()) - 15) * CELL_M
    # Derived: straight leg = D and turn = 180 + 2 atan(R/D) degrees to a point behind (tangents
    # from a point to a circle are equal), so 10 (85 - turn) metres are left
    radius_m = 25.0**2 / (9.80665 * math.sin(math.radians(45)))
    loss_m = turn_loss_per_rad_m(25.0, 10.0, math.radians(45))
    reach_m = 500.0
    for _ in range(20):
        reach_m = 10.0 * (85.0 - (math.pi + 2 * math.atan(radius_m / reach_m)) * loss_m)
    assert abs(behind_m - reach_m) <= CELL_M
    assert abs(ahead_m - 850.0) <= CELL_M
