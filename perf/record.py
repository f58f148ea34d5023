"""Aircraft records: TOML files, or the same keys as a mapping, turned into polars.

A record states every number with its unit in the key and a source beside it::

    name = "..."
    [mass]           minimum_kg, maximum_kg, source
    [speeds]         stall_eas_kt, stall_mass_kg, maximum_glide_eas_kt, source
    [glide]          propeller, configuration (the state that the figures are for), source, and
                     either best_glide_eas_kt, ratio, mass_kg or cd0, k, wing_area_m2
    [[propeller]]    state, source, and either best_glide_eas_kt, ratio or drag_factor
    [[configuration]] name, source, the same figures, and stall_eas_kt where it differs

The state of [glide] is listed without figures; its order in the list is its own. The first
propeller state and the first configuration are the defaults. Speeds are equivalent airspeeds; the
manual's calibrated speed equals them within 0.1 kt at the speeds and heights of gliding flight.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from perf.errors import InputError, RecordError
from perf.polar import Polar
from perf.record_form import Figures, RecordForm, read_form

MAX_FILE_BYTES = 65_536  # a record is a few kB; a larger file is no record
_ID = re.compile(r"[A-Za-z0-9][A-Za-z0-9_-]{0,63}\Z")


@dataclass(frozen=True)
class AircraftRecord:
    """One aeroplane's figures.

    Parameters
    ----------
    id
        Stem of the file, or ``inline`` for a mapping.
    name
        Name shown to people.
    mass_min_kg, mass_max_kg
        Limits of the mass [kg].
    propeller_states, configurations
        Names, in the order of the record; the first of each is the default.
    maximum_speed_eas_mps
        Highest speed that the wind policy may choose [m/s EAS].
    sources
        Where the numbers come from, one sentence for each section.
    form
        The checked content of the record.
    """

    id: str
    name: str
    mass_min_kg: float
    mass_max_kg: float
    propeller_states: tuple[str, ...]
    configurations: tuple[str, ...]
    maximum_speed_eas_mps: float
    sources: tuple[str, ...]
    form: RecordForm

    def polar(
        self,
        mass_kg: float | None = None,
        propeller: str | None = None,
        configuration: str | None = None,
    ) -> Polar:
        """Return the polar for a mass and a state.

        Parameters
        ----------
        mass_kg
            Mass [kg]; None means the maximum.
        propeller, configuration
            Names; None means the record's first.

        Raises
        ------
        InputError
            The mass is outside the limits, or the record does not know the state.

        Derived: speeds grow with the square root of the mass, the ratio does not change.
        """
        mass = self.mass_max_kg if mass_kg is None else mass_kg
        if not self.mass_min_kg <= mass <= self.mass_max_kg:
            allowed = f"{self.mass_min_kg:g} to {self.mass_max_kg:g} kg"
            raise InputError("The mass is outside the record's limits.", "mass_kg", allowed)
        state = _pick("propeller", propeller, self.propeller_states)
        shape = _pick("configuration", configuration, self.configurations)
        return self.form.polar(mass, state, shape)


def load_record(source: Path | Mapping[str, Any]) -> AircraftRecord:
    """Return the checked record of a TOML file or of a mapping with the same keys.

    Raises
    ------
    RecordError
        The record is faulty: its `field` is the dotted path of the fault (`propeller.1.state`)
        and its `allowed` the allowed range; for a file the detail begins with the file's name.
    """
    if isinstance(source, Path):
        try:
            return _load(_read_toml(source), source.stem)
        except RecordError as error:
            detail = f"{source.name}: {error.detail}"
            raise RecordError(detail, error.field, error.allowed) from None
    return _load(source, "inline")


def load_records(folder: Path) -> dict[str, AircraftRecord]:
    """Return the records of all TOML files in a folder by id, in the order of their names.

    Raises
    ------
    RecordError
        A file is faulty; the detail begins with its name.
    """
    return {path.stem: load_record(path) for path in sorted(folder.glob("*.toml"))}


def _read_toml(path: Path) -> dict[str, Any]:
    """Return the content of a TOML file, or raise in words."""
    if not _ID.match(path.stem):
        raise RecordError(
            "The file name is no record id.", None, "letters, digits, - and _, at most 64"
        )
    try:
        if not path.is_file():
            raise RecordError("There is no such file.")
        if path.stat().st_size > MAX_FILE_BYTES:
            raise RecordError("The file is too large for a record.", None, "at most 64 kB")
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError:
        raise RecordError("The file cannot be read.") from None
    except (tomllib.TOMLDecodeError, UnicodeDecodeError, RecursionError, ValueError) as error:
        where = re.search(r"line \d+, column \d+", str(error))
        place = f" at {where.group()}" if where else ""
        raise RecordError(f"The file is not valid TOML{place}.") from None


def _load(data: Mapping[str, Any], record_id: str) -> AircraftRecord:
    """Return the record of parsed content, every state of it tried."""
    form = read_form(data)
    _check_states(form)
    return AircraftRecord(
        id=record_id,
        name=form.name,
        mass_min_kg=form.mass_min_kg,
        mass_max_kg=form.mass_max_kg,
        propeller_states=tuple(item.name for item in form.propellers),
        configurations=tuple(item.name for item in form.configurations),
        maximum_speed_eas_mps=form.maximum_speed_eas_mps,
        sources=form.sources,
        form=form,
    )


def _check_states(form: RecordForm) -> None:
    """Raise when any state of the record glides outside what the model accepts."""
    for i, propeller in enumerate(form.propellers):
        for j, configuration in enumerate(form.configurations):
            field = _blame(i, propeller, j, configuration)
            polar = form.polar(form.mass_max_kg, propeller.name, configuration.name)
            if not Figures.RATIO[0] <= polar.ratio <= Figures.RATIO[1]:
                raise RecordError(
                    "The glide ratio of this state is out of range.", field, "3 to 70"
                )
            if not polar.stall_eas_mps < polar.best_glide_eas_mps:
                raise RecordError(
                    "The stall speed is not below the best-glide speed of this state.",
                    field,
                    "stall speed below best-glide speed at the same mass",
                )
            if not polar.best_glide_eas_mps <= form.maximum_speed_eas_mps:
                raise RecordError(
                    "The best-glide speed of this state is above the maximum glide speed.",
                    "speeds.maximum_glide_eas_kt",
                    "at least the best-glide speed at maximum mass",
                )


def _blame(i: int, propeller: Figures, j: int, configuration: Figures) -> str:
    """Return the dotted path of the section whose figures make a state what it is."""
    if not configuration.is_reference:
        return f"configuration.{j}"
    return "glide" if propeller.is_reference else f"propeller.{i}"


def _pick(field: str, name: str | None, known: tuple[str, ...]) -> str:
    """Return the name, or the first known one for None."""
    if name is None:
        return known[0]
    if name not in known:
        raise InputError("The record does not know this state.", field, ", ".join(known))
    return name
