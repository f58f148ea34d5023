"""The kernels of rays, arcs, front and ring against their slow twins and against closed forms."""

from __future__ import annotations

from math import cos, hypot, pi, radians, sin
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geo import front, rays, ring
from geo import layout as k
from tests import naive_glide as naive

pytestmark = pytest.mark.smallgrid

LEVEL0_M, STEP_M, N_LEVELS, N_TRACKS = -60.0, 60.0, 30, 16
NO_ENTRY = np.zeros(N_TRACKS)


def parameters(**changed: float) -> Any:
    """Return the scalars of a solve on cells of 30 m with a bank of 30 degrees and 10:1."""
    par = np.zeros(k.N_PAR)
    par[k.CELL_M], par[k.LEVEL0_M], par[k.LEVEL_STEP_M] = 30.0, LEVEL0_M, STEP_M
    par[k.BANK_SIN], par[k.BANK_COS], par[k.RATIO] = 0.5, cos(radians(30)), 10.0
    par[k.MAX_RUN], par[k.JUMP_M], par[k.ROOM_M] = 10.0 / 30.0, 20.0, 5.0
    par[k.DETOUR_CELLS], par[k.FLOOR_M] = 12.0, -1000.0
    for name, value in changed.items():
        par[getattr(k, name)] = value
    return par


def air_of(tas: float = 30.0, wind: tuple[float, float] = (0.0, 0.0), shear: float = 0.0) -> Any:
    """Return an air table: speed growing a little, wind growing by `shear` per metre."""
    alt = LEVEL0_M + STEP_M * np.arange(N_LEVELS)
    grow = 1.0 + shear * alt
    return np.column_stack((tas + 0.001 * alt, tas + 0.001 * alt, wind[0] * grow, wind[1] * grow))


def run_of(seed: int) -> Any:
    rng = np.random.default_rng(seed)
    return rng.uniform(0.15, 0.5, (N_LEVELS - 1, N_TRACKS))


def anchor_at(x: float, y: float, z: float, heading: float, side: float, **more: float) -> Any:
    anchor = np.zeros(k.N_ANCHOR)
    anchor[k.AX], anchor[k.AY], anchor[k.AZ] = x, y, z
    anchor[k.HX], anchor[k.HY], anchor[k.SIDE] = sin(heading), cos(heading), side
    anchor[k.STEP], anchor[k.TURNS], anchor[k.PARENT] = 0.02, 1.0, -1.0
    for name, value in more.items():
        anchor[getattr(k, name)] = value
    return anchor


def state_of(x: float, y: float, z: float, bearing: float) -> Any:
    state = np.zeros(k.N_STATE)
    state[k.SX], state[k.SY], state[k.SZ], state[k.CAP] = x, y, z, z
    state[k.DX], state[k.DY] = sin(bearing), cos(bearing)
    state[k.TRACK] = bearing / (2 * pi) * N_TRACKS
    return state


bearings = st.floats(0.0, 6.28)
altitudes = st.floats(50.0, 1600.0)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 99), altitudes, bearings, st.floats(0.0, 60.0))
def test_glide_alt_equals_its_twin(seed: int, z: float, bearing: float, distance: float) -> None:
    run, track = run_of(seed), bearing / (2 * pi) * N_TRACKS
    got = rays.glide_alt(run, parameters(), z, track, distance)
    want = naive.glide_alt(run, LEVEL0_M, STEP_M, z, track, distance, 0.01)
    if want == -np.inf:
        assert got < LEVEL0_M + 1.0
    else:
        # a twin's step may straddle a level: 0.01 cells at the steepest, at every level crossed
        assert got == pytest.approx(want, abs=0.01 / 0.15 * N_LEVELS)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 99), st.floats(2.1, 21.9), st.floats(2.1, 21.9), bearings)
def test_cast_equals_its_twin(seed: int, x: float, y: float, bearing: float) -> None:
    rng = np.random.default_rng(seed)
    top = rng.uniform(0.0, 500.0, (24, 24)).astype(np.float32)
    top[rng.random(top.shape) < 0.02] = np.inf
    run, z = run_of(seed), 560.0
    alt, ray = np.full(top.shape, k.UNREACHED), np.full(top.shape, -1, dtype=np.int32)
    state = state_of(x, y, z, bearing)
    touched = np.empty(100, dtype=np.int32)
    count = rays.cast(
        top, alt, ray, run, parameters(CLEARANCE_M=20.0), state, 7, 0, k.NO_LIMIT, touched, 0
    )
    start = (x, y, z, state[k.DX], state[k.DY], state[k.TRACK])
    want = naive.cast(top, run, LEVEL0_M, STEP_M, 20.0, start)
    got = {(int(r), int(c)): float(alt[r, c]) for r, c in np.argwhere(ray == 7)}
    assert count == len(got)
    # a corner cut, or a height within the twin's step, may tell them apart at the last cell only
    assert abs(len(got) - len(want)) <= 1
    for cell in got.keys() & want.keys():
        assert got[cell] == pytest.approx(want[cell], abs=0.5)
    assert len(got.keys() & want.keys()) >= min(len(got), len(want)) - 1


@pytest.mark.parametrize("turn_deg", [-200, -90, 30, 180])
@pytest.mark.parametrize(("wind", "shear"), [((0.0, 0.0), 0.0), ((6.0, -9.0), 5e-4)])
def test_arc_equals_its_twin(turn_deg: int, wind: tuple[float, float], shear: float) -> None:
    air, par, heading = air_of(wind=wind, shear=shear), parameters(), 0.6
    anchor = anchor_at(40.0, 40.0, 900.0, heading, 1.0 if turn_deg > 0 else -1.0)
    count = round(abs(radians(turn_deg)) / anchor[k.STEP])
    arc = rays.new_arc(air, par, anchor)
    for _ in range(count):
        rays.arc_step(air, par, anchor, arc)

    def by_alt(column: int) -> Any:
        alt = LEVEL0_M + STEP_M * np.arange(N_LEVELS)
        return lambda z: float(np.interp(z, alt, air[:, column]))

    turn = (1 if turn_deg > 0 else -1) * count * anchor[k.STEP]
    x, y, z = naive.arc(
        by_alt(k.TAS), by_alt(k.WIND_X), by_alt(k.WIND_Y), 900.0, heading, turn, radians(30), 10.0
    )
    # constants are held for one level of 60 m: speeds differ by 0.06 m/s in 30, 0.4 % of the loss
    assert arc[0] == pytest.approx(40.0 + x / 30.0, abs=0.15)
    assert arc[1] == pytest.approx(40.0 + y / 30.0, abs=0.15)
    assert arc[2] == pytest.approx(z, abs=0.006 * (900.0 - z))


def test_arc_in_still_air_is_the_closed_form() -> None:
    air, par = air_of(tas=35.0), parameters()
    air[:, :2] = 35.0
    anchor = anchor_at(0.0, 0.0, 1000.0, 0.0, 1.0, STEP=pi / 500)
    arc = rays.new_arc(air, par, anchor)
    for _ in range(500):
        rays.arc_step(air, par, anchor, arc)
    # Derived: a steady turn at v sqrt(n): radius v^2/(g sin b), height pi v^2/(E g sin b cos b)
    radius_m = 35.0**2 / (9.80665 * 0.5)
    assert arc[0] * 30.0 == pytest.approx(2.0 * radius_m, rel=1e-4)  # chords of 500 steps
    assert arc[1] * 30.0 == pytest.approx(0.0, abs=0.1)
    assert 1000.0 - arc[2] == pytest.approx(pi * radius_m / (10.0 * cos(radians(30))), rel=1e-9)


def test_heading_for_a_published_wind_triangle() -> None:
    # Source: FAA-H-8083-25 Pilot's Handbook, navigation chapter: course 090, TAS 120, wind 045/40
    # gives heading 076 and ground speed 88 (heading and speed from memory, recomputed 76.37, 88.33)
    air = air_of(tas=120.0, wind=(-40.0 * sin(radians(45)), -40.0 * cos(radians(45))))
    air[:, :2] = 120.0
    out = np.empty(2)
    assert rays.heading_for(air, parameters(), 500.0, 1.0, 0.0, out)
    assert np.degrees(naive.bearing(out[0], out[1])) == pytest.approx(76.37, abs=0.01)
    assert 120.0 * out[0] + air[0, k.WIND_X] == pytest.approx(88.33, abs=0.01)


@settings(max_examples=10, deadline=None)
@given(bearings, st.floats(-20.0, 20.0), st.floats(-20.0, 20.0))
def test_heading_equals_its_twin(track: float, wx: float, wy: float) -> None:
    air, out = air_of(wind=(wx, wy)), np.empty(2)
    air[:, :2] = 30.0
    assert rays.heading_for(air, parameters(), 0.0, sin(track), cos(track), out)
    want = naive.heading_for(track, 30.0, wx, wy)
    assert want is not None
    assert abs((naive.bearing(out[0], out[1]) - want + pi) % (2 * pi) - pi) < 0.002  # twin's step


def test_a_track_that_cannot_be_held_has_no_heading() -> None:
    air, out = air_of(wind=(40.0, 0.0)), np.empty(2)
    assert not rays.heading_for(air, parameters(), 0.0, 0.0, 1.0, out)


@settings(max_examples=20, deadline=None)
@given(st.integers(0, 50), bearings)
def test_ring_walks_as_far_as_a_ray(seed: int, bearing: float) -> None:
    rng = np.random.default_rng(seed)
    top = (rng.uniform(0.0, 300.0, (70, 70)) * (rng.random((70, 70)) < 0.3)).astype(np.float32)
    top[33:38, 33:38] = 0.0
    run, par = run_of(seed), parameters(CLEARANCE_M=15.0)
    state = state_of(35.3, 35.4, 420.0, bearing)
    out = np.empty((1, 2))
    ring.ring(top, ring.block_maxima(top), run, par, state[None, :], 60.0, 15.0, out)
    alt, ray = np.full(top.shape, k.UNREACHED), np.full(top.shape, -1, dtype=np.int32)
    rays.cast(top, alt, ray, run, par, state, 0, 0, k.NO_LIMIT, np.empty(0, dtype=np.int32), 0)
    assert out[0, 0] == pytest.approx(state[k.FLOWN], abs=1e-5)
    # the last cell of the ray that keeps 60 m, by the labels of the ray itself
    high = [t for r, c, t in naive.cells_crossed(35.3, 35.4, state[k.DX], state[k.DY], out[0, 0])
            if alt[r, c] >= top[r, c] + 60.0]  # fmt: skip
    assert out[0, 1] == pytest.approx(max(high, default=0.0), abs=1e-3)


def test_block_maxima_equal_their_twin() -> None:
    top = np.random.default_rng(1).normal(size=(47, 65)).astype(np.float32)
    size = ring.BLOCK
    want = [[top[r : r + size, c : c + size].max() for c in range(0, 65, size)]
            for r in range(0, 47, size)]  # fmt: skip
    assert np.array_equal(ring.block_maxima(top), np.array(want))


@settings(deadline=None)  # the first call compiles
@given(st.lists(st.integers(1, 50), min_size=1, max_size=20), st.data())
def test_find_anchor_equals_its_twin(counts: list[int], data: st.DataObject) -> None:
    offsets = np.concatenate(([0], np.cumsum(counts)[:-1]))
    anchors = np.zeros((len(counts), k.N_ANCHOR))
    anchors[:, k.OFFSET] = offsets
    ray_id = data.draw(st.integers(0, sum(counts) - 1))
    found = rays.find_anchor(anchors, len(counts), ray_id)
    assert found == naive.find_anchor(list(offsets), ray_id)


def solved_behind_a_wall() -> tuple[Any, ...]:
    """Solve a small window with a wall across the way, open at its northern end."""
    top = np.zeros((60, 60), dtype=np.float32)
    top[0:35, 30] = 1000.0
    alt, ray = np.full(top.shape, k.UNREACHED), np.full(top.shape, -1, dtype=np.int32)
    run, air = np.full((N_LEVELS - 1, N_TRACKS), 10.0 / 30.0), air_of(tas=12.0)
    par, anchors = parameters(FLOOR_M=0.0), np.zeros((4000, k.N_ANCHOR))
    anchors[0] = anchor_at(10.3, 20.6, 400.0, 0.0, 1.0, STEP=0.01, COUNT=629, TURNS=0.0)
    stop, none = np.zeros(1, dtype=np.uint8), np.empty(0, dtype=np.int32)
    front.fan(top, alt, ray, run, NO_ENTRY, air, par, anchors, 0, none, True, stop)
    straight = alt.copy()
    count = front.spread(top, alt, ray, run, NO_ENTRY, air, par, anchors, 1, stop, 3)
    return top, straight, alt, ray, run, air, par, anchors, count


def test_front_goes_round_a_wall_and_never_beats_the_way_round() -> None:
    top, straight, alt, _, _, _, _, _, _ = solved_behind_a_wall()
    hidden = (straight == k.UNREACHED) & (top == 0.0)
    assert hidden.sum() > 300
    assert (alt[hidden] > k.UNREACHED).mean() > 0.97  # the rest lies inside turns by the wall
    assert not (alt[top > 500.0] > k.UNREACHED).any()
    for r, c in np.argwhere(hidden & (alt > k.UNREACHED)):
        # Derived: no path behind is shorter than the two sides round the wall's end at row 35
        way = hypot(30.5 - 10.3, 35.0 - 20.6) + hypot(c + 1.0 - 30.5, max(35.0 - r - 1.0, 0.0))
        assert alt[r, c] <= 400.0 - 3.0 * (way - 1.5) + 1e-3


def test_every_label_is_the_altitude_of_its_own_path() -> None:
    _, _, alt, ray, run, air, par, anchors, count = solved_behind_a_wall()
    for r, c in np.argwhere(alt > k.UNREACHED)[::7]:
        a = rays.find_anchor(anchors, count, ray[r, c])
        number = ray[r, c] - int(anchors[a, k.OFFSET])
        state = rays.replay(air, par, NO_ENTRY, anchors, a, number)
        t = rays.nearest_on_ray(state, r, c)
        x, y = state[k.SX] + t * state[k.DX], state[k.SY] + t * state[k.DY]
        assert c - 1e-6 <= x <= c + 1 + 1e-6
        assert r - 1e-6 <= y <= r + 1 + 1e-6
        assert rays.alt_along(run, par, state, t) >= alt[r, c] - 1e-3  # float32 of the label


def test_cancel_stops_the_front() -> None:
    top, _, alt, ray, run, air, par, anchors, _ = solved_behind_a_wall()
    alt[:, 31:] = k.UNREACHED
    stop = np.ones(1, dtype=np.uint8)
    assert front.spread(top, alt, ray, run, NO_ENTRY, air, par, anchors, 1, stop, 3) == -1


@pytest.mark.parametrize(("half_width", "room"), [(25, True), (6, False)])
def test_room_to_lose_height_needs_a_wide_bowl(half_width: int, room: bool) -> None:
    # Derived: the circle's diameter is 2 v^2/(g sin b) = 12.2 cells of 30 m at 30 m/s
    top = np.full((80, 80), 900.0, dtype=np.float32)
    top[40 - half_width : 40 + half_width, 40 - half_width : 40 + half_width] = 0.0
    circle = anchor_at(40.0, 40.0, 600.0, 0.0, 1.0, STEP=0.1)
    air = air_of()
    air[:, :2] = 30.0
    assert rays.has_room(top, air, parameters(CLEARANCE_M=50.0), circle, 100.0) == room
