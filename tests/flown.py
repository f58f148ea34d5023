"""Flies the paths behind a footprint's cells with the independent simulator and keeps the score."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import binary_dilation

from geo.answers import GlidePath
from geo.case import GlideCase
from geo.footprint import Footprint
from tests.simulator import Aeroplane, Air, Flight, fly
from tests.source_surface import LocalPlane, SourceSurface

Array = NDArray[np.float64]
FT_M = 0.3048
ALLOWED_M = 15.0 * FT_M  # an arrival may be this much below the claim (the customer's figure)
SHORT_LEG_M = 60.0  # two cells, about 2 s of flight
WORST_M = 50.0 * FT_M  # and none more than this


@dataclass(frozen=True)
class Result:
    """One flight against its claim: positive heights [m] are good."""

    label: str
    lon_deg: float
    lat_deg: float
    bends: int
    arrival_m: float  # arrival altitude less the altitude claimed
    clearance_m: float  # least height above the surface less the clearance
    clearance_lonlat: tuple[float, float]
    miss_m: float
    early_s: float  # by how much the path turns before the reaction time is over

    @property
    def is_false(self) -> bool:
        """Tell whether the claim was false."""
        return self.arrival_m < -ALLOWED_M or self.clearance_m < 0.0


@dataclass
class Score:
    """All flights of a test."""

    results: list[Result] = field(default_factory=list)
    near: int = 0

    def report(self) -> str:
        """Return the figures and the worst flights in words."""
        if not self.results:
            return "nothing flown"
        arrivals = np.array([r.arrival_m for r in self.results]) / FT_M
        gaps = np.array([r.clearance_m for r in self.results]) / FT_M
        bent = sum(r.bends > 0 for r in self.results)
        lines = [
            f"{len(self.results)} flown, {bent} on bent paths, {self.near} near an outline,"
            f" {sum(r.is_false for r in self.results)} false;"
            f" arrival against claim {arrivals.min():.1f} / {np.median(arrivals):.1f} ft"
            f" (worst / median), least clearance to spare {gaps.min():.1f} ft,"
            f" largest miss {max(r.miss_m for r in self.results):.0f} m,"
            f" {sum(r.early_s > 0.5 for r in self.results)} turn too early"
        ]
        worst = sorted(self.results, key=lambda r: min(r.arrival_m, r.clearance_m))[:8]
        worst += [result for result in self.results if result.miss_m > 60.0][:8]
        lines += [
            f"  {r.label}: {r.lon_deg:.5f} {r.lat_deg:.5f} bends {r.bends} arrival"
            f" {r.arrival_m / FT_M:.1f} ft, clearance {r.clearance_m / FT_M:.1f} ft at"
            f" {r.clearance_lonlat[0]:.5f} {r.clearance_lonlat[1]:.5f}, miss {r.miss_m:.0f} m"
            for r in worst
        ]
        return "\n".join(lines)


def legs_and_turns(path: GlidePath, plane: LocalPlane) -> tuple[Array, Array]:
    """Return a path as straight legs (m, 4) and the turns between them (m - 1, 2)."""
    points = path.points
    lonlat = np.array([(p.lon_deg, p.lat_deg) for p in points])
    x, y = plane.to_xy(lonlat[:, 0], lonlat[:, 1])
    legs: list[tuple[float, float, float, float]] = []
    turns: list[tuple[float, float]] = []
    begun = 0
    for i, point in enumerate(points):
        if point.kind == "turn_start":
            legs.append((x[begun], y[begun], x[i], y[i]))
            after = points[i + 1]
            bank, turn = point.bank_rad or after.bank_rad, point.turn_rad or after.turn_rad
            turns.append((bank, turn))
            begun = i + 1
    legs.append((x[begun], y[begun], x[-1], y[-1]))
    return _joined(legs, turns)


def _joined(
    legs: list[tuple[float, float, float, float]], turns: list[tuple[float, float]]
) -> tuple[Array, Array]:
    """Join turns to the same side with hardly a leg between: no pilot levels the wings for it."""
    k = 1
    while k < len(turns):
        length_m = math.hypot(legs[k][2] - legs[k][0], legs[k][3] - legs[k][1])
        (bank, first), (_bank, second) = turns[k - 1], turns[k]
        if length_m < SHORT_LEG_M and first * second > 0.0 and abs(first + second) < 2 * math.pi:
            turns[k - 1 : k + 1] = [(bank, first + second)]
            del legs[k]
        else:
            k += 1
    return np.array(legs), np.array(turns).reshape(-1, 2)


def air_of(case: GlideCase, against_mps: float = 0.0) -> Air:
    """Return the air of a case, in plain numbers."""
    return Air(
        np.asarray(case.wind.alt_m),
        np.asarray(case.wind.east_mps),
        np.asarray(case.wind.north_mps),
        case.margins.downdraft_mps,
        case.isa_offset_k,
        case.qnh_pa,
        against_mps,
    )


def aeroplane_of(case: GlideCase) -> Aeroplane:
    """Return the glide of a case, the ratio after its margin."""
    return Aeroplane(
        case.polar.ratio * case.margins.ratio_factor,
        case.polar.best_glide_eas_mps,
        case.polar.stall_eas_mps,
        case.maximum_speed_eas_mps,
        case.speed_policy == "wind",
    )


def flown(case: GlideCase, path: GlidePath, plane: LocalPlane, against_mps: float = 0.0) -> Flight:
    """Fly a path in the case's own wind, or in one worse by `against_mps` on every track."""
    legs, turns = legs_and_turns(path, plane)
    track = case.track_rad
    if track is None:
        track = math.atan2(legs[0, 2] - legs[0, 0], legs[0, 3] - legs[0, 1])
    # from any heading the failure finds the aeroplane on its leg, at the speed of the policy
    any_heading = case.track_rad is None
    aeroplane, air = aeroplane_of(case), air_of(case, against_mps)
    return fly(legs, turns, case.alt_m, track, aeroplane, air, any_heading)


def judged(
    label: str,
    found: Footprint,
    lonlat: tuple[float, float],
    surface: SourceSurface,
    against_mps: float = 0.0,
) -> Result:
    """Fly to one cell and hold the flight to what the footprint claims."""
    path = found.path_to(*lonlat)
    assert path is not None, f"{label}: no path behind the reached cell at {lonlat}"
    claimed_m = found.explain(*lonlat).alt_m
    assert claimed_m is not None, f"{label}: nothing claimed for the reached cell at {lonlat}"
    case = found.case
    plane = LocalPlane(case.lon_deg, case.lat_deg)
    flight = flown(case, path, plane, against_mps)
    lon, lat = plane.to_lonlat(flight.x_m, flight.y_m)
    height_m = flight.alt_m - surface.height_m(lon, lat)
    height_m = np.where(np.isnan(height_m), -np.inf, height_m)
    low = int(np.argmin(height_m))
    return Result(
        label,
        lonlat[0],
        lonlat[1],
        path.bends,
        flight.arrival_alt_m - max(claimed_m, path.claimed_alt_m),
        float(height_m[low]) - case.margins.clearance_m,
        (float(lon[low]), float(lat[low])),
        flight.miss_m,
        _early_s(found, path, plane),
    )


def _early_s(found: Footprint, path: GlidePath, plane: LocalPlane) -> float:
    """Return by how much [s] the first turn comes before the reaction time is over."""
    case = found.case
    if case.track_rad is None or len(path.points) < 3:
        return 0.0
    legs, turns = legs_and_turns(path, plane)
    east, north = (float(v[0]) for v in case.wind.at(np.array([case.alt_m])))
    if len(turns) == 0:
        return 0.0
    sigma = (1.0 - 0.0065 * case.alt_m / 288.15) ** 4.255880  # ICAO Doc 7488/3
    along = east * math.sin(case.track_rad) + north * math.cos(case.track_rad)
    cross = east * math.cos(case.track_rad) - north * math.sin(case.track_rad)
    over = case.polar.best_glide_eas_mps / math.sqrt(sigma)
    ground = along + math.sqrt(over * over * 0.988 - cross * cross) - case.margins.wind_error_mps
    flown_m = math.hypot(legs[0, 2] - legs[0, 0], legs[0, 3] - legs[0, 1])
    return found.figures.reaction_s - flown_m / ground


def cells_to_fly(
    found: Footprint, count: int, rng: np.random.Generator
) -> tuple[list[tuple[float, float]], int]:
    """Return cells to fly to [lon, lat]: half within three cells of an outline, a quarter bent."""
    reach = np.asarray(found.labels.reach)
    rim = reach & binary_dilation(~reach, np.ones((3, 3)), iterations=3)
    bent = reach & ~np.asarray(found.labels.straight)
    groups = [
        (rim & bent, count // 8),
        (bent, count // 8),
        (rim, 3 * count // 8),
        (reach, count - count // 8 * 2 - 3 * count // 8),
    ]
    picked: list[tuple[int, int]] = []
    for mask, wanted in groups:
        cells = np.argwhere(mask)
        if len(cells):
            chosen = rng.choice(len(cells), min(wanted, len(cells)), replace=False)
            picked += [(int(r), int(c)) for r, c in cells[chosen]]
    grid = found.grid
    x_m = np.array([(grid.col0 + c + 0.5) * grid.cell_m for _r, c in picked])
    y_m = np.array([(grid.row0 + r + 0.5) * grid.cell_m for r, _c in picked])
    lon, lat = grid.frame.to_lonlat(x_m, y_m)
    near = sum(bool(rim[cell]) for cell in picked)
    return [(float(a), float(b)) for a, b in zip(lon, lat, strict=True)], near
