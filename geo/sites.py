"""Landing sites: read from GeoJSON files, held in SI, given back in the schema of the files.

A site is a GeoJSON feature (RFC 7946) whose properties are `id, name, kind, status, elevation_ft,
length_ft, width_ft, surface, slope_pct, lit, arrival_height_ft, source, survey_date, review_due`.
The first four are required; null or absent means unknown, and unknown stays None.
"""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from datetime import date
from pathlib import Path
from typing import Any, NoReturn

from pyproj import Geod
from shapely.geometry import LineString, MultiPolygon, Point, Polygon, mapping
from shapely.geometry.base import BaseGeometry
from shapely.geometry.polygon import orient

from geo.case import FT_M
from perf.errors import InputError

KINDS = ("aerodrome", "strip", "field", "water")
STATUSES = ("open", "private", "disused", "surveyed", "candidate")
MAX_FILE_BYTES = 8_000_000
MAX_DEPTH = 32
MAX_POSITIONS = 10_000  # of one site
MAX_TEXT = 200
RUNWAY_M = (20.0, 10_000.0)  # threshold to threshold

_WGS84 = Geod(ellps="WGS84")
_TOKEN = re.compile(r'\\.|["\[\]{}]', re.DOTALL)
_CONTROL = re.compile(r"[\x00-\x1f\x7f]")


@dataclass(frozen=True)
class Site:
    """One landing site. None means unknown, and unknown is never treated as good.

    Parameters
    ----------
    site_id, name
        Unique id, and the name shown.
    kind
        One of `KINDS`.
    status
        One of `STATUSES`.
    lon, lat
        The point itself, the middle of the runway, or a point inside the area [deg, WGS 84].
    elevation_m
        Above mean sea level [m].
    length_m, width_m
        Of the landing surface [m].
    surface
        What one lands on, in words.
    slope_pct
        Rise from the first threshold to the second [percent].
    lit
        Whether there are lights.
    arrival_height_m
        The site's own arrival height [m above the site].
    source, survey_date, review_due
        Where the figures come from, when they were taken and when to look again (ISO 8601).
    geometry
        Point, LineString from threshold to threshold, Polygon or MultiPolygon.
    """

    site_id: str
    name: str
    kind: str
    status: str
    lon: float
    lat: float
    elevation_m: float | None
    length_m: float | None
    width_m: float | None
    surface: str | None
    slope_pct: float | None
    lit: bool | None
    arrival_height_m: float | None
    source: str | None
    survey_date: str | None
    review_due: str | None
    geometry: BaseGeometry = field(compare=False, hash=False)


class _FeatureError(Exception):
    """What is wrong with a feature: its member and the allowed values."""


def _refuse(member: str, allowed: str) -> NoReturn:
    raise _FeatureError(member, allowed)


def _number(low: float, high: float) -> Callable[[str, Any], float]:
    """Return a reader of numbers within [low, high]."""

    def read(member: str, value: Any) -> float:
        good = isinstance(value, int | float) and not isinstance(value, bool)
        if not good or not low <= value <= high:
            _refuse(member, f"a number from {low:g} to {high:g}, or null")
        return float(value)

    return read


def _feet(low: float, high: float) -> Callable[[str, Any], float]:
    """Return a reader of feet within [low, high] that gives metres."""
    read = _number(low, high)
    return lambda member, value: read(member, value) * FT_M


def _text(member: str, value: Any) -> str:
    """Read a short line of text."""
    good = isinstance(value, str) and 0 < len(value) <= MAX_TEXT and not _CONTROL.search(value)
    if not good or not value.strip():
        _refuse(member, f"one line of 1 to {MAX_TEXT} characters")
    return str(value)


def _choice(allowed: tuple[str, ...]) -> Callable[[str, Any], str]:
    """Return a reader of one of the given words."""

    def read(member: str, value: Any) -> str:
        if not isinstance(value, str) or value not in allowed:
            _refuse(member, "one of " + ", ".join(allowed))
        return value

    return read


def _flag(member: str, value: Any) -> bool:
    """Read true or false."""
    if not isinstance(value, bool):
        _refuse(member, "true, false or null")
    return value


def _day(member: str, value: Any) -> str:
    """Read a calendar date."""
    if isinstance(value, str) and re.fullmatch(r"[0-9]{4}-[0-9]{2}-[0-9]{2}", value):
        try:
            return date.fromisoformat(value).isoformat()
        except ValueError:
            pass
    _refuse(member, "a date as YYYY-MM-DD, or null")


# Schema name -> (field of Site, reader). Ranges take in every landing surface on Earth.
_REQUIRED: dict[str, tuple[str, Callable[[str, Any], Any]]] = {
    "id": ("site_id", _text),
    "name": ("name", _text),
    "kind": ("kind", _choice(KINDS)),
    "status": ("status", _choice(STATUSES)),
}
_OPTIONAL: dict[str, tuple[str, Callable[[str, Any], Any]]] = {
    "elevation_ft": ("elevation_m", _feet(-1500.0, 30_000.0)),
    "length_ft": ("length_m", _feet(1.0, 100_000.0)),
    "width_ft": ("width_m", _feet(1.0, 100_000.0)),
    "surface": ("surface", _text),
    "slope_pct": ("slope_pct", _number(-40.0, 40.0)),
    "lit": ("lit", _flag),
    "arrival_height_ft": ("arrival_height_m", _feet(0.0, 20_000.0)),
    "source": ("source", _text),
    "survey_date": ("survey_date", _day),
    "review_due": ("review_due", _day),
}
PROPERTY_NAMES = (*_REQUIRED, *_OPTIONAL)


def _properties(given: Any) -> dict[str, Any]:
    """Return the fields of a site from the properties of its feature."""
    if not isinstance(given, dict):
        _refuse("properties", "an object")
    if not given.keys() <= set(PROPERTY_NAMES):
        _refuse("properties", "only " + ", ".join(PROPERTY_NAMES))
    fields: dict[str, Any] = {}
    for name, (key, read) in _REQUIRED.items():
        fields[key] = read(f"properties.{name}", given.get(name))
    for name, (key, read) in _OPTIONAL.items():
        value = given.get(name)
        fields[key] = None if value is None else read(f"properties.{name}", value)
    return fields


def _position(value: Any) -> tuple[float, float]:
    """Return longitude and latitude [deg]; a third number is dropped."""
    if isinstance(value, list) and len(value) in (2, 3):
        number = [isinstance(v, int | float) and not isinstance(v, bool) for v in value]
        if all(number) and -180 <= value[0] <= 180 and -90 <= value[1] <= 90:
            return float(value[0]), float(value[1])
    _refuse("geometry.coordinates", "longitude -180 to 180, latitude -90 to 90")


def _positions(value: Any, at_least: int) -> list[tuple[float, float]]:
    """Return a list of positions."""
    if not isinstance(value, list) or not at_least <= len(value) <= MAX_POSITIONS:
        _refuse("geometry.coordinates", f"{at_least} to {MAX_POSITIONS} positions")
    return [_position(item) for item in value]


def _line(coordinates: Any) -> LineString:
    """Return a runway from threshold to threshold."""
    ends = _positions(coordinates, 2)
    if len(ends) != 2:
        _refuse("geometry.coordinates", "two positions, threshold to threshold")
    length_m = _WGS84.inv(*ends[0], *ends[1])[2]
    if not RUNWAY_M[0] <= length_m <= RUNWAY_M[1]:
        _refuse("geometry.coordinates", "thresholds 20 m to 10 km apart")
    return LineString(ends)


def _polygon(coordinates: Any) -> Polygon:
    """Return a valid area with its outer ring anticlockwise."""
    if not isinstance(coordinates, list) or not 1 <= len(coordinates) <= MAX_POSITIONS:
        _refuse("geometry.coordinates", "one ring or more")
    rings = [_positions(ring, 4) for ring in coordinates]
    closed = all(ring[0] == ring[-1] for ring in rings)
    if not closed or sum(len(ring) for ring in rings) > MAX_POSITIONS:
        _refuse("geometry.coordinates", f"closed rings, at most {MAX_POSITIONS} positions in all")
    area = Polygon(rings[0], rings[1:])
    if not area.is_valid or area.area <= 0.0:
        _refuse("geometry.coordinates", "rings that do not cross and enclose an area")
    return orient(area)


def _areas(coordinates: Any) -> MultiPolygon:
    """Return several areas that do not overlap, as of a site cut at 180 degrees."""
    if not isinstance(coordinates, list) or not 1 <= len(coordinates) <= 100:
        _refuse("geometry.coordinates", "1 to 100 polygons")
    areas = MultiPolygon([_polygon(part) for part in coordinates])
    if not areas.is_valid:
        _refuse("geometry.coordinates", "polygons that do not overlap")
    return areas


_GEOMETRIES: dict[str, Callable[[Any], BaseGeometry]] = {
    "Point": lambda coordinates: Point(_position(coordinates)),
    "LineString": _line,
    "Polygon": _polygon,
    "MultiPolygon": _areas,
}


def _geometry(given: Any) -> BaseGeometry:
    """Return the shape of a site."""
    kind = given.get("type") if isinstance(given, dict) else None
    if not isinstance(kind, str) or kind not in _GEOMETRIES:
        _refuse("geometry.type", "one of " + ", ".join(_GEOMETRIES))
    return _GEOMETRIES[kind](given.get("coordinates"))


def _representative(geometry: BaseGeometry) -> tuple[float, float]:
    """Return the point that stands for a shape, longitude and latitude [deg]."""
    if isinstance(geometry, LineString):
        (lon, lat), (lon_1, lat_1) = geometry.coords
        # The middle of the geodesic, so that a runway across 180 degrees keeps its place.
        middle = _WGS84.npts(lon, lat, lon_1, lat_1, 1)[0]
        return float(middle[0]), float(middle[1])
    point = geometry.representative_point()
    return float(point.x), float(point.y)


def _site(feature: Any) -> Site:
    """Return the site that a feature describes."""
    if not isinstance(feature, dict) or feature.get("type") != "Feature":
        _refuse("type", "Feature")
    fields = _properties(feature.get("properties"))
    geometry = _geometry(feature.get("geometry"))
    lon, lat = _representative(geometry)
    return Site(**fields, lon=lon, lat=lat, geometry=geometry)


def _too_deep(text: str) -> bool:
    """Tell whether brackets outside strings nest deeper than the limit."""
    depth, in_string = 0, False
    for match in _TOKEN.finditer(text):
        token = match.group()
        if token == '"':
            in_string = not in_string
        elif not in_string and len(token) == 1:
            depth += 1 if token in "[{" else -1
            if depth > MAX_DEPTH:
                return True
    return False


def _no_constant(_: str) -> NoReturn:
    raise ValueError


def _features(path: Path) -> list[Any]:
    """Return the features of a file, or raise `InputError` that names the file."""
    field_name = f"sites/{path.name}"
    try:
        with path.open("rb") as file:
            raw = file.read(MAX_FILE_BYTES + 1)
        if len(raw) > MAX_FILE_BYTES:
            allowed = f"at most {MAX_FILE_BYTES} bytes"
            raise InputError(f"The sites file {path.name} is too large.", field_name, allowed)
        text = raw.decode("utf-8-sig")
        if _too_deep(text):
            allowed = f"at most {MAX_DEPTH} levels"
            raise InputError(
                f"The sites file {path.name} is nested too deeply.", field_name, allowed
            )
        top = json.loads(text, parse_constant=_no_constant)
    except (OSError, ValueError, RecursionError) as error:
        raise InputError(
            f"The sites file {path.name} cannot be read as JSON.", field_name, "UTF-8 GeoJSON"
        ) from error
    features = top.get("features") if isinstance(top, dict) else None
    if not isinstance(features, list) or top.get("type") != "FeatureCollection":
        raise InputError(
            f"The sites file {path.name} is no FeatureCollection.", field_name, "RFC 7946"
        )
    if "crs" in top and "CRS84" not in json.dumps(top["crs"]):
        raise InputError(
            f"The sites file {path.name} is not in WGS 84.", field_name, "longitude and latitude"
        )
    return features


def load_sites(folder: Path) -> tuple[Site, ...]:
    """Return the landing sites in `folder`/sites/*.geojson; no such folder means no sites.

    Parameters
    ----------
    folder
        The data folder.

    Raises
    ------
    InputError
        A file or feature is faulty, or an id comes twice; names the file and the feature's index.
    """
    sites: dict[str, Site] = {}
    paths = sorted(Path(folder).glob("sites/*.geojson"))
    for path in (path for path in paths if path.is_file()):  # a pipe would be waited for
        for index, feature in enumerate(_features(path)):
            where = f"sites/{path.name}#features[{index}]"
            try:
                site = _site(feature)
            except _FeatureError as fault:
                member, allowed = fault.args
                raise InputError(
                    f"Feature {index} of the sites file {path.name} is faulty at {member}.",
                    f"{where}.{member}",
                    allowed,
                ) from None
            if site.site_id in sites:
                raise InputError(
                    f"Feature {index} of the sites file {path.name} repeats an id.",
                    f"{where}.properties.id",
                    "an id that no other site has",
                )
            sites[site.site_id] = site
    return tuple(sites.values())


def _listed(value: Any) -> Any:
    """Return nested tuples as nested lists."""
    return [_listed(item) for item in value] if isinstance(value, Sequence) else value


def _schema_value(name: str, value: Any) -> Any:
    """Return a field's value in the schema's unit, free of the noise of conversion."""
    if not name.endswith("_ft") or value is None:
        return value
    feet = round(value / FT_M, 6)
    return int(feet) if feet.is_integer() else feet


def sites_feature_collection(sites: Iterable[Site]) -> dict[str, Any]:
    """Return sites as a GeoJSON FeatureCollection with the schema's property names."""
    table = {**_REQUIRED, **_OPTIONAL}
    features = []
    for site in sites:
        shape = mapping(site.geometry)
        geometry = {"type": shape["type"], "coordinates": _listed(shape["coordinates"])}
        properties = {
            name: _schema_value(name, getattr(site, key)) for name, (key, _) in table.items()
        }
        features.append({"type": "Feature", "geometry": geometry, "properties": properties})
    return {"type": "FeatureCollection", "features": features}
