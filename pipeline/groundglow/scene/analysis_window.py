"""Reading a window of an analysis at one time: every quantity on all levels, checked, in our units."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.humidity import ppmv, vapour_pressure
from groundglow.errors import InputError
from groundglow.scene.analysis_lattice import Lattice
from groundglow.scene.analysis_layout import StoredField

Float = NDArray[np.float64]
Fields = Mapping[str, Sequence[StoredField]]

# One of these is needed; the first one there is used.
HUMIDITIES = ("specific_humidity", "relative_humidity")
# Wave-like noise of analyses may take humidity below zero, and relative humidity counted over ice exceeds
# 100 % of what is counted over water: both are cut. Beyond these it is another quantity.
_LOWEST_HUMIDITY = {"specific_humidity": -1e-3, "relative_humidity": -20.0}  # kg kg-1, %
_HIGHEST_HUMIDITY = {"specific_humidity": 0.06, "relative_humidity": 200.0}
_SATURATED = 100.0  # %
_LARGEST_FRACTION = 1.05
_KELVIN_RANGE = (150.0, 340.0)


def humidity_of(fields: Fields) -> str:
    """The measure of humidity that is used."""
    return next(role for role in HUMIDITIES if role in fields)


def read_window(
    fields: Fields, lattice: Lattice, time: np.datetime64, rows: slice, columns: slice
) -> dict[str, Float]:
    """Every quantity at one time in a window of the lattice.

    Parameters
    ----------
    fields : mapping of str to sequence of StoredField
        By ``analysis_layout.VARIABLES``; temperature, height and a humidity are known at the time.
    lattice : Lattice
        Of all fields.
    time : datetime64
        One of the stored ones, in UTC.
    rows, columns : slice
        Of the lattice.

    Returns
    -------
    dict of str to array
        ``pressure`` (levels,) falling [hPa]; ``temperature`` [K], geopotential ``height`` [m],
        ``water_vapour`` and, if known, ``ozone`` mole fractions [1e-6], all (levels, rows, columns), NaN
        where missing; ``surface_pressure`` (rows, columns), if known [hPa].

    Raises
    ------
    InputError
        If a value cannot be meant in the unit stated, or the file is damaged there.
    """
    measure = humidity_of(fields)
    at_time = {
        role: field for role, of_role in fields.items() for field in reversed(of_role) if time in field.times
    }
    levels = at_time["temperature"].levels
    assert levels is not None  # temperature is only looked for on levels
    pressure = np.sort(levels)[::-1]
    found = {"pressure": pressure}
    for role in ("temperature", measure, "height", "ozone", "surface_pressure"):
        if role in at_time:
            found[role] = _read(at_time[role], lattice, time, (rows, columns), pressure)
    _refuse_temperatures(found["temperature"], at_time["temperature"].where)
    humidity = _checked_humidity(measure, found.pop(measure), at_time[measure].where)
    level_pressure = pressure[:, np.newaxis, np.newaxis]
    vapour = vapour_pressure(measure, humidity, found["temperature"], level_pressure)
    found["water_vapour"] = ppmv(vapour, level_pressure)
    return found


def mixed(parts: Sequence[tuple[Mapping[str, Float], float]], *, where: str) -> dict[str, Float]:
    """Weighted mean of windows, of what all of them hold.

    Parameters
    ----------
    parts : sequence of (window, weight)
        The weights add up to one.
    where : str
        The files, for messages.

    Raises
    ------
    InputError
        If their levels differ.
    """
    first = parts[0][0]
    for window, _ in parts[1:]:
        if not np.array_equal(window["pressure"], first["pressure"]):
            raise InputError("the pressure levels differ from time to time", where=where)
    return {
        role: np.sum([share * window[role] for window, share in parts], axis=0)
        for role in first
        if all(role in window for window, _ in parts)
    }


def _read(
    field: StoredField, lattice: Lattice, time: np.datetime64, window: tuple[slice, slice], pressure: Float
) -> Float:
    """One variable at the levels wanted; NaN at levels that it lacks."""
    row, column = lattice.row[window[0]], lattice.column[window[1]]
    index = int(np.flatnonzero(field.times == time)[0])
    stored = field.read(index, slice(int(row.min()), int(row.max()) + 1), column)
    stored = stored[..., row - row.min(), :]
    if field.levels is None:
        return stored
    values = np.full((pressure.size, *stored.shape[1:]), np.nan)
    place = {round(float(level), 4): index for index, level in enumerate(field.levels)}
    for index, level in enumerate(pressure):
        if round(float(level), 4) in place:
            values[index] = stored[place[round(float(level), 4)]]
    return values


def _checked_humidity(measure: str, humidity: Float, where: str) -> Float:
    """Humidity without noise below zero and without what is above saturation."""
    known = humidity[np.isfinite(humidity)]
    if not known.size:
        return humidity
    low, high = float(known.min()), float(known.max())
    if low < _LOWEST_HUMIDITY[measure] or high > _HIGHEST_HUMIDITY[measure]:
        raise InputError(
            f"values of {low:g} to {high:g} are no {measure.replace('_', ' ')} in the unit stated",
            where=where,
        )
    if measure == "specific_humidity":
        return np.maximum(humidity, 0.0)
    if 0.0 < high <= _LARGEST_FRACTION:
        raise InputError(
            f"relative humidities of at most {high:g} % look like fractions of one",
            where=where,
            remedy="Their unit must then be '1'",
        )
    return np.clip(humidity, 0.0, _SATURATED)


def _refuse_temperatures(temperature: Float, where: str) -> None:
    known = temperature[np.isfinite(temperature)]
    low, high = _KELVIN_RANGE
    if known.size and not (low <= known.min() and known.max() <= high):
        raise InputError(
            f"temperatures of {known.min():.1f} to {known.max():.1f} K are none of the air's",
            where=where,
            remedy="They look like degrees Celsius" if known.max() < 65.0 else None,
        )
