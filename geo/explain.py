"""Why a place is in or out of range, sections through the terrain, and sites in reach."""

from __future__ import annotations

from collections.abc import Sequence
from math import pi
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from pyproj import Geod

from geo import layout as k
from geo import paths, rays
from geo.answers import Explanation, GlidePath, ProfilePoint, Ridge, SiteReach
from geo.case import FT_M, NM_M
from geo.sites import Site
from geo.terrain_layer import meets

if TYPE_CHECKING:
    from geo.footprint import Footprint

Array = NDArray[np.float64]

GEOD = Geod(ellps="WGS84")
PROFILE_POINTS = 400


def explain(answer: Footprint, lon: float, lat: float) -> Explanation:
    """Say why a place [deg] is in or out of range.

    The reason is the first that holds of: no terrain, void, room to lose height, arrival height,
    wind, height, ridge.
    """
    ground = float(answer.store.ground_m(np.array([lon]), np.array([lat]))[0])
    row, col = answer.grid.cell_of(lon, lat)
    if np.isnan(ground):
        return _nothing(answer, lon, lat)
    if not answer.grid.inside(row, col):
        return _beyond(ground)
    labels = answer.labels
    if not np.isfinite(labels.top_m[row, col]):
        return _out("void", "No terrain data here (a void): never shown as within range.", ground)
    if labels.ray[row, col] >= 0:
        return _labelled(answer, row, col, ground)
    return _unlabelled(answer, lon, lat, ground)


def _out(
    code: str,
    text: str,
    ground_m: float | None,
    alt_m: float | None = None,
    surplus_m: float | None = None,
    ridge: Ridge | None = None,
) -> Explanation:
    return Explanation(False, code, text, None, alt_m, ground_m, surplus_m, ridge)


def _nothing(answer: Footprint, lon: float, lat: float) -> Explanation:
    """Tell a void inside the terrain from a place off it."""
    for source in answer.store.sources:
        if meets(source.bbox, np.array([lon]), np.array([lat])):
            text = "No terrain data here (a void): never shown as within range."
            return _out("void", text, None)
    return _out("off_terrain", "This place is off the terrain that is loaded.", None)


def _beyond(ground: float) -> Explanation:
    text = "Out of height: this place is beyond any glide from this altitude."
    return _out("height", text, ground)


def _need_m(answer: Footprint, row: int, col: int) -> float:
    return float(answer.labels.top_m[row, col]) + answer.case.margins.arrival_m


def _labelled(answer: Footprint, row: int, col: int, ground: float) -> Explanation:
    """Explain a cell that some path crosses."""
    labels = answer.labels
    alt = float(labels.alt_m[row, col])
    surplus = alt - _need_m(answer, row, col)
    if surplus < 0.0:
        text = (
            f"The clearance is kept on the way, but the arrival is {_ft(-surplus)} below the"
            f" arrival height of {_ft(answer.case.margins.arrival_m)}."
        )
        return _out("reserve", text, ground, alt, surplus)
    by = "straight" if labels.straight[row, col] else "bent"
    if not room_to_lose(answer, row, col):
        text = (
            f"Reached with a surplus of {_ft(surplus)}, but no room to lose height here: a circle"
            " drifting with the wind would not keep the clearance."
        )
        return _out("no_room", text, ground, alt, surplus)
    how = "by a straight glide" if by == "straight" else "by a path that bends round terrain"
    text = f"Within modelled gliding range {how}, surplus {_ft(surplus)}."
    return Explanation(True, "within_range", text, by, alt, ground, surplus)


def room_to_lose(answer: Footprint, row: int, col: int) -> bool:
    """Return whether the surplus over a reached cell can be lost in a drifting circle."""
    labels, glide = answer.labels, answer.glide
    ray_id = int(labels.ray[row, col])
    anchor = rays.find_anchor(labels.anchors, len(labels.anchors), ray_id)
    number = ray_id - int(labels.anchors[anchor, k.OFFSET])
    state = rays.replay(glide.air, labels.par, glide.entry, labels.anchors, anchor, number)
    t = rays.nearest_on_ray(state, row, col)
    circle = np.zeros(k.N_ANCHOR)
    circle[k.AX] = state[k.SX] + t * state[k.DX]
    circle[k.AY] = state[k.SY] + t * state[k.DY]
    circle[k.AZ], circle[k.STEP], circle[k.TURNS] = labels.alt_m[row, col], 0.1, 1.0
    heading = circle[k.HX : k.HY + 1]
    rays.heading_for(glide.air, labels.par, circle[k.AZ], state[k.DX], state[k.DY], heading)
    need = _need_m(answer, row, col)
    return bool(rays.has_room(labels.top_m, glide.air, labels.par, circle, need))


def _unlabelled(answer: Footprint, lon: float, lat: float, ground: float) -> Explanation:
    """Explain a cell that no path crosses, by the straight glide to it."""
    if len(answer.labels.anchors) == 0:
        text = "The aeroplane is already below the clearance that you set above the terrain."
        return _out("reserve", text, ground)
    path = paths.straight_path(answer.glide, answer.grid, answer.labels, lon, lat)
    if path is None:
        text = "No first turn leads straight to this place: it lies inside the turn or upwind."
        return _out("wind" if _windy(answer) else "height", text, ground)
    row, col = answer.grid.cell_of(lon, lat)
    if path.claimed_alt_m < -k.FAR / 2:
        text = "The wind is too strong to hold a straight track to this place at some level."
        return _out("wind", text, ground)
    surplus = path.claimed_alt_m - _need_m(answer, row, col)
    ridge = _first_conflict(answer, path)
    if surplus < 0.0 and (ridge is None or ridge.short_m <= -surplus):
        text = f"Out of height: a straight glide would arrive {_ft(-surplus)} too low."
        return _out("height", text, ground, None, surplus)
    if ridge is None:
        text = "Hidden by terrain beside the straight glide, and no path round it was found."
        return _out("ridge", text, ground, None, None)
    text = (
        f"A ridge is in the way: ground of {_ft(ridge.elevation_m)} at"
        f" {ridge.distance_m / NM_M:.1f} nm flown needs {_ft(ridge.short_m)} more height than the"
        " glide has there, and no path round it was found."
    )
    if surplus < 0.0:
        text += f" Beyond it the glide would arrive {_ft(-surplus)} too low as well."
    return _out("ridge", text, ground, None, None, ridge)


def _windy(answer: Footprint) -> bool:
    return not bool(np.all(np.isfinite(answer.glide.table.loss)))


def _first_conflict(answer: Footprint, path: GlidePath) -> Ridge | None:
    """Return where the straight glide first meets the clearance, at its worst within that ridge."""
    worst: Ridge | None = None
    for point in path_profile(answer, path):
        short = (point.required_m or -np.inf) - (point.glide_m or np.inf)
        if short <= 0.0:
            if worst is not None:
                return worst
        elif (worst is None or short > worst.short_m) and point.ground_m is not None:
            worst = Ridge(point.lon_deg, point.lat_deg, point.ground_m, short, point.along_m)
    return worst


def straight_section(answer: Footprint, lon: float, lat: float) -> list[ProfilePoint]:
    """Return the section under the straight glide to a place; the glide line may cross terrain.

    Where no first turn leads there, the section of the direct line without a glide line.
    """
    path = None
    if len(answer.labels.anchors):
        path = paths.straight_path(answer.glide, answer.grid, answer.labels, lon, lat)
    if path is not None and path.claimed_alt_m > -k.FAR / 2:
        return path_profile(answer, path)
    case = answer.case
    between = GEOD.npts(case.lon_deg, case.lat_deg, lon, lat, PROFILE_POINTS // 2)
    line = [(case.lon_deg, case.lat_deg), *between, (lon, lat)]
    return _profile(answer, [(x, y, None) for x, y in line])


def path_profile(answer: Footprint, path: GlidePath) -> list[ProfilePoint]:
    """Return ground, clearance and glide line along a path, at most `PROFILE_POINTS` points."""
    return _profile(answer, path.line)


def _profile(
    answer: Footprint, line: Sequence[tuple[float, float, float | None]]
) -> list[ProfilePoint]:
    lon, lat = np.array([p[0] for p in line]), np.array([p[1] for p in line])
    steps = GEOD.inv(lon[:-1], lat[:-1], lon[1:], lat[1:])[2] if len(line) > 1 else np.zeros(0)
    along = np.concatenate(([0.0], np.cumsum(steps)))
    count = min(PROFILE_POINTS, max(int(along[-1] / answer.cell_m), 2))
    at = np.unique(np.concatenate((np.linspace(0.0, along[-1], count // 2), along)))
    if len(at) > PROFILE_POINTS:
        at = np.linspace(0.0, along[-1], PROFILE_POINTS)
    unwrapped = np.unwrap(lon, period=360.0)
    lon_at, lat_at = np.interp(at, along, unwrapped), np.interp(at, along, lat)
    lon_at = (lon_at + 180.0) % 360.0 - 180.0
    ground = answer.store.ground_m(lon_at, lat_at)
    required = answer.store.surface_m(lon_at, lat_at) + answer.case.margins.clearance_m
    heights = [p[2] for p in line]
    glide = None if heights[0] is None else np.interp(at, along, np.array(heights, dtype=float))
    return [
        ProfilePoint(
            float(at[i]), float(lon_at[i]), float(lat_at[i]), _number(ground[i]),
            _number(required[i]), None if glide is None else _number(glide[i]),
        )
        for i in range(len(at))
    ]  # fmt: skip


def _number(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _ft(height_m: float) -> str:
    return f"{height_m / FT_M:,.0f} ft"


def sites_in_reach(answer: Footprint, sites: Sequence[Site]) -> list[SiteReach]:
    """Return the landing sites inside the window with their surplus, nearest first."""
    found = [reach for site in sites if (reach := _site(answer, site)) is not None]
    return sorted(found, key=lambda reach: reach.distance_m)


def _site(answer: Footprint, site: Site) -> SiteReach | None:
    row, col = answer.grid.cell_of(site.lon, site.lat)
    if not answer.grid.inside(row, col):
        return None
    why = explain(answer, site.lon, site.lat)
    case = answer.case
    bearing, _, distance = GEOD.inv(case.lon_deg, case.lat_deg, site.lon, site.lat)
    extra = 0.0
    if site.arrival_height_m is not None:
        extra = max(site.arrival_height_m - answer.case.margins.arrival_m, 0.0)
    surplus = None if why.surplus_m is None else why.surplus_m - extra
    in_range = why.within_range and surplus is not None and surplus >= 0.0
    note = None if in_range else why.text
    if why.within_range and not in_range:
        note = f"Below this site's own arrival height of {_ft(site.arrival_height_m or 0.0)}."
    return SiteReach(
        site.site_id, site.name, in_range, surplus, (bearing % 360.0) * pi / 180.0, distance, note
    )
