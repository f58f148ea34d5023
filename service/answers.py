"""The shapes of the answers, for the OpenAPI document and the tests. Every number is finite."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, FiniteFloat

from service.schemas import FootprintRequest, SectionRequest

Place = Annotated[
    list[FiniteFloat], Field(min_length=2, max_length=2, description="[lon, lat], WGS 84 [deg].")
]


class Answer(BaseModel):
    """An answer object: it has these members and no others."""

    model_config = ConfigDict(extra="forbid")


class Polygon(Answer):
    """A GeoJSON polygon (RFC 7946, section 3.1.6)."""

    type: Literal["Polygon"]
    coordinates: list[list[Place]]


class MultiPolygon(Answer):
    """A GeoJSON multipolygon (RFC 7946, section 3.1.7)."""

    type: Literal["MultiPolygon"]
    coordinates: list[list[list[Place]]]


class AreaProperties(Answer):
    """What an area is, and how large [km2]."""

    kind: Literal["footprint", "straight"]
    area_km2: Annotated[FiniteFloat, Field(ge=0)]


class AreaFeature(Answer):
    """Ground within modelled range: by any path, or by one straight glide."""

    type: Literal["Feature"]
    geometry: Polygon | MultiPolygon | None
    properties: AreaProperties


class GlideNumbers(Answer):
    """The numbers behind the picture, at the failure altitude."""

    best_glide_eas_kt: FiniteFloat
    speed_eas_kt: FiniteFloat
    ratio_record: FiniteFloat
    ratio_used: FiniteFloat
    sink_fpm: FiniteFloat
    turn_180_loss_ft: FiniteFloat


class Range(Answer):
    """The farthest place within modelled range on one true bearing."""

    bearing_deg: FiniteFloat
    distance_nm: FiniteFloat


class SiteInReach(Answer):
    """A landing site as seen from the failure."""

    id: str
    name: str
    in_range: bool
    surplus_ft: FiniteFloat | None
    bearing_deg: FiniteFloat
    distance_nm: FiniteFloat
    note: str | None


class Source(Answer):
    """A terrain file: name, box [deg], post spacing [m], origin."""

    file: str
    bbox: Annotated[list[FiniteFloat], Field(min_length=4, max_length=4)]
    cell_m: FiniteFloat
    source: str | None
    date: str | None
    vertical_datum: str | None
    vertical_unit: str | None


class FootprintAnswer(Answer):
    """A GeoJSON FeatureCollection with one feature of each kind, and foreign members."""

    type: Literal["FeatureCollection"]
    features: Annotated[list[AreaFeature], Field(min_length=2, max_length=2)]
    detail: Literal["fine", "coarse"]
    cell_m: FiniteFloat
    glide: GlideNumbers
    ranges: list[Range]
    straight_ranges: list[Range]
    sites: list[SiteInReach]
    inputs: FootprintRequest
    data: list[Source]
    margins_below_default: list[str]
    limits: list[str]


class RidgeInWay(Answer):
    """Where the straight glide meets the clearance."""

    position: Place
    elevation_ft: FiniteFloat | None
    short_ft: FiniteFloat | None
    distance_nm: FiniteFloat


class Reason(Answer):
    """Why the place is in or out of range."""

    code: Literal[
        "within_range", "height", "ridge", "wind", "reserve", "void", "no_room", "off_terrain"
    ]
    text: str
    ridge: RidgeInWay | None


class Along(Answer):
    """One point of a section; heights above mean sea level [ft], null where unknown."""

    along_nm: FiniteFloat
    position: Place
    ground_ft: FiniteFloat | None
    required_ft: FiniteFloat | None
    glide_ft: FiniteFloat | None


class PathLine(Answer):
    """A GeoJSON line (RFC 7946, section 3.1.4); the third coordinate is the altitude [m]."""

    type: Literal["LineString"]
    coordinates: list[list[FiniteFloat]]


class Bend(Answer):
    """A turn on the path; positive to the right."""

    position: Place
    altitude_ft: FiniteFloat | None
    bank_deg: FiniteFloat
    turn_deg: FiniteFloat


class PathProperties(Answer):
    """Length and turns of a path."""

    length_nm: FiniteFloat
    bends: list[Bend]


class PathFeature(Answer):
    """The path behind the answer."""

    type: Literal["Feature"]
    geometry: PathLine
    properties: PathProperties


class SectionAnswer(Answer):
    """One place: whether, how and why it is in or out of modelled range."""

    to: Place
    bearing_deg: FiniteFloat
    distance_nm: FiniteFloat
    within_range: bool
    by: Literal["straight", "bent"] | None
    surplus_ft: FiniteFloat | None
    arrival_altitude_ft: FiniteFloat | None
    ground_ft: FiniteFloat | None
    reason: Reason
    profile: Annotated[list[Along], Field(max_length=400)]
    path: PathFeature | None
    path_profile: Annotated[list[Along], Field(max_length=400)] | None
    inputs: SectionRequest
    data: list[Source]
    margins_below_default: list[str]
    limits: list[str]


class CatalogAircraft(Answer):
    """An aircraft record; best glide at maximum mass, first propeller state and configuration."""

    id: str
    name: str
    mass_min_kg: FiniteFloat
    mass_max_kg: FiniteFloat
    propeller: list[str]
    configuration: list[str]
    best_glide_eas_kt: FiniteFloat
    ratio: FiniteFloat


class MarginRange(Answer):
    """Default and bounds of a margin; a null default depends on the height above ground."""

    default: FiniteFloat | None
    minimum: FiniteFloat
    maximum: FiniteFloat
    less_safe: Literal["above", "below"]
    text: str


class CatalogAnswer(Answer):
    """What this service has: aeroplanes, landing sites, terrain, margins, limits."""

    aircraft: list[CatalogAircraft]
    sites: dict[str, Any]
    terrain: list[Source]
    margins: dict[str, MarginRange]
    limits: list[str]


class HealthAnswer(Answer):
    """The service is up; how many solves run and wait."""

    status: Literal["ok"]
    solving: int
    waiting: int


class ProblemError(Answer):
    """One faulty field: RFC 6901 pointer, what is wrong, what is allowed."""

    pointer: str
    detail: str
    allowed: str | None


class Problem(Answer):
    """A problem (RFC 9457)."""

    type: str
    title: str
    status: int
    detail: str
    errors: list[ProblemError]
