"""Closed forms of the ground within reach: discs, and shortest ways round upright obstacles."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from pyproj import Geod
from shapely import Geometry, LineString, MultiPolygon, Polygon, prepare
from shapely.geometry.base import BaseGeometry

Array = NDArray[np.float64]
Point = tuple[float, float]
GEOD = Geod(ellps="WGS84")
G = 9.80665  # standard gravity [m/s2]


@dataclass(frozen=True)
class Disc:
    """A disc on flat ground: centre and radius [m] in true local axes."""

    x_m: float
    y_m: float
    radius_m: float

    def outside_m(self, x_m: Array, y_m: Array) -> Array:
        """Return how far points lie outside [m]; negative inside."""
        return np.hypot(x_m - self.x_m, y_m - self.y_m) - self.radius_m


def disc_at_constant_tas(
    tas_mps: float, ratio: float, height_m: float, east_mps: float, north_mps: float
) -> Disc:
    """Return the disc reached in constant wind at a held TAS along the flight path.

    Derived: the air carries the still-air disc of radius E h through w T, T = h / (V sin gamma),
    tan gamma = 1/E (Zermelo's problem in a constant wind, small time = whole descent).
    """
    time_s = height_m / (tas_mps * math.sin(math.atan(1.0 / ratio)))
    return Disc(east_mps * time_s, north_mps * time_s, ratio * height_m)


def disc_at_constant_eas(
    eas_mps: float,
    ratio: float,
    high_m: float,
    low_m: float,
    east_mps: float,
    north_mps: float,
) -> Disc:
    """Return the disc reached in constant wind at a held EAS through the standard atmosphere.

    Derived: the radius stays E h; the descent lasts I / sink_EAS with I the integral of
    sqrt(sigma) dh, closed form with sigma = (1 - h / 44330.77)^4.255880 (ICAO Doc 7488/3).
    """
    power = 1.0 + 4.255880 / 2.0
    integral_m = (44330.77 / power) * (
        (1.0 - low_m / 44330.77) ** power - (1.0 - high_m / 44330.77) ** power
    )
    time_s = integral_m / (eas_mps * math.sin(math.atan(1.0 / ratio)))
    return Disc(east_mps * time_s, north_mps * time_s, ratio * (high_m - low_m))


def reach_from_downwind_m(
    tas_mps: float, wind_mps: float, time_s: float, angle_rad: float
) -> float:
    """Return the reach [m] at an angle from downwind: r = T (w cos + sqrt(V^2 - w^2 sin^2))."""
    across = wind_mps * math.sin(angle_rad)
    return time_s * (wind_mps * math.cos(angle_rad) + math.sqrt(tas_mps**2 - across**2))


def time_to_go_s(
    dx_m: float, dy_m: float, tas_mps: float, east_mps: float, north_mps: float
) -> float:
    """Return the time along a straight ground track in constant wind (Randers norm) [s]."""
    dot = dx_m * east_mps + dy_m * north_mps
    spare = tas_mps**2 - east_mps**2 - north_mps**2
    return (math.sqrt(dot**2 + (dx_m**2 + dy_m**2) * spare) - dot) / spare


def best_reach_by_speed(wind: float, angle_rad: float) -> float:
    """Return the reach per unit height, in units of E, when the speed is free.

    Derived: the union over u = V / V_bg of discs with centre w / s(u) and radius u / s(u),
    s(u) = (u^3 + 1/u) / 2; `wind` in units of V_bg, the angle from downwind.
    """
    u = np.linspace(0.4, 4.0, 200_001)
    sink = 0.5 * (u**3 + 1.0 / u)
    across = wind * math.sin(angle_rad)
    inside = u**2 - across**2
    held = inside >= 0.0
    reach = (wind * math.cos(angle_rad) + np.sqrt(np.where(held, inside, 0.0))) / sink
    return float(np.max(np.where(held, reach, -np.inf)))


def turn_loss_per_rad_m(eas_mps: float, ratio: float, bank_rad: float) -> float:
    """Return v^2 / (E g sin b cos b) [m/rad] (Rogers, J. Aircraft 32(2), 1995, small angles)."""
    return eas_mps**2 / (ratio * G * math.sin(bank_rad) * math.cos(bank_rad))


def turn_rad(before: Point, at: Point, after: Point) -> float:
    """Return the angle of the bend at a point [rad, 0 .. pi]."""
    first = math.atan2(at[0] - before[0], at[1] - before[1])
    second = math.atan2(after[0] - at[0], after[1] - at[1])
    return abs((second - first + math.pi) % (2.0 * math.pi) - math.pi)


class Obstacles:
    """Upright obstacles higher than any glide, as polygons in true local axes.

    The shortest way round them runs straight between their corners (Lozano-Perez and Wesley,
    Communications of the ACM 22(10), 1979), so with a constant loss per metre of each track the
    least loss is a shortest path through the graph of corners that see one another.
    """

    def __init__(self, polygons: list[Polygon], loss_m: LossFunction) -> None:
        self._solid: Geometry = MultiPolygon(polygons).buffer(-0.01, join_style="mitre")
        prepare(self._solid)
        self.corners = [corner for shape in polygons for corner in shape.exterior.coords[:-1]]
        self._loss_m = loss_m

    def sees(self, a: Point, b: Point) -> bool:
        """Tell whether the straight line between two points misses every obstacle."""
        return a == b or not self._solid.intersects(LineString([a, b]))

    def _edge_losses_m(self, start: Point, turn_m: float) -> dict[tuple[Point, Point], float]:
        """Return the least loss [m] on arrival at each corner, by the point it is come from."""
        loss = {(start, c): self._loss_m(start, c) for c in self.corners if self.sees(start, c)}
        seen = {(a, b) for a in self.corners for b in self.corners if a != b and self.sees(a, b)}
        for _ in self.corners:
            for (before, a), held in list(loss.items()):
                for b in self.corners:
                    if (a, b) in seen:
                        new = held + turn_m * turn_rad(before, a, b) + self._loss_m(a, b)
                        if new < loss.get((a, b), np.inf) - 1e-9:
                            loss[a, b] = new
        return loss

    def losses_m(self, start: Point, ends: Array, turn_m: float = 0.0) -> Array:
        """Return the least loss [m] from `start` to each of `ends` (n, 2), inf where walled in.

        `turn_m` is the height a turn costs per radian at a corner, on top of the straight way.
        """
        edges = self._edge_losses_m(start, turn_m)
        out = np.full(len(ends), np.inf)
        for k, (x, y) in enumerate(ends):
            end = (float(x), float(y))
            if self.sees(start, end):
                out[k] = self._loss_m(start, end)
                continue
            visible = {corner for corner in self.corners if self.sees(corner, end)}
            for (before, corner), held in edges.items():
                if held < out[k] and corner in visible:
                    turned_m = turn_m * turn_rad(before, corner, end)
                    out[k] = min(out[k], held + turned_m + self._loss_m(corner, end))
        return out


class LossFunction:
    """Height lost [m] on a straight ground track from a to b in constant wind."""

    def __init__(
        self, ratio: float, tas_mps: float, east_mps: float = 0.0, north_mps: float = 0.0
    ) -> None:
        gamma = math.atan(1.0 / ratio)
        self._over_mps = tas_mps * math.cos(gamma)
        self._sink_mps = tas_mps * math.sin(gamma)
        self._wind = (east_mps, north_mps)

    def __call__(self, a: Point, b: Point) -> float:
        """Return the height lost [m]."""
        time_s = time_to_go_s(b[0] - a[0], b[1] - a[1], self._over_mps, *self._wind)
        return self._sink_mps * time_s


def ridge_losses_m(
    start_x_m: float, height_m: float, ridge_m: float, ratio: float, ends: Array
) -> Array:
    """Return the least loss [m] to points beyond an endless ridge along x = 0, still air.

    The ridge top `ridge_m` can be crossed where the glide from (start_x, 0) has that height left:
    |y| <= sqrt((E (h - ridge))^2 - start_x^2); beyond, the way bends at the end of that stretch.
    """
    room = (ratio * (height_m - ridge_m)) ** 2 - start_x_m**2
    if room <= 0.0:
        return np.full(len(ends), np.inf)
    half = math.sqrt(room)
    cross = ends[:, 1] * (-start_x_m) / (ends[:, 0] - start_x_m)
    at = np.clip(cross, -half, half)
    way = np.hypot(start_x_m, at) + np.hypot(ends[:, 0], ends[:, 1] - at)
    return np.asarray(way / ratio)


def area_m2(shape: BaseGeometry) -> float:
    """Return the geodesic area of a polygon in lon/lat [m2] (Karney, J. Geodesy 87, 2013)."""
    return abs(float(GEOD.geometry_area_perimeter(shape)[0]))
