"""The invented demo place: made again byte for byte, and consistent in itself."""

from __future__ import annotations

import json
import subprocess
import sys
import xml.etree.ElementTree as ElementTree
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
from pyproj import Geod, Transformer

from geo.sites import KINDS, STATUSES, Site, load_sites

DEMO = Path(__file__).resolve().parent.parent / "demo_data"
WGS84 = Geod(ellps="WGS84")
FT_M = 0.3048  # Source: international foot, exact (NIST SP 811, 2008, B.6)
MADE = [
    "terrain/coast.tif", "landcover/coast.tif", "landcover/coast.json", "sites/runways.geojson",
    "sites/areas.geojson", "obstacles/obstacles.geojson", "routes/tarvane-orrendale.gpx",
    "routes/tarvane-orrendale.geojson", "weather/light-easterly.json", "weather/westerly.json",
    "weather/southerly-change.json", "weather/easterly-shear.json", "start.json",
]  # fmt: skip


class Ground:
    """The terrain and land cover as they lie in the files."""

    def __init__(self) -> None:
        with rasterio.open(DEMO / "terrain" / "coast.tif") as raster:
            self.height_m = raster.read(1)
            self.transform, self.tags, self.units = raster.transform, raster.tags(), raster.units
            self.crs = raster.crs
        with rasterio.open(DEMO / "landcover" / "coast.tif") as raster:
            self.cover = raster.read(1)
            self.cover_transform = raster.transform
        self.to_grid = Transformer.from_crs(4326, self.crs, always_xy=True)

    def cell(self, lon: float, lat: float) -> tuple[int, int]:
        x_m, y_m = self.to_grid.transform(lon, lat)
        return int((self.transform.f - y_m) / 30.0), int((x_m - self.transform.c) / 30.0)

    def along(self, start: tuple[float, float], bearing_deg: float, length_m: float) -> Any:
        """Return distances [m] and heights [m] every 30 m from a place."""
        distance_m = np.arange(0.0, length_m, 30.0)
        n = len(distance_m)
        lon, lat, _ = WGS84.fwd([start[0]] * n, [start[1]] * n, [bearing_deg] * n, distance_m)
        cells = [self.cell(*place) for place in zip(lon, lat, strict=True)]
        return distance_m, np.array([self.height_m[cell] for cell in cells], dtype=float)


@pytest.fixture(scope="module")
def ground() -> Ground:
    return Ground()


@pytest.fixture(scope="module")
def sites() -> dict[str, Site]:
    return {site.site_id: site for site in load_sites(DEMO)}


def read(name: str) -> Any:
    return json.loads((DEMO / name).read_text(encoding="utf-8"))


def test_the_script_makes_the_same_bytes_again(tmp_path: Path) -> None:
    script = [sys.executable, str(DEMO / "make_demo.py"), "--out", str(tmp_path)]
    subprocess.run(script, check=True, timeout=900)
    made = {str(p.relative_to(tmp_path).as_posix()) for p in tmp_path.rglob("*") if p.is_file()}
    assert made == set(MADE)
    differing = [n for n in MADE if (tmp_path / n).read_bytes() != (DEMO / n).read_bytes()]
    assert differing == []


def test_it_is_small(ground: Ground) -> None:
    files = [p for p in DEMO.rglob("*") if p.is_file() and "__pycache__" not in p.parts]
    # Common practice: a clone should stay light; 10 MB was agreed for this folder.
    assert sum(p.stat().st_size for p in files) < 10_000_000
    assert ground.height_m.nbytes > 10_000_000  # so the limit asks for compression


def test_the_terrain_is_a_mountainous_coast(ground: Ground) -> None:
    height_m = ground.height_m
    # Derived: 60 km in cells of 30 m.
    assert height_m.shape == (2000, 2000)
    assert (ground.transform.a, ground.transform.e) == (30.0, -30.0)
    # From memory: the height of a high coastal range, summits about 2600 m.
    assert 2500.0 < height_m.max() < 2700.0
    assert np.isfinite(height_m).all()
    sea = height_m == 0.0
    assert 0.15 < sea.mean() < 0.35
    assert not (height_m < 0.0).any()
    # A tenth of the land lies low enough for wide valley floors.
    assert (height_m[~sea] < 120.0).mean() > 0.1


def test_the_terrain_states_where_it_comes_from(ground: Ground) -> None:
    assert set(ground.tags) >= {"SOURCE", "DATE", "VERTICAL_DATUM"}
    assert "nvented" in ground.tags["SOURCE"]
    assert ground.units == ("m",)


def test_it_lies_where_there_is_only_sea(ground: Ground) -> None:
    # From memory: the South Pacific round 44 S 130 W is open ocean for more than 2000 km.
    middle_m = (ground.transform.c + 30_000.0, ground.transform.f - 30_000.0)
    lon, lat = ground.to_grid.transform(*middle_m, direction="INVERSE")
    assert WGS84.inv(lon, lat, -130.0, -44.0)[2] < 50_000.0


def test_every_class_of_land_cover_is_in_the_legend(ground: Ground) -> None:
    legend = read("landcover/coast.json")
    assert {str(code) for code in np.unique(ground.cover)} == set(legend["classes"])
    assert ground.cover_transform == ground.transform
    for entry in legend["classes"].values():
        assert ("canopy_ft" in entry) == (entry["kind"] == "trees")
    water = [int(code) for code, entry in legend["classes"].items() if entry["kind"] == "water"]
    assert np.isin(ground.cover[ground.height_m == 0.0], water).all()


def test_the_sites_show_every_kind_and_status(sites: dict[str, Site]) -> None:
    assert {site.kind for site in sites.values()} == set(KINDS)
    assert {site.status for site in sites.values()} == set(STATUSES)
    assert len({site.name for site in sites.values()}) == len(sites)
    runways = [site for site in sites.values() if site.kind == "aerodrome"]
    assert len(runways) == 2
    assert any(site.elevation_m is None for site in sites.values())
    assert any(site.length_m is None for site in sites.values())


def test_sites_lie_on_the_terrain_at_their_elevation(
    ground: Ground, sites: dict[str, Site]
) -> None:
    for site in sites.values():
        if site.elevation_m is not None:
            height_m = ground.height_m[ground.cell(site.lon, site.lat)]
            # 3 m: half a cell of a 5 % slope is 0.8 m, rounding to whole feet 0.2 m.
            assert site.elevation_m == pytest.approx(height_m, abs=3.0), site.site_id


def test_runways_have_the_length_and_slope_that_they_state(
    ground: Ground, sites: dict[str, Site]
) -> None:
    lines = [site for site in sites.values() if site.geometry.geom_type == "LineString"]
    assert len(lines) == 8
    for site in lines:
        first, second = site.geometry.coords
        length_m = WGS84.inv(*first, *second)[2]
        # 2 m: UTM's scale here is 0.9998, whole feet and places of 0.1 m.
        assert site.length_m == pytest.approx(length_m, abs=2.0), site.site_id
        rise_m = float(ground.height_m[ground.cell(*second)]) - float(
            ground.height_m[ground.cell(*first)]
        )
        # 2 m: half a cell of a 5 % slope at either end and heights in steps of 0.5 m.
        assert rise_m == pytest.approx(site.length_m * site.slope_pct / 100.0, abs=2.0)


def test_water_landings_are_on_water_and_the_others_are_not(
    ground: Ground, sites: dict[str, Site]
) -> None:
    classes = read("landcover/coast.json")["classes"]
    for site in sites.values():
        kind = classes[str(ground.cover[ground.cell(site.lon, site.lat)])]["kind"]
        assert (kind == "water") == (site.kind == "water"), site.site_id
        assert kind != "trees", site.site_id


def test_obstacles_state_height_accuracy_and_source(ground: Ground) -> None:
    features = read("obstacles/obstacles.geojson")["features"]
    names = [feature["properties"]["name"] for feature in features]
    assert len(set(names)) == len(names)
    assert {feature["geometry"]["type"] for feature in features} == {"Point", "LineString"}
    for feature in features:
        properties = feature["properties"]
        assert 0 < properties["height_ft"] < 2000
        assert properties["accuracy_horizontal_ft"] > 0
        assert properties["accuracy_vertical_ft"] > 0
        assert properties["source"]
        assert properties["date"].startswith("2026-")


def test_both_forms_of_the_route_agree_and_keep_above_the_ground(ground: Ground) -> None:
    (line,) = read("routes/tarvane-orrendale.geojson")["features"]
    points = line["geometry"]["coordinates"]
    space = "{http://www.topografix.com/GPX/1/1}"  # Source: GPX 1.1 schema, target namespace
    root = ElementTree.parse(DEMO / "routes" / "tarvane-orrendale.gpx").getroot()
    marks = root.findall(f"{space}rte/{space}rtept")
    assert root.get("version") == "1.1"
    found = [
        [float(m.attrib["lon"]), float(m.attrib["lat"]), float(m.findtext(f"{space}ele") or "nan")]
        for m in marks
    ]
    assert found == points
    for (lon, lat, alt_m), (lon_1, lat_1, alt_1_m) in pairwise(points):
        bearing_deg, _, length_m = WGS84.inv(lon, lat, lon_1, lat_1)
        distance_m, height_m = ground.along((lon, lat), bearing_deg, length_m)
        flown_m = alt_m + (alt_1_m - alt_m) * distance_m / length_m
        # Source: ICAO Annex 2, 4.6 b: 150 m (500 ft) above the ground under visual rules.
        assert (flown_m - height_m).min() > 150.0


@pytest.mark.parametrize("name", [name for name in MADE if name.startswith("weather/")])
def test_winds_are_levels_in_order(name: str) -> None:
    case = read(name)
    assert set(case) == {"name", "valid", "note", "wind"}
    assert case["valid"].startswith("2026-")
    altitudes = [level["altitude_ft"] for level in case["wind"]]
    assert altitudes == sorted(set(altitudes))
    for level in case["wind"]:
        assert set(level) == {"altitude_ft", "from_deg", "speed_kt"}
        assert 0 <= level["from_deg"] < 360
        assert 0 <= level["speed_kt"] <= 250


def test_the_first_view_has_the_aerodrome_hidden_by_the_ridge(
    ground: Ground, sites: dict[str, Site]
) -> None:
    start = read("start.json")
    assert (DEMO / "aircraft" / f"{start['aircraft']}.toml").is_file()
    place = tuple(start["position"])
    alt_m = start["altitude_ft"] * FT_M
    tarvane = sites["tarvane-09-27"]
    bearing_deg, _, length_m = WGS84.inv(*place, tarvane.lon, tarvane.lat)
    distance_m, height_m = ground.along(place, bearing_deg, length_m)
    # From memory: a two-seat trainer glides about 9:1; even without margins the ridge is in the
    # way, though the aerodrome lies far below that line.
    glide_m = alt_m - distance_m / 9.0
    assert (height_m - glide_m).max() > 30.0
    assert tarvane.elevation_m is not None
    assert glide_m[-1] > tarvane.elevation_m + 600.0
    # Past the ridge's western end the same glide has open ground.
    bearing_deg, _, length_m = WGS84.inv(*place, -130.1, -44.02)
    distance_m, height_m = ground.along(place, bearing_deg, length_m)
    assert (alt_m - distance_m / 9.0 - height_m).min() > 0.0


def test_the_box_canyon_ends_in_walls(ground: Ground) -> None:
    head = (-129.834624, -44.102536)
    floor_m = float(ground.height_m[ground.cell(*head)])
    assert floor_m < 400.0
    rises_m = {
        bearing: ground.along(head, bearing, 3000.0)[1].max() - floor_m
        for bearing in range(0, 360, 20)
    }
    # It opens to the north-west only; 500 m is more than anything gliding in can climb.
    closed = [bearing for bearing, rise_m in rises_m.items() if rise_m > 500.0]
    assert closed == [*range(0, 260, 20)]
