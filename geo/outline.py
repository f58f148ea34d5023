"""Outlines of the reached cells: valid polygons with holes, light, in longitude and latitude."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import contourpy
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import MultiPolygon, box
from shapely.geometry.base import BaseGeometry

from geo.frame import Frame

SIMPLIFY_CELLS = 0.7  # largest shift of an outline by simplification [cells]
ISLAND_CELLS = 12.0  # smaller islands of reached ground are left out: that takes ground away only
SPECK_CELLS = 3.5  # holes of up to 3 cells are left out: they lie within one cell of reached
# ground all over


def trace(mask: NDArray[np.bool_]) -> MultiPolygon:
    """Return the outline of the true cells, in cells from the grid's south-west corner.

    Parameters
    ----------
    mask
        Reached cells, shape ``(n_rows, n_cols)``, row 0 in the south.

    Returns
    -------
    MultiPolygon
        Valid; no point of it is farther than one cell from a true cell.
    """
    if not mask.any():
        return MultiPolygon()
    rows, cols = np.flatnonzero(mask.any(axis=1)), np.flatnonzero(mask.any(axis=0))
    r0, c0 = rows[0], cols[0]
    inner = mask[r0 : rows[-1] + 1, c0 : cols[-1] + 1]
    padded = np.zeros((inner.shape[0] + 2, inner.shape[1] + 2))
    padded[1:-1, 1:-1] = inner
    contours = contourpy.contour_generator(
        z=padded, name="serial", fill_type=contourpy.FillType.OuterOffset
    )
    filled: Any = contours.filled(0.5, 2.0)
    pieces = [_polygon(p, o) for p, o in zip(filled[0], filled[1], strict=True)]
    full = MultiPolygon([piece for piece in pieces if piece is not None])
    outline: BaseGeometry = shapely.simplify(full, SIMPLIFY_CELLS, preserve_topology=False)
    if not outline.is_valid:  # rings may touch after the fast way; the slow one keeps them apart
        outline = shapely.simplify(full, SIMPLIFY_CELLS)
    if not outline.is_valid:
        outline = shapely.make_valid(outline, method="structure", keep_collapsed=False)
    shift = np.array((c0 - 0.5, r0 - 0.5))
    return _as_multi(_moved(outline, shift))


def _moved(shape: BaseGeometry, by: NDArray[np.float64]) -> BaseGeometry:
    return shapely.transform(shape, lambda xy: xy + by)


def _polygon(points: NDArray[np.float64], offsets: NDArray[np.uint32]) -> shapely.Polygon | None:
    """Return one contour as a polygon, its specks left out; None when it is a speck itself."""
    rings = [points[a:b] for a, b in pairwise(offsets)]
    if abs(_ring_area(rings[0])) < ISLAND_CELLS:
        return None
    holes = [ring for ring in rings[1:] if abs(_ring_area(ring)) >= SPECK_CELLS]
    return shapely.Polygon(rings[0], holes)


def _ring_area(ring: NDArray[np.float64]) -> float:
    x, y = ring[:, 0], ring[:, 1]
    return 0.5 * float(np.dot(x[:-1], y[1:]) - np.dot(x[1:], y[:-1]))


def _as_multi(shape: BaseGeometry) -> MultiPolygon:
    """Return the polygons of any geometry as one MultiPolygon, exteriors counter-clockwise."""
    parts = [part for part in shapely.get_parts(shape) if part.geom_type == "Polygon"]
    parts += [p for m in shapely.get_parts(shape) if m.geom_type == "MultiPolygon" for p in m.geoms]
    return shapely.orient_polygons(MultiPolygon(parts), exterior_cw=False)


def to_lonlat(
    outline: MultiPolygon, frame: Frame, col0: int, row0: int, cell_m: float
) -> MultiPolygon:
    """Return an outline in cells as longitude and latitude [deg], cut at the 180th meridian.

    Source: RFC 7946 sections 3.1.6 (right-hand rule) and 3.1.9 (antimeridian cutting).
    """
    if outline.is_empty:
        return MultiPolygon()

    def geographic(xy: NDArray[np.float64]) -> NDArray[np.float64]:
        lon, lat = frame.to_lonlat((xy[:, 0] + col0) * cell_m, (xy[:, 1] + row0) * cell_m)
        lon = frame.lon0_deg + (np.asarray(lon) - frame.lon0_deg + 180.0) % 360.0 - 180.0
        pairs: NDArray[np.float64] = np.column_stack((lon, lat))
        return pairs.round(6)

    shape: BaseGeometry = shapely.transform(outline, geographic)
    if not shape.is_valid:
        shape = shapely.make_valid(shape, method="structure", keep_collapsed=False)
    west, _, east, _ = shape.bounds
    if west < -180.0 or east > 180.0:
        shape = _cut(shape)
    return _as_multi(shape)


def _cut(shape: BaseGeometry) -> BaseGeometry:
    """Cut a shape whose longitudes run past 180 degrees and bring the pieces back."""
    pieces = []
    for turns in (-1, 0, 1):
        part = shapely.intersection(shape, box(360 * turns - 180, -90, 360 * turns + 180, 90))
        back = np.array((360.0 * turns, 0.0))
        pieces += list(_as_multi(_moved(part, -back)).geoms)
    return MultiPolygon(pieces)
