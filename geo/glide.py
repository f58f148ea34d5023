"""One case turned into the local frame: the glide table as the kernels want it, the figures."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import NDArray

from geo import layout as k
from geo.case import FT_M, REACTION_LOW_HEIGHT_M, GlideCase
from geo.frame import Frame
from perf.atmosphere import eas_to_tas_mps
from perf.errors import InputError
from perf.glide_table import GlideTable, build_glide_table
from perf.turn import turn_loss_m_per_rad

Array = NDArray[np.float64]

LEVEL_STEP_M = 60.0  # of the glide table; halving it moves labels by less than 0.1 m
LOWEST_GROUND_M = -450.0  # below the lowest dry land


@dataclass(frozen=True)
class GlideFigures:
    """The numbers behind the picture, at the failure altitude. SI."""

    best_glide_eas_mps: float
    speed_eas_mps: float
    ratio_record: float
    ratio_used: float
    sink_mps: float
    turn_180_loss_m: float
    reaction_s: float


@dataclass(frozen=True)
class Glide:
    """One case turned into the frame: the glide table as kernels want it, and the figures."""

    case: GlideCase
    table: GlideTable
    run: Array
    entry: Array
    air: Array
    start_alt_m: float
    track_rad: float | None
    convergence_rad: float
    figures: GlideFigures
    notes: tuple[str, ...]


def prepare(case: GlideCase, frame: Frame, ground_m: float) -> Glide:
    """Return the glide of a case in a frame's axes.

    Parameters
    ----------
    case
        What is asked.
    frame
        The local frame; winds and tracks are turned by its convergence at the position.
    ground_m
        Ground under the aeroplane [m], for the reaction time.

    Raises
    ------
    InputError
        The altitude is at or below the ground.
    """
    if case.alt_m <= ground_m:
        raise InputError(
            "The altitude is at or below the ground here. Give the true height above sea level.",
            "altitude_ft",
            f"above {ground_m / FT_M:.0f} ft at this position",
        )
    turn = float(frame.convergence_rad(case.lon_deg, case.lat_deg))
    wind = case.wind.turned(turn)
    margins = case.margins
    polar = case.polar.degraded(margins.ratio_factor)
    start_alt_m = case.alt_m + _speed_change_m(case)
    n_levels = max(int(np.ceil((start_alt_m - LOWEST_GROUND_M) / LEVEL_STEP_M)), 2) + 1
    levels = start_alt_m - LEVEL_STEP_M * np.arange(n_levels - 1, -1, -1)
    table = build_glide_table(
        polar,
        alt_levels_m=levels,
        wind_alt_m=wind.alt_m,
        wind_east_mps=wind.east_mps,
        wind_north_mps=wind.north_mps,
        speed_policy=case.speed_policy,
        maximum_speed_eas_mps=case.maximum_speed_eas_mps,
        isa_offset_k=case.isa_offset_k,
        qnh_pa=case.qnh_pa,
        wind_error_mps=margins.wind_error_mps,
        downdraft_mps=margins.downdraft_mps,
    )
    with np.errstate(divide="ignore"):
        per_m = np.where(np.isfinite(table.loss), 1.0 / table.loss, 0.0)
    held = (per_m[:-1] > 0) & (per_m[1:] > 0)
    entry, share = _speeding_up(table, case.polar.best_glide_eas_mps)
    run = np.where(held, 0.5 * (per_m[:-1] + per_m[1:]) * share, 0.0)
    air = np.column_stack(
        (table.tas_mps, table.tas_mps * np.cos(table.gamma_rad), table.wind_east_mps,
         table.wind_north_mps)
    )  # fmt: skip
    reaction_s = margins.reaction_s
    if reaction_s is None:
        reaction_s = 4.0 if case.alt_m - ground_m < REACTION_LOW_HEIGHT_M else 10.0
    track = None if case.track_rad is None else (case.track_rad + turn) % (2 * pi)
    notes = _glide_notes(case, table)
    return Glide(
        case, table, np.ascontiguousarray(run), entry, np.ascontiguousarray(air), start_alt_m,
        track, turn, _figures(case, table, track, reaction_s), tuple(notes),
    )  # fmt: skip


def _speeding_up(table: GlideTable, glide_eas_mps: float) -> tuple[Array, Array]:
    """Return what it costs to fly tracks at speeds of their own, as the wind policy does.

    The height [m] to speed up from best glide to each track's fastest speed, shape
    ``(n_tracks,)``, and the share of each level interval's height that is left for distance where
    a track's speed grows on the way down, shape ``(n - 1, n_tracks)``. Slowing down earns nothing.
    """
    tas = table.speed_eas_mps * (table.tas_mps / glide_eas_mps)[:, None]
    kinetic_m = np.where(np.isfinite(tas), tas**2, 0.0) / (2.0 * k.GRAVITY_MPS2)
    glide_m = (table.tas_mps**2 / (2.0 * k.GRAVITY_MPS2))[:, None]
    gained = np.maximum(kinetic_m[:-1] - kinetic_m[1:], 0.0)
    height = np.diff(table.alt_m)[:, None]
    return (kinetic_m - glide_m).max(axis=0, initial=0.0), np.maximum(1.0 - gained / height, 0.0)


def _speed_change_m(case: GlideCase) -> float:
    """Return the height [m] credited for excess speed, or (negative) charged for a deficit."""
    if case.speed_eas_mps is None:
        return 0.0
    air = (case.alt_m, case.isa_offset_k, case.qnh_pa)
    glide_mps = float(eas_to_tas_mps(case.polar.best_glide_eas_mps, *air))
    failure_mps = float(eas_to_tas_mps(case.speed_eas_mps, *air))
    height_m = (failure_mps**2 - glide_mps**2) / (2.0 * k.GRAVITY_MPS2)
    return height_m if height_m < 0.0 else height_m * min(case.margins.excess_speed_credit, 0.5)


def _figures(
    case: GlideCase, table: GlideTable, track_rad: float | None, reaction_s: float
) -> GlideFigures:
    tas = float(table.tas_mps[-1])
    speed_mps = case.polar.best_glide_eas_mps
    if track_rad is not None and case.speed_policy == "wind":
        n_tracks = len(table.track_rad)
        along = table.speed_eas_mps[-1, round(track_rad * n_tracks / (2 * pi)) % n_tracks]
        speed_mps = float(along) if np.isfinite(along) else speed_mps
    return GlideFigures(
        best_glide_eas_mps=case.polar.best_glide_eas_mps,
        speed_eas_mps=speed_mps,
        ratio_record=case.polar.ratio,
        ratio_used=table.ratio,
        sink_mps=float(table.sink_mps[-1]) + case.margins.downdraft_mps,
        turn_180_loss_m=pi * float(turn_loss_m_per_rad(tas, table.ratio, case.margins.bank_rad)),
        reaction_s=reaction_s if case.track_rad is not None else 0.0,
    )


def _glide_notes(case: GlideCase, table: GlideTable) -> list[str]:
    """Return sentences on what the glide leaves out or could not hold."""
    notes = []
    if case.track_rad is None:
        notes.append("No track given: any heading is assumed, no first turn or reaction charged.")
    if case.wind.alt_m.size == 0:
        notes.append("No wind given: calm air is assumed.")
    elif case.alt_m > case.wind.alt_m[-1] or case.wind.alt_m[0] > 0.0:
        notes.append("Outside the wind levels given, the nearest level's wind is used.")
    if not np.all(np.isfinite(table.loss)):
        notes.append(
            "The wind is too strong to hold some tracks at some levels; those tracks are left out."
        )
    return notes
