"""Wind by level, held and interpolated as components, never as directions."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perf.errors import InputError

Array = NDArray[np.float64]


@dataclass(frozen=True)
class WindProfile:
    """Wind by level.

    Parameters
    ----------
    alt_m
        Level altitudes above mean sea level [m], shape ``(k,)``, ascending and distinct.
    east_mps, north_mps
        Components of the air's motion, *towards* east and north [m/s], shape ``(k,)``.
        Empty arrays mean calm air.
    """

    alt_m: Array
    east_mps: Array
    north_mps: Array

    @staticmethod
    def calm() -> WindProfile:
        """Return still air at every level."""
        empty = np.zeros(0)
        return WindProfile(empty, empty, empty)

    @staticmethod
    def from_levels(levels: Sequence[tuple[float, float, float]]) -> WindProfile:
        """Build a profile from levels in any order.

        Parameters
        ----------
        levels
            Triples ``(alt_m, from_rad, speed_mps)``: altitude [m], the true direction the wind
            blows *from* [rad], speed [m/s, 0 or more].

        Raises
        ------
        InputError
            Two levels share an altitude.
        """
        ordered = sorted(levels)
        alt_m = np.array([level[0] for level in ordered], dtype=np.float64)
        if np.any(np.diff(alt_m) <= 0):
            raise InputError(
                "Two wind levels have the same altitude.", "wind", "distinct altitudes"
            )
        from_rad = np.array([level[1] for level in ordered], dtype=np.float64)
        speed_mps = np.array([level[2] for level in ordered], dtype=np.float64)
        return WindProfile(alt_m, -speed_mps * np.sin(from_rad), -speed_mps * np.cos(from_rad))

    def at(self, alt_m: Array) -> tuple[Array, Array]:
        """Return east and north components [m/s] at altitudes [m], any shape.

        Linear by component between levels; outside them the nearest level holds.
        """
        if self.alt_m.size == 0:
            calm = np.zeros_like(alt_m, dtype=np.float64)
            return calm, calm.copy()
        return (
            np.interp(alt_m, self.alt_m, self.east_mps),
            np.interp(alt_m, self.alt_m, self.north_mps),
        )

    def turned(self, angle_rad: float) -> WindProfile:
        """Return the same wind seen in axes turned so that bearings grow by `angle_rad` [rad]."""
        cos, sin = np.cos(angle_rad), np.sin(angle_rad)
        return WindProfile(
            self.alt_m,
            self.east_mps * cos + self.north_mps * sin,
            self.north_mps * cos - self.east_mps * sin,
        )
