"""A small invented data folder, a stand-in for the solver, and an application made of them."""

from __future__ import annotations

import threading
import time
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from rasterio import Affine
from shapely.geometry import MultiPolygon, box

from geo.answers import Explanation, GlidePath, PathPoint, ProfilePoint, Ridge, SiteReach
from geo.case import NM_M, GlideCase
from perf.errors import Cancelled
from service.settings import Settings

WEST, NORTH, STEP_DEG, POSTS = -20.0, 50.0, 0.0005, 400  # open sea; posts about 36 x 56 m
MIDDLE = (WEST + 0.1, NORTH - 0.1)
HILL_M = 300.0
VOID = (WEST + 0.18, NORTH - 0.18)

RECORD = """\
name = "Test Two"
[mass]
minimum_kg = 500
maximum_kg = 750
source = "Invented for the tests"
[speeds]
stall_eas_kt = 45
stall_mass_kg = 750
maximum_glide_eas_kt = 110
source = "Invented for the tests"
[glide]
best_glide_eas_kt = 68
ratio = 9.0
mass_kg = 750
propeller = "windmilling"
configuration = "clean"
source = "Invented for the tests"
[[propeller]]
state = "windmilling"
source = "The figures of the glide section"
[[propeller]]
state = "stopped"
drag_factor = 0.9
source = "Invented for the tests"
[[configuration]]
name = "clean"
source = "The figures of the glide section"
"""

REQUEST: dict[str, Any] = {
    "position": list(MIDDLE),
    "altitude_ft": 2500,
    "aircraft": "test-two",
    "track_deg": 90,
}


def write_data(folder: Path) -> Path:
    """Write the data folder: a round hill in the middle, sea in the west, a void south-east."""
    for part in ("terrain", "aircraft"):
        (folder / part).mkdir(parents=True, exist_ok=True)
    lon = WEST + STEP_DEG * np.arange(POSTS)
    lat = NORTH - STEP_DEG * np.arange(POSTS)
    away = np.hypot(*np.meshgrid((lon - MIDDLE[0]) / 0.04, (lat - MIDDLE[1]) / 0.03))
    heights = (HILL_M * np.exp(-(away**2)) + 40.0).astype(np.float32)
    heights[:, lon < WEST + 0.03] = 0.0
    void_col = int((VOID[0] - WEST) / STEP_DEG)
    void_row = int((NORTH - VOID[1]) / STEP_DEG)
    heights[void_row - 10 : void_row + 10, void_col - 10 : void_col + 10] = -9999.0
    with rasterio.open(
        folder / "terrain" / "isle.tif", "w", driver="GTiff", width=POSTS, height=POSTS, count=1,
        dtype="float32", crs="EPSG:4326", nodata=-9999.0,
        transform=Affine(STEP_DEG, 0, WEST - STEP_DEG / 2, 0, -STEP_DEG, NORTH + STEP_DEG / 2),
    ) as out:  # fmt: skip
        out.write(heights, 1)
    (folder / "aircraft" / "test-two.toml").write_text(RECORD, encoding="utf-8")
    return folder


def write_static(folder: Path) -> Path:
    """Write a page of one line."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "index.html").write_text("<!doctype html><title>Page</title>", encoding="utf-8")
    return folder


def settings_in(folder: Path, **changes: Any) -> Settings:
    """Return settings for a data folder and a page within `folder`, without warm-up."""
    data, static = write_data(folder / "data"), write_static(folder / "static")
    changes = {"warm_up": False, **changes}
    return Settings(data=data, static=static, work=folder / "work", **changes)


@dataclass(frozen=True)
class Figures:
    """Figures of the stand-in, SI."""

    best_glide_eas_mps: float = 35.0
    speed_eas_mps: float = 35.0
    ratio_record: float = 9.0
    ratio_used: float = 8.1
    sink_mps: float = 4.3
    turn_180_loss_m: float = 95.0
    reaction_s: float = 10.0


class StandIn:
    """Answers like a footprint, without solving: a square with a hole and a smaller square."""

    def __init__(self, store: Any, case: GlideCase) -> None:
        self.case = case
        self.cell_m = 30.0 if case.detail == "fine" else 120.0
        self.ground_m = float(store.ground_m(case.lon_deg, case.lat_deg))
        lon, lat = case.lon_deg, case.lat_deg
        hole = box(lon + 0.01, lat + 0.01, lon + 0.02, lat + 0.02)
        area = box(lon - 0.05, lat - 0.05, lon + 0.05, lat + 0.05).difference(hole)
        self.footprint = MultiPolygon([area])
        self.straight = MultiPolygon([box(lon - 0.02, lat - 0.02, lon + 0.0123456789, lat + 0.005)])
        self.footprint_km2, self.straight_km2 = 79.5, 7.1
        self.figures = Figures()
        self.ranges = [(np.radians(10.0 * i), 3.0 * NM_M) for i in range(36)]
        self.straight_ranges = [(bearing, 0.9 * away) for bearing, away in self.ranges]
        self.sources = store.sources
        self.limits = ["No wind given: calm air is assumed."]
        self.sites = [SiteReach("x", "Field", True, 128.0, 1.0, 2000.0, None)]

    def explain(self, lon: float, lat: float) -> Explanation:
        """Say that a ridge is in the way."""
        ridge = Ridge(lon, lat, 300.0, 30.0, 1000.0)
        return Explanation(False, "ridge", "A ridge is in the way.", None, None, 40.0, None, ridge)

    def path_to(self, lon: float, lat: float) -> GlidePath | None:
        """Return a path with one bend."""
        start = PathPoint(self.case.lon_deg, self.case.lat_deg, 0.0, 0.0, 700.0, "start")
        turn = PathPoint(lon, self.case.lat_deg, 0.0, 0.0, 600.0, "turn_start", 0.5, -1.0)
        end = PathPoint(lon, lat, 0.0, 0.0, 400.0, "end")
        return GlidePath((start, turn, end), 400.0, 0)

    def section(self, lon: float, lat: float) -> list[ProfilePoint]:
        """Return more points than an answer may have; one of them without ground."""
        points = [ProfilePoint(10.0 * i, lon, lat, 40.0, 100.0, 500.0 - i) for i in range(1000)]
        points[0] = ProfilePoint(0.0, lon, lat, None, None, float("nan"))
        return points

    def path_profile(self, path: GlidePath) -> list[ProfilePoint]:
        """Return two points."""
        return [ProfilePoint(0.0, p.lon_deg, p.lat_deg, 40.0, 100.0, p.alt_m) for p in path.points]


def stand_in(store: Any, case: GlideCase, **_: Any) -> StandIn:
    """Solve nothing."""
    return StandIn(store, case)


class SlowSolver:
    """Works until it is told to stop, as a kernel would; counts what happened.

    Parameters
    ----------
    longest_s
        Ends by itself after this [s], so that a failing test ends too.
    """

    def __init__(self, longest_s: float = 20.0) -> None:
        self.longest_s = longest_s
        self.started = threading.Semaphore(0)
        self.starts = 0
        self.stopped_after_s: list[float] = []
        self.release = threading.Event()

    def __call__(self, store: Any, case: GlideCase, *, cancel: Any, **_: Any) -> StandIn:
        """Wait for the flag or the release."""
        self.starts += 1
        self.started.release()
        begin = time.monotonic()
        while time.monotonic() - begin < self.longest_s and not self.release.is_set():
            if cancel[0]:
                self.stopped_after_s.append(time.monotonic() - begin)
                raise Cancelled
            time.sleep(0.005)
        return StandIn(store, case)
