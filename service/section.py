"""The answer about one place: ground, glide line and clearance along the way, and the reason."""

from __future__ import annotations

from collections.abc import Sequence
from math import degrees, isfinite
from typing import Any

from pyproj import Geod

from geo.answers import Explanation, GlidePath, ProfilePoint
from geo.case import FT_M, NM_M
from geo.footprint import Footprint
from perf.errors import InputError
from perf.record import AircraftRecord
from service.convert import COORDINATE_DIGITS, common_json
from service.schemas import SectionRequest

PROFILE_POINTS_MAX = 400
BEYOND = 1.1  # a bearing is followed to a tenth beyond the range there, to show what ends it
BEYOND_MIN_M = NM_M  # where nothing is in range, the first mile is shown
_GEOD = Geod(ellps="WGS84")


def check_target(request: SectionRequest) -> None:
    """Make sure that the request names a place or a bearing, not both.

    Raises
    ------
    InputError
        Neither or both are given.
    """
    if (request.to is None) == (request.bearing_deg is None):
        raise InputError("Give the place or a bearing, not both.", "to", "either to or bearing_deg")


def _feet(height_m: float | None, digits: int = 0) -> float | None:
    if height_m is None or not isfinite(height_m):
        return None
    return round(height_m / FT_M, digits)


def _place(lon_deg: float, lat_deg: float) -> list[float]:
    return [round(float(lon_deg), COORDINATE_DIGITS), round(float(lat_deg), COORDINATE_DIGITS)]


def target_of(request: SectionRequest, footprint: Footprint) -> tuple[float, float]:
    """Return the place asked about [deg]."""
    if request.to is not None:
        return request.to
    assert request.bearing_deg is not None
    bearing_deg = request.bearing_deg % 360.0
    apart = [
        (abs((degrees(bearing_rad) - bearing_deg + 180.0) % 360.0 - 180.0), distance_m)
        for bearing_rad, distance_m in footprint.ranges
    ]
    distance_m = max(min(apart)[1] * BEYOND, BEYOND_MIN_M) if apart else BEYOND_MIN_M
    lon, lat, _ = _GEOD.fwd(*request.position, bearing_deg, distance_m)
    return float(lon), float(lat)


def profile_json(points: Sequence[ProfilePoint]) -> list[dict[str, Any]]:
    """Return a profile of at most 400 points; the first and last are kept."""
    step = max(1, -(-len(points) // (PROFILE_POINTS_MAX - 1)))
    kept = list(points[::step])
    if points and kept[-1] is not points[-1]:
        kept.append(points[-1])
    return [
        {
            "along_nm": round(point.along_m / NM_M, 4),
            "position": _place(point.lon_deg, point.lat_deg),
            "ground_ft": _feet(point.ground_m, 1),
            "required_ft": _feet(point.required_m, 1),
            "glide_ft": _feet(point.glide_m, 1),
        }
        for point in kept
    ]


def reason_json(why: Explanation) -> dict[str, Any]:
    """Return why the place is in or out of range."""
    ridge = why.ridge
    return {
        "code": why.code,
        "text": why.text,
        "ridge": None
        if ridge is None
        else {
            "position": _place(ridge.lon_deg, ridge.lat_deg),
            "elevation_ft": _feet(ridge.elevation_m),
            "short_ft": _feet(ridge.short_m),
            "distance_nm": round(ridge.distance_m / NM_M, 2),
        },
    }


def path_json(path: GlidePath) -> dict[str, Any]:
    """Return the path as a GeoJSON LineString; the third coordinate is the altitude [m]."""
    points = path.points
    length_m = _GEOD.line_length([p.lon_deg for p in points], [p.lat_deg for p in points])
    return {
        "type": "Feature",
        "geometry": {
            "type": "LineString",
            "coordinates": [
                [*_place(point.lon_deg, point.lat_deg), round(float(point.alt_m), 1)]
                for point in points
            ],
        },
        "properties": {
            "length_nm": round(length_m / NM_M, 3),
            "bends": [
                {
                    "position": _place(point.lon_deg, point.lat_deg),
                    "altitude_ft": _feet(point.alt_m),
                    "bank_deg": round(degrees(point.bank_rad), 1),
                    "turn_deg": round(degrees(point.turn_rad), 1),
                }
                for point in points
                if point.kind == "turn_start"
            ],
        },
    }


def section_json(
    request: SectionRequest, record: AircraftRecord, footprint: Footprint
) -> dict[str, Any]:
    """Return the answer about the place."""
    lon, lat = target_of(request, footprint)
    why = footprint.explain(lon, lat)
    path = footprint.path_to(lon, lat)
    azimuth_deg, _, distance_m = _GEOD.inv(*request.position, lon, lat)
    return {
        "to": _place(lon, lat),
        "bearing_deg": round(azimuth_deg % 360.0, 2) % 360.0,
        "distance_nm": round(distance_m / NM_M, 3),
        "within_range": bool(why.within_range),
        "by": why.by,
        "surplus_ft": _feet(why.surplus_m),
        "arrival_altitude_ft": _feet(why.alt_m),
        "ground_ft": _feet(why.ground_m),
        "reason": reason_json(why),
        "profile": profile_json(footprint.section(lon, lat)),
        "path": None if path is None else path_json(path),
        "path_profile": None if path is None else profile_json(footprint.path_profile(path)),
        **common_json(request, record, footprint),
    }
