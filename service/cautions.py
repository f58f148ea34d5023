"""The sentences that every answer, the page and every print carry."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from geo.case import FT_M, KT_MPS, Margins

CAUTIONS: tuple[str, ...] = (
    "This is a planning aid: a model of a glide from the inputs shown.",
    "The flight manual, local rules, and an instructor or operator come first.",
    "Reachable does not mean landable.",
    "No wire on the map is not no wire on the ground.",
    "Nothing here advises turning back.",
    "Wind is a forecast; near hills the air can sink faster than modelled.",
    "In cold air you are lower than the altimeter says.",
    "Ground not shown as reachable is not a reason to stop flying the aeroplane.",
    "This is not approved performance data and not a means of navigation.",
    "In a real failure fly the aeroplane and look outside.",
    "Practice needs a qualified instructor and a safe height.",
)

TURN_RESERVE_M = 200.0 * FT_M  # arrival height beyond the 180 degree turn, design section 6


@dataclass(frozen=True)
class Shown:
    """How a margin is compared and shown: `sign` is +1 where a larger value is less safe."""

    sign: int
    words: str
    unit: str
    value: Callable[[Margins], float | None]


SHOWN: dict[str, Shown] = {
    "ratio_factor": Shown(1, "The glide ratio margin", "", lambda m: m.ratio_factor),
    "wind_error_kt": Shown(-1, "The wind error margin", " kt", lambda m: m.wind_error_mps / KT_MPS),
    "reaction_s": Shown(-1, "The reaction time", " s", lambda m: m.reaction_s),
    "bank_deg": Shown(1, "The bank in turns", " degrees", lambda m: m.bank_rad * 57.29577951308232),
    "clearance_ft": Shown(-1, "The clearance on the way", " ft", lambda m: m.clearance_m / FT_M),
    "arrival_height_ft": Shown(
        -1, "The arrival height", " ft", lambda m: m.arrival_height_m / FT_M
    ),
    "downdraft_fpm": Shown(
        -1, "The downdraft allowance", " ft/min", lambda m: m.downdraft_mps * 60.0 / FT_M
    ),
    "excess_speed_credit": Shown(1, "The excess speed credit", "", lambda m: m.excess_speed_credit),
}


def margins_below_default(
    margins: Margins, reaction_default_s: float, turn_180_loss_m: float
) -> dict[str, str]:
    """Return the margins that are less safe than their default, each with a sentence.

    Parameters
    ----------
    margins
        Margins of the case.
    reaction_default_s
        Default reaction time at this height above ground [s].
    turn_180_loss_m
        Height of a 180 degree turn at the set bank [m]; the arrival height is also named when it
        is below this plus 200 ft.
    """
    defaults = Margins(reaction_s=reaction_default_s)
    found: dict[str, str] = {}
    for name, shown in SHOWN.items():
        value, usual = shown.value(margins), shown.value(defaults)
        if value is None or usual is None:
            continue
        if shown.sign * (value - usual) > 1e-9 * max(1.0, abs(usual)):
            found[name] = (
                f"{shown.words} is less safe than its default: "
                f"{value:.4g}{shown.unit} instead of {usual:.4g}{shown.unit}."
            )
    needed_m = turn_180_loss_m + TURN_RESERVE_M
    if margins.arrival_m < needed_m:
        sentence = (
            "The arrival height is less than this aeroplane's 180 degree turn at the set bank "
            f"plus 200 ft ({needed_m / FT_M:.0f} ft)."
        )
        earlier = found.get("arrival_height_ft")
        found["arrival_height_ft"] = f"{earlier} {sentence}" if earlier else sentence
    return found
