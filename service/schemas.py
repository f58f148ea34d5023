"""Requests as other programs write them: aviation units, every number bounded and finite."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, WithJsonSchema
from pydantic_core import PydanticCustomError

from service.record_schema import RECORD
from service.settings import (
    ALTITUDE_MAX_FT,
    ALTITUDE_MIN_FT,
    LATITUDE_MAX_DEG,
    WIND_LEVELS_MAX,
    WIND_MAX_KT,
)

RECORD_ID_PATTERN = r"^[a-z0-9][a-z0-9_-]{0,63}$"


def _number(ge: float, le: float, description: str) -> Any:
    """Return a field that takes a finite number within bounds, and no text or truth value."""
    return Field(ge=ge, le=le, strict=True, allow_inf_nan=False, description=description)


Longitude = Annotated[float, _number(-180, 180, "Longitude, WGS 84 [deg].")]
Latitude = Annotated[float, _number(-LATITUDE_MAX_DEG, LATITUDE_MAX_DEG, "Latitude, WGS 84 [deg].")]
Position = Annotated[
    tuple[Longitude, Latitude], Field(description="Longitude and latitude, WGS 84 [deg].")
]
Altitude = Annotated[
    float,
    _number(ALTITUDE_MIN_FT, ALTITUDE_MAX_FT, "True height above mean sea level [ft]."),
]
Bearing = Annotated[float, _number(0, 360, "Clockwise from true north [deg].")]
StateName = Annotated[
    str, Field(min_length=1, max_length=64, description="One of the record's states.")
]


def _record_or_id(value: Any) -> Any:
    """Take a record's id or the record itself; perf checks the record's own fields."""
    if isinstance(value, str) and 1 <= len(value) <= 64:
        return value
    if isinstance(value, dict):
        return value
    raise PydanticCustomError("aircraft_type", "Neither a record's id nor a record.")


Aircraft = Annotated[
    Any,
    AfterValidator(_record_or_id),
    WithJsonSchema(
        {
            "anyOf": [
                {"type": "string", "minLength": 1, "maxLength": 64},
                RECORD,
            ],
            "description": "The id of a record in the catalog, or a whole record.",
        }
    ),
]


class Closed(BaseModel):
    """A request object: unknown fields are refused."""

    model_config = ConfigDict(extra="forbid")


class WindLevel(Closed):
    """The wind at one true altitude."""

    altitude_ft: Annotated[float, _number(-1500, 100_000, "True height of the level [ft].")]
    from_deg: Annotated[float, _number(0, 360, "True direction the wind blows from [deg].")]
    speed_kt: Annotated[float, _number(0, WIND_MAX_KT, "Wind speed [kt].")]


class MarginsRequest(Closed):
    """Margins of the glide; null or absent means the default."""

    ratio_factor: (
        Annotated[float, _number(0.3, 1, "Share of the record's glide ratio that is used.")] | None
    ) = None
    wind_error_kt: (
        Annotated[float, _number(0, 60, "Taken off every track's ground speed [kt].")] | None
    ) = None
    reaction_s: (
        Annotated[
            float,
            _number(0, 60, "Flown straight on first [s]; default 4, or 10 from 1000 ft up."),
        ]
        | None
    ) = None
    bank_deg: Annotated[float, _number(5, 60, "Bank in turns [deg].")] | None = None
    clearance_ft: (
        Annotated[float, _number(0, 5000, "Height kept above the surface on the way [ft].")] | None
    ) = None
    arrival_height_ft: (
        Annotated[float, _number(0, 10_000, "Height above the place on arrival [ft].")] | None
    ) = None
    downdraft_fpm: (
        Annotated[float, _number(0, 2000, "Sinking of the air everywhere [ft/min].")] | None
    ) = None
    excess_speed_credit: (
        Annotated[float, _number(0, 0.5, "Share of the excess speed that is credited.")] | None
    ) = None


class FootprintRequest(Closed):
    """One engine failure: position, true altitude and aeroplane; everything else has a default."""

    position: Position
    altitude_ft: Altitude
    aircraft: Aircraft
    track_deg: Bearing | None = Field(
        default=None, description="True track at failure [deg]; null means any heading."
    )
    mass_kg: Annotated[float, _number(1, 1_000_000, "Mass [kg]; default the maximum.")] | None = (
        None
    )
    propeller: StateName | None = None
    configuration: StateName | None = None
    speed_policy: Literal["manual", "wind"] = Field(
        default="manual",
        description="Fly the record's best-glide speed, or the one that loses least in this wind.",
    )
    speed_at_failure_kt: (
        Annotated[float, _number(1, 600, "Equivalent airspeed at failure [kt]; null = glide.")]
        | None
    ) = None
    wind: list[WindLevel] = Field(
        default_factory=list,
        max_length=WIND_LEVELS_MAX,
        description="Wind by level, in any order; empty means calm.",
    )
    isa_offset_c: Annotated[float, _number(-80, 60, "Temperature above standard [C].")] = 0.0
    qnh_hpa: Annotated[float, _number(850, 1090, "Pressure at mean sea level [hPa].")] = 1013.25
    detail: Literal["fine", "coarse"] = Field(
        default="fine", description="Coarse is for dragging: cells four times as wide."
    )
    margins: MarginsRequest | None = None


class SectionRequest(FootprintRequest):
    """A footprint request, and the place asked about: `to`, or `bearing_deg`, not both."""

    to: Position | None = Field(default=None, description="The place asked about.")
    bearing_deg: Bearing | None = Field(
        default=None,
        description="Instead of a place: true bearing [deg], to a tenth beyond the range there.",
    )
