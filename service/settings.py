"""Where the data lies and how much the service takes on: every limit in one place."""

from __future__ import annotations

import os
from dataclasses import dataclass, field
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent  # the clone: the package is installed editable

ALTITUDE_MIN_FT = -1500.0  # below the lowest dry land (about -1400 ft)
ALTITUDE_MAX_FT = 60_000.0
LATITUDE_MAX_DEG = 80.0  # frames and tiles are not checked nearer the poles
WIND_LEVELS_MAX = 50
WIND_MAX_KT = 250.0
FAILURE_SPEED_FACTOR = 1.5  # speed at failure at most, in units of the record's fastest glide
TILE_ZOOM_MAX = 17  # about 1 m a pixel at 45 degrees: far finer than any post spacing


class SettingsError(Exception):
    """The service cannot start with these settings; the message says why in words."""


@dataclass(frozen=True)
class Settings:
    """Settings of one running service.

    Parameters
    ----------
    data
        Folder of open formats: ``terrain/`` and ``aircraft/`` are needed, the rest may be absent.
    static
        Folder of the page.
    work
        Folder for results worth keeping.
    warm_up
        Compile the solver and solve the start case before the first request is taken.
    body_max_bytes
        Largest request body [byte].
    depth_max
        Deepest nesting of arrays and objects in a request body.
    solve_cells_max
        Largest solver grid [cells].
    solves_at_once, solves_waiting
        Solves that run together, and further ones that wait; any more are refused.
    retry_after_s
        When a refused client may try again [s].
    tiles_at_once, tiles_waiting
        The same for relief tiles, which have threads of their own.
    tile_cache_bytes
        Finished relief tiles kept in memory [byte].
    """

    data: Path = field(default_factory=lambda: default_data())
    static: Path = ROOT / "static"
    work: Path = field(default_factory=lambda: default_work())
    warm_up: bool = True
    body_max_bytes: int = 256_000
    depth_max: int = 64
    solve_cells_max: int = 16_000_000
    solves_at_once: int = 2
    solves_waiting: int = 8
    retry_after_s: int = 2
    tiles_at_once: int = 1
    tiles_waiting: int = 128
    tile_cache_bytes: int = 32_000_000


def default_data() -> Path:
    """Return the folder named by ``ENGINEOUT_DATA``, or the demo data beside the packages."""
    named = os.environ.get("ENGINEOUT_DATA")
    return Path(named) if named else ROOT / "demo_data"


def default_work() -> Path:
    """Return the user's cache folder for this program; it is made when first needed."""
    cache = os.environ.get("XDG_CACHE_HOME")
    return (Path(cache) if cache else Path.home() / ".cache") / "engineout"


def check_data(settings: Settings) -> None:
    """Make sure that the data folder is there.

    Raises
    ------
    SettingsError
        The folder, or its terrain or aircraft part, is missing.
    """
    if not settings.data.is_dir():
        raise SettingsError(
            f"The data folder {settings.data} is missing. Name one that is there with --data or "
            "ENGINEOUT_DATA, or run from a whole clone, which carries demo_data/."
        )
    for part in ("terrain", "aircraft"):
        if not (settings.data / part).is_dir():
            raise SettingsError(
                f"The data folder {settings.data} has no folder {part}/. It needs terrain/ with "
                "elevation rasters and aircraft/ with aircraft records."
            )


def check_static(settings: Settings) -> None:
    """Make sure that the page is there.

    Raises
    ------
    SettingsError
        The folder or its index page is missing.
    """
    if not (settings.static / "index.html").is_file():
        raise SettingsError(
            f"The page's folder {settings.static} is missing or has no index.html. "
            "Install with `pip install -e .` from a whole clone."
        )
