"""Obstacles: which cells and places they raise, by how much, and which files are refused."""

from __future__ import annotations

import json

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic
from pyproj import Transformer

from geo.frame import frame_for
from geo.obstacles import load_obstacles
from perf.errors import TerrainError
from tests.terrain_files import ORIGIN, UTM32, places_in, store_of, window_about, write_json

TO_LONLAT = Transformer.from_crs(UTM32, "EPSG:4326", always_xy=True)
FT_M = 0.3048  # Source: NIST SP 811 (2008), appendix B.6
MIDDLE = TO_LONLAT.transform(ORIGIN[0] + 3000.0, ORIGIN[1] - 3000.0)
FLAT = np.full((200, 200), 100.0)


def feature(kind, coordinates, **properties):
    """Return a GeoJSON feature."""
    geometry = {"type": kind, "coordinates": coordinates}
    return {"type": "Feature", "geometry": geometry, "properties": properties}


def store_with(folder, *features, heights=FLAT):
    """Return the store of a folder with terrain and these obstacles."""
    content = {"type": "FeatureCollection", "features": list(features)}
    write_json(folder / "obstacles" / "masts.geojson", content)
    return store_of(folder, heights, units="m")


def mast(**properties):
    """Return a mast in the middle, accurate to 100 ft and 20 ft unless told otherwise."""
    accuracy = {"accuracy_horizontal_ft": 100, "accuracy_vertical_ft": 20}
    return feature("Point", list(MIDDLE), **{**accuracy, **properties})


@pytest.mark.parametrize(
    ("properties", "top_m"),
    [
        ({"height_ft": 300}, 100.0 + 320 * FT_M),  # Derived: ground + height + accuracy
        ({"elevation_top_ft": 700}, 720 * FT_M),  # Derived: top + accuracy
        ({"elevation_top_ft": 400, "height_ft": 300}, 100.0 + 320 * FT_M),  # the higher of both
        ({"elevation_top_ft": 100}, 100.0),  # below the ground: raises nothing
    ],
)
@pytest.mark.parametrize("cell_m", [30.0, 120.0])
def test_a_mast_raises_cells_within_its_accuracy_and_one_cell(tmp_path, properties, top_m, cell_m):
    store = store_with(tmp_path, mast(**properties))
    window = window_about(store, *MIDDLE, 12, cell_m)
    x_m, y_m = window.frame.to_xy_m(*MIDDLE)
    rows, cols = np.mgrid[0:12, 0:12]
    dx = abs((window.col0 + cols + 0.5) * cell_m - x_m) - cell_m / 2
    dy = abs((window.row0 + rows + 0.5) * cell_m - y_m) - cell_m / 2
    gap_m = np.hypot(np.maximum(dx, 0), np.maximum(dy, 0))
    expected = np.where(gap_m <= 100 * FT_M + cell_m, max(top_m, 100.0), 100.0)
    np.testing.assert_allclose(window.top_m, expected, atol=1e-3)  # float32 of 300 m


def test_a_place_is_raised_near_a_mast_and_the_ground_is_not(tmp_path):
    store = store_with(tmp_path, mast(height_ft=300))
    ends = [Geodesic.WGS84.Direct(MIDDLE[1], MIDDLE[0], 70.0, s) for s in (0.0, 60.0, 61.0)]
    lon, lat = [end["lon2"] for end in ends], [end["lat2"] for end in ends]
    # Derived: 100 ft and 30 m are 60.48 m.
    high = 100.0 + 320 * FT_M
    np.testing.assert_allclose(store.surface_m(lon, lat), [high, high, 100.0], atol=1e-3)
    np.testing.assert_allclose(store.ground_m(lon, lat), 100.0, atol=1e-4)


def test_a_wire_across_a_valley_hangs_straight_at_the_lowest(tmp_path):
    columns = np.broadcast_to(np.arange(200.0), (200, 200))
    valley = 100.0 + 2.0 * abs(columns - 99.5)  # lowest in the middle column
    ends = [TO_LONLAT.transform(ORIGIN[0] + 3000.0 + d, ORIGIN[1] - 3000.0) for d in (-1500, 1500)]
    wire = feature(
        "LineString", [list(end) for end in ends],
        height_ft=100, accuracy_horizontal_ft=0, accuracy_vertical_ft=0,
    )  # fmt: skip
    store = store_with(tmp_path, wire, heights=valley)
    # Derived: both pylons stand on 100 + 2 * 50 = 200 m and reach 30.48 m higher.
    assert float(store.surface_m(*MIDDLE)) == pytest.approx(230.48, abs=0.05)
    window = window_about(store, *MIDDLE, 110)
    lon, lat, row, col = places_in(window, count=8000)
    assert (window.top_m[row, col] >= store.surface_m(lon, lat) - 1e-3).all()
    along = TO_LONLAT.transform(
        ORIGIN[0] + np.linspace(1500, 4500, 77), np.full(77, ORIGIN[1] - 3e3)
    )
    x_m, y_m = window.frame.to_xy_m(*along)
    cells = (
        np.floor(y_m / 30.0).astype(int) - window.row0,
        np.floor(x_m / 30.0).astype(int) - window.col0,
    )
    assert window.top_m[cells].min() > 230.4
    # Derived: the wire's cells and one to two on each side, over 100 cells; no others.
    bare = store_of(tmp_path / "bare", valley, units="m")
    raised = window.top_m > window_about(bare, *MIDDLE, 110).top_m
    assert 3 * 100 <= raised.sum() <= 5 * 104


def test_unknown_accuracy_is_never_taken_as_good_and_is_told(tmp_path):
    store = store_with(tmp_path, feature("Point", list(MIDDLE), height_ft=300))
    assert float(store.surface_m(*MIDDLE)) == pytest.approx(100.0 + 350 * FT_M, abs=1e-3)
    assert any("1 obstacles state no accuracy: 250 ft" in note for note in store.notes)
    known = store_with(tmp_path, mast(height_ft=300))
    assert not any("obstacle" in note for note in known.notes)


def test_without_obstacles_a_note_says_so(tmp_path):
    assert any("No obstacle file" in note for note in store_of(tmp_path, FLAT).notes)


def test_a_void_under_a_mast_stays_void(tmp_path):
    heights = FLAT.copy()
    heights[95:105, 95:105] = np.nan
    store = store_with(tmp_path, mast(elevation_top_ft=900), mast(height_ft=900), heights=heights)
    assert np.isnan(window_about(store, *MIDDLE, 4).top_m).all()
    assert np.isnan(store.surface_m(*MIDDLE))


def test_a_mast_beyond_the_window_still_raises_its_edge(tmp_path):
    store = store_with(tmp_path, mast(height_ft=300, accuracy_horizontal_ft=1000))
    frame = frame_for(*MIDDLE)
    x_m, y_m = frame.to_xy_m(*MIDDLE)
    col0 = int(x_m // 30) + 8
    top_m = store.window(frame, col0, int(y_m // 30), 8, 1, 30.0).top_m[0]
    gap_m = (col0 + np.arange(8)) * 30.0 - x_m
    expected = gap_m <= 1000 * FT_M + 30.0  # Derived: 334.8 m, eleven cells
    assert (top_m > 150.0).tolist() == expected.tolist()
    assert expected.any()
    assert not expected.all()


@pytest.mark.parametrize(
    "properties",
    [
        {},
        {"height_ft": None, "elevation_top_ft": None},
        {"height_ft": "300"},
        {"height_ft": -1},
        {"height_ft": 100_001},
        {"height_ft": True},
        {"height_ft": 300, "accuracy_horizontal_ft": 10_001},
        {"height_ft": 300, "accuracy_vertical_ft": -1},
        {"height_ft": float("nan")},
    ],
)
def test_a_feature_out_of_range_is_refused_with_its_number(tmp_path, properties):
    good = mast(height_ft=100_000, accuracy_horizontal_ft=10_000)
    path = write_json(
        tmp_path / "masts.geojson",
        {"features": [good, feature("Point", list(MIDDLE), **properties)]},
    )
    with pytest.raises(TerrainError, match=r"Feature 1 of the obstacle file masts\.geojson") as got:
        load_obstacles(path)
    assert "0 to 10000" in got.value.allowed


@pytest.mark.parametrize(
    "geometry",
    [
        {"type": "Polygon", "coordinates": [[[9, 46], [9.1, 46], [9, 46.1], [9, 46]]]},
        {"type": "Point", "coordinates": [9]},
        {"type": "Point", "coordinates": [9.0, 91.0]},
        {"type": "LineString", "coordinates": []},
        None,
    ],
)
def test_a_geometry_that_cannot_be_used_is_refused(tmp_path, geometry):
    faulty = {"type": "Feature", "geometry": geometry, "properties": {"height_ft": 1}}
    path = write_json(tmp_path / "masts.geojson", {"features": [faulty]})
    with pytest.raises(TerrainError, match="Feature 0"):
        load_obstacles(path)


@pytest.mark.parametrize("text", ["", "{", "[]", '{"features": 3}', "[" * 100_000])
def test_a_file_that_is_no_collection_is_refused(tmp_path, text):
    path = tmp_path / "obstacles" / "masts.geojson"
    path.parent.mkdir()
    path.write_text(text, encoding="utf-8")
    with pytest.raises(TerrainError, match=r"masts\.geojson is not a GeoJSON") as got:
        load_obstacles(path)
    assert str(tmp_path) not in got.value.detail
    with pytest.raises(TerrainError, match=r"masts\.geojson"):  # what it holds may lie anywhere
        store_of(tmp_path, FLAT).ground_m(*MIDDLE)


def test_several_points_and_lines_in_a_feature(tmp_path):
    lines = [[[9.0, 46.0], [9.1, 46.0]], [[9.0, 46.2], [9.1, 46.2], [9.2, 46.2]]]
    content = {
        "features": [
            feature("MultiPoint", [[9.0, 46.0], [9.1, 46.0, 400.0]], height_ft=10),
            feature("MultiLineString", lines, height_ft=20),
        ]
    }
    path = tmp_path / "a.geojson"
    path.write_text(json.dumps(content), encoding="utf-8")
    found = load_obstacles(path)
    assert [obstacle.lon_deg.size for obstacle in found] == [1, 1, 2, 3]
    assert [obstacle.height_m for obstacle in found] == pytest.approx(
        [10 * FT_M, 10 * FT_M, 20 * FT_M, 20 * FT_M]
    )


def test_the_size_of_a_file_is_bounded(tmp_path, monkeypatch):
    path = write_json(tmp_path / "obstacles" / "a.geojson", {"features": [mast(height_ft=9)]})
    monkeypatch.setattr("geo.obstacles.MAX_FILE_BYTES", path.stat().st_size)
    assert len(load_obstacles(path)) == 1
    monkeypatch.setattr("geo.obstacles.MAX_FILE_BYTES", path.stat().st_size - 1)
    with pytest.raises(TerrainError, match="larger than 64 MB"):
        load_obstacles(path)
