"""Writers: rasters, GeoJSON, GPX and JSON, always with the same bytes."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import rasterio
from pyproj import Transformer
from rasterio.transform import from_origin

from . import layout, places
from .ground import LEGEND, unit_vector

FOOT_M = 0.3048
_TO_LONLAT = Transformer.from_crs(layout.EPSG, 4326, always_xy=True)
SITE_NAMES = ("width_ft", "surface", "slope_pct", "lit", "arrival_height_ft", "source",
              "survey_date", "review_due")  # fmt: skip


def lonlat(east_km, north_km):
    """Return longitude and latitude of a place, to about 0.1 m."""
    lon, lat = _TO_LONLAT.transform(
        layout.WEST_M + 1000.0 * east_km, layout.SOUTH_M + 1000.0 * north_km
    )
    return [round(lon, 6), round(lat, 6)]


def write_json(path: Path, value):
    """Write JSON with a fixed layout."""
    path.parent.mkdir(parents=True, exist_ok=True)
    text = json.dumps(value, indent=1, ensure_ascii=False)
    path.write_text(text + "\n", encoding="utf-8", newline="\n")


def write_raster(path: Path, grid, tags, unit, nodata):
    """Write a tiled GeoTIFF; LZW, because its bytes do not depend on a library's version."""
    path.parent.mkdir(parents=True, exist_ok=True)
    north_m = layout.SOUTH_M + layout.SIDE_CELLS * layout.CELL_M
    profile = {
        "driver": "GTiff", "width": grid.shape[1], "height": grid.shape[0], "count": 1,
        "dtype": grid.dtype.name, "crs": f"EPSG:{layout.EPSG}", "nodata": nodata,
        "transform": from_origin(layout.WEST_M, north_m, layout.CELL_M, layout.CELL_M),
        "tiled": True, "blockxsize": 256, "blockysize": 256,
        "compress": "LZW", "predictor": 2 if grid.dtype.kind in "iu" else 3,
    }  # fmt: skip
    with rasterio.open(path, "w", **profile) as raster:
        raster.write(grid, 1)
        raster.update_tags(**tags)
        if unit:
            raster.set_band_unit(1, unit)


def _collection(features):
    """Return a GeoJSON FeatureCollection."""
    return {"type": "FeatureCollection", "features": features}


def _feature(kind, coordinates, properties):
    """Return a GeoJSON feature."""
    geometry = {"type": kind, "coordinates": coordinates}
    return {"type": "Feature", "geometry": geometry, "properties": properties}


def _site_properties(site, elevation_m):
    """Return the properties of a runway or area."""
    given = [round(site[8][0] / FOOT_M), *site[8][1:]]
    head = {"id": site[0], "name": site[1], "kind": site[2], "status": site[3]}
    length_ft = round(site[7] / FOOT_M)
    return {
        **head, "elevation_ft": round(elevation_m / FOOT_M), "length_ft": length_ft,
        **dict(zip(SITE_NAMES, given, strict=True)),
    }  # fmt: skip


def site_features(elevations):
    """Return the landing sites as two FeatureCollections: runways, and areas and points."""
    runways, areas = [], []
    for site in places.RUNWAYS:
        ux, uy = unit_vector(site[6])
        half = 0.0005 * site[7]
        line = [lonlat(site[4] + s * half * ux, site[5] + s * half * uy) for s in (-1, 1)]
        runways.append(_feature("LineString", line, _site_properties(site, elevations[site[0]])))
    for site in places.AREAS:
        ux, uy = unit_vector(site[6])
        a, b = 0.0005 * site[7], 0.0005 * site[8][0]
        corners = ((-a, -b), (a, -b), (a, b), (-a, b), (-a, -b))
        ring = [lonlat(site[4] + s * ux - t * uy, site[5] + s * uy + t * ux) for s, t in corners]
        areas.append(_feature("Polygon", [ring], _site_properties(site, elevations[site[0]])))
    for site in places.POINTS:
        head = {"id": site[0], "name": site[1], "kind": site[2], "status": site[3]}
        names = ("elevation_ft", "length_ft", *SITE_NAMES)
        properties = {**head, **dict.fromkeys(names), "source": "Map study"}
        areas.append(_feature("Point", lonlat(site[4], site[5]), properties))
    return _collection(runways), _collection(areas)


def obstacle_features():
    """Return the obstacles as a FeatureCollection."""
    features = []
    for name, kind, points, height_ft, across_ft, up_ft, date in places.OBSTACLES:
        line = [lonlat(*point) for point in points]
        properties = {
            "name": name, "type": kind, "height_ft": height_ft,
            "accuracy_horizontal_ft": across_ft, "accuracy_vertical_ft": up_ft,
            "source": "Invented obstacle list", "date": date,
        }  # fmt: skip
        if len(line) > 1:
            features.append(_feature("LineString", line, properties))
        else:
            features.append(_feature("Point", line[0], properties))
    return _collection(features)


def write_route(folder: Path):
    """Write the route as GPX 1.1 and as GeoJSON with altitudes in metres."""
    folder.mkdir(parents=True, exist_ok=True)
    points = [(name, *lonlat(e, n), round(ft * FOOT_M, 1)) for name, e, n, ft in places.ROUTE]
    lines = [
        '<?xml version="1.0" encoding="UTF-8"?>',
        '<gpx version="1.1" creator="make_demo" xmlns="http://www.topografix.com/GPX/1/1">',
        " <rte>",
        "  <name>Tarvane to Orrendale</name>",
    ]
    lines += [
        f'  <rtept lat="{lat}" lon="{lon}"><ele>{ele}</ele><name>{name}</name></rtept>'
        for name, lon, lat, ele in points
    ]
    lines += [" </rte>", "</gpx>", ""]
    path = folder / "tarvane-orrendale.gpx"
    path.write_text("\n".join(lines), encoding="utf-8", newline="\n")
    properties = {
        "name": "Tarvane to Orrendale",
        "points": [name for name, *_ in points],
        "altitudes_ft": [ft for *_, ft in places.ROUTE],
    }
    line = _feature("LineString", [[lon, lat, ele] for _, lon, lat, ele in points], properties)
    write_json(folder / "tarvane-orrendale.geojson", _collection([line]))


def _levels(name):
    """Return the wind levels of one weather case."""
    keys = ("altitude_ft", "from_deg", "speed_kt")
    return [dict(zip(keys, level, strict=True)) for level in places.WEATHER[name]["wind"]]


def write_weather(folder: Path):
    """Write each weather case."""
    for key, case in places.WEATHER.items():
        head = {k: case[k] for k in ("name", "valid", "note")}
        write_json(folder / f"{key}.json", {**head, "wind": _levels(key)})


def write_start(path: Path):
    """Write the page's first view."""
    start = places.START
    view = {
        "position": lonlat(start["east"], start["north"]), "altitude_ft": start["altitude_ft"],
        "track_deg": start["track_deg"], "aircraft": start["aircraft"],
        "wind": _levels(start["wind"]), "note": start["note"],
    }  # fmt: skip
    write_json(path, view)


def round_height(height_m, water):
    """Return float32 heights in steps that grow with the slope, sea 0 and land 0.5 m or more."""
    z = np.asarray(height_m)
    fall = np.zeros(z.shape)
    fall[1:-1, 1:-1] = np.maximum(
        np.abs(z[2:, 1:-1] - z[:-2, 1:-1]), np.abs(z[1:-1, 2:] - z[1:-1, :-2])
    )
    fine = np.floor(z * 4.0 + 0.5) / 4.0
    coarse = np.floor(z * 2.0 + 0.5) / 2.0
    out = np.where(fall > 12.0, coarse, fine)
    return np.where(water, z, np.maximum(out, 0.5)).astype(np.float32)


def legend(date):
    """Return the land-cover legend."""
    classes = {
        str(code): {"name": name, "kind": kind}
        | ({"canopy_ft": canopy_ft} if canopy_ft is not None else {})
        for code, (name, kind, canopy_ft) in LEGEND.items()
    }
    return {"classes": classes, "source": "Invented (make_demo.py)", "date": date}
