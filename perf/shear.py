"""The wind at the levels of a glide table, seen along its tracks, and its change with height."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from perf.errors import InputError

Array = NDArray[np.float64]


class TrackWind:
    """The wind at table levels in track axes, and the rise of headwind that is charged there.

    Parameters
    ----------
    alt_m, east_mps, north_mps
        Wind levels [m], ascending and distinct, and the motion of the air towards east and north
        [m/s], shape ``(k,)``; empty means calm.
    levels
        Levels of the table [m], ascending and distinct, shape ``(n,)``.
    track_rad
        Tracks of the table [rad], shape ``(n_tracks,)``.

    Attributes
    ----------
    east, north
        Wind at the levels [m/s], shape ``(n,)``.
    along, across
        Wind along each track and to its right [m/s], shape ``(n, n_tracks)``.
    sheared
        Whether the wind changes at all within the table.

    Raises
    ------
    InputError
        The arrays differ in length, do not ascend or hold a number that is not finite.
    """

    def __init__(
        self,
        alt_m: ArrayLike,
        east_mps: ArrayLike,
        north_mps: ArrayLike,
        levels: Array,
        track_rad: Array,
    ) -> None:
        source = ascending("wind_alt_m", alt_m, least=0)
        east, north = np.asarray(east_mps, np.float64), np.asarray(north_mps, np.float64)
        if not source.shape == east.shape == north.shape:
            raise InputError("The wind arrays differ in length.", "wind_alt_m", "equal lengths")
        for name, values in (("wind_east_mps", east), ("wind_north_mps", north)):
            if not np.all(np.isfinite(values)):
                raise InputError("A wind component is not finite.", name, "finite numbers")
        if source.size == 0:
            source, east, north = np.zeros(1), np.zeros(1), np.zeros(1)
        self.east = np.interp(levels, source, east)
        self.north = np.interp(levels, source, north)
        self.along, self.across = _turned(track_rad, self.east[:, None], self.north[:, None])
        # Wind levels inside the table's intervals count too: a thin layer is not stepped over.
        inside = source[(source > levels[0]) & (source < levels[-1])]
        pieces = np.union1d(levels, inside)
        change = np.diff([np.interp(pieces, source, values) for values in (east, north)])
        self.sheared = bool(np.any(change))
        if self.sheared:
            self._plan(levels, pieces, change, track_rad)

    def _plan(self, levels: Array, pieces: Array, change: Array, track_rad: Array) -> None:
        """List the pieces of air that count at each level, grouped by interval.

        The first n groups are the intervals above the levels (below it for the top one). The
        interval below a level has a group of its own where its wind changes otherwise. The first
        pieces of the first n groups are rows without a gather; the few other pieces follow.
        """
        n = levels.size
        first = np.searchsorted(pieces, levels)  # first piece of each interval
        slope = change[:, first[:-1]] / np.diff(pieces)[first[:-1]]
        alike = np.all(np.isclose(slope[:, 1:], slope[:, :-1], rtol=1e-9, atol=1e-12), axis=0)
        single = np.diff(first) == 1
        alike &= single[1:] & single[:-1]
        self._lower = np.flatnonzero(~alike) + 1  # levels with a group of their own
        level = np.concatenate((np.arange(n), self._lower))
        interval = np.concatenate((np.minimum(np.arange(n), n - 2), self._lower - 1))
        self._thickness = np.diff(levels)[interval, None]
        more = [
            (group, piece)
            for group, j in enumerate(interval)
            for piece in range(first[j] + (group < n), first[j + 1])
        ]
        self._group, further = np.array(more, dtype=np.intp).reshape(-1, 2).T
        self._level = level[self._group]
        piece = np.concatenate((first[interval[:n]], further))
        turned = _turned(track_rad, change[0, piece, None], change[1, piece, None])
        self._rise_along, self._rise_across = turned

    def headwind_slope(self, air_mps: Array, held_mps: Array) -> Array:
        """Return the rise of headwind with height that is charged at each level [1/s].

        Parameters
        ----------
        air_mps
            Horizontal airspeed [m/s], shape ``(n, n_tracks)`` or ``(n, 1)``.
        held_mps
            Its part along the track [m/s], shape ``(n, n_tracks)``.

        Notes
        -----
        The heading is held: only the wind changes. Rises alone count: what a falling headwind
        gives back is not credited, not even within one interval. A level takes the larger of the
        intervals above and below it, so that interpolation between levels charges enough.
        """
        n, at = self.east.size, self._level
        rise = np.zeros((self._thickness.size, self.along.shape[1]))
        part = self.across * self._rise_across[:n] - held_mps * self._rise_along[:n]
        np.maximum(part / air_mps, 0.0, out=rise[:n])
        part = self.across[at] * self._rise_across[n:] - held_mps[at] * self._rise_along[n:]
        np.add.at(rise, self._group, np.maximum(part / air_mps[at], 0.0))
        rise /= self._thickness
        charged: Array = rise[:n]
        charged[self._lower] = np.maximum(charged[self._lower], rise[n:])
        return charged


def ascending(name: str, values: ArrayLike, least: int = 1) -> Array:
    """Return ascending, distinct, finite levels [m], or raise an InputError about `name`."""
    levels = np.asarray(values, dtype=np.float64)
    if levels.ndim != 1 or levels.size < least or not np.all(np.isfinite(levels)):
        raise InputError("The levels are not a list of finite numbers.", name, "finite numbers")
    if np.any(np.diff(levels) <= 0.0):
        raise InputError("The levels do not ascend.", name, "ascending, distinct")
    return levels


def _turned(track_rad: Array, east: Array, north: Array) -> tuple[Array, Array]:
    """Return components along each track and to its right, the tracks as columns."""
    sine, cosine = np.sin(track_rad), np.cos(track_rad)
    return east * sine + north * cosine, east * cosine - north * sine
