"""The places of a gridded analysis: which grid points surround a place, and how much each counts.

Longitudes may run from -180 or from 0, cross the antimeridian or close around the globe; latitudes may
fall or rise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import InputError

Float = NDArray[np.float64]
Int = NDArray[np.int64]

# Places this far outside the outermost grid points count as on them: rounding of stored axes.
_ROUNDING = 1e-4  # deg


@dataclass(frozen=True)
class Lattice:
    """Grid points in rising order, with their places in the file.

    Attributes
    ----------
    latitude, longitude : array
        Rising; longitudes run on past 180 or 360 where the grid does, and once around if it closes. [deg]
    row, column : array
        Index in the file of each.
    """

    latitude: Float
    longitude: Float
    row: Int
    column: Int

    @property
    def spacing(self) -> float:
        """Typical distance of grid points along the finer of the two axes. [deg]."""
        return float(min(np.median(np.diff(self.latitude)), np.median(np.diff(self.longitude))))

    @property
    def coverage(self) -> str:
        """The region for a message."""
        west, east = self.longitude[0], self.longitude[-1]
        around = "all longitudes" if east - west >= 360.0 - _ROUNDING else f"{_east(west)} to {_east(east)}"
        return f"{_north(self.latitude[0])} to {_north(self.latitude[-1])}, {around}"

    def around(self, longitude: float, latitude: float) -> Corners:
        """The grid points around a place.

        Parameters
        ----------
        longitude, latitude : float
            East and north positive; longitudes of any turn. [deg]

        Raises
        ------
        InputError
            If the place lies outside; with what the grid covers.
        """
        west, east = self.longitude[0], self.longitude[-1]
        turned = west + (longitude - west) % 360.0
        if turned > west + 360.0 - _ROUNDING:
            turned = west
        inside = self.latitude[0] - _ROUNDING <= latitude <= self.latitude[-1] + _ROUNDING
        if not (inside and turned <= east + _ROUNDING):
            raise InputError(
                f"does not cover {_north(latitude)}, {_east(longitude)}: it covers {self.coverage}",
                remedy="Give an analysis of the whole scene",
            )
        row, share_row = _cell(self.latitude, latitude)
        column, share_column = _cell(self.longitude, turned)
        return Corners(row, column, share_row, share_column)


@dataclass(frozen=True)
class Corners:
    """The cell of the lattice that holds a place: its lower corner, and the share of the upper ones."""

    row: int
    column: int
    share_row: float
    share_column: float

    def blend(self, values: Float, first_row: int, first_column: int) -> Float:
        """Bilinear mean of the four corners' values (..., rows, columns) in a window of the lattice.

        A corner without share may be missing (NaN); one with a share makes the mean missing.
        """
        total = np.zeros(values.shape[:-2])
        for row, share_row in ((0, 1.0 - self.share_row), (1, self.share_row)):
            for column, share_column in ((0, 1.0 - self.share_column), (1, self.share_column)):
                share = share_row * share_column
                if share > 0.0:
                    place = (..., self.row - first_row + row, self.column - first_column + column)
                    total = total + share * values[place]
        return total


def lattice_of(latitude: Float, longitude: Float, *, where: str) -> Lattice:
    """The lattice of a file's axes.

    Parameters
    ----------
    latitude, longitude : array
        In the order of the file. [deg]
    where : str
        The file, for messages.

    Raises
    ------
    InputError
        If an axis has fewer than two points, repeats one, or leaves the globe.
    """
    if latitude.size < 2 or longitude.size < 2:
        raise InputError(
            f"has {latitude.size} latitudes and {longitude.size} longitudes, and two of each are needed",
            where=where,
        )
    if not (
        np.isfinite(latitude).all() and np.isfinite(longitude).all() and (np.abs(latitude) <= 90.0).all()
    ):
        raise InputError("has latitudes or longitudes that are not on the globe", where=where)
    row = np.argsort(latitude, kind="stable")
    turned = longitude % 360.0
    column = np.argsort(turned, kind="stable")
    steps = np.diff(turned[column], append=turned[column[0]] + 360.0)
    if (steps[:-1] < 1e-9).any() and np.ptp(longitude) > 360.0 - _ROUNDING:
        # The first meridian is stored at both ends: one of them is enough.
        return lattice_of(latitude, longitude[:-1], where=where)
    if (np.diff(latitude[row]) <= 0.0).any() or (steps[:-1] < 1e-9).any():
        raise InputError("has a latitude or longitude twice", where=where)
    widest = int(np.argmax(steps))
    column = np.roll(column, -(widest + 1))
    east = turned[column[0]] + np.concatenate([[0.0], np.cumsum(np.roll(steps, -(widest + 1))[:-1])])
    if steps[widest] < 1.5 * np.median(steps):
        column, east = np.append(column, column[0]), np.append(east, east[0] + 360.0)
    return Lattice(latitude[row], east, row.astype(np.int64), column.astype(np.int64))


def _cell(axis: Float, place: float) -> tuple[int, float]:
    cell = int(np.clip(np.searchsorted(axis, place, side="right") - 1, 0, axis.size - 2))
    share = (place - axis[cell]) / (axis[cell + 1] - axis[cell])
    return cell, float(np.clip(share, 0.0, 1.0))


def _north(latitude: float) -> str:
    return f"{abs(latitude):.2f} {'N' if latitude >= 0.0 else 'S'}"


def _east(longitude: float) -> str:
    turned = (longitude + 180.0) % 360.0 - 180.0
    return f"{abs(turned):.2f} {'E' if turned >= 0.0 else 'W'}"
