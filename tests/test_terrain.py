"""The terrain store: real rasters, any grid, voids, units, several files, threads, bounds."""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from affine import Affine
from geographiclib.geodesic import Geodesic
from pyproj import Transformer

from geo import terrain_tiles
from geo.frame import frame_for
from geo.terrain import TerrainStore, warm_up
from tests.real_terrain import ALETSCH_LONLAT, JACKSBORO_LONLAT, write_aletsch, write_jacksboro
from tests.source_surface import SourceSurface
from tests.terrain_files import (
    ORIGIN,
    UTM32,
    places_in,
    store_of,
    turned,
    window_about,
    write_raster,
)

TO_LONLAT = Transformer.from_crs(UTM32, "EPSG:4326", always_xy=True)
ROUGH = np.random.default_rng(7).uniform(0.0, 50.0, (120, 120))


@pytest.mark.parametrize(
    ("write", "place"), [(write_jacksboro, JACKSBORO_LONLAT), (write_aletsch, ALETSCH_LONLAT)]
)
@pytest.mark.parametrize("cell_m", [30.0, 120.0])
def test_real_terrain(tmp_path, write, place, cell_m):
    surface = SourceSurface(write(tmp_path))
    store = TerrainStore(tmp_path)
    window = window_about(store, *place, 160, cell_m)
    assert not np.isnan(window.top_m).any()
    lon, lat, row, col = places_in(window)
    ground_m = surface.height_m(lon, lat)  # independent of geo
    # 1 mm: float32 posts up to 4216 m carry 0.25 mm, and four of them are weighed.
    np.testing.assert_allclose(store.ground_m(lon, lat), ground_m, atol=1e-3)
    # 10 cm: the grid of exact projections is 512 m wide and misplaces a cell by up to 2 cm.
    assert (window.top_m[row, col] - ground_m).min() > -0.1
    for r, c in [(3, 5), (80, 90), (77, 140), (159, 159), (0, 0), (120, 31)]:
        x, y = np.meshgrid(np.linspace(c, c + 1, 101), np.linspace(r, r + 1, 101))
        lon, lat = window.frame.to_lonlat((window.col0 + x) * cell_m, (window.row0 + y) * cell_m)
        highest = surface.height_m(lon, lat).max()
        # Derived: samples are cell/100 apart, so a point is within 0.7 % of a cell of one; slopes
        # here stay below 2 in 1. The misplacement of 2 cm comes on top.
        assert -0.1 < window.top_m[r, c] - highest < 2.0 * 0.007 * cell_m + 0.1


def test_grid_north_14_degrees_off_and_cells_not_square(tmp_path):
    turn = math.radians(14.0)
    cells = turned(30.0, turn) @ Affine(1.0, 0.0, 0.0, 0.0, 0.7, 0.0)
    i, j = np.meshgrid(np.arange(200.0) + 0.5, np.arange(300.0) + 0.5)
    east = cells.a * i + cells.b * j
    north = cells.d * i + cells.e * j
    store = store_of(tmp_path, 900.0 + 0.11 * east - 0.07 * north, cells)
    middle = (cells.a * 100 + cells.b * 150 + cells.c, cells.d * 100 + cells.e * 150 + cells.f)
    window = window_about(store, *TO_LONLAT.transform(*middle), 80)
    lon, lat, row, col = places_in(window)
    x, y = TO_LONLAT.transform(lon, lat, direction="INVERSE")
    plane_m = 900.0 + 0.11 * (x - ORIGIN[0]) - 0.07 * (y - ORIGIN[1])
    np.testing.assert_allclose(store.ground_m(lon, lat), plane_m, atol=1e-3)  # Derived: the plane
    over = window.top_m[row, col] - plane_m
    # Derived: a plane is highest in a corner of the cell: at most 30 (0.11 + 0.07) m above any
    # point of it, a little more for the turn of the frame against the grid.
    assert over.min() > -0.01
    assert over.max() < 30.0 * 0.18 * 1.05
    lon, lat = TO_LONLAT.transform(middle[0] + np.array([0, 0]), middle[1] + np.array([0, 1000.0]))
    assert np.diff(store.ground_m(lon, lat))[0] == pytest.approx(-70.0, abs=0.01)  # Derived


@pytest.mark.parametrize(
    ("crs", "transform"),
    [
        ("EPSG:4326", Affine(4e-4, 1e-4, 9.0, 5e-5, -3e-4, 46.0)),  # turned and sheared
        ("EPSG:4267", Affine(3e-4, 0.0, -84.0, 0.0, -3e-4, 36.0)),  # NAD27, degrees
        ("EPSG:3857", Affine(40.0, 0.0, 1e6, 0.0, -40.0, 8.5e6)),
        ("EPSG:3413", Affine(30.0, 0.0, 3e5, 0.0, -30.0, -1.4e6)),  # polar stereographic
        ("EPSG:2229", Affine(100.0, 0.0, 6.4e6, 0.0, -100.0, 1.9e6)),  # in US survey feet
        ("EPSG:32660", Affine(30.0, 0.0, 6.7e5, 0.0, 30.0, 6.7e6)),  # south side up
    ],
)
def test_any_coordinate_system(tmp_path, crs, transform):
    path = write_raster(tmp_path / "terrain" / "a.tif", ROUGH, transform, crs)
    surface, store = SourceSurface(path), TerrainStore(tmp_path)
    x, y = (transform.a + transform.b) * 60 + transform.c, (transform.d + transform.e) * 60
    to_lonlat = Transformer.from_crs(crs, "EPSG:4326", always_xy=True)
    window = window_about(store, *to_lonlat.transform(x, y + transform.f), 40)
    lon, lat, row, col = places_in(window)
    ground_m = surface.height_m(lon, lat)
    assert not np.isnan(ground_m).any()
    np.testing.assert_allclose(store.ground_m(lon, lat), ground_m, atol=1e-3)
    # 10 cm: 2 cm of misplacement on slopes of up to 50 m from post to post (20 m or more).
    assert (window.top_m[row, col] - ground_m).min() > -0.1
    spread = store.sources[0].bbox
    assert spread[0] < lon.min() < lon.max() < spread[2]
    assert spread[1] < lat.min() < lat.max() < spread[3]


def test_a_one_degree_height_file(tmp_path):
    heights = np.full((1201, 1201), 1234, dtype=">i2")
    heights[600:602, 600:602] = -32768
    (tmp_path / "terrain").mkdir()
    (tmp_path / "terrain" / "N46E007.hgt").write_bytes(heights.tobytes())
    store = TerrainStore(tmp_path)
    # Source: SRTM collection user guide (NASA, 2015): the name is the south-west post, the first
    # row is the north, posts on the degree lines, big-endian, -32768 a void.
    assert store.sources[0].bbox == pytest.approx((7.0, 46.0, 8.0, 47.0), abs=1e-9)
    got = store.ground_m([7.2, 7.5005, 7.0, 8.0, 8.0001], [46.9, 46.4995, 46.0, 47.0, 46.5])
    np.testing.assert_array_equal(got, [1234.0, np.nan, 1234.0, 1234.0, np.nan])


def test_a_post_is_the_middle_of_its_pixel_for_area_and_point_files(tmp_path):
    heights = np.arange(16.0).reshape(4, 4)
    place = TO_LONLAT.transform(ORIGIN[0] + 45.0, ORIGIN[1] - 75.0)  # Derived: row 2, column 1
    for kind in ("Area", "Point"):
        store = store_of(tmp_path / kind, heights, AREA_OR_POINT=kind)
        assert float(store.ground_m(*place)) == pytest.approx(9.0, abs=1e-4)


def test_a_patch_with_a_void_post_is_void_and_so_is_a_cell_that_touches_one(tmp_path):
    heights = ROUGH.copy()
    heights[60, 60] = -9999.0
    store = store_of(tmp_path, heights, nodata=-9999.0)
    x, y = ORIGIN[0] + 60.5 * 30.0, ORIGIN[1] - 60.5 * 30.0
    steps = np.array([-31.0, -29.0, 0.0, 29.0, 31.0])
    ground_m = store.ground_m(*TO_LONLAT.transform(x + steps, np.full(5, y)))
    assert np.isnan(ground_m).tolist() == [False, True, True, True, False]
    window = window_about(store, *TO_LONLAT.transform(x, y), 20)
    lon, lat, row, col = places_in(window, count=20_000)
    assert np.isnan(window.top_m[row, col][np.isnan(store.ground_m(lon, lat))]).all()
    assert (
        9 <= np.isnan(window.top_m).sum() <= 16
    )  # Derived: a 2 x 2 square touches 3 or 4 each way


@pytest.mark.parametrize("missing", [math.nan, math.inf, -32768.0, -9999.0, 1e30])
def test_what_cannot_be_a_height_is_a_void(tmp_path, missing):
    heights = ROUGH.copy()
    heights[50:70, 50:70] = missing
    store = store_of(tmp_path, heights)
    place = TO_LONLAT.transform(ORIGIN[0] + 1800.0, ORIGIN[1] - 1800.0)
    assert math.isnan(float(store.ground_m(*place)))
    assert np.isnan(window_about(store, *place, 8).top_m).all()


def test_off_the_terrain_is_void(tmp_path):
    store = store_of(tmp_path, ROUGH)
    lon, lat = TO_LONLAT.transform(ORIGIN[0] + 20.0, ORIGIN[1] - 14.0)  # within the pixel's edge
    assert math.isnan(float(store.ground_m(lon, lat)))
    window = window_about(store, *TO_LONLAT.transform(*ORIGIN), 40)
    lon, lat, row, col = places_in(window, count=20_000)
    assert np.isnan(window.top_m[row, col][np.isnan(store.ground_m(lon, lat))]).all()
    assert not np.isnan(window.top_m).all()
    assert np.isnan(window_about(store, 20.0, 50.0, 4).top_m).all()
    assert window_about(store, 20.0, 50.0, 4).sources == ()
    assert np.isnan(store.ground_m([np.nan, 9.0], [46.0, np.inf])).all()


def test_a_place_that_the_projection_does_not_know_is_void(tmp_path):
    at = Affine(30.0, 0.0, 3e5, 0.0, -30.0, -1.4e6)
    store = store_of(tmp_path, ROUGH, at, "EPSG:3413")  # north polar: has no south pole
    lon, lat = Transformer.from_crs("EPSG:3413", "EPSG:4326", always_xy=True).transform(
        3e5 + 1800.0, -1.4e6 - 1800.0
    )
    ground_m = store.ground_m([lon, lon, 0.0], [lat, -90.0, -89.9])
    assert np.isfinite(ground_m).tolist() == [True, False, False]


@pytest.mark.parametrize(
    ("options", "metre", "shown"),
    [
        ({"units": "ft"}, 0.3048, "ft"),  # Source: NIST SP 811 (2008), appendix B.6
        ({"units": "US survey foot"}, 1200 / 3937, "US survey ft"),  # Source: the same
        ({"VERTICAL_UNIT": "Foot"}, 0.3048, "ft"),
        ({"units": "metre"}, 1.0, "m"),
        ({"crs": "EPSG:32632+8228"}, 0.3048, "ft"),  # Source: EPSG 8228, NAVD88 height (ft)
        ({}, 1.0, "m (not stated)"),
    ],
)
def test_height_units_are_read_and_shown(tmp_path, options, metre, shown):
    store = store_of(tmp_path, np.full((9, 9), 1000.0), **options)
    place = TO_LONLAT.transform(ORIGIN[0] + 130.0, ORIGIN[1] - 130.0)
    assert float(store.ground_m(*place)) == pytest.approx(1000.0 * metre, abs=1e-4)
    assert store.sources[0].vertical_unit == shown
    assert any("no unit is stated" in note for note in store.notes) == ("not stated" in shown)


def test_an_unknown_height_unit_is_refused(tmp_path):
    store = store_of(tmp_path, np.zeros((9, 9)), units="fathom")
    assert "height unit that is not known" in store.refused[0].detail


def test_a_file_says_where_it_comes_from(tmp_path):
    about = {"SOURCE": "Survey of an invented place", "DATE": "2024-05", "VERTICAL_DATUM": "Tide 1"}
    shown = store_of(tmp_path / "told", ROUGH, **about).sources[0]
    assert (shown.source, shown.date, shown.vertical_datum) == tuple(about.values())
    assert shown.file == "a.tif"
    assert shown.cell_m == pytest.approx(30.0, rel=5e-4)  # Derived: UTM scale 0.9996 there
    silent = store_of(tmp_path / "silent", ROUGH).sources[0]
    assert {silent.source, silent.date, silent.vertical_datum} == {"not stated"}
    west, _ = TO_LONLAT.transform(ORIGIN[0] + 15.0, ORIGIN[1] - 119.5 * 30.0)
    _, south = TO_LONLAT.transform(ORIGIN[0] + 119.5 * 30.0, ORIGIN[1] - 119.5 * 30.0)
    # Derived: the corner posts; east of the central meridian the grid leans west to the south.
    assert silent.bbox[:2] == pytest.approx((west, south), abs=1e-9)


def overlapping(folder, hole=None):
    """Write a coarse file of 100 m height and a fine one of 40 m in its middle."""
    write_raster(folder / "terrain" / "coarse.tif", np.full((60, 60), 100.0), 90.0)
    fine = np.full((100, 100), 40.0)
    if hole is not None:
        fine[hole] = np.nan
    at = Affine(20.0, 0.0, ORIGIN[0] + 1700.0, 0.0, -20.0, ORIGIN[1] - 1700.0)
    write_raster(folder / "terrain" / "fine.tif", fine, at)
    return TerrainStore(folder)


def test_the_finest_source_wins_and_the_coarser_fills_its_voids(tmp_path):
    store = overlapping(tmp_path, (slice(48, 52), slice(48, 52)))
    x, y = ORIGIN[0] + 2700.0, ORIGIN[1] - 2700.0  # middle of both
    at = TO_LONLAT.transform(x + np.array([0.0, 300.0, 1500.0]), np.full(3, y))
    np.testing.assert_allclose(store.ground_m(*at), [100.0, 40.0, 100.0])
    window = window_about(store, *TO_LONLAT.transform(x, y), 120)
    assert {source.file for source in window.sources} == {"fine.tif", "coarse.tif"}
    lon, lat, row, col = places_in(window, count=20_000)
    ground_m, top_m = store.ground_m(lon, lat), window.top_m[row, col]
    assert (top_m >= ground_m).all()  # also in cells on the seam
    assert set(np.unique(window.top_m)) == {40.0, 100.0}
    # Derived: 40 m holds where the fine file covers the whole cell: 65 to 66 cells in 1980 m each
    # way, less a hole of 5 patches of 20 m that touches 4 or 5 cells each way.
    assert 64 * 64 - 5 * 5 <= (window.top_m == 40.0).sum() <= 66 * 66 - 4 * 4


def test_files_side_by_side_on_one_grid_have_no_seam(tmp_path):
    whole = store_of(tmp_path / "whole", ROUGH)
    for name, rows, cols in (("nw", 0, 0), ("ne", 0, 1), ("sw", 1, 0), ("se", 1, 1)):
        part = ROUGH[60 * rows : 60 * rows + 60, 60 * cols : 60 * cols + 60]
        at = Affine(30.0, 0.0, ORIGIN[0] + 1800.0 * cols, 0.0, -30.0, ORIGIN[1] - 1800.0 * rows)
        write_raster(tmp_path / "parts" / "terrain" / f"{name}.tif", part, at)
    parts = TerrainStore(tmp_path / "parts")
    place = TO_LONLAT.transform(ORIGIN[0] + 1800.0, ORIGIN[1] - 1800.0)
    windows = [window_about(store, *place, 60) for store in (whole, parts)]
    assert not np.isnan(windows[0].top_m).any()
    np.testing.assert_array_equal(windows[0].top_m, windows[1].top_m)
    assert len(parts.sources) == 4


def test_files_far_apart(tmp_path):
    write_jacksboro(tmp_path)
    write_aletsch(tmp_path)
    store = TerrainStore(tmp_path)
    lon, lat = np.array([JACKSBORO_LONLAT, ALETSCH_LONLAT, (0.0, 0.0)]).T
    ground_m = store.ground_m(lon, lat)
    assert np.isfinite(ground_m).tolist() == [True, True, False]
    assert [s.file for s in window_about(store, *ALETSCH_LONLAT, 8).sources] == ["aletsch.tif"]


@pytest.mark.parametrize("lat0", [-17.0, 65.0, 0.0])
def test_the_date_line_has_no_seam(tmp_path, lat0):
    step = 1.0 / 1200.0
    j, i = np.mgrid[0:120, 0:240]
    heights = 500.0 + 3.0 * np.sin(i / 5.0) * np.cos(j / 7.0)
    for name, west, cols in (
        ("w", 180.0 - 120 * step, slice(0, 120)),
        ("e", -180.0, slice(120, 240)),
    ):
        at = Affine(step, 0.0, west, 0.0, -step, lat0 + 60 * step)
        write_raster(
            tmp_path / "two" / "terrain" / f"{name}.tif", heights[:, cols], at, "EPSG:4326"
        )
    at = Affine(step, 0.0, 180.0 - 120 * step, 0.0, -step, lat0 + 60 * step)
    one = store_of(tmp_path / "one", heights, at, "EPSG:4326")
    two = TerrainStore(tmp_path / "two")
    window = window_about(two, 180.0, lat0, 60)
    assert not np.isnan(window.top_m).any()
    np.testing.assert_array_equal(window.top_m, window_about(one, -180.0, lat0, 60).top_m)
    lon, lat, _, _ = places_in(window)
    u, v = ((lon - 180.0) % 360.0 + 120 * step) % 360.0, lat0 + 60 * step - lat
    near = 500.0 + 3.0 * np.sin((u / step - 0.5) / 5.0) * np.cos((v / step - 0.5) / 7.0)
    # Derived: bilinear error of the sines, (3/25 + 3/49) / 8 = 0.02 m.
    np.testing.assert_allclose(two.ground_m(lon, lat), near, atol=0.025)
    assert one.sources[0].bbox[0] > one.sources[0].bbox[2]  # RFC 7946 section 5.2


def test_a_tilted_plane_rises_the_right_way_at_every_latitude(tmp_path):
    for lon0, lat0 in ((10.0, 0.0), (25.0, 65.0), (-70.0, -40.0), (100.0, 79.0)):
        step = 1.0 / 1200.0
        j, _ = np.mgrid[0:240, 0:480]
        at = Affine(step, 0.0, lon0 - 240 * step, 0.0, -step, lat0 + 120 * step)
        folder = tmp_path / f"{lat0}"
        store = store_of(folder, 1000.0 - j, at, "EPSG:4326")  # 1 m a row towards the north
        north = Geodesic.WGS84.Direct(lat0, lon0, 0.0, 500.0)
        ground_m = store.ground_m([lon0, lon0], [lat0, north["lat2"]])
        per_row_m = Geodesic.WGS84.Inverse(lat0, lon0, lat0 + step, lon0)["s12"]
        # Derived: 1 m per row of latitude; 1e-3 for float32 and the meridian's curvature.
        assert ground_m[1] - ground_m[0] == pytest.approx(500.0 / per_row_m, abs=2e-3)
        window = window_about(store, lon0, lat0, 40)
        rise = window.top_m[39, 20] - window.top_m[0, 20]
        assert rise == pytest.approx(39 * 30.0 / per_row_m, abs=0.05)


def test_windows_agree_where_they_overlap_and_tiles_are_bounded(tmp_path):
    write_jacksboro(tmp_path)
    store = TerrainStore(tmp_path, cache_bytes=3 * 256 * 256 * 4)
    frame = frame_for(*JACKSBORO_LONLAT)
    large = store.window(frame, -300, -300, 600, 600, 30.0).top_m
    assert large.shape == (600, 600)
    assert large.flags.c_contiguous
    assert store.cached_bytes <= 3 * 256 * 256 * 4
    small = store.window(frame, -250, -37, 99, 311, 30.0).top_m
    np.testing.assert_array_equal(small, large[263 : 263 + 311, 50 : 50 + 99])
    small[:] = 0.0  # a window is the caller's own
    again = store.window(frame, -250, -37, 99, 311, 30.0).top_m
    np.testing.assert_array_equal(again, large[263 : 263 + 311, 50 : 50 + 99])


def test_a_block_with_too_many_posts_is_built_in_quarters(tmp_path, monkeypatch):
    write_jacksboro(tmp_path)
    frame = frame_for(*JACKSBORO_LONLAT)
    whole = TerrainStore(tmp_path).window(frame, 0, 0, 256, 256, 30.0).top_m
    monkeypatch.setattr(terrain_tiles, "POSTS_AT_ONCE", 1000)
    parts = TerrainStore(tmp_path).window(frame, 0, 0, 256, 256, 30.0).top_m
    np.testing.assert_array_equal(whole, parts)


def test_threads_get_the_same_answers_and_build_each_tile_once(tmp_path):
    write_jacksboro(tmp_path)
    frame = frame_for(*JACKSBORO_LONLAT)
    alone = TerrainStore(tmp_path).window(frame, -256, -256, 512, 512, 30.0).top_m
    store, built = TerrainStore(tmp_path), []
    build = store.tiles.build
    store.tiles.build = lambda keys: built.extend(keys) or build(keys)
    warm_up()

    def ask(number):
        part = slice(64 * (number % 3), 64 * (number % 3) + 300)
        got = store.window(frame, part.start - 256, -256, 300, 512, 30.0)
        lon, lat = frame.to_lonlat(np.linspace(-5e3, 5e3, 50), np.linspace(-5e3, 5e3, 50))
        return np.array_equal(got.top_m, alone[:, part], equal_nan=True), store.ground_m(lon, lat)

    with ThreadPoolExecutor(6) as pool:
        answers = list(pool.map(ask, range(12)))
    assert all(same for same, _ in answers)
    assert all(np.array_equal(ground_m, answers[0][1], equal_nan=True) for _, ground_m in answers)
    assert sorted(key[2:] for key in built) == [(-1, -1), (-1, 0), (0, -1), (0, 0)]


def test_a_failed_build_does_not_block_the_next(tmp_path):
    store = store_of(tmp_path, ROUGH)
    build, calls = store.tiles.build, []

    def fail_once(keys):
        calls.append(keys)
        if len(calls) == 1:
            raise MemoryError
        return build(keys)

    store.tiles.build = fail_once
    place = TO_LONLAT.transform(ORIGIN[0] + 1800.0, ORIGIN[1] - 1800.0)
    with pytest.raises(MemoryError):
        window_about(store, *place, 8)
    assert np.isfinite(window_about(store, *place, 8).top_m).all()
