"""From a request in aviation units to a case in SI, and from the footprint to GeoJSON."""

from __future__ import annotations

import json
from collections.abc import Mapping
from math import degrees, radians
from typing import Any

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Polygon

from geo.answers import SiteReach
from geo.case import FT_M, KT_MPS, NM_M, REACTION_LOW_HEIGHT_M, GlideCase, Margins
from geo.footprint import Footprint
from geo.terrain_source import TerrainSource
from geo.wind import WindProfile
from perf.errors import InputError, RecordError
from perf.record import AircraftRecord, load_record
from service.cautions import CAUTIONS, margins_below_default
from service.schemas import FootprintRequest, MarginsRequest
from service.settings import FAILURE_SPEED_FACTOR

FPM_MPS = FT_M / 60.0  # foot per minute [m/s]
COORDINATE_DIGITS = 6  # 0.1 m
REACTION_LOW_S, REACTION_HIGH_S = 4.0, 10.0  # below and from 1000 ft above ground


def record_of(
    aircraft: str | Mapping[str, Any], records: Mapping[str, AircraftRecord]
) -> AircraftRecord:
    """Return the record that a request names or carries.

    Raises
    ------
    RecordError
        No record has that id, or the inline record is faulty; the field starts with `aircraft`.
    """
    if isinstance(aircraft, str):
        if aircraft not in records:
            allowed = ", ".join(sorted(records))
            raise RecordError("No aircraft record has this id.", "aircraft", allowed)
        return records[aircraft]
    try:
        return load_record(dict(aircraft))
    except RecordError as error:
        field = f"aircraft.{error.field}" if error.field else "aircraft"
        raise RecordError(error.detail, field, error.allowed) from None


def margins_of(request: MarginsRequest | None) -> Margins:
    """Return the margins in SI; null or absent means the default."""
    usual = Margins()
    if request is None:
        return usual

    def given(value: float | None, factor: float, default: float) -> float:
        return default if value is None else value * factor

    return Margins(
        ratio_factor=given(request.ratio_factor, 1.0, usual.ratio_factor),
        wind_error_mps=given(request.wind_error_kt, KT_MPS, usual.wind_error_mps),
        reaction_s=request.reaction_s,
        bank_rad=given(request.bank_deg, radians(1.0), usual.bank_rad),
        clearance_m=given(request.clearance_ft, FT_M, usual.clearance_m),
        arrival_height_m=given(request.arrival_height_ft, FT_M, usual.arrival_height_m),
        downdraft_mps=given(request.downdraft_fpm, FPM_MPS, usual.downdraft_mps),
        excess_speed_credit=given(request.excess_speed_credit, 1.0, usual.excess_speed_credit),
    )


def case_of(request: FootprintRequest, record: AircraftRecord) -> GlideCase:
    """Return the case in SI.

    Raises
    ------
    RecordError
        The record has no such mass, propeller state or configuration.
    InputError
        Two wind levels have the same altitude, or the speed at failure is beyond this aeroplane.
    """
    levels = [
        (level.altitude_ft * FT_M, radians(level.from_deg), level.speed_kt * KT_MPS)
        for level in request.wind
    ]
    failure_kt = request.speed_at_failure_kt
    fastest_kt = FAILURE_SPEED_FACTOR * record.maximum_speed_eas_mps / KT_MPS
    if failure_kt is not None and failure_kt > fastest_kt * (1.0 + 1e-9):
        raise InputError(
            f"The speed at failure is more than {FAILURE_SPEED_FACTOR:g} times the record's "
            "maximum glide speed.",
            "speed_at_failure_kt",
            f"1 to {fastest_kt:.6g} kt",
        )
    return GlideCase(
        lon_deg=request.position[0],
        lat_deg=request.position[1],
        alt_m=request.altitude_ft * FT_M,
        track_rad=None if request.track_deg is None else radians(request.track_deg),
        polar=record.polar(request.mass_kg, request.propeller, request.configuration),
        maximum_speed_eas_mps=record.maximum_speed_eas_mps,
        speed_policy=request.speed_policy,
        wind=WindProfile.from_levels(levels),
        isa_offset_k=request.isa_offset_c,
        qnh_pa=request.qnh_hpa * 100.0,
        margins=margins_of(request.margins),
        speed_eas_mps=None if failure_kt is None else failure_kt * KT_MPS,
        detail=request.detail,
    )


def reaction_default_s(footprint: Footprint) -> float:
    """Return the default reaction time at this height above ground [s]."""
    height_m = footprint.case.alt_m - footprint.ground_m
    return REACTION_LOW_S if height_m < REACTION_LOW_HEIGHT_M else REACTION_HIGH_S


def margins_json(margins: Margins, reaction_default_s: float) -> dict[str, float]:
    """Return margins in aviation units; a reaction time left open takes the default [s]."""
    reaction = reaction_default_s if margins.reaction_s is None else margins.reaction_s
    return {
        "ratio_factor": round(margins.ratio_factor, 6),
        "wind_error_kt": round(margins.wind_error_mps / KT_MPS, 6),
        "reaction_s": round(reaction, 6),
        "bank_deg": round(degrees(margins.bank_rad), 6),
        "clearance_ft": round(margins.clearance_m / FT_M, 6),
        "arrival_height_ft": round(margins.arrival_height_m / FT_M, 6),
        "downdraft_fpm": round(margins.downdraft_mps / FPM_MPS, 6),
        "excess_speed_credit": round(margins.excess_speed_credit, 6),
    }


def inputs_json(
    request: FootprintRequest, record: AircraftRecord, footprint: Footprint
) -> dict[str, Any]:
    """Return the whole request with its defaults filled in, and what was given as it was given.

    So the inputs, sent again, give the same answer to the last digit.
    """
    inputs = request.model_dump(mode="json")
    case = footprint.case
    if request.mass_kg is None:
        inputs["mass_kg"] = case.polar.mass_kg
    inputs["propeller"] = request.propeller or record.propeller_states[0]
    inputs["configuration"] = request.configuration or record.configurations[0]
    usual = margins_json(case.margins, reaction_default_s(footprint))
    given = request.margins.model_dump(exclude_none=True) if request.margins else {}
    inputs["margins"] = {**usual, **given}
    return inputs


def source_json(source: TerrainSource) -> dict[str, Any]:
    """Return where a terrain file comes from; its name only, never its folder."""
    return {
        "file": source.file,
        "bbox": [round(float(value), COORDINATE_DIGITS) for value in source.bbox],
        "cell_m": round(float(source.cell_m), 2),
        "source": source.source,
        "date": source.date,
        "vertical_datum": source.vertical_datum,
        "vertical_unit": source.vertical_unit,
    }


def rounded(area: MultiPolygon) -> MultiPolygon:
    """Return the area with its coordinates rounded to 6 decimals, still valid, right-handed."""
    if area.is_empty:
        return area
    near = shapely.transform(area, lambda points: np.round(points, COORDINATE_DIGITS))
    if not near.is_valid:
        near = shapely.set_precision(area, 10.0**-COORDINATE_DIGITS)
    parts = [part for part in shapely.get_parts(near) if isinstance(part, Polygon)]
    return MultiPolygon([shapely.orient_polygons(part) for part in parts if not part.is_empty])


def geometry_json(area: MultiPolygon) -> dict[str, Any] | None:
    """Return a GeoJSON Polygon or MultiPolygon (RFC 7946), or None for no area."""
    parts = shapely.get_parts(rounded(area))
    if len(parts) == 0:
        return None

    def ring(line: Any) -> list[list[float]]:
        points: list[list[float]] = np.round(
            shapely.get_coordinates(line), COORDINATE_DIGITS
        ).tolist()
        return points

    polygons = [[ring(part.exterior), *map(ring, part.interiors)] for part in parts]
    if len(polygons) == 1:
        return {"type": "Polygon", "coordinates": polygons[0]}
    return {"type": "MultiPolygon", "coordinates": polygons}


def site_json(reach: SiteReach) -> dict[str, Any]:
    """Return a landing site as seen from the failure."""
    surplus_m = reach.surplus_m
    return {
        "id": reach.site_id,
        "name": reach.name,
        "in_range": bool(reach.in_range),
        "surplus_ft": None if surplus_m is None else round(surplus_m / FT_M),
        "bearing_deg": round(degrees(reach.bearing_rad) % 360.0, 1) % 360.0,
        "distance_nm": round(reach.distance_m / NM_M, 2),
        "note": reach.note,
    }


def glide_json(footprint: Footprint) -> dict[str, float]:
    """Return the numbers behind the picture."""
    figures = footprint.figures
    return {
        "best_glide_eas_kt": round(figures.best_glide_eas_mps / KT_MPS, 1),
        "speed_eas_kt": round(figures.speed_eas_mps / KT_MPS, 1),
        "ratio_record": round(figures.ratio_record, 3),
        "ratio_used": round(figures.ratio_used, 3),
        "sink_fpm": round(figures.sink_mps / FPM_MPS),
        "turn_180_loss_ft": round(figures.turn_180_loss_m / FT_M),
    }


def common_json(
    request: FootprintRequest, record: AircraftRecord, footprint: Footprint
) -> dict[str, Any]:
    """Return what every answer states: inputs, data, limits, margins below their default."""
    weak = margins_below_default(
        footprint.case.margins, reaction_default_s(footprint), footprint.figures.turn_180_loss_m
    )
    return {
        "inputs": inputs_json(request, record, footprint),
        "data": [source_json(source) for source in footprint.sources],
        "margins_below_default": list(weak),
        "limits": list(dict.fromkeys([*weak.values(), *footprint.limits, *CAUTIONS])),
    }


def ranges_json(ranges: list[tuple[float, float]]) -> list[dict[str, float]]:
    """Return distances by bearing in aviation units."""
    return [
        {
            "bearing_deg": round(degrees(bearing_rad) % 360.0, 1),
            "distance_nm": round(distance_m / NM_M, 3),
        }
        for bearing_rad, distance_m in ranges
    ]


def footprint_json(
    request: FootprintRequest, record: AircraftRecord, footprint: Footprint
) -> dict[str, Any]:
    """Return the GeoJSON answer: one feature of each kind, and the foreign members."""

    def feature(kind: str, area: MultiPolygon, area_km2: float) -> dict[str, Any]:
        geometry = geometry_json(area)
        return {
            "type": "Feature",
            "geometry": geometry,
            "properties": {
                "kind": kind,
                "area_km2": round(float(area_km2), 3) if geometry else 0,
            },
        }

    return {
        "type": "FeatureCollection",
        "features": [
            feature("footprint", footprint.footprint, footprint.footprint_km2),
            feature("straight", footprint.straight, footprint.straight_km2),
        ],
        "detail": request.detail,
        "cell_m": round(float(footprint.cell_m), 3),
        "glide": glide_json(footprint),
        "ranges": ranges_json(footprint.ranges),
        "straight_ranges": ranges_json(footprint.straight_ranges),
        "sites": [site_json(reach) for reach in footprint.sites],
        **common_json(request, record, footprint),
    }


def encode(answer: Mapping[str, Any]) -> bytes:
    """Return JSON in UTF-8; a number that is not finite is a defect and raises ValueError."""
    text = json.dumps(answer, allow_nan=False, ensure_ascii=False, separators=(",", ":"))
    return text.encode("utf-8")
