"""The outline of a grid in longitude and latitude, as GeoJSON asks for it.

References
----------
RFC 7946, "The GeoJSON Format", IETF 2016, sections 3.1.6 (rings run anticlockwise), 3.1.9 (shapes
are cut at the antimeridian) and 5.2, 5.3 (bounding boxes there and at the poles).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from rasterio._err import CPLE_BaseError  # what rasterio raises here has no public name
from rasterio.crs import CRS
from rasterio.warp import transform as transform_points

from groundglow.raster.grid import Grid

Points = NDArray[np.float64]

# Straight edges of the grid bend in longitude and latitude: 20 pieces each keep a scene 200 km wide
# within some metres.
PIECES = 20
_DECIMALS = 7  # one centimetre


def footprint(grid: Grid) -> tuple[dict[str, Any] | None, list[float] | None]:
    """Outline and bounding box of a grid in WGS 84.

    Parameters
    ----------
    grid : Grid
        In any CRS, rotated or not, across the antimeridian or around a pole.

    Returns
    -------
    geometry : dict or None
        GeoJSON Polygon, or MultiPolygon where the antimeridian cuts it. None where the outline
        cannot be given in longitude and latitude.
    bbox : list of float or None
        West, south, east, north; west is the larger number where the box spans the antimeridian. [deg]
    """
    ring = _outline(grid)
    if ring is None:
        return None, None
    ring, around_pole = _unwrapped(ring)
    parts = [part for window in _windows(ring) if len(part := _between(ring, window)) > 2]
    polygons = [_anticlockwise(part) for part in parts]
    bbox = _bounding_box(ring, around_pole=around_pole)
    if len(polygons) == 1:
        return {"type": "Polygon", "coordinates": [polygons[0]]}, bbox
    return {"type": "MultiPolygon", "coordinates": [[polygon] for polygon in polygons]}, bbox


def _outline(grid: Grid) -> Points | None:
    """Points along the outer edge (n, 2) as longitude and latitude, the first not repeated; or None."""
    steps = np.arange(PIECES) / PIECES
    zeros, ones = np.zeros(PIECES), np.ones(PIECES)
    across = np.concatenate([steps, ones, 1.0 - steps, zeros]) * grid.width
    down = np.concatenate([zeros, steps, ones, 1.0 - steps]) * grid.height
    place = grid.transform
    x = place.a * across + place.b * down + place.c
    y = place.d * across + place.e * down + place.f
    try:
        longitude, latitude = transform_points(grid.crs, CRS.from_epsg(4326), x.tolist(), y.tolist())
    except CPLE_BaseError:
        return None
    points = np.array([longitude, latitude], dtype=np.float64).T
    return points if np.isfinite(points).all() else None


def _unwrapped(ring: Points) -> tuple[Points, bool]:
    """A ring without jumps in longitude, and whether it runs around a pole; then it is closed along it."""
    longitude = np.unwrap(ring[:, 0], period=360.0)
    turn = longitude[-1] + _shortest(ring[0, 0] - ring[-1, 0]) - longitude[0]
    latitude = ring[:, 1]
    if abs(turn) < 180.0:
        return np.column_stack([longitude, latitude]), False
    pole = 90.0 if latitude.mean() > 0.0 else -90.0
    end = longitude[0] + np.sign(turn) * 360.0
    longitude = np.concatenate([longitude, [end, end, longitude[0]]])
    latitude = np.concatenate([latitude, [latitude[0], pole, pole]])
    return np.column_stack([longitude, latitude]), True


def _shortest(difference: float) -> float:
    """A difference of longitudes taken the short way round, in degrees."""
    return (difference + 180.0) % 360.0 - 180.0


def _windows(ring: Points) -> list[float]:
    """The middles of the turns of longitude, 360 degrees each, that a ring reaches into."""
    first = np.ceil((ring[:, 0].min() - 180.0) / 360.0 - 1e-12)
    last = np.floor((ring[:, 0].max() + 180.0) / 360.0 + 1e-12)
    return [360.0 * turn for turn in np.arange(first, last + 1)]


def _between(ring: Points, middle: float) -> Points:
    """The part of a ring within 180 degrees of a meridian, as longitudes from there."""
    shifted = ring - np.array([middle, 0.0])
    for sign in (1.0, -1.0):
        shifted = _cut(shifted, sign)
    extent = shifted[:, 0].max() - shifted[:, 0].min() if len(shifted) else 0.0
    return shifted if extent > 10.0**-_DECIMALS else np.empty((0, 2))


def _cut(ring: Points, sign: float) -> Points:
    """What of a ring lies on the inner side of the meridian 180 (sign 1) or -180 (sign -1).

    The corners are walked one after another: where an edge crosses the meridian, the crossing is
    kept, and so is every corner inside.
    """
    kept: list[Points] = []
    for index in range(len(ring)):
        start, end = ring[index - 1], ring[index]
        inside_start, inside_end = sign * start[0] <= 180.0, sign * end[0] <= 180.0
        if inside_start != inside_end:
            share = (sign * 180.0 - start[0]) / (end[0] - start[0])
            kept.append(np.array([sign * 180.0, start[1] + share * (end[1] - start[1])]))
        if inside_end:
            kept.append(end)
    return np.array(kept).reshape(-1, 2)


def _anticlockwise(ring: Points) -> list[list[float]]:
    """A closed GeoJSON ring, its outside to the right."""
    x, y = ring.T
    area = float(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y))
    ordered = ring if area > 0.0 else ring[::-1]
    points: list[list[float]] = np.round(ordered, _DECIMALS).tolist()
    distinct = [point for index, point in enumerate(points) if point != points[index - 1]]
    return [*distinct, distinct[0]]


def _bounding_box(ring: Points, *, around_pole: bool) -> list[float]:
    """West, south, east, north of an unwrapped ring."""
    west, south = ring.min(axis=0)
    east, north = ring.max(axis=0)
    if around_pole or east - west >= 360.0:
        west, east = -180.0, 180.0
    elif west < -180.0 or east > 180.0:
        west, east = _shortest(west), _shortest(east)
        east = 180.0 if east == -180.0 else east
    return [round(float(value), _DECIMALS) for value in (west, south, east, north)]
