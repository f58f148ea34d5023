"""Land cover: tree height on cells and places, class names, legends that are refused."""

from __future__ import annotations

import numpy as np
import pytest
from affine import Affine
from pyproj import Transformer

from geo.canopy import LandCover
from geo.terrain import TerrainStore
from perf.errors import TerrainError
from tests.terrain_files import (
    ORIGIN,
    UTM32,
    places_in,
    store_of,
    turned,
    window_about,
    write_json,
    write_raster,
)

TO_LONLAT = Transformer.from_crs(UTM32, "EPSG:4326", always_xy=True)
TREE_M = 65 * 0.3048  # Source: NIST SP 811 (2008), appendix B.6
FLAT = np.full((200, 200), 100.0)
LEGEND = {
    "classes": {
        "10": {"name": "tree cover", "canopy_ft": 65, "kind": "trees"},
        "30": {"name": "grass"},
        "80": {"name": "water", "kind": "water"},
    },
    "source": "Invented",
    "date": "2026",
}


def write_cover(folder, codes, transform=10.0, legend=LEGEND, name="cover", **options):
    """Write a land-cover raster and its legend."""
    place = folder / "landcover"
    write_raster(place / f"{name}.tif", codes, transform, dtype="uint8", **options)
    if legend is not None:
        write_json(place / f"{name}.json", legend)


def at(east_m, south_m):
    """Return longitude and latitude of a place from the north-west corner of the terrain."""
    return TO_LONLAT.transform(ORIGIN[0] + np.asarray(east_m), ORIGIN[1] - np.asarray(south_m))


@pytest.mark.parametrize("pixel_m", [10.0, 30.0, 100.0])
@pytest.mark.parametrize("turn_rad", [0.0, 0.3])
def test_a_cell_that_touches_a_tree_pixel_is_raised(tmp_path, pixel_m, turn_rad):
    n = int(6000 / pixel_m)
    codes = np.full((n, n), 30)
    codes[n // 2 : n // 2 + 3, n // 2] = 10
    write_cover(tmp_path, codes, turned(pixel_m, turn_rad))
    store = store_of(tmp_path, np.full((300, 300), 100.0), turned(30.0, turn_rad), units="m")
    cells = turned(pixel_m, turn_rad)
    middle = [
        cells.a * (n // 2 + 0.5) + cells.b * (n // 2 + 1.5),
        -cells.d * (n // 2 + 0.5) - cells.e * (n // 2 + 1.5),
    ]
    window = window_about(store, *at(*middle), 40)
    lon, lat, row, col = places_in(window, count=60_000)
    surface_m = store.surface_m(lon, lat)
    np.testing.assert_allclose(np.unique(surface_m), [100.0, 100.0 + TREE_M], atol=1e-4)
    highest = np.full(window.top_m.shape, 100.0)
    np.maximum.at(highest, (row, col), surface_m)
    # Every cell in which a sample lies among trees is raised; the cells beyond touch with less
    # than the samples see, or only with the rectangle round a turned pixel: one cell at most.
    assert (window.top_m >= highest - 1e-3).all()
    spread = np.zeros(highest.shape, dtype=bool)
    for r, c in np.argwhere(highest > 100.0):
        spread[max(r - 1, 0) : r + 2, max(c - 1, 0) : c + 2] = True
    assert not (window.top_m[~spread] > 100.0).any()
    np.testing.assert_allclose(np.unique(window.top_m), [100.0, 100.0 + TREE_M], atol=1e-4)


def test_class_names(tmp_path):
    codes = np.full((600, 600), 30)
    codes[:, 300:] = 80
    codes[0:50, 0:50] = 77
    codes[100:150, 0:50] = 255
    write_cover(tmp_path, codes, nodata=255)
    store = store_of(tmp_path, FLAT)
    lon, lat = at([1500, 4500, 100, 100, -100], [3000, 3000, 100, 1200, 100])
    names = ["grass", "water", "class 77", None, None]
    assert store.landcover_at(lon, lat) == names
    assert store.landcover_at(lon[1], lat[1]) == ["water"]
    heights_m = store.surface_m(lon, lat)
    # Derived: a class that the legend lacks gets the legend's tallest trees; no data, none.
    expected = [100.0, 100.0, 100.0 + TREE_M, 100.0, np.nan]
    np.testing.assert_allclose(heights_m, expected, atol=1e-4)


def test_trees_of_any_file_count_and_the_finest_names_the_place(tmp_path):
    write_cover(tmp_path, np.full((60, 60), 10), 100.0, name="coarse")
    write_cover(tmp_path, np.full((100, 100), 80), Affine(20, 0, ORIGIN[0], 0, -20, ORIGIN[1]))
    store = store_of(tmp_path, FLAT)
    lon, lat = at([1000, 5000], [1000, 5000])
    assert store.landcover_at(lon, lat) == ["water", "tree cover"]
    np.testing.assert_allclose(store.surface_m(lon, lat), 100.0 + TREE_M, atol=1e-4)
    assert (window_about(store, lon[0], lat[0], 8).top_m > 119.0).all()


def test_notes_tell_what_is_allowed_for(tmp_path):
    assert any("No land-cover file" in note for note in store_of(tmp_path, FLAT).notes)
    write_cover(tmp_path, np.full((60, 60), 30))
    notes = TerrainStore(tmp_path).notes
    assert not any("No land-cover file" in note for note in notes)
    assert any("only where a land-cover file lies" in note for note in notes)


@pytest.mark.parametrize(
    "legend",
    [
        None,
        [],
        {},
        {"classes": []},
        {"classes": {"ten": {"name": "a"}}},
        {"classes": {"10": {"canopy_ft": 65}}},
        {"classes": {"10": {"name": "a", "kind": "trees"}}},
        {"classes": {"10": {"name": "a", "canopy_ft": 400.1}}},
        {"classes": {"10": {"name": "a", "canopy_ft": -1}}},
        {"classes": {"10": {"name": "a", "canopy_ft": float("nan")}}},
    ],
)
def test_a_faulty_legend_is_refused(tmp_path, legend):
    write_cover(tmp_path, np.full((60, 60), 10), legend=legend)
    with pytest.raises(TerrainError, match=r"cover\.tif has no legend, or a faulty one") as caught:
        LandCover.load(tmp_path / "landcover" / "cover.tif")
    assert "0 to 400" in caught.value.allowed
    with pytest.raises(TerrainError, match=r"cover\.tif"):
        store_of(tmp_path, FLAT).ground_m(*at(300.0, 300.0))


def test_the_tallest_trees_are_taken(tmp_path):
    legend = {"classes": {"10": {"name": "giants", "canopy_ft": 400}}}
    write_cover(tmp_path, np.full((60, 60), 10), legend=legend)
    place = at(300.0, 300.0)
    store = store_of(tmp_path, FLAT)
    assert float(store.surface_m(*place)) == pytest.approx(100.0 + 400 * 0.3048, abs=1e-4)
