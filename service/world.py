"""What the data folder holds, read once at start, and how one request is solved with it."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from math import isnan
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic import ValidationError

import geo.footprint
from geo.case import FT_M, KT_MPS, SolveLimits
from geo.footprint import Footprint
from geo.sites import Site, load_sites, sites_feature_collection
from geo.terrain import TerrainStore
from perf.errors import InputError, ModelError, TerrainError
from perf.record import AircraftRecord, load_records
from service import convert
from service.answers import CatalogAnswer
from service.cautions import CAUTIONS, SHOWN
from service.schemas import FootprintRequest, MarginsRequest
from service.settings import Settings, SettingsError

Solver = Callable[..., Footprint]
START_FILE = "start.json"
START_HEIGHT_FT = 3000.0  # above the ground in the terrain's middle, where there is no start file
START_FILE_MAX_BYTES = 65_536


@dataclass(frozen=True)
class World:
    """The data folder, read.

    Parameters
    ----------
    settings
        Settings of the service.
    store
        Terrain, obstacles and land cover.
    records
        Aircraft records by id.
    sites
        Landing sites.
    solver
        The function that computes a footprint; tests put their own here.
    """

    settings: Settings
    store: TerrainStore
    records: dict[str, AircraftRecord]
    sites: tuple[Site, ...]
    solver: Solver = geo.footprint.solve

    def solve(
        self, request: FootprintRequest, cancel: NDArray[np.uint8] | None = None
    ) -> tuple[AircraftRecord, Footprint]:
        """Return the record and the footprint of a request.

        Raises
        ------
        ModelError
            The request cannot be answered, or was stopped through `cancel`.
        """
        record = convert.record_of(request.aircraft, self.records)
        case = convert.case_of(request, record)
        self.check_place(case.lon_deg, case.lat_deg, case.alt_m)
        limits = SolveLimits(max_cells=self.settings.solve_cells_max)
        found = self.solver(self.store, case, sites=self.sites, limits=limits, cancel=cancel)
        return record, found

    def check_place(self, lon_deg: float, lat_deg: float, alt_m: float) -> None:
        """Make sure that the aeroplane is over known ground and above it.

        Raises
        ------
        TerrainError
            The position is off the terrain or over a void.
        InputError
            The altitude is not above the ground.
        """
        ground_m = float(self.store.ground_m(lon_deg, lat_deg))
        if isnan(ground_m):
            raise TerrainError(
                "There is no terrain at this position.", "position", "a place on the terrain loaded"
            )
        if alt_m <= ground_m:
            raise InputError(
                "The altitude is at or below the ground. Give the true height above sea level.",
                "altitude_ft",
                f"above {ground_m / FT_M:.0f} ft at this position",
            )

    def start(self) -> dict[str, Any]:
        """Return the request that the page starts with.

        Raises
        ------
        SettingsError
            The start file of the data folder is not a footprint request, or not one of this data.
        """
        path = self.settings.data / START_FILE
        if path.is_file():
            try:
                if path.stat().st_size > START_FILE_MAX_BYTES:
                    raise ValueError("too large for one request")
                case = json.loads(path.read_bytes())
                case.pop("note", None)  # for people who read the file
                request = FootprintRequest.model_validate(case)
            except (ValidationError, ValueError, AttributeError, TypeError, RecursionError):
                raise SettingsError(
                    f"{START_FILE} in the data folder is not a footprint request."
                ) from None
            self._check_start(request)
            return request.model_dump(mode="json", exclude_unset=True)
        return self._middle()

    def _check_start(self, request: FootprintRequest) -> None:
        """Make sure that the start can be asked for; a faulty terrain file is told elsewhere."""
        try:
            case = convert.case_of(request, convert.record_of(request.aircraft, self.records))
            self.check_place(case.lon_deg, case.lat_deg, case.alt_m)
        except ModelError as error:
            if error.field is not None:
                raise SettingsError(
                    f"{START_FILE} in the data folder cannot be used: {error.field}: {error.detail}"
                ) from None

    def _middle(self) -> dict[str, Any]:
        """Return a start over the middle of the first terrain file that has ground there."""
        aircraft = next(iter(self.records))
        lon, lat, ground_m = 0.0, 0.0, 0.0
        for source in self.store.sources:
            west, south, east, north = source.bbox
            wide = (east - west) % 360.0
            lon = round((west + wide / 2.0 + 180.0) % 360.0 - 180.0, 5)
            lat = round((south + north) / 2.0, 5)
            try:
                ground_m = float(self.store.ground_m(lon, lat))
            except TerrainError:  # a file of the folder is refused; the answers will say so
                ground_m = 0.0
                break
            if not isnan(ground_m):
                break
        altitude_ft = round(((0.0 if isnan(ground_m) else ground_m) / FT_M + START_HEIGHT_FT), -2)
        return {"position": [lon, lat], "altitude_ft": altitude_ft, "aircraft": aircraft}

    def catalog(self) -> dict[str, Any]:
        """Return what this service has: aeroplanes, landing sites, terrain, margins, limits."""
        catalog = {
            "aircraft": [_aircraft_json(record) for record in self.records.values()],
            "sites": sites_feature_collection(self.sites),
            "terrain": [convert.source_json(source) for source in self.store.sources],
            "margins": margin_ranges(),
            "limits": [*CAUTIONS, *self.store.notes],
        }
        return CatalogAnswer.model_validate(catalog).model_dump(mode="json")


def load_world(settings: Settings) -> World:
    """Read the data folder.

    Raises
    ------
    SettingsError
        The folder has no aircraft record.
    ModelError
        A file of the folder is faulty; the detail names it.
    """
    store = TerrainStore(settings.data)
    records = load_records(settings.data / "aircraft")
    if not records:
        raise SettingsError(f"There is no record (*.toml) in {settings.data / 'aircraft'}.")
    return World(settings, store, records, tuple(load_sites(settings.data)))


def _aircraft_json(record: AircraftRecord) -> dict[str, Any]:
    polar = record.polar()
    return {
        "id": record.id,
        "name": record.name,
        "mass_min_kg": record.mass_min_kg,
        "mass_max_kg": record.mass_max_kg,
        "propeller": list(record.propeller_states),
        "configuration": list(record.configurations),
        "best_glide_eas_kt": round(polar.best_glide_eas_mps / KT_MPS, 1),
        "ratio": round(polar.ratio, 3),
    }


def margin_ranges() -> dict[str, Any]:
    """Return default and bounds of each margin, read from the request's own schema."""
    usual = convert.margins_json(convert.margins_of(None), convert.REACTION_HIGH_S)
    fields = MarginsRequest.model_json_schema()["properties"]
    ranges: dict[str, Any] = {}
    for name, shown in SHOWN.items():
        number = fields[name]["anyOf"][0]
        ranges[name] = {
            "default": None if name == "reaction_s" else usual[name],
            "minimum": number["minimum"],
            "maximum": number["maximum"],
            "less_safe": "above" if shown.sign > 0 else "below",
            "text": number["description"],
        }
    return ranges


def library_folder() -> Path:
    """Return the folder of the installed map library's files.

    Raises
    ------
    SettingsError
        The library is not installed.
    """
    from importlib import resources

    try:
        folder = resources.files("js_lib_leaflet") / "static" / "js_lib_leaflet"
    except ModuleNotFoundError:
        raise SettingsError(
            "The map library is not installed: run `pip install -e .` in the clone."
        ) from None
    path = Path(str(folder))
    if not (path / "leaflet.js").is_file():
        raise SettingsError("The installed map library has no leaflet.js: install it again.")
    return path
