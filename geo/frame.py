"""Local azimuthal-equidistant frames on WGS 84, centred on the points of a fixed lattice."""

from __future__ import annotations

import math
import threading
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pyproj import Geod, Proj

LATTICE_DEG = 0.5  # latitude step of the lattice; a place is at most 40 km from its centre
MAX_LATITUDE_DEG = 89.5  # centres beyond would make the longitude step meaningless
REACH_M = 150_000.0  # distance from the centre up to which the stretch stays below 1e-4

_GEOD = Geod(ellps="WGS84")
_LOCAL = threading.local()  # Proj objects must not be shared between threads

Values = NDArray[np.float64]


@dataclass(frozen=True)
class Frame:
    """A plane with x towards east and y towards north at its centre, in metres.

    Distances and directions from the centre are exact; at distance s the tangential stretch
    is (s/R)^2/6, 1e-4 at 150 km. Use `frame_for`, so that requests near one another share a frame.

    Parameters
    ----------
    lon0_deg, lat0_deg
        Centre, WGS 84 [deg].

    Source
    ------
    Snyder, Map Projections: A Working Manual, USGS Professional Paper 1395 (1987), p. 191;
    the ellipsoidal geodesics are those of PROJ (Karney, J. Geodesy 87, 2013).
    """

    lon0_deg: float
    lat0_deg: float

    def to_xy_m(self, lon_deg: ArrayLike, lat_deg: ArrayLike) -> tuple[Values, Values]:
        """Return x, y in the frame [m], in the shape of the input (0-d for scalars).

        Parameters
        ----------
        lon_deg, lat_deg
            Places, WGS 84 [deg], any shape.
        """
        lon, lat = _same_shape(lon_deg, lat_deg)
        x_m, y_m = self._proj()(lon, lat)
        return np.asarray(x_m, dtype=np.float64), np.asarray(y_m, dtype=np.float64)

    def to_lonlat(self, x_m: ArrayLike, y_m: ArrayLike) -> tuple[Values, Values]:
        """Return longitude [-180 .. 180 deg] and latitude [deg], in the shape of the input.

        Parameters
        ----------
        x_m, y_m
            Places in the frame [m], any shape.
        """
        x, y = _same_shape(x_m, y_m)
        lon, lat = self._proj()(x, y, inverse=True)
        return np.asarray(lon, dtype=np.float64), np.asarray(lat, dtype=np.float64)

    def convergence_rad(self, lon_deg: ArrayLike, lat_deg: ArrayLike) -> Values:
        """Return the direction of true north in the frame, clockwise from frame north [rad].

        A true track t is the frame track ``t + convergence``, within 5e-5 rad at 150 km for
        any t (the rest is the stretch, which no rotation can undo).

        Parameters
        ----------
        lon_deg, lat_deg
            Places, WGS 84 [deg], any shape.
        """
        lon, lat = _same_shape(lon_deg, lat_deg)
        lon0, lat0 = np.full_like(lon, self.lon0_deg), np.full_like(lat, self.lat0_deg)
        azimuth_deg, back_deg, _ = _GEOD.inv(lon0, lat0, lon, lat)
        turn_deg = np.asarray(azimuth_deg) - (np.asarray(back_deg) + 180.0)
        return np.asarray(np.radians((turn_deg + 180.0) % 360.0 - 180.0), dtype=np.float64)

    def _proj(self) -> Any:
        """Return this thread's projection of the frame."""
        held: dict[Frame, Any] = _LOCAL.__dict__.setdefault("held", {})
        if self not in held:
            if len(held) >= 64:
                held.clear()
            held[self] = Proj(proj="aeqd", lat_0=self.lat0_deg, lon_0=self.lon0_deg, datum="WGS84")
        return held[self]


def frame_for(lon_deg: float, lat_deg: float) -> Frame:
    """Return the frame whose lattice point is nearest in latitude, then in longitude.

    Parameters
    ----------
    lon_deg, lat_deg
        Place, WGS 84 [deg]; any longitude, so that 181 and -179 give the same frame.
    """
    row = round(min(max(lat_deg, -MAX_LATITUDE_DEG), MAX_LATITUDE_DEG) / LATTICE_DEG)
    lat0_deg = row * LATTICE_DEG
    per_turn = max(1, int(360.0 / LATTICE_DEG * math.cos(math.radians(lat0_deg))))
    step_deg = 360.0 / per_turn
    column = round((lon_deg + 180.0) % 360.0 / step_deg) % per_turn
    return _frame(round(column * step_deg - 180.0, 9), lat0_deg)


@lru_cache(maxsize=256)
def _frame(lon0_deg: float, lat0_deg: float) -> Frame:
    return Frame(lon0_deg, lat0_deg)


def _same_shape(first: ArrayLike, second: ArrayLike) -> tuple[Values, Values]:
    """Return both as contiguous float64 arrays of one shape."""
    one, two = np.broadcast_arrays(
        np.asarray(first, dtype=np.float64), np.asarray(second, dtype=np.float64)
    )
    return np.ascontiguousarray(one).reshape(one.shape), np.ascontiguousarray(two).reshape(
        two.shape
    )
