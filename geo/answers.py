"""What the solver answers: paths, places, sites and the figures behind the picture. SI inside."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class PathPoint:
    """One point of a flown path.

    `kind` is ``start``, ``turn_start``, ``turn_end`` or ``end``. Between a ``turn_start`` and the
    next ``turn_end`` the aeroplane turns at `bank_rad` through `turn_rad` (positive to the right,
    measured in the air heading); otherwise it flies straight over the ground. Altitudes are those
    of the model, margins included [m above mean sea level].
    """

    lon_deg: float
    lat_deg: float
    x_m: float
    y_m: float
    alt_m: float
    kind: str
    bank_rad: float = 0.0
    turn_rad: float = 0.0


@dataclass(frozen=True)
class GlidePath:
    """The path behind one cell.

    Parameters
    ----------
    points
        From the failure to the place, altitudes falling.
    claimed_alt_m
        Altitude that the answer claims over the place [m]; never above the last point's.
    bends
        Turns after the first.
    line
        The same path for drawing, arcs included: (longitude [deg], latitude [deg], altitude [m]).
    """

    points: tuple[PathPoint, ...]
    claimed_alt_m: float
    bends: int
    line: tuple[tuple[float, float, float], ...] = ()


@dataclass(frozen=True)
class Ridge:
    """Where the straight glide meets the clearance."""

    lon_deg: float
    lat_deg: float
    elevation_m: float
    short_m: float
    distance_m: float


@dataclass(frozen=True)
class Explanation:
    """Why a place is in or out of range.

    `code` is one of ``within_range height ridge wind reserve void no_room off_terrain``.
    `surplus_m` is the height above ground plus arrival height [m], None where no path arrives.
    """

    within_range: bool
    code: str
    text: str
    by: str | None
    alt_m: float | None
    ground_m: float | None
    surplus_m: float | None
    ridge: Ridge | None = None


@dataclass(frozen=True)
class ProfilePoint:
    """One point of a section: along [m], place [deg], heights [m above mean sea level]."""

    along_m: float
    lon_deg: float
    lat_deg: float
    ground_m: float | None
    required_m: float | None
    glide_m: float | None


@dataclass(frozen=True)
class SiteReach:
    """A landing site seen from the failure: distances [m], bearing [rad], surplus [m]."""

    site_id: str
    name: str
    in_range: bool
    surplus_m: float | None
    bearing_rad: float
    distance_m: float
    note: str | None
