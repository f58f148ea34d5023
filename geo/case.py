"""What a footprint is asked for: the aeroplane's state, the air, and the margins. SI inside."""

from __future__ import annotations

from dataclasses import dataclass, field

from geo.wind import WindProfile
from perf.polar import Polar

FT_M = 0.3048  # international foot [m], exact
NM_M = 1852.0  # international nautical mile [m], exact
KT_MPS = NM_M / 3600.0  # knot [m/s], exact
REACTION_LOW_HEIGHT_M = 1000.0 * FT_M  # below this height above ground the short reaction holds


@dataclass(frozen=True)
class Margins:
    """Margins of a case. The defaults are those for en-route flight.

    Parameters
    ----------
    ratio_factor
        Share of the record's glide ratio that is used, at every speed and in turns [0.3 .. 1].
    wind_error_mps
        Taken off every track's ground speed [m/s].
    reaction_s
        Time flown straight on before anything is done [s]; None means 4 s below 1000 ft above
        ground and 10 s above.
    bank_rad
        Bank in turns [rad].
    clearance_m
        Height kept above the surface all the way [m].
    arrival_height_m
        Height above the place on arrival [m]; the clearance counts where it is larger.
    downdraft_mps
        Sinking of the air, everywhere [m/s].
    excess_speed_credit
        Share of the excess speed's energy that is credited [0 .. 0.5].
    """

    ratio_factor: float = 0.9
    wind_error_mps: float = 6.0 * KT_MPS
    reaction_s: float | None = None
    bank_rad: float = 0.5235987755982988  # 30 degrees
    clearance_m: float = 200.0 * FT_M
    arrival_height_m: float = 1000.0 * FT_M
    downdraft_mps: float = 0.0
    excess_speed_credit: float = 0.0

    @property
    def arrival_m(self) -> float:
        """Height above the ground that counts on arrival [m]: never below the clearance."""
        return max(self.arrival_height_m, self.clearance_m)

    @staticmethod
    def neutral() -> Margins:
        """Return the bare physics: every margin at the value that takes nothing off."""
        return Margins(1.0, 0.0, 0.0, 0.5235987755982988, 0.0, 0.0, 0.0, 0.0)


@dataclass(frozen=True)
class GlideCase:
    """One engine failure.

    Parameters
    ----------
    lon_deg, lat_deg
        Position, WGS 84 [deg].
    alt_m
        True height above mean sea level [m].
    track_rad
        True track at failure [rad], or None for any heading (no reaction, no turn charged).
    polar
        The aeroplane's polar at this mass and state, not yet degraded by the ratio margin.
    maximum_speed_eas_mps
        Highest speed that the wind policy may choose [m/s EAS].
    speed_policy
        ``manual`` or ``wind``.
    speed_eas_mps
        Speed at failure [m/s EAS], or None for the glide speed.
    detail
        ``fine`` (30 m cells) or ``coarse`` (cells four times as wide, for dragging).
    """

    lon_deg: float
    lat_deg: float
    alt_m: float
    track_rad: float | None
    polar: Polar
    maximum_speed_eas_mps: float
    speed_policy: str = "manual"
    wind: WindProfile = field(default_factory=WindProfile.calm)
    isa_offset_k: float = 0.0
    qnh_pa: float = 101325.0
    margins: Margins = field(default_factory=Margins)
    speed_eas_mps: float | None = None
    detail: str = "fine"


@dataclass(frozen=True)
class SolveLimits:
    """Largest solve that is started.

    Parameters
    ----------
    cell_m
        Cell wanted [m]; the solve takes the next coarser of the ladder until it fits.
    max_cells
        Cells of the solver grid at most.
    max_cell_m
        Coarsest cell tried [m]; a case that does not fit even then is refused.
    """

    cell_m: float = 30.0
    max_cells: int = 16_000_000
    max_cell_m: float = 120.0
