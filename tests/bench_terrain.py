"""Mountainous terrain for the benchmark: a fractal surface, the same on every run."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio.crs import CRS
from rasterio.transform import from_origin

POST_M = 30.0
LON, LAT = -130.0, -44.0  # middle of the terrain: the lattice point of a local frame
CRS_LOCAL = CRS.from_proj4(f"+proj=aeqd +lon_0={LON} +lat_0={LAT} +datum=WGS84 +units=m")


def mountains(n_posts: int, relief_m: float = 3000.0, seed: int = 7) -> NDArray[np.float32]:
    """Return heights [m], shape ``(n_posts, n_posts)``, with the slopes of young mountains.

    Spectrum: amplitude falls with wave number to the power 2.2, common practice for terrain.
    """
    rng = np.random.default_rng(seed)
    fy, fx = np.fft.fftfreq(n_posts)[:, None], np.fft.rfftfreq(n_posts)[None, :]
    wave = np.hypot(fx, fy) * n_posts
    wave[0, 0] = 1.0
    # waves longer than 20 km are held level, so that valleys and ridges alternate within reach
    wave = np.maximum(wave, n_posts * POST_M / 20_000.0)
    spectrum = wave**-2.2 * np.exp(2j * np.pi * rng.random(wave.shape))
    heights = np.fft.irfft2(spectrum, s=(n_posts, n_posts))
    heights = (heights - heights.min()) / (heights.max() - heights.min())
    return (heights * relief_m).astype(np.float32)


def write_mountains(folder: Path, n_posts: int) -> NDArray[np.float32]:
    """Write the terrain of the benchmark into a data folder and return its heights."""
    heights = mountains(n_posts)
    (folder / "terrain").mkdir(parents=True)
    half = n_posts * POST_M / 2.0
    with rasterio.open(
        folder / "terrain" / "mountains.tif", "w", driver="GTiff", height=n_posts, width=n_posts,
        count=1, dtype="float32", crs=CRS_LOCAL, transform=from_origin(-half, half, POST_M, POST_M),
        tiled=True, blockxsize=256, blockysize=256,
    ) as target:  # fmt: skip
        target.write(heights, 1)
    return heights
