"""Speed and memory, one JSON line per figure: `python -m tests.bench`.

Each time is measured against a label-setting reference of a general library on the same grid in
the same run, since absolute times say little on a shared machine. Every figure is the median of
interleaved repeats.
"""

from __future__ import annotations

import json
import os
import socket
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import httpx
import numpy as np
import skfmm
from pyproj import Geod
from skimage.graph import MCP_Geometric

from geo import footprint as fp
from geo import layout as k
from geo.case import FT_M, KT_MPS, GlideCase
from geo.footprint import Footprint, solve
from geo.frame import frame_for
from geo.grid import Grid
from geo.label import label, ring_ranges
from geo.terrain import TerrainStore
from geo.wind import WindProfile
from perf.record import load_records
from tests.bench_terrain import LAT, LON, POST_M, write_mountains

DATA = Path(__file__).parent.parent / "demo_data"
AIRCRAFT = "vessim-two"
WIND = ((0.0, 250.0, 10.0), (5000.0, 265.0, 18.0), (12000.0, 280.0, 25.0))  # ft, deg, kt
N_POSTS = 4200
REPEATS = 5


def emit(name: str, value: float, unit: str, against: float | None = None, cells_grid: int = 0,
         cells_reached: int = 0, **more: float) -> None:  # fmt: skip
    """Print one figure."""
    ratio = None if against is None else round(value / against, 4)
    line = {"name": name, "value": round(value, 6), "unit": unit, "against": against,
            "ratio": ratio, "cells_grid": cells_grid, "cells_reached": cells_reached}  # fmt: skip
    print(json.dumps({**line, **more}), flush=True)


def case_at(alt_m: float) -> GlideCase:
    """Return the case of the benchmark at an altitude [m]: a track, three winds."""
    record = load_records(DATA / "aircraft")[AIRCRAFT]
    levels = [(ft * FT_M, np.radians(deg), kt * KT_MPS) for ft, deg, kt in WIND]
    return GlideCase(
        LON, LAT, alt_m, np.radians(70.0), record.polar(), record.maximum_speed_eas_mps,
        wind=WindProfile.from_levels(levels),
    )  # fmt: skip


def timed(function: Callable[[], object]) -> float:
    """Return how long one call takes [s]."""
    start = time.perf_counter()
    function()
    return time.perf_counter() - start


def fixed_grid(case: GlideCase, side: int) -> Grid:
    """Return a square window of `side` cells around the failure."""
    frame = frame_for(case.lon_deg, case.lat_deg)
    x_m, y_m = frame.to_xy_m(case.lon_deg, case.lat_deg)
    col0, row0 = int(x_m // POST_M) - side // 2, int(y_m // POST_M) - side // 2
    return Grid(frame, col0, row0, side, side, POST_M)


class OnGrid:
    """The solve of the endpoint on a window of a given size in place of the one it would choose."""

    def __init__(self, store: TerrainStore, side: int) -> None:
        self.store, self.side = store, side

    def __call__(self, case: GlideCase, bend: bool = True) -> Footprint:
        """Run `solve` with its choice of window replaced."""
        chosen = fp.grid_for
        fp.grid_for = lambda *_: fixed_grid(case, self.side)
        try:
            return solve(self.store, case, bend=bend)
        finally:
            fp.grid_for = chosen


def altitude_for(run: OnGrid, low_cells: int, high_cells: int) -> float:
    """Return an altitude [m] at which the number of cells reached lies between two bounds."""
    ground = float(run.store.ground_m(np.array([LON]), np.array([LAT]))[0])
    low, high = ground + 100.0, ground + 6000.0
    for _ in range(30):
        middle = 0.5 * (low + high)
        reached = int(run(case_at(middle)).labels.reach.sum())
        if low_cells <= reached <= high_cells:
            return middle
        low, high = (middle, high) if reached < low_cells else (low, middle)
    raise SystemExit(f"no altitude reaches {low_cells} to {high_cells} cells")


def reference(side: int) -> None:
    """Label a grid of ones from its middle with the general library."""
    MCP_Geometric(np.ones((side, side))).find_costs([(side // 2, side // 2)])


def bench_main(store: TerrainStore) -> tuple[float, float]:
    """Measure straight, ring, footprint and front on 1800 x 1800 cells."""
    side = 1800
    run = OnGrid(store, side)
    alt_m = altitude_for(run, 500_000, 700_000)
    case = case_at(alt_m)
    answer = run(case)
    reached, cells = int(answer.labels.reach.sum()), side * side
    top = answer.labels.top_m
    glide, grid = answer.glide, answer.grid
    times: dict[str, list[float]] = {"mcp": [], "straight": [], "ring": [], "footprint": []}
    ring_ranges(glide, grid, top)
    for _ in range(REPEATS):
        times["mcp"].append(timed(lambda: reference(side)))
        times["straight"].append(timed(lambda: run(case, bend=False)))
        times["ring"].append(timed(lambda: ring_ranges(glide, grid, top)))
        times["footprint"].append(timed(lambda: run(case)))
    mcp = statistics.median(times["mcp"])
    for name in ("straight", "ring", "footprint"):
        emit(name, statistics.median(times[name]), "s", mcp, cells, reached,
             altitude_ft=round(alt_m / FT_M))  # fmt: skip
    bench_front(answer)
    return alt_m, statistics.median(times["footprint"])


def bench_front(answer: Footprint) -> None:
    """Measure the front alone, per cell that it labels, against an eikonal solver per cell."""
    labels, side = answer.labels, answer.grid.n_rows
    cancel = np.zeros(1, dtype=np.uint8)
    phi = np.ones((side, side))
    phi[side // 2, side // 2] = -1.0
    front_s, fmm_s = [], []
    for _ in range(REPEATS):
        whole = timed(lambda: label(answer.glide, answer.grid, labels.top_m, cancel, True))
        straight = timed(lambda: label(answer.glide, answer.grid, labels.top_m, cancel, False))
        front_s.append(whole - straight)
        fmm_s.append(timed(lambda: skfmm.distance(phi)))
    reached = int((labels.alt_m > k.UNREACHED).sum())
    only_straight = label(answer.glide, answer.grid, labels.top_m, cancel, False)
    bent = reached - int((only_straight.alt_m > k.UNREACHED).sum())
    per_cell = statistics.median(front_s) / max(reached, 1)
    emit("front", per_cell * 1e6, "us per cell reached", statistics.median(fmm_s) / side**2 * 1e6,
         side * side, reached, us_per_bent_cell=statistics.median(front_s) / max(bent, 1) * 1e6,
         bent_cells=bent)  # fmt: skip


def bench_growth(store: TerrainStore) -> None:
    """Measure the time per reached cell on windows of 900, 1800 and 3600 cells."""
    previous = None
    for side in (900, 1800, 3600):
        run = OnGrid(store, side)
        share = side * side
        case = case_at(altitude_for(run, int(0.15 * share), int(0.22 * share)))
        reached = int(run(case).labels.reach.sum())
        per_cell = statistics.median(timed(lambda: run(case)) for _ in range(3)) / reached  # noqa: B023
        emit("growth", per_cell * 1e6, "us per cell reached", previous, side * side, reached)
        previous = per_cell * 1e6


def bench_memory(store: TerrainStore, alt_m: float) -> None:
    """Measure the highest resident size during the solve, less that before it."""
    run, status = OnGrid(store, 1800), Path("/proc/self/status")
    case = case_at(alt_m)

    def resident(field: str) -> int:
        line = next(x for x in status.read_text().splitlines() if x.startswith(field))
        return int(line.split()[1]) * 1024

    run(case)
    Path("/proc/self/clear_refs").write_text("5")  # resets the high-water mark
    before = resident("VmRSS")
    answer = run(case)
    extra = (resident("VmHWM") - before) / (1800 * 1800)
    emit("memory", extra, "bytes per grid cell", None, 1800 * 1800, int(answer.labels.reach.sum()))


def bench_http(folder: Path, alt_m: float) -> None:
    """Measure the endpoint with the position moved by 500 m between requests; first request."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    command = [sys.executable, "-m", "service", "--port", str(port), "--data", str(folder)]
    with subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL) as server:
        try:
            with httpx.Client(base_url=f"http://127.0.0.1:{port}", timeout=60) as client:
                _wait(client)
                _time_requests(client, TerrainStore(folder), alt_m)
        finally:
            server.terminate()


def _wait(client: httpx.Client) -> None:
    for _ in range(1200):
        try:
            if client.get("/health").status_code == 200:
                return
        except httpx.TransportError:
            time.sleep(0.1)
    raise SystemExit("the service did not start")


def _time_requests(client: httpx.Client, store: TerrainStore, alt_m: float) -> None:
    """Time the first request, then requests from moving places beside the same solves here."""
    wind = [{"altitude_ft": a, "from_deg": d, "speed_kt": s} for a, d, s in WIND]
    body = {"position": [LON, LAT], "altitude_ft": alt_m / FT_M, "track_deg": 70.0,
            "aircraft": AIRCRAFT, "wind": wind}  # fmt: skip
    emit("first_request", timed(lambda: client.post("/api/footprint", json=body)), "s")
    case, here, there = case_at(alt_m), [], []
    for i in range(2 * REPEATS):
        lon, lat, _ = Geod(ellps="WGS84").fwd(LON, LAT, 90.0, 500.0 * (i + 1))
        moved = {**body, "position": [lon, lat]}
        there.append(timed(lambda: client.post("/api/footprint", json=moved).raise_for_status()))  # noqa: B023
        at = GlideCase(**{**vars(case), "lon_deg": lon, "lat_deg": lat})
        here.append(timed(lambda: solve(store, at)))  # noqa: B023
    emit("http", statistics.median(there[2:]), "s", statistics.median(here[2:]))


def main() -> None:
    """Write the terrain, run every figure and print it."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        write_mountains(folder, N_POSTS)
        (folder / "aircraft").symlink_to(DATA / "aircraft")
        store = TerrainStore(folder)
        emit("cpu", os.cpu_count() or 0, "cores")
        alt_m, _ = bench_main(store)
        bench_memory(store, alt_m)
        bench_http(folder, alt_m)
        bench_growth(store)


if __name__ == "__main__":
    main()
