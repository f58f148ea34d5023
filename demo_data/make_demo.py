"""Write the invented demo place into a folder, byte for byte the same each time.

Run `python demo_data/make_demo.py` from the clone; `--out FOLDER` writes elsewhere. The
aircraft records are written by hand and not touched.
"""

from __future__ import annotations

import argparse
from pathlib import Path

from maker import writers
from maker.ground import level_sites, make_land_cover, sink_lake
from maker.terrain import make_height_m

DATE = "2026-06-01"
SOURCE = "Invented place (make_demo.py)"


def make(folder: Path) -> None:
    """Write all files of the place except the aircraft."""
    height_m, inland_km = make_height_m()
    lake = sink_lake(height_m)
    water = (inland_km <= 0.0) | lake
    height_m[inland_km <= 0.0] = 0.0
    elevations = level_sites(height_m)
    height_m = writers.round_height(height_m, water)
    cover = make_land_cover(height_m, water)
    tags = {"SOURCE": SOURCE, "DATE": DATE}
    datum = {"VERTICAL_DATUM": "mean sea level (invented)"}
    writers.write_raster(folder / "terrain" / "coast.tif", height_m, tags | datum, "m", -32768.0)
    writers.write_raster(folder / "landcover" / "coast.tif", cover, tags, None, 0)
    writers.write_json(folder / "landcover" / "coast.json", writers.legend(DATE))
    runways, areas = writers.site_features(elevations)
    writers.write_json(folder / "sites" / "runways.geojson", runways)
    writers.write_json(folder / "sites" / "areas.geojson", areas)
    writers.write_json(folder / "obstacles" / "obstacles.geojson", writers.obstacle_features())
    writers.write_route(folder / "routes")
    writers.write_weather(folder / "weather")
    writers.write_start(folder / "start.json")


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description="Write the invented demo place.")
    parser.add_argument("--out", type=Path, default=Path(__file__).parent)
    make(parser.parse_args().out)
