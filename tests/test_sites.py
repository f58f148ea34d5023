"""Landing sites: what is read, what stays unknown, what is refused."""

from __future__ import annotations

import copy
import json
import os
from pathlib import Path
from typing import Any

import pytest

from geo.sites import MAX_DEPTH, MAX_FILE_BYTES, load_sites, sites_feature_collection
from perf.errors import InputError

RUNWAY: dict[str, Any] = {
    "type": "Feature",
    "geometry": {"type": "LineString", "coordinates": [[10.0, 0.0], [10.01, 0.0]]},
    "properties": {
        "id": "east-west",
        "name": "East-west runway",
        "kind": "aerodrome",
        "status": "open",
        "elevation_ft": 1000,
        "length_ft": 3652.5,
        "width_ft": 98,
        "surface": "asphalt",
        "slope_pct": -0.4,
        "lit": True,
        "arrival_height_ft": 1200,
        "source": "Survey",
        "survey_date": "2026-03-14",
        "review_due": "2027-03-14",
    },
}
BARE: dict[str, Any] = {
    "type": "Feature",
    "geometry": {"type": "Point", "coordinates": [10.2, 0.1]},
    "properties": {"id": "bare", "name": "Bare", "kind": "field", "status": "candidate"},
}
OPTIONAL = [
    "elevation_ft",
    "length_ft",
    "width_ft",
    "surface",
    "slope_pct",
    "lit",
    "arrival_height_ft",
    "source",
    "survey_date",
    "review_due",
]


def write(folder: Path, *features: Any, name: str = "a.geojson") -> Path:
    (folder / "sites").mkdir(exist_ok=True)
    top = {"type": "FeatureCollection", "features": list(features)}
    (folder / "sites" / name).write_text(json.dumps(top), encoding="utf-8")
    return folder


def write_text(folder: Path, text: str | bytes) -> Path:
    (folder / "sites").mkdir(exist_ok=True)
    raw = text if isinstance(text, bytes) else text.encode()
    (folder / "sites" / "a.geojson").write_bytes(raw)
    return folder


def changed(feature: dict[str, Any], **properties: Any) -> dict[str, Any]:
    other = copy.deepcopy(feature)
    other["properties"].update(properties)
    return other


def shaped(kind: Any, coordinates: Any) -> dict[str, Any]:
    other = copy.deepcopy(BARE)
    other["geometry"] = {"type": kind, "coordinates": coordinates}
    return other


def test_feet_become_metres(tmp_path: Path) -> None:
    (site,) = load_sites(write(tmp_path, RUNWAY))
    # Source: international foot, 0.3048 m exactly (NIST SP 811, 2008, B.6): 1000 ft is 304.8 m.
    assert site.elevation_m == pytest.approx(304.8, abs=1e-9)  # rounding of one product
    assert site.length_m == pytest.approx(1113.282, abs=1e-9)  # Derived: 3652.5 x 0.3048
    assert site.arrival_height_m == pytest.approx(365.76, abs=1e-9)  # Derived: 1200 x 0.3048
    assert (site.slope_pct, site.lit, site.surface) == (-0.4, True, "asphalt")


def test_the_files_schema_comes_back_unchanged(tmp_path: Path) -> None:
    area = shaped("Polygon", [[[0.0, 0.0], [0.01, 0.0], [0.01, 0.01], [0.0, 0.0]]])
    area["properties"]["id"] = "area"
    features = [RUNWAY, changed(BARE, elevation_ft=-12.5), area]
    back = sites_feature_collection(load_sites(write(tmp_path, *features)))
    assert [f["geometry"] for f in back["features"]] == [f["geometry"] for f in features]
    for got, given in zip(back["features"], features, strict=True):
        assert got["properties"] == {**dict.fromkeys(OPTIONAL), **given["properties"]}
    assert json.loads(json.dumps(back)) == back


def test_a_runway_runs_from_threshold_to_threshold(tmp_path: Path) -> None:
    (site,) = load_sites(write(tmp_path, RUNWAY))
    assert list(site.geometry.coords) == [(10.0, 0.0), (10.01, 0.0)]
    # Derived: the equator is a geodesic, so its middle is the mean of the longitudes.
    assert (site.lon, site.lat) == pytest.approx((10.005, 0.0), abs=1e-9)


def test_a_runway_across_the_date_line_keeps_its_place(tmp_path: Path) -> None:
    runway = shaped("LineString", [[179.995, 0.0], [-179.985, 0.0]])
    (site,) = load_sites(write(tmp_path, runway))
    # Derived: 0.02 degrees of the equator, whose middle lies 0.01 degrees east of 179.995.
    assert site.lon % 360.0 == pytest.approx(180.005, abs=1e-9)


def test_an_area_is_stood_for_by_a_point_inside_it(tmp_path: Path) -> None:
    hook = [[0, 0], [3, 0], [3, 3], [2, 3], [2, 1], [0, 1], [0, 0]]
    ring = [[0.001 * x, 0.001 * y] for x, y in hook]
    (site,) = load_sites(write(tmp_path, shaped("Polygon", [ring])))
    x, y = 1000.0 * site.lon, 1000.0 * site.lat
    # Derived: the hook is the strip 0 < y < 1 together with the strip 2 < x < 3.
    assert (0 < x < 3 and 0 < y < 1) or (2 < x < 3 and 0 < y < 3)


@pytest.mark.parametrize("given", [BARE, changed(BARE, **dict.fromkeys(OPTIONAL))])
def test_unknown_stays_unknown(tmp_path: Path, given: dict[str, Any]) -> None:
    (site,) = load_sites(write(tmp_path, given))
    values = (site.elevation_m, site.length_m, site.width_m, site.surface, site.slope_pct,
              site.lit, site.arrival_height_m, site.source, site.survey_date,
              site.review_due)  # fmt: skip
    assert values == (None,) * 10
    back = sites_feature_collection([site])["features"][0]["properties"]
    assert [back[name] for name in OPTIONAL] == [None] * 10


def test_no_folder_is_no_site(tmp_path: Path) -> None:
    assert load_sites(tmp_path) == ()
    (tmp_path / "sites").mkdir()
    assert load_sites(tmp_path) == ()


def test_several_files_are_read_in_the_order_of_their_names(tmp_path: Path) -> None:
    write(tmp_path, BARE, name="b.geojson")
    write(tmp_path, RUNWAY, name="a.geojson")
    assert [site.site_id for site in load_sites(tmp_path)] == ["east-west", "bare"]


def test_an_id_comes_once_over_all_files(tmp_path: Path) -> None:
    write(tmp_path, BARE, name="a.geojson")
    write(tmp_path, RUNWAY, BARE, name="b.geojson")
    with pytest.raises(InputError) as caught:
        load_sites(tmp_path)
    assert caught.value.field == "sites/b.geojson#features[1].properties.id"


@pytest.mark.parametrize(
    ("feature", "member"),
    [
        (changed(BARE, id=7), "properties.id"),
        (changed(BARE, id=" "), "properties.id"),
        (changed(BARE, name="x" * 201), "properties.name"),
        (changed(BARE, name="two\nlines"), "properties.name"),
        (changed(BARE, kind="beach"), "properties.kind"),
        (changed(BARE, kind=["field"]), "properties.kind"),
        (changed(BARE, status=None), "properties.status"),
        (changed(BARE, elevation_ft="high"), "properties.elevation_ft"),
        (changed(BARE, elevation_ft=True), "properties.elevation_ft"),
        (changed(BARE, elevation_ft=30_001), "properties.elevation_ft"),
        (changed(BARE, length_ft=0), "properties.length_ft"),
        (changed(BARE, length_ft=10**400), "properties.length_ft"),
        (changed(BARE, slope_pct=-40.5), "properties.slope_pct"),
        (changed(BARE, lit="yes"), "properties.lit"),
        (changed(BARE, lit=1), "properties.lit"),
        (changed(BARE, arrival_height_ft=-1), "properties.arrival_height_ft"),
        (changed(BARE, survey_date="2026-02-30"), "properties.survey_date"),
        (changed(BARE, survey_date="14.03.2026"), "properties.survey_date"),
        (changed(BARE, elevation_m=300), "properties"),
        ({"type": "Feature", "geometry": None, "properties": None}, "properties"),
        ([], "type"),
        (shaped("Point", [181, 0]), "geometry.coordinates"),
        (shaped("Point", [0, 90.5]), "geometry.coordinates"),
        (shaped("Point", [0]), "geometry.coordinates"),
        (shaped("Point", {"0": 1}), "geometry.coordinates"),
        (shaped("Point", [True, 0]), "geometry.coordinates"),
        (shaped("Circle", [0, 0]), "geometry.type"),
        (shaped(["Point"], [0, 0]), "geometry.type"),
        (shaped("LineString", [[0, 0], [0, 0]]), "geometry.coordinates"),
        (shaped("LineString", [[0, 0], [1, 0]]), "geometry.coordinates"),
        (shaped("LineString", [[0, 0], [0.01, 0], [0.02, 0]]), "geometry.coordinates"),
        (shaped("Polygon", [[[0, 0], [1, 1], [1, 0], [0, 1], [0, 0]]]), "geometry.coordinates"),
        (shaped("Polygon", [[[0, 0], [1, 0], [1, 1], [0, 1]]]), "geometry.coordinates"),
        (shaped("Polygon", [[[0, 0], [0, 0], [0, 0], [0, 0]]]), "geometry.coordinates"),
        (shaped("Polygon", [[[0, 0]] * 10_001]), "geometry.coordinates"),
        (shaped("MultiPolygon", [[[[0, 0], [1, 0], [1, 1], [0, 0]]]] * 2), "geometry.coordinates"),
    ],
)
def test_a_faulty_feature_is_named(tmp_path: Path, feature: Any, member: str) -> None:
    with pytest.raises(InputError) as caught:
        load_sites(write(tmp_path, RUNWAY, feature))
    assert caught.value.field == f"sites/a.geojson#features[1].{member}"
    assert caught.value.allowed
    assert "a.geojson" in caught.value.detail


@pytest.mark.parametrize(
    "text",
    [
        "",
        "not json",
        "[]",
        "null",
        '{"type": "FeatureCollection"}',
        '{"type": "Feature", "features": []}',
        '{"type": "FeatureCollection", "features": {}}',
        '{"type": "FeatureCollection", "features": [NaN]}',
        '{"type": "FeatureCollection", "features": [' + "9" * 5000 + "]}",
        '{"type": "FeatureCollection", "features": [], "crs": {"name": "EPSG:32709"}}',
        b"\xff\xfe\x00",
        "[" * 100_000,
        '{"a":' * 100_000,
    ],
)
def test_a_file_that_is_no_collection_is_refused(tmp_path: Path, text: str | bytes) -> None:
    with pytest.raises(InputError) as caught:
        load_sites(write_text(tmp_path, text))
    assert caught.value.field == "sites/a.geojson"


def test_a_number_beyond_the_range_of_floats_is_refused(tmp_path: Path) -> None:
    text = json.dumps({"type": "FeatureCollection", "features": [changed(BARE, lit=None)]})
    text = text.replace('"lit": null', '"elevation_ft": 1e999')
    with pytest.raises(InputError) as caught:
        load_sites(write_text(tmp_path, text))
    assert caught.value.field == "sites/a.geojson#features[0].properties.elevation_ft"


def test_a_file_of_the_largest_size_is_read_and_one_byte_more_is_refused(tmp_path: Path) -> None:
    text = json.dumps({"type": "FeatureCollection", "features": [BARE]})
    full = text + " " * (MAX_FILE_BYTES - len(text))
    assert len(load_sites(write_text(tmp_path, full))) == 1
    with pytest.raises(InputError, match="too large"):
        load_sites(write_text(tmp_path, full + " "))


def test_brackets_may_nest_to_the_limit_and_no_deeper(tmp_path: Path) -> None:
    def nested(levels: int) -> str:
        inside = "[" * (levels - 1) + "]" * (levels - 1)
        return '{"type": "FeatureCollection", "features": [], "more": ' + inside + "}"

    assert load_sites(write_text(tmp_path, nested(MAX_DEPTH))) == ()
    with pytest.raises(InputError, match="nested too deeply"):
        load_sites(write_text(tmp_path, nested(MAX_DEPTH + 1)))


def test_brackets_in_text_do_not_count_as_nesting(tmp_path: Path) -> None:
    name = '\\" ' + "[" * (MAX_DEPTH + 1)
    (site,) = load_sites(write(tmp_path, changed(BARE, name=name)))
    assert site.name == name


def test_a_pipe_among_the_files_is_passed_over(tmp_path: Path) -> None:
    (tmp_path / "sites").mkdir()
    os.mkfifo(tmp_path / "sites" / "pipe.geojson")
    assert load_sites(tmp_path) == ()
