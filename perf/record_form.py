"""The checked content of an aircraft record, and how its states combine into a polar.

Every value is checked here once: type, range, unknown and missing keys. Nothing of the input is
repeated in an error except a plain key name.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

from perf.errors import RecordError
from perf.polar import Polar, drag_from_pair

KT_MPS = 1852.0 / 3600.0  # knot [m/s], exact
PROPELLER_STATES = ("windmilling", "stopped", "feathered", "idle")
MAX_CONFIGURATIONS = 12

Range = tuple[float, float]
SPEED_KT: Range = (15.0, 400.0)
MASS_KG: Range = (50.0, 50_000.0)

_PLAIN_KEY = re.compile(r"[A-Za-z_][A-Za-z0-9_]{0,40}\Z")
_STATE_NAME = re.compile(r"[a-z][a-z0-9-]{0,39}\Z")


@dataclass(frozen=True)
class Figures:
    """What a record says about one propeller state, one configuration, or its reference.

    Parameters
    ----------
    name
        Name of the state.
    source
        Where the figures come from.
    pair
        Best-glide speed [m/s EAS] at the mass of [glide] and ratio [-], or None.
    drag_factor
        Factor on the drag at no lift [-], or None.
    stall_eas_mps
        Stall speed at the record's stall mass [m/s EAS], or None for the record's own.
    """

    RATIO: ClassVar[Range] = (3.0, 70.0)
    DRAG_FACTOR: ClassVar[Range] = (0.2, 20.0)

    name: str
    source: str
    pair: tuple[float, float] | None = None
    drag_factor: float | None = None
    stall_eas_mps: float | None = None

    @property
    def is_reference(self) -> bool:
        """Whether these are the figures of [glide] itself."""
        return self.pair is None and self.drag_factor is None


@dataclass(frozen=True)
class RecordForm:
    """The checked content of a record, SI.

    Parameters
    ----------
    reference
        Pair of [glide] (manual form), or None.
    drag
        CD0 [-], K [-] and wing area [m2] of [glide] (drag form), or None.
    glide_mass_kg, stall_mass_kg
        Masses that the best-glide and the stall speeds are for [kg].
    """

    name: str
    mass_min_kg: float
    mass_max_kg: float
    stall_eas_mps: float
    stall_mass_kg: float
    maximum_speed_eas_mps: float
    glide_mass_kg: float
    reference: tuple[float, float] | None
    drag: tuple[float, float, float] | None
    propellers: tuple[Figures, ...]
    configurations: tuple[Figures, ...]
    sources: tuple[str, ...]

    def polar(self, mass_kg: float, propeller: str, configuration: str) -> Polar:
        """Return the polar of a mass [kg] and a state, both known to the record.

        Derived: drags add. With the drag of the reference state as (parasite, induced), that of a
        propeller state and a configuration together is propeller + configuration - reference. One
        drag factor f alone gives E / sqrt(f) and v_bg / f^(1/4).
        """
        first = next(item for item in self.propellers if item.name == propeller)
        second = next(item for item in self.configurations if item.name == configuration)
        base, one, two = self._drag_of(None), self._drag_of(first), self._drag_of(second)
        parasite = one[0] + two[0] - base[0]
        induced = one[1] + two[1] - base[1]
        if not (parasite > 0.0 and induced > 0.0):
            raise RecordError(
                "The figures of a propeller state and a configuration contradict each other.",
                "configuration",
                "drag above zero in every state",
            )
        stall = self.stall_eas_mps if second.stall_eas_mps is None else second.stall_eas_mps
        stall *= math.sqrt(mass_kg / self.stall_mass_kg)
        if self.drag is not None:
            return Polar.from_drag(parasite, induced, self.drag[2], stall, mass_kg)
        speed = (induced / parasite) ** 0.25 * math.sqrt(mass_kg / self.glide_mass_kg)
        ratio = round(1.0 / math.sqrt(parasite * induced), 9)  # 9, not 9.000000000000002
        return Polar(speed, ratio, stall, mass_kg)

    def _drag_of(self, figures: Figures | None) -> tuple[float, float]:
        """Return parasite and induced drag: CD0 and K, or 1 / (E v^2) and v^2 / E of a pair."""
        if figures is not None and figures.pair is not None:
            return self._drag_of_pair(figures.pair)
        if self.drag is not None:
            parasite, induced = self.drag[0], self.drag[1]
        else:
            assert self.reference is not None
            parasite, induced = self._drag_of_pair(self.reference)
        factor = 1.0 if figures is None or figures.drag_factor is None else figures.drag_factor
        return factor * parasite, induced

    def _drag_of_pair(self, pair: tuple[float, float]) -> tuple[float, float]:
        """Return the same for a measured pair at the mass of [glide]."""
        speed_mps, ratio = pair
        if self.drag is not None:
            return drag_from_pair(speed_mps, ratio, self.glide_mass_kg, self.drag[2])
        return 1.0 / (ratio * speed_mps**2), speed_mps**2 / ratio


def read_form(data: Mapping[str, Any]) -> RecordForm:
    """Return the checked content of a record.

    Raises
    ------
    RecordError
        A key is unknown or missing, or a value has the wrong type or is out of range.
    """
    top = _Section(data, "")
    top.only("name", "mass", "speeds", "glide", "propeller", "configuration")
    mass, speeds, glide = (top.section(key) for key in ("mass", "speeds", "glide"))
    mass.only("minimum_kg", "maximum_kg", "source")
    speeds.only("stall_eas_kt", "stall_mass_kg", "maximum_glide_eas_kt", "source")
    low, high = mass.number("minimum_kg", MASS_KG), mass.number("maximum_kg", MASS_KG)
    if not low <= high:
        raise RecordError(
            "The minimum mass is above the maximum.", "mass.minimum_kg", "at most mass.maximum_kg"
        )
    reference, drag, glide_mass = _read_glide(glide, (low, high))
    propellers = tuple(_read_propeller(item) for item in top.sections("propeller", 4))
    configurations = tuple(
        _read_configuration(item) for item in top.sections("configuration", MAX_CONFIGURATIONS)
    )
    _check_names("propeller", "state", propellers, glide.word("propeller"))
    _check_names("configuration", "name", configurations, glide.word("configuration"))
    if propellers[0].name == "idle":
        raise RecordError(
            "Idle is a practice state and cannot be the first.",
            "propeller.0.state",
            "windmilling, stopped or feathered",
        )
    return RecordForm(
        name=top.text("name", 80),
        mass_min_kg=low,
        mass_max_kg=high,
        stall_eas_mps=speeds.number("stall_eas_kt", SPEED_KT) * KT_MPS,
        stall_mass_kg=speeds.number("stall_mass_kg", (low, high)),
        maximum_speed_eas_mps=speeds.number("maximum_glide_eas_kt", SPEED_KT) * KT_MPS,
        glide_mass_kg=glide_mass,
        reference=reference,
        drag=drag,
        propellers=propellers,
        configurations=configurations,
        sources=_sources(mass, speeds, glide, propellers, configurations),
    )


class _Section:
    """One table of a record; every reader names the dotted path of a fault."""

    def __init__(self, data: object, path: str) -> None:
        if not isinstance(data, Mapping):
            raise RecordError(
                "This part of the record is not a table.", path or None, "a table of keys"
            )
        self.data = data
        self.path = path

    def at(self, key: str) -> str:
        """Return the dotted path of a key."""
        return f"{self.path}.{key}" if self.path else key

    def only(self, *keys: str) -> None:
        """Raise when there is a key that is not among these."""
        for key in self.data:
            if isinstance(key, str) and key in keys:
                continue
            plain = isinstance(key, str) and _PLAIN_KEY.match(key)
            field = self.at(key) if plain else self.path or None
            raise RecordError("This key is unknown.", field, ", ".join(keys))

    def get(self, key: str, allowed: str) -> Any:
        """Return the value of a key, which must be there."""
        if key not in self.data:
            raise RecordError("This key is missing.", self.at(key), allowed)
        return self.data[key]

    def number(self, key: str, limits: Range) -> float:
        """Return a number within limits; NaN and infinities are outside every range."""
        allowed = f"{limits[0]:g} to {limits[1]:g}"
        value = self.get(key, allowed)
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise RecordError("This value is not a number.", self.at(key), allowed)
        if not limits[0] <= value <= limits[1]:
            raise RecordError("This number is out of range.", self.at(key), allowed)
        return float(value)

    def text(self, key: str, longest: int) -> str:
        """Return a line of text."""
        allowed = f"a line of 1 to {longest} characters"
        value = self.get(key, allowed)
        if not isinstance(value, str) or not 0 < len(value.strip()) <= len(value) <= longest:
            raise RecordError("This value is not such a line.", self.at(key), allowed)
        if not value.isprintable():
            raise RecordError("This line holds control characters.", self.at(key), allowed)
        return value

    def word(self, key: str) -> str:
        """Return the name of a state."""
        allowed = "lower-case letters, digits and -, at most 40"
        value = self.get(key, allowed)
        if not isinstance(value, str) or not _STATE_NAME.match(value):
            raise RecordError("This value is not such a name.", self.at(key), allowed)
        return value

    def section(self, key: str) -> _Section:
        """Return a table within this one."""
        return _Section(self.get(key, "a table of keys"), self.at(key))

    def sections(self, key: str, most: int) -> list[_Section]:
        """Return a list of tables within this one."""
        allowed = f"a list of 1 to {most} tables"
        value = self.get(key, allowed)
        if not isinstance(value, Sequence) or isinstance(value, str | bytes | bytearray):
            raise RecordError("This value is not a list.", self.at(key), allowed)
        if not 1 <= len(value) <= most:
            raise RecordError("This list has a wrong length.", self.at(key), allowed)
        return [_Section(item, f"{self.at(key)}.{i}") for i, item in enumerate(value)]


def _read_glide(
    glide: _Section, mass_kg: Range
) -> tuple[tuple[float, float] | None, tuple[float, float, float] | None, float]:
    """Return the pair or the drag figures of the reference state, and the mass they are for."""
    if "cd0" in glide.data:
        glide.only("cd0", "k", "wing_area_m2", "propeller", "configuration", "source")
        drag = (
            glide.number("cd0", (0.002, 0.5)),
            glide.number("k", (0.002, 0.5)),
            glide.number("wing_area_m2", (1.0, 1000.0)),
        )
        return None, drag, mass_kg[1]
    glide.only("best_glide_eas_kt", "ratio", "mass_kg", "propeller", "configuration", "source")
    return _read_pair(glide), None, glide.number("mass_kg", mass_kg)


def _read_pair(section: _Section) -> tuple[float, float]:
    """Return best-glide speed [m/s EAS] and ratio [-]."""
    speed_mps = section.number("best_glide_eas_kt", SPEED_KT) * KT_MPS
    return speed_mps, section.number("ratio", Figures.RATIO)


def _read_propeller(section: _Section) -> Figures:
    """Return the figures of one propeller state."""
    section.only("state", "source", "best_glide_eas_kt", "ratio", "drag_factor")
    state = section.word("state")
    if state not in PROPELLER_STATES:
        raise RecordError(
            "This propeller state is unknown.", section.at("state"), ", ".join(PROPELLER_STATES)
        )
    pair, factor = _read_effect(section)
    return Figures(state, section.text("source", 500), pair, factor)


def _read_configuration(section: _Section) -> Figures:
    """Return the figures of one configuration."""
    section.only("name", "source", "best_glide_eas_kt", "ratio", "drag_factor", "stall_eas_kt")
    name = section.word("name")
    pair, factor = _read_effect(section)
    stall = None
    if "stall_eas_kt" in section.data:
        stall = section.number("stall_eas_kt", SPEED_KT) * KT_MPS
    return Figures(name, section.text("source", 500), pair, factor, stall)


def _read_effect(section: _Section) -> tuple[tuple[float, float] | None, float | None]:
    """Return a measured pair, a drag factor, or neither; both are a fault."""
    measured = "ratio" in section.data or "best_glide_eas_kt" in section.data
    if "drag_factor" not in section.data:
        return (_read_pair(section) if measured else None), None
    if measured:
        raise RecordError(
            "A state has either a measured pair or a drag factor.",
            section.at("drag_factor"),
            "absent beside best_glide_eas_kt and ratio",
        )
    return None, section.number("drag_factor", Figures.DRAG_FACTOR)


def _check_names(list_key: str, key: str, items: tuple[Figures, ...], reference: str) -> None:
    """Raise unless names are distinct and exactly the reference state is without figures."""
    names = [item.name for item in items]
    if reference not in names:
        raise RecordError(
            "The state of the glide figures is not in the list.",
            f"glide.{list_key}",
            "a listed name",
        )
    for i, item in enumerate(items):
        if item.name in names[:i]:
            raise RecordError(
                "This name is there twice.", f"{list_key}.{i}.{key}", "distinct names"
            )
        if item.is_reference != (item.name == reference):
            raise RecordError(
                "Exactly the state of the glide figures is listed without figures of its own.",
                f"{list_key}.{i}",
                "best_glide_eas_kt and ratio, or drag_factor, except for the state of [glide]",
            )


def _sources(
    mass: _Section,
    speeds: _Section,
    glide: _Section,
    propellers: tuple[Figures, ...],
    configurations: tuple[Figures, ...],
) -> tuple[str, ...]:
    """Return one sentence for each section, the section's name before it."""
    named = [(item.path, item.text("source", 500)) for item in (mass, speeds, glide)]
    named += [(f"propeller {item.name}", item.source) for item in propellers]
    named += [(f"configuration {item.name}", item.source) for item in configurations]
    return tuple(f"{name}: {source}" for name, source in named)
