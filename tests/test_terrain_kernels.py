"""The kernels of the terrain against their slow twins, and closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geo import terrain_kernels as kernels
from tests.naive import terrain_cell, terrain_height

pytestmark = pytest.mark.smallgrid
TOUCH = 1e-4  # cells


def tops_of(posts, matrix, shift, n_rows, n_cols, step=2):
    """Return top and void of a grid whose corner (x, y) lies at post ``matrix (x, y) + shift``."""
    top = np.full((n_rows, n_cols), kernels.NO_TOP)
    void = np.zeros(top.shape, dtype=np.uint8)
    x, y = np.meshgrid(np.arange(0.0, n_cols + 1, step), np.arange(0.0, n_rows + 1, step))
    (a, b), (c, d) = matrix
    u, v = a * x + b * y + shift[0], c * x + d * y + shift[1]
    kernels.walk_edges(posts, 0, 0, u, v, step, top, void)
    i, j = np.meshgrid(
        np.arange(0.0, posts.shape[1] + step, step), np.arange(0.0, posts.shape[0] + step, step)
    )
    back = np.linalg.inv(matrix)
    u, v = i - shift[0], j - shift[1]
    xs, ys = back[0, 0] * u + back[0, 1] * v, back[1, 0] * u + back[1, 1] * v
    kernels.scatter_posts(posts, xs, ys, step, TOUCH, 0, 0, top, void)
    return top, void


def highest_post(posts, matrix, shift, row, col):
    """Return the highest post within a cell grown by the touching distance, -inf if none."""
    back = np.linalg.inv(matrix)
    best = -math.inf
    for (j, i), height in np.ndenumerate(posts):
        x, y = back @ (np.array([i, j], dtype=float) - shift)
        if max(abs(x - col - 0.5), abs(y - row - 0.5)) <= 0.5 and not math.isnan(height):
            best = max(best, float(height))
    return best


@st.composite
def grids(draw):
    """Draw posts (some void), and a grid of cells that is turned, stretched and shifted."""
    seed = draw(st.integers(0, 2**31))
    rng = np.random.default_rng(seed)
    posts = rng.uniform(0.0, 100.0, (draw(st.integers(2, 7)), draw(st.integers(2, 7))))
    if draw(st.booleans()):
        posts[tuple(rng.integers(0, posts.shape))] = np.nan
    turn, flip = rng.uniform(0, 2 * np.pi), rng.choice([-1.0, 1.0])
    if draw(st.booleans()):
        turn = 0.0  # cells along the posts
    across, along = rng.uniform(0.15, 3.0, 2)
    cos, sin = math.cos(turn), math.sin(turn)
    matrix = np.array([[across * cos, -along * sin], [across * sin * flip, along * cos * flip]])
    middle = np.array([posts.shape[1] - 1.0, posts.shape[0] - 1.0]) / 2.0
    shift = middle - matrix @ np.array([1.0, 1.0]) + rng.uniform(-1.0, 1.0, 2)
    return posts.astype(np.float32), matrix, shift


@settings(max_examples=40, deadline=None)
@given(grids())
def test_top_is_the_highest_point_of_every_cell(grid):
    posts, matrix, shift = grid
    top, void = tops_of(posts, matrix, shift, 2, 2)

    def to_posts(x, y):
        return matrix @ np.array([x, y]) + shift

    # Derived: a sample lies within half a sampling step of any point of an edge; the surface
    # rises by no more than 100 per post, in u and in v.
    step = 0.5 / 200 + TOUCH
    slack = 100.0 * float(np.abs(matrix).sum(axis=0).max()) * step * 1.01
    for row, col in np.ndindex(2, 2):
        sampled, missing = terrain_cell(posts, to_posts, row, col)
        best = max(sampled, highest_post(posts, matrix, shift, row, col))
        assert top[row, col] >= best - 1e-4  # float32 posts up to 100: 4e-6 each
        if missing:
            assert void[row, col] == 1
        elif void[row, col] == 1:
            assert touches_void(posts, matrix, shift, row, col)
        else:
            assert top[row, col] <= best + slack


def touches_void(posts, matrix, shift, row, col):
    """Tell whether fine sampling of the cell and a skin of 0.02 cells round it finds a void."""
    for x in np.linspace(-0.02, 1.02, 120):
        for y in np.linspace(-0.02, 1.02, 120):
            if math.isnan(terrain_height(posts, *(matrix @ np.array([col + x, row + y]) + shift))):
                return True
    return False


def test_the_vertex_of_the_parabola_along_an_edge_is_found():
    posts = np.array([[0.0, 100.0], [100.0, 0.0]], dtype=np.float32)
    top, void = kernels.edge_top(posts, 0, 0, 0.25, 0.25, 0.75, 0.75)
    # Derived: along u = v the surface is 200 t (1 - t): 50 at t = 1/2, 37.5 at both ends.
    assert top == pytest.approx(50.0, abs=1e-9)
    assert void == 0
    top, _ = kernels.edge_top(posts, 0, 0, 0.25, 0.75, 0.75, 0.25)
    assert top == pytest.approx(62.5, abs=1e-9)  # Derived: 100 - 200 t (1 - t), highest at ends


def test_a_ridge_of_a_coarse_source_is_not_lowered():
    # Derived: posts ten cells apart; only the cell that holds the one high post may reach 1000 m.
    posts = np.zeros((5, 5), dtype=np.float32)
    posts[2, 2] = 1000.0
    matrix = np.array([[0.1, 0.0], [0.0, 0.1]])
    top, void = tops_of(posts, matrix, np.array([0.55, 0.55]), 30, 30)
    assert top.max() == 1000.0
    assert np.argwhere(top == 1000.0).tolist() == [[14, 14]]
    assert not void.any()
    # Derived: the nearest edge of the next cell is 0.05 posts away: 950 m by the bilinear cone.
    assert top[14, 15] == pytest.approx(950.0, abs=1e-3)


@pytest.mark.parametrize("ends", [(0.5, 0.5, math.nan, 0.5), (math.inf, 0.0, 0.0, 0.0)])
def test_an_edge_without_a_place_is_void(ends):
    assert kernels.edge_top(np.zeros((3, 3), dtype=np.float32), 0, 0, *ends) == (kernels.NO_TOP, 1)


@given(st.integers(0, 2**31))
@settings(max_examples=40, deadline=None)
def test_sample_is_bilinear(seed):
    rng = np.random.default_rng(seed)
    posts = rng.uniform(0.0, 100.0, (5, 4)).astype(np.float32)
    posts[rng.integers(5), rng.integers(4)] = np.nan
    u, v = rng.uniform(-0.5, 3.5, 20), rng.uniform(-0.5, 4.5, 20)
    u[0], v[0], u[1], v[1] = 3.0, 4.0, 0.0, 0.0  # the corners count
    out = np.full(20, np.nan)
    out[5] = -7.0  # a height that a finer source gave stays
    kernels.sample(posts, u, v, out)
    expected = [terrain_height(posts, *place) for place in zip(u, v, strict=True)]
    expected[5] = -7.0
    np.testing.assert_allclose(out, expected, atol=1e-4)


def test_merge_takes_the_coarser_only_where_the_finer_is_not_whole():
    out, done = np.full((1, 4), kernels.NO_TOP), np.zeros((1, 4), dtype=np.uint8)
    finer = np.array([[10.0, 20.0, kernels.NO_TOP, kernels.NO_TOP]])
    assert kernels.merge(finer, np.array([[0, 1, 1, 1]], dtype=np.uint8), out, done) == 2
    coarser = np.array([[99.0, 15.0, 7.0, 8.0]])
    assert kernels.merge(coarser, np.array([[0, 0, 0, 1]], dtype=np.uint8), out, done) == 3
    cells = kernels.finish(out, done)
    # Derived: whole in the finer; the higher of both; the coarser alone; nowhere whole, so void.
    np.testing.assert_array_equal(cells, np.array([[10.0, 20.0, 7.0, np.nan]], dtype=np.float32))


def test_finish_never_rounds_down():
    values = np.random.default_rng(2).uniform(-400.0, 8800.0, (50, 50))
    cells = kernels.finish(values, np.ones((50, 50), dtype=np.uint8))
    assert (cells.astype(np.float64) >= values).all()
    assert (
        cells - values
    ).max() < 1e-3  # Derived: float32 spacing below 8192 is 4.9e-4, above 9.8e-4


def test_touched_takes_every_pixel_under_the_cell():
    values = np.zeros((6, 6), dtype=np.float32)
    values[2, 3] = 20.0
    x, y = np.meshgrid(np.arange(0.0, 7.0), np.arange(0.0, 7.0))
    exact = np.zeros((6, 6), dtype=np.float32)
    kernels.touched(values, 0, 0, x, y, 1, exact)
    assert np.array_equal(exact, values)  # Derived: cells that are pixels touch no other pixel
    moved = np.zeros((6, 6), dtype=np.float32)
    kernels.touched(values, 0, 0, x + 0.5, y - 0.25, 1, moved)
    assert np.argwhere(moved == 20.0).tolist() == [[2, 2], [2, 3], [3, 2], [3, 3]]


def test_a_disc_raises_the_cells_that_come_within_its_radius():
    top = np.zeros((9, 9), dtype=np.float32)
    top[4, 5] = np.nan
    kernels.raise_discs(top, np.array([4.5]), np.array([4.5]), np.array([2.0]), np.array([50.0]))
    rows, cols = np.mgrid[0:9, 0:9]
    gap = np.hypot(np.maximum(abs(cols - 4) - 0.5, 0), np.maximum(abs(rows - 4) - 0.5, 0))
    expected = np.where(gap <= 2.0, 50.0, 0.0)  # Derived: nearest point of each cell
    expected[4, 5] = np.nan
    np.testing.assert_array_equal(top, expected)
