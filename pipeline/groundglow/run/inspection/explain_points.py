"""Points to be explained: typed in or from a CSV file, in map coordinates or degrees, and their pixels."""

from __future__ import annotations

import csv
import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from groundglow.errors import ConfigError, InputError
from groundglow.raster.grid import Grid

_COLUMNS = {
    "x": ("x", "longitude", "lon"),
    "y": ("y", "latitude", "lat"),
}


@dataclass(frozen=True)
class Point:
    """A place that someone asks about.

    Attributes
    ----------
    x, y : float
        Map coordinates, or degrees of longitude and latitude.
    lonlat : bool
        Which of them.
    name : str
    """

    x: float
    y: float
    lonlat: bool
    name: str = ""

    def __str__(self) -> str:
        label = f"{self.name} " if self.name else ""
        unit = "longitude, latitude " if self.lonlat else ""
        return f"{label}({unit}{self.x:g}, {self.y:g})"


def read_points(path: Path, *, lonlat: bool) -> list[Point]:
    """Points of a CSV file with a heading row.

    Parameters
    ----------
    path : Path
        Columns ``x`` and ``y``, or ``longitude`` and ``latitude`` (then in degrees), and perhaps ``name``.
    lonlat : bool
        Take x and y as degrees too.

    Raises
    ------
    InputError
        If the file cannot be read, lacks a column, or holds something else than numbers; the message names
        the line.
    """
    try:
        with path.open(newline="", encoding="utf-8-sig") as stream:
            rows = list(csv.DictReader(stream))
    except FileNotFoundError:
        raise InputError("there is no such file", where=str(path)) from None
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        raise InputError(f"the file cannot be read as CSV ({error})", where=str(path)) from error
    if not rows:
        raise InputError(
            "the file holds no points", where=str(path), remedy="Write a heading row x,y and one row a point"
        )
    known = {str(name).strip().lower(): name for name in rows[0] if name is not None}
    chosen = {axis: next((name for name in names if name in known), None) for axis, names in _COLUMNS.items()}
    if chosen["x"] is None or chosen["y"] is None:
        raise InputError(
            f"columns x and y (or longitude and latitude) are needed, found {', '.join(known) or 'none'}",
            where=str(path),
        )
    degrees = lonlat or chosen["x"] != "x"
    points = []
    for number, row in enumerate(rows, start=2):
        x, y = (_number(row.get(known[str(chosen[axis])]), path, number) for axis in ("x", "y"))
        if degrees and (fault := _off_the_globe(x, y)):
            raise InputError(fault, where=f"{path}, line {number}")
        name = row.get(known["name"], "") if "name" in known else ""
        points.append(Point(x, y, degrees, (name or "").strip() or f"line {number}"))
    return points


def one_point(x: float | None, y: float | None, *, lonlat: bool) -> Point:
    """A point typed on the command line.

    Raises
    ------
    ConfigError
        If a coordinate is missing or no number.
    """
    if x is None or y is None:
        raise ConfigError(
            "a point needs X and Y", where="explain", remedy="Give both, or a CSV file with --points"
        )
    if not (math.isfinite(x) and math.isfinite(y)):
        raise ConfigError(f"coordinates must be finite numbers, not {x}, {y}", where="explain")
    if lonlat and (fault := _off_the_globe(x, y)):
        raise ConfigError(fault, where="explain", remedy="Longitude comes first, both in degrees")
    return Point(x, y, lonlat)


def pixel_of(point: Point, grid: Grid) -> tuple[int, int] | None:
    """Row and column of the pixel that holds a point; None outside the grid."""
    x, y = _map_coordinates(point, grid)
    if not (math.isfinite(x) and math.isfinite(y)):
        return None
    inverse = ~grid.transform
    column = math.floor(inverse.a * x + inverse.b * y + inverse.c)
    row = math.floor(inverse.d * x + inverse.e * y + inverse.f)
    return (row, column) if 0 <= row < grid.height and 0 <= column < grid.width else None


def outside(points: Sequence[Point], grids: Sequence[tuple[str, Grid]]) -> InputError:
    """The error for points that no map holds, with what the maps hold."""
    spans = "; ".join(f"{name}: {_span(grid)}" for name, grid in grids)
    told = ", ".join(str(point) for point in points[:5]) + (", ..." if len(points) > 5 else "")
    verb = "lies" if len(points) == 1 else "lie"
    return InputError(
        f"{told} {verb} outside the map",
        where="explain",
        remedy=f"The map spans {spans}. Degrees of longitude and latitude need --lonlat",
    )


def _off_the_globe(longitude: float, latitude: float) -> str | None:
    """What is wrong with degrees, which the coordinate library would refuse in words of its own."""
    if abs(latitude) > 90.0:
        return f"a latitude lies between -90 and 90 degrees, not at {latitude:g}"
    if abs(longitude) > 360.0:
        return f"a longitude lies between -180 and 360 degrees, not at {longitude:g}"
    return None


def _number(text: str | None, path: Path, line: int) -> float:
    try:
        value = float((text or "").strip())
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise InputError(f"{text!r} is not a coordinate", where=f"{path}, line {line}")
    return value


def _map_coordinates(point: Point, grid: Grid) -> tuple[float, float]:
    if not point.lonlat:
        return point.x, point.y
    from rasterio.warp import transform  # noqa: PLC0415  (needed for degrees only)

    (x,), (y,) = transform("EPSG:4326", grid.crs, [point.x], [point.y])
    return float(x), float(y)


def _span(grid: Grid) -> str:
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    x = [c + a * column + b * row for column in (0, grid.width) for row in (0, grid.height)]
    y = [f + d * column + e * row for column in (0, grid.width) for row in (0, grid.height)]
    code = grid.crs.to_epsg()
    name = f"EPSG:{code}" if code else "its own coordinate reference system"
    return f"x {min(x):.10g} to {max(x):.10g}, y {min(y):.10g} to {max(y):.10g} in {name}"
