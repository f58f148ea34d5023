"""The only door to raster files: what is opened, and what is refused before anything is read.

A file may be huge, cut short, or a text that points at other files or at the network. So every
open names its drivers, looks at no neighbouring file, and checks size, bands, type and the
decoded block first. Messages carry the file's name, never its path.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio.errors import NotGeoreferencedWarning, RasterioError
from rasterio.windows import Window

from perf.errors import TerrainError

DRIVERS = {".tif": "GTiff", ".tiff": "GTiff", ".hgt": "SRTMHGT"}
MAX_PIXELS = 400_000_000  # of one file: 20000 x 20000
MAX_BLOCK_BYTES = 64 * 2**20  # decoded size of the piece that is unpacked at once
MAX_UNPACKED_BYTES = 256 * 2**20  # up to here any compression is taken
MAX_UNPACK_RATIO = 250.0  # beyond that size; real heights unpack 2 to 20 times
HEIGHT_TYPES = ("int8", "uint8", "int16", "uint16", "int32", "uint32", "float32", "float64")
CLASS_TYPES = ("uint8", "int16", "uint16")
ALLOWED = "GeoTIFF (or .hgt), one band of real numbers, up to 400 million cells, blocks up to 64 MB"

# No directory listing, no side files, no network, no Python pixel functions.
_ENVIRONMENT: dict[str, Any] = {
    "GDAL_DISABLE_READDIR_ON_OPEN": "EMPTY_DIR",
    "GDAL_PAM_ENABLED": "NO",
    "GDAL_GEOREF_SOURCES": "INTERNAL",
    "GDAL_VRT_ENABLE_PYTHON": "NO",
    "CPL_VSIL_CURL_ALLOWED_EXTENSIONS": ".none",
    "GDAL_HTTP_MAX_RETRY": "0",
    "GDAL_CACHEMAX": 64 * 2**20,
}


def raster_files(folder: Path) -> list[Path]:
    """Return the raster files of a folder by name, an empty list where there is no folder."""
    if not folder.is_dir():
        return []
    return sorted(p for p in folder.iterdir() if p.suffix.lower() in DRIVERS and p.is_file())


@contextmanager
def open_raster(path: Path, dtypes: tuple[str, ...] = HEIGHT_TYPES) -> Iterator[Any]:
    """Open a raster file that has passed every check, and close it again.

    Parameters
    ----------
    path
        File; its suffix chooses the only driver that may open it.
    dtypes
        Names of the number types that are taken.

    Raises
    ------
    TerrainError
        The file is of another format, cut short, too large, or packed too densely.
    """
    if path.suffix.lower() not in DRIVERS:
        raise refusal(path, "has a suffix that is not read")
    try:
        opened = open_unchecked(path)
    except NotGeoreferencedWarning:  # where warnings are errors
        raise refusal(path, "does not say where it lies") from None
    except (RasterioError, OSError, ValueError):
        raise refusal(path, "is cut short or is not a raster of its kind") from None
    with opened as dataset:
        check(dataset, path, dtypes)
        with rasterio.Env(**_ENVIRONMENT):
            yield dataset


def open_unchecked(path: Path) -> Any:
    """Return an open dataset of a file that has not been checked: read its header, nothing else."""
    with rasterio.Env(**_ENVIRONMENT):
        return rasterio.open(path, driver=DRIVERS[path.suffix.lower()])


def check(dataset: Any, path: Path, dtypes: tuple[str, ...]) -> None:
    """Refuse an open dataset that would be too large or is of no use.

    Raises
    ------
    TerrainError
        Says which check failed.
    """
    if dataset.count != 1:
        raise refusal(path, "has more than one band")
    if dataset.dtypes[0] not in dtypes:
        raise refusal(path, f"holds numbers of a type that is not read ({', '.join(dtypes)} are)")
    pixels = dataset.width * dataset.height
    if pixels > MAX_PIXELS:
        raise refusal(path, "has more than 400 million cells")
    item = np.dtype(dataset.dtypes[0]).itemsize
    rows, columns = dataset.block_shapes[0]
    if rows * columns * item > MAX_BLOCK_BYTES:
        raise refusal(path, "unpacks more than 64 MB at once; write it tiled")
    unpacked = pixels * item
    if unpacked > max(MAX_UNPACKED_BYTES, MAX_UNPACK_RATIO * path.stat().st_size):
        raise refusal(path, "is packed more densely than heights can be")
    if dataset.crs is None or dataset.transform.is_identity:
        raise refusal(path, "does not say where it lies")
    if dataset.transform.is_degenerate:
        raise refusal(path, "has cells without size")


def read_window(dataset: Any, path: Path, window: tuple[int, int, int, int]) -> NDArray[Any]:
    """Return the raw numbers of a window, masked where the file says "no data".

    Parameters
    ----------
    dataset
        As `open_raster` gives it.
    path
        Its file, for messages.
    window
        ``(row0, row1, column0, column1)``, within the raster.

    Returns
    -------
    Masked array, shape ``(row1 - row0, column1 - column0)``, in the file's own type.

    Raises
    ------
    TerrainError
        The data are cut short or damaged.
    """
    row0, row1, column0, column1 = window
    try:
        part = Window(column0, row0, column1 - column0, row1 - row0)
        values: NDArray[Any] = np.ma.asanyarray(dataset.read(1, window=part, masked=True))
    except (RasterioError, OSError, ValueError, MemoryError):
        raise refusal(path, "is cut short or damaged") from None
    return values


def refusal(path: Path, reason: str) -> TerrainError:
    """Return the error that refuses a file: its name and the reason, never its path."""
    return TerrainError(f"The raster file {path.name} {reason}.", allowed=ALLOWED)
