"""Relief tiles: the right place, smooth between posts, transparent off the terrain."""

from __future__ import annotations

import io
import threading
from math import asinh, pi, radians, tan
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
from PIL import Image

from geo.terrain import TerrainStore
from service import relief
from service.relief import Relief, cubic, fill_voids, intervals_for, shade
from tests.service_support import MIDDLE, NORTH, POSTS, VOID, WEST, write_data


@pytest.fixture(scope="module")
def drawn(tmp_path_factory: pytest.TempPathFactory) -> Relief:
    return Relief(TerrainStore(write_data(tmp_path_factory.mktemp("data"))), 10_000_000)


def tile_at(lon: float, lat: float, z: int) -> tuple[int, int]:
    """Return the tile over a place, by the textbook formula.

    Source: Snyder, USGS Professional Paper 1395 (1987), p. 41, eqs. 7-1 and 7-2 (spherical).
    """
    n = 1 << z
    x = (lon + 180.0) / 360.0 * n
    y = (1.0 - asinh(tan(radians(lat))) / pi) / 2.0 * n
    return int(x), int(y)


def pixels(drawn: Relief, z: int, x: int, y: int) -> Any:
    tile = drawn.tile(z, x, y)
    assert tile is not None
    image = Image.open(io.BytesIO(tile.png))
    assert (image.format, image.size) == ("PNG", (256, 256))
    return np.asarray(image.convert("RGBA")).astype(float)


def test_tile_edges_agree_with_the_projection() -> None:
    # Source: EPSG Guidance Note 7-2, Popular Visualisation Pseudo-Mercator: the square map ends
    # at 85.0511 degrees
    assert relief.tile_latitude_deg(0, 0) == pytest.approx(85.051129, abs=1e-6)
    assert relief.tile_latitude_deg(1, 1) == pytest.approx(0.0, abs=1e-12)
    x, y = tile_at(*MIDDLE, 12)
    assert relief.tile_longitude_deg(x, 12) <= MIDDLE[0] < relief.tile_longitude_deg(x + 1, 12)
    assert relief.tile_latitude_deg(y + 1, 12) < MIDDLE[1] <= relief.tile_latitude_deg(y, 12)


def test_the_slope_towards_the_light_is_the_brighter(drawn: Relief) -> None:
    x, y = tile_at(*MIDDLE, 12)
    n = 1 << 12
    column = ((MIDDLE[0] + 180) / 360 * n - x) * 256
    row = ((1 - asinh(tan(radians(MIDDLE[1]))) / pi) / 2 * n - y) * 256
    image = pixels(drawn, 12, x, y)

    def bright(right: int, down: int) -> float:
        r, c = int(np.clip(row + down, 0, 255)), int(np.clip(column + right, 0, 255))
        return float(image[r, c, :3].mean())

    step = 40 if column > 60 and row > 60 else 20
    assert bright(-step, -step) > bright(step, step) + 5  # Common practice: light from north-west


def test_the_sea_is_blue_grey_and_the_land_is_paper(drawn: Relief) -> None:
    sea = pixels(drawn, 14, *tile_at(WEST + 0.01, MIDDLE[1], 14))[128, 128]
    land = pixels(drawn, 14, *tile_at(WEST + 0.05, NORTH - 0.02, 14))[128, 128]
    assert sea[2] > sea[0]
    assert land[0] >= land[2]
    for colour in (sea, land):  # muted: far from pure red, amber or green
        assert max(colour[:3]) - min(colour[:3]) < 40
        assert colour[3] == 255


def test_off_the_terrain_there_is_no_tile(drawn: Relief) -> None:
    assert drawn.tile(12, *tile_at(20.0, 50.0, 12)) is None
    edge = pixels(drawn, 11, *tile_at(WEST, NORTH, 11))
    assert {0.0, 255.0} == set(np.unique(edge[..., 3]))


def test_a_void_is_hatched(drawn: Relief) -> None:
    z = 15
    x, y = tile_at(*VOID, z)
    image = pixels(drawn, z, x, y)
    shades = {tuple(colour) for colour in image[..., :3].reshape(-1, 3)}
    assert tuple(relief.VOID_RGB) in shades
    assert tuple(relief.HATCH_RGB) in shades


def test_a_tile_within_the_box_is_clear_where_no_ground_is(tmp_path: Path) -> None:
    data = write_data(tmp_path)
    with rasterio.open(data / "terrain" / "isle.tif", "r+") as file:
        file.write(np.full((POSTS, POSTS), -9999.0, dtype=np.float32), 1)
    empty = Relief(TerrainStore(data), 10_000_000)
    for z in (9, 13, 17):
        x, y = tile_at(*MIDDLE, z)
        assert not pixels(empty, z, x, y)[..., 3].any()
    assert empty.tile(13, *tile_at(WEST - 1.0, NORTH, 13)) is None


@pytest.mark.parametrize("z", [13, 15])
def test_neighbouring_tiles_meet_without_a_seam(drawn: Relief, z: int) -> None:
    x, y = tile_at(*MIDDLE, z)
    left, right = pixels(drawn, z, x, y), pixels(drawn, z, x + 1, y)
    across = np.abs(right[:, 0, :3] - left[:, -1, :3]).max()
    within = np.abs(np.diff(left[..., :3], axis=1)).max()
    assert across <= within + 2  # a step of a rounded colour


def test_every_zoom_is_cheap(drawn: Relief, monkeypatch: pytest.MonkeyPatch) -> None:
    taken: list[int] = []
    ground_m = TerrainStore.ground_m

    def counted(self: TerrainStore, lon: Any, lat: Any) -> Any:
        taken.append(np.size(lon))
        return ground_m(self, lon, lat)

    monkeypatch.setattr(TerrainStore, "ground_m", counted)
    fresh = Relief(drawn._store, 10_000_000)
    for z in (0, 3, 6, 9, 11, 13, 17):
        assert fresh.tile(z, *tile_at(*MIDDLE, z)) is not None
    assert max(taken) <= 65_536  # our own bound: one sample a pixel of a tile
    assert len(taken) == 7


def test_the_cubic_keeps_a_plane() -> None:
    # Derived: a uniform cubic B-spline reproduces polynomials of degree 1
    for intervals in (4, 64, 252):
        weights, slopes = cubic(intervals)
        samples = 3.0 * (np.arange(intervals + 3) - 1.0) + 7.0
        centres = (np.arange(256) + 0.5) / 256 * intervals
        assert weights @ samples == pytest.approx(3.0 * centres + 7.0, abs=1e-9)
        assert slopes @ samples == pytest.approx(np.full(256, 3.0), abs=1e-9)


def test_samples_are_no_finer_than_posts_or_pixels() -> None:
    assert intervals_for(10_000.0, 10_000.0) == relief.INTERVALS_MIN
    assert intervals_for(960.0, 30.0) == 32  # Derived: 960 m hold 32 posts of 30 m
    assert intervals_for(1e6, 30.0) == relief.INTERVALS_MAX


def test_flat_ground_keeps_its_colour_and_shade_never_turns_black() -> None:
    flat = np.zeros((1, 1))
    assert shade(flat, flat) == pytest.approx(1.0)
    steep = np.linspace(-50, 50, 101)
    grid = np.meshgrid(steep, steep)
    assert shade(*grid).min() > 0.3
    assert shade(*grid).max() < 1.3


def test_voids_are_filled_from_their_neighbours() -> None:
    ground = np.array([[np.nan, 1.0, np.nan], [np.nan, np.nan, np.nan], [2.0, np.nan, np.nan]])
    filled = fill_voids(ground)
    assert np.isfinite(filled).all()
    assert (filled[0, 1], filled[2, 0]) == (1.0, 2.0)


def test_the_cache_is_bounded_and_serves_threads(tmp_path: Path) -> None:
    small = Relief(TerrainStore(write_data(tmp_path)), 30_000)
    x, y = tile_at(*MIDDLE, 14)

    def draw() -> None:
        for step in range(4):
            small.tile(14, x + step, y)

    threads = [threading.Thread(target=draw) for _ in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    kept = [tile for tile in small._kept.values() if tile is not None]
    assert sum(len(tile.png) for tile in kept) <= 30_000
    again = small.tile(14, x, y)
    assert again == small.tile(14, x, y)
