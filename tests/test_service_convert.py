"""From aviation units to SI and back; areas as valid GeoJSON."""

from __future__ import annotations

import json
from math import radians
from pathlib import Path
from typing import Any

import pytest
import shapely
from geojson_validator import validate_geometries, validate_structure
from shapely.geometry import MultiPolygon, Polygon, box, shape

from geo.case import Margins
from perf.errors import InputError, RecordError
from perf.record import load_records
from service import convert
from service.cautions import margins_below_default
from service.schemas import FootprintRequest, MarginsRequest
from tests.service_support import REQUEST, write_data


@pytest.fixture(scope="module")
def records(tmp_path_factory: pytest.TempPathFactory) -> Any:
    return load_records(write_data(tmp_path_factory.mktemp("data")) / "aircraft")


def request(**changes: Any) -> FootprintRequest:
    return FootprintRequest.model_validate({**REQUEST, **changes})


def test_units_of_a_case(records: Any) -> None:
    level = {"altitude_ft": 1000, "from_deg": 90, "speed_kt": 10}
    asked = request(altitude_ft=1000, track_deg=180, wind=[level], isa_offset_c=-5, qnh_hpa=1000,
                    speed_at_failure_kt=100)  # fmt: skip
    case = convert.case_of(asked, records["test-two"])
    # Source: BIPM, The International System of Units, 9th edition, and international foot 0.3048 m
    assert case.alt_m == pytest.approx(304.8)
    assert case.speed_eas_mps == pytest.approx(100 * 1852 / 3600)
    assert case.track_rad == pytest.approx(3.141592653589793)
    assert (case.isa_offset_k, case.qnh_pa) == (-5, 100_000)
    # Derived: wind from the east blows towards the west
    assert case.wind.east_mps[0] == pytest.approx(-10 * 1852 / 3600)
    assert case.wind.north_mps[0] == pytest.approx(0.0, abs=1e-12)
    assert case.polar.mass_kg == 750  # Derived: the record's maximum is the default
    assert case.polar.best_glide_eas_mps == pytest.approx(68 * 1852 / 3600)


def test_a_null_or_absent_margin_means_its_default_also_in_part() -> None:
    usual = Margins()
    assert convert.margins_of(None) == usual
    assert convert.margins_of(MarginsRequest()) == usual
    given = dict.fromkeys(MarginsRequest.model_fields)
    part = convert.margins_of(MarginsRequest.model_validate({**given, "bank_deg": 45}))
    assert part.bank_rad == pytest.approx(radians(45))
    assert part.ratio_factor == usual.ratio_factor
    assert part.reaction_s is None


def test_neutral_margins_by_name_are_neutral() -> None:
    neutral = {"ratio_factor": 1, "wind_error_kt": 0, "reaction_s": 0, "bank_deg": 30,
               "clearance_ft": 0, "arrival_height_ft": 0, "downdraft_fpm": 0,
               "excess_speed_credit": 0}  # fmt: skip
    found = convert.margins_of(MarginsRequest.model_validate(neutral))
    wanted = Margins.neutral()
    assert found.bank_rad == pytest.approx(wanted.bank_rad)
    assert found.ratio_factor == 1.0
    for name in ("wind_error_mps", "reaction_s", "clearance_m", "arrival_height_m"):
        assert getattr(found, name) == 0.0


def test_margins_go_to_si_and_back() -> None:
    given = {"ratio_factor": 0.8, "wind_error_kt": 7.5, "reaction_s": 6, "bank_deg": 25,
             "clearance_ft": 150, "arrival_height_ft": 800, "downdraft_fpm": 120,
             "excess_speed_credit": 0.25}  # fmt: skip
    margins = convert.margins_of(MarginsRequest.model_validate(given))
    assert convert.margins_json(margins, 10.0) == pytest.approx(given)
    assert margins.downdraft_mps == pytest.approx(120 * 0.3048 / 60)  # Derived: ft/min to m/s


def test_margins_below_their_default_are_named() -> None:
    usual = Margins()
    assert margins_below_default(usual, 10.0, 95.0) == {}
    weak = Margins(ratio_factor=1.0, wind_error_mps=0.0, reaction_s=4.0, bank_rad=radians(45),
                   clearance_m=30.0, arrival_height_m=100.0, excess_speed_credit=0.5)  # fmt: skip
    found = margins_below_default(weak, 10.0, 95.0)
    assert list(found) == ["ratio_factor", "wind_error_kt", "reaction_s", "bank_deg",
                           "clearance_ft", "arrival_height_ft", "excess_speed_credit"]  # fmt: skip
    assert "45 degrees instead of 30 degrees" in found["bank_deg"]
    assert "180 degree turn" in found["arrival_height_ft"]
    strong = Margins(0.8, 10.0, 12.0, radians(20), 100.0, 400.0, 1.0, 0.0)
    assert margins_below_default(strong, 10.0, 95.0) == {}


def test_the_default_arrival_height_is_named_where_a_turn_needs_more() -> None:
    # Derived: 250 m for the turn plus 200 ft (61 m) is more than 1000 ft (305 m)
    found = margins_below_default(Margins(), 10.0, 250.0)
    assert list(found) == ["arrival_height_ft"]
    assert "1020 ft" in found["arrival_height_ft"]  # Derived: 250 / 0.3048 + 200


def test_records_by_id_and_inline(records: Any, tmp_path: Path) -> None:
    import tomllib

    record = tomllib.loads((write_data(tmp_path) / "aircraft/test-two.toml").read_text())
    inline = convert.record_of(record, records)
    assert inline.polar() == records["test-two"].polar()
    record["glide"]["ratio"] = 71
    with pytest.raises(RecordError) as caught:
        convert.record_of(record, records)
    assert caught.value.field == "aircraft.glide.ratio"
    with pytest.raises(RecordError) as caught:
        convert.record_of("none", records)
    assert caught.value.allowed == "test-two"


def test_wind_levels_at_one_altitude_are_refused(records: Any) -> None:
    level = {"altitude_ft": 0, "from_deg": 90, "speed_kt": 10}
    with pytest.raises(InputError):
        convert.case_of(request(wind=[level, level]), records["test-two"])


def test_the_speed_at_failure_is_at_most_half_again_the_fastest_glide(records: Any) -> None:
    # Derived: the record's fastest glide is 110 kt
    convert.case_of(request(speed_at_failure_kt=165), records["test-two"])
    with pytest.raises(InputError, match=r"1\.5 times") as caught:
        convert.case_of(request(speed_at_failure_kt=166), records["test-two"])
    assert (caught.value.field, caught.value.allowed) == ("speed_at_failure_kt", "1 to 165 kt")


def area_json(area: MultiPolygon) -> dict[str, Any]:
    found = convert.geometry_json(area)
    assert found is not None
    document = json.loads(convert.encode(found))
    assert validate_structure(document) == {}
    # Source: RFC 7946, sections 3.1.6 and 5.2, as that library checks them
    assert validate_geometries(document)["invalid"] == {}
    return document


def test_areas_are_valid_right_handed_and_rounded() -> None:
    outer = box(9.123456789, 45.0, 9.2, 45.1)
    clockwise = Polygon(list(outer.exterior.coords)[::-1], [box(9.15, 45.05, 9.16, 45.06).exterior])
    found = area_json(MultiPolygon([clockwise]))
    assert found["type"] == "Polygon"
    area = shape(found)
    assert area.exterior.is_ccw  # Source: RFC 7946, section 3.1.6, right-hand rule
    assert not area.interiors[0].is_ccw
    # Derived: 6 decimals of a degree are at most 0.06 m from the place
    assert found["coordinates"][0][0][0] in (9.123457, 9.2)
    two = area_json(MultiPolygon([box(0, 0, 1, 1), box(2, 2, 3, 3)]))
    assert two["type"] == "MultiPolygon"
    assert convert.geometry_json(MultiPolygon()) is None


def test_rounding_never_leaves_a_broken_ring() -> None:
    sliver = Polygon([(0, 0), (1, 0), (1, 1), (0.5, 2e-7), (0, 1)])  # nearly touches its base
    rounded = convert.rounded(MultiPolygon([sliver]))
    assert rounded.is_valid
    assert rounded.area == pytest.approx(sliver.area, abs=1e-5)  # rounding moves 1e-6 deg a side
    assert shapely.get_num_geometries(rounded) >= 1


def test_a_number_that_is_not_finite_is_never_encoded() -> None:
    with pytest.raises(ValueError, match="JSON"):
        convert.encode({"a": float("nan")})
