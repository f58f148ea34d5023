"""Slow twins of the glide kernels, written to be read: plain Python, small steps, no tricks."""

from __future__ import annotations

from math import atan2, cos, floor, hypot, pi, sin, sqrt
from typing import Any

import numpy as np

G_MPS2 = 9.80665  # standard gravity, ISO 80000-3


def run_at(run: Any, level: int, track: float) -> float:
    """Return cells per metre of height, linear between neighbouring tracks."""
    n_tracks = run.shape[1]
    low = floor(track) % n_tracks
    high = (low + 1) % n_tracks
    share = track - floor(track)
    if run[level, low] <= 0 or run[level, high] <= 0:
        return 0.0
    return float((1 - share) * run[level, low] + share * run[level, high])


def glide_alt(
    run: Any, level0_m: float, step_m: float, z: float, track: float, distance: float, dt: float
) -> float:
    """Return the altitude after a distance, losing height little by little."""
    t = 0.0
    while t < distance:
        dt = min(dt, distance - t) if distance - t > 0 else dt
        level = min(int((z - level0_m) // step_m), run.shape[0] - 1)
        if level < 0:
            return -np.inf
        per_m = run_at(run, level, track)
        if per_m <= 0.0:
            return -np.inf
        z -= dt / per_m
        t += dt
    return z


def cells_crossed(x: float, y: float, dx: float, dy: float, length: float) -> list[Any]:
    """Return (row, column, distance at which the ray leaves) of each cell crossed, in order.

    Every crossing with a grid line is listed and sorted; between two crossings lies one cell.
    """
    crossings = [length]
    for start, d in ((x, dx), (y, dy)):
        if abs(d) > 1e-12:
            lines = range(floor(start) - int(length) - 2, floor(start) + int(length) + 3)
            crossings += [(line - start) / d for line in lines if 0 < (line - start) / d < length]
    crossings.sort()
    found, before = [], 0.0
    for t in crossings:
        if t - before > 1e-9:
            middle = 0.5 * (t + before)
            found.append((floor(y + middle * dy), floor(x + middle * dx), t))
            before = t
    return found


def cast(
    top: Any, run: Any, level0_m: float, step_m: float, clearance_m: float, start: Any
) -> dict[tuple[int, int], float]:
    """Return the label of each cell under a straight glide, until it meets terrain.

    The altitude at which it leaves the cell, or abreast of the centre where that comes later.
    """
    x, y, z, dx, dy, track = start
    labels: dict[tuple[int, int], float] = {}
    for row, col, t in cells_crossed(x, y, dx, dy, 2.0 * sum(top.shape)):
        if not (0 <= row < top.shape[0] and 0 <= col < top.shape[1]):
            break
        if glide_alt(run, level0_m, step_m, z, track, t, 0.05) < top[row, col] + clearance_m:
            break
        centre = (col + 0.5 - x) * dx + (row + 0.5 - y) * dy
        labels[row, col] = glide_alt(run, level0_m, step_m, z, track, max(t, centre), 0.05)
    return labels


def arc(
    tas: Any, wind_x: Any, wind_y: Any, z: float, heading: float, turn: float, bank: float,
    ratio: float,
) -> tuple[float, float, float]:  # fmt: skip
    """Return x, y [m] and altitude [m] after a turn, flown in steps of a thousandth of a radian.

    `tas`, `wind_x`, `wind_y` are functions of altitude [m/s]. Height per radian
    v^2 / (E g sin b cos b), radius v^2 / (g sin b), speed in the turn v sqrt(n).
    """
    x = y = 0.0
    side, n_steps = (1.0 if turn > 0 else -1.0), max(int(abs(turn) * 1000), 1)
    d = abs(turn) / n_steps
    for i in range(n_steps):
        h = heading + side * (i + 0.5) * d
        v = tas(z)
        radius = v * v / (G_MPS2 * sin(bank))
        seconds = radius * d / (v / sqrt(cos(bank)))
        x += radius * d * sin(h) + wind_x(z) * seconds
        y += radius * d * cos(h) + wind_y(z) * seconds
        loss = radius * d / (ratio * cos(bank))
        # a headwind that falls off below is paid with V/g of height per m/s
        fade = (wind_x(z - loss) - wind_x(z)) * sin(h) + (wind_y(z - loss) - wind_y(z)) * cos(h)
        z -= loss + max(fade, 0.0) * v / G_MPS2
    return x, y, z


def heading_for(track: float, speed: float, wind_x: float, wind_y: float) -> float | None:
    """Return the heading [rad] that holds a track, by trying headings a hundredth degree apart."""
    best, least = None, 1e9
    for i in range(36_000):
        h = 2 * pi * i / 36_000
        gx, gy = speed * sin(h) + wind_x, speed * cos(h) + wind_y
        along = gx * sin(track) + gy * cos(track)
        across = abs(gx * cos(track) - gy * sin(track))
        if along > 0 and across < least:
            best, least = h, across
    return best if least < 0.02 * max(speed, hypot(wind_x, wind_y)) else None


def bearing(x: float, y: float) -> float:
    """Return the bearing [rad] of a vector, 0 to 2 pi, clockwise from north."""
    return atan2(x, y) % (2 * pi)


def find_anchor(offsets: list[float], ray_id: int) -> int:
    """Return the last anchor whose first ray is not beyond `ray_id`."""
    return max(a for a, offset in enumerate(offsets) if offset <= ray_id)
