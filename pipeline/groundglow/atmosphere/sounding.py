"""A sounding's columns as a profile: radiosondes, masts, drone flights, one column of an analysis.

Columns come as they are written, in any order of levels; what cannot be meant is refused with a hint.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.atmosphere.humidity import SMALLEST_VAPOUR_PRESSURE, ppmv, vapour_pressure
from groundglow.atmosphere.profile import WATER, Profile, check_temperature
from groundglow.atmosphere.structure import hydrostatic_height, hydrostatic_pressure
from groundglow.errors import DomainError

Float = NDArray[np.float64]

# Supersaturation that a humidity sensor may report: 2 % of relative humidity, 0.3 K of dew point.
_RELATIVE_HUMIDITY_LIMIT = 105.0  # %
_DEW_POINT_LIMIT = 0.3  # K
# Without any value above this, relative humidities are taken for fractions and refused.
_LARGEST_FRACTION = 1.05
_LARGEST_MIXING_RATIO = 0.06  # kg kg-1


def profile_of_sounding(
    *,
    temperature: ArrayLike,
    humidity: ArrayLike,
    humidity_measure: str,
    pressure: ArrayLike | None = None,
    height: ArrayLike | None = None,
    ground_height: float | None = None,
    ground_pressure: float | None = None,
    ozone: ArrayLike | None = None,
    source: str = "sounding",
) -> Profile:
    """A checked profile from the columns of a sounding.

    Parameters
    ----------
    temperature : array (levels,)
        [K]
    humidity : array (levels,)
        The measure named next; missing (NaN) values are accepted above the last known level, where
        soundings cease to measure it: the profile then ends there and its top can be completed.
    humidity_measure : str
        ``dew_point`` [K], ``relative_humidity`` [%], ``mixing_ratio`` or ``specific_humidity``
        [kg kg-1], ``ppmv`` [1e-6] or ``vapour_pressure`` [hPa].
    pressure : array (levels,), optional
        [hPa]
    height : array (levels,), optional
        Geometric, above sea level. One of pressure and height may be absent. [m]
    ground_height : float, optional
        Height of the lowest level, needed without ``height``. [m]
    ground_pressure : float, optional
        Pressure of the lowest level, needed without ``pressure``. [hPa]
    ozone : array (levels,), optional
        Mole fraction. [1e-6]
    source : str
        First line of the profile's notes.

    Returns
    -------
    Profile

    Raises
    ------
    DomainError
        If a column is missing, of another length, in another unit than said, or impossible.
    """
    columns = {"temperature": temperature, "humidity": humidity}
    for name, values in (("pressure", pressure), ("height", height), ("ozone", ozone)):
        if values is not None:
            columns[name] = values
    table = _sorted(_arrays(columns))
    table = _ended_where_humidity_ends(table)
    for name, values in table.items():
        _refuse_missing(name, values)
    check_temperature(table["temperature"])
    if "pressure" not in table:
        table["pressure"] = _pressure_from_height(table, humidity_measure, ground_pressure)
    elif table["pressure"][0] > 5000.0:
        raise DomainError(
            f"a pressure of {table['pressure'][0]:g} hPa is none of the air's",
            remedy="Pressures in Pa must be divided by 100.",
        )
    _check_humidity(humidity_measure, table["humidity"], table["temperature"])
    vapour = vapour_pressure(humidity_measure, table["humidity"], table["temperature"], table["pressure"])
    vapour = np.maximum(vapour, SMALLEST_VAPOUR_PRESSURE)
    if "height" not in table:
        if ground_height is None:
            raise DomainError(
                "a sounding without heights needs the height of its lowest level",
                remedy="Give ground_height in metres above sea level.",
            )
        table["height"] = hydrostatic_height(table["pressure"], table["temperature"], vapour, ground_height)
    gases = {WATER: ppmv(vapour, table["pressure"])}
    if "ozone" in table:
        gases["ozone"] = table["ozone"]
    return Profile(table["height"], table["pressure"], table["temperature"], gases, (source,))


def _arrays(columns: dict[str, ArrayLike]) -> dict[str, Float]:
    table = {name: np.asarray(values, dtype=np.float64) for name, values in columns.items()}
    size = table["temperature"].size
    for name, values in table.items():
        if values.ndim != 1 or values.size != size:
            raise DomainError(f"the sounding's {name} has {values.size} values, its temperature {size}")
    if "pressure" not in table and "height" not in table:
        raise DomainError("a sounding needs pressure or height at its levels")
    return table


def _sorted(table: dict[str, Float]) -> dict[str, Float]:
    """Levels from the ground up; a sounding that was written from the top down is turned over."""
    key = table["pressure"] if "pressure" in table else -table["height"]
    if key.size < 2:
        raise DomainError("a sounding needs at least two levels")
    if np.isnan(key).any():
        _refuse_missing("pressure" if "pressure" in table else "height", key)
    order = np.argsort(-key, kind="stable")
    repeated = np.flatnonzero(np.diff(key[order]) == 0.0)
    if repeated.size:
        what, unit = ("pressure", "hPa") if "pressure" in table else ("height", "m")
        raise DomainError(
            f"the level at {what} {abs(key[order][repeated[0]]):g} {unit} comes twice",
            remedy="Each level may stand once.",
        )
    return {name: values[order] for name, values in table.items()}


def _ended_where_humidity_ends(table: dict[str, Float]) -> dict[str, Float]:
    known = np.flatnonzero(np.isfinite(table["humidity"]))
    if known.size < 2:
        raise DomainError("the sounding's humidity is known at fewer than two levels")
    return {name: values[: known[-1] + 1] for name, values in table.items()}


def _refuse_missing(name: str, values: Float) -> None:
    missing = np.flatnonzero(~np.isfinite(values))
    if missing.size:
        raise DomainError(
            f"the sounding's {name} is missing at {missing.size} of {values.size} levels, "
            f"first at level {missing[0] + 1} from the ground",
            remedy="Leave levels without a value out.",
        )


def _pressure_from_height(table: dict[str, Float], measure: str, ground_pressure: float | None) -> Float:
    if ground_pressure is None:
        raise DomainError(
            "a sounding without pressures needs the pressure of its lowest level",
            remedy="Give ground_pressure in hPa.",
        )
    height, temperature = table["height"], table["temperature"]
    pressure = hydrostatic_pressure(height, temperature, ground_pressure)
    for _ in range(3):
        vapour = vapour_pressure(measure, table["humidity"], temperature, pressure)
        pressure = hydrostatic_pressure(height, temperature, ground_pressure, ppmv(vapour, pressure))
    return pressure


def _check_humidity(measure: str, humidity: Float, temperature: Float) -> None:
    if measure == "dew_point":
        _check_dew_point(humidity, temperature)
        return
    if (humidity < 0.0).any():
        raise DomainError(f"the sounding's {measure} must not be negative, as {humidity.min():g} is")
    if measure == "relative_humidity":
        _check_relative_humidity(humidity)
    elif measure in ("mixing_ratio", "specific_humidity") and humidity.max() > _LARGEST_MIXING_RATIO:
        raise DomainError(
            f"a {measure} of {humidity.max():g} kg kg-1 is more than air can hold",
            remedy="Values in g kg-1 must be divided by 1000.",
        )


def _check_dew_point(humidity: Float, temperature: Float) -> None:
    low, high = float(humidity.min()), float(humidity.max())
    if high < 150.0:
        raise DomainError(
            f"dew points of {low:.1f} to {high:.1f} K are none of the air's",
            remedy="They look like degrees Celsius: say so, or add 273.15.",
        )
    above = np.flatnonzero(humidity > temperature + _DEW_POINT_LIMIT)
    if above.size:
        level = int(above[0])
        raise DomainError(
            f"the dew point {humidity[level]:.2f} K lies above the temperature {temperature[level]:.2f} K "
            f"at level {level + 1} from the ground"
        )


def _check_relative_humidity(humidity: Float) -> None:
    if humidity.max() <= _LARGEST_FRACTION:
        raise DomainError(
            f"relative humidities of at most {humidity.max():g} % look like fractions of one",
            remedy="Multiply them by 100, or name the unit.",
        )
    if humidity.max() > _RELATIVE_HUMIDITY_LIMIT:
        raise DomainError(
            f"a relative humidity of {humidity.max():g} % is above {_RELATIVE_HUMIDITY_LIMIT:g} %"
        )
