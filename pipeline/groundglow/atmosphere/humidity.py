"""Humidity: one formula family, and every measure of moisture turned into every other.

Saturation follows the Magnus form of the WMO guide over water (over ice on request). Amounts are
turned into one another through the vapour pressure: the mole fraction (ppmv) is e / p, the mixing
ratio 0.622 e / (p - e), the specific humidity 0.622 e / (p - 0.378 e).

References
----------
WMO (2018), Guide to Instruments and Methods of Observation, WMO-No. 8, annex 4.B.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError
from groundglow.physics.constants import WATER_TO_DRY_AIR_MASS, ZERO_CELSIUS

Float = NDArray[np.float64]

# Factor, slope and offset of the Magnus form e = A exp(B t / (C + t)), t in degrees Celsius.
_WATER = (6.112, 17.62, 243.12)  # hPa, 1, deg C
_ICE = (6.112, 22.46, 272.62)
_PARTS_PER_MILLION = 1e6
# Below this a humidity is treated as this small one, so that its logarithm exists.
SMALLEST_VAPOUR_PRESSURE = 1e-9  # hPa


def saturation_vapour_pressure(temperature: ArrayLike, *, over_ice: bool = False) -> Float:
    """Vapour pressure of air in equilibrium with a plane surface of water, or of ice. [hPa].

    Parameters
    ----------
    temperature : array, any shape
        Air temperature; the fit holds from 228 to 333 K (ice: 208 to 273 K). [K]
    over_ice : bool
        Over ice instead of (supercooled) water.

    Returns
    -------
    array, same shape
    """
    factor, slope, offset = _ICE if over_ice else _WATER
    celsius = np.asarray(temperature, dtype=np.float64) - ZERO_CELSIUS
    # Far below the fit (the mesosphere) the denominator stays away from zero.
    return np.asarray(factor * np.exp(slope * celsius / np.maximum(offset + celsius, 100.0)))


def dew_point(vapour_pressure: ArrayLike) -> Float:
    """Temperature at which air of this vapour pressure is saturated over water. [K].

    Parameters
    ----------
    vapour_pressure : array, any shape
        Above 0. [hPa]

    Returns
    -------
    array, same shape
    """
    factor, slope, offset = _WATER
    ratio = np.log(np.asarray(vapour_pressure, dtype=np.float64) / factor)
    return np.asarray(offset * ratio / (slope - ratio) + ZERO_CELSIUS)


def vapour_pressure_of_dew_point(dew_point: ArrayLike) -> Float:
    """Vapour pressure of air with this dew point. [hPa]."""
    return saturation_vapour_pressure(dew_point)


def vapour_pressure_of_relative_humidity(relative_humidity: ArrayLike, temperature: ArrayLike) -> Float:
    """Vapour pressure of air with this relative humidity over water. [hPa].

    Parameters
    ----------
    relative_humidity : array
        In percent, 0 to 100. [%]
    temperature : array
        Air temperature. [K]
    """
    fraction = np.asarray(relative_humidity, dtype=np.float64) / 100.0
    return np.asarray(fraction * saturation_vapour_pressure(temperature))


def vapour_pressure_of_mixing_ratio(mixing_ratio: ArrayLike, pressure: ArrayLike) -> Float:
    """Vapour pressure from the mass of water per mass of dry air. [hPa].

    Parameters
    ----------
    mixing_ratio : array
        [kg kg-1]
    pressure : array
        [hPa]
    """
    r, p = np.asarray(mixing_ratio, dtype=np.float64), np.asarray(pressure, dtype=np.float64)
    return np.asarray(r * p / (WATER_TO_DRY_AIR_MASS + r))


def vapour_pressure_of_specific_humidity(specific_humidity: ArrayLike, pressure: ArrayLike) -> Float:
    """Vapour pressure from the mass of water per mass of moist air. [hPa].

    Parameters
    ----------
    specific_humidity : array
        [kg kg-1]
    pressure : array
        [hPa]
    """
    q, p = np.asarray(specific_humidity, dtype=np.float64), np.asarray(pressure, dtype=np.float64)
    return np.asarray(q * p / (WATER_TO_DRY_AIR_MASS + (1.0 - WATER_TO_DRY_AIR_MASS) * q))


def vapour_pressure_of_ppmv(ppmv: ArrayLike, pressure: ArrayLike) -> Float:
    """Vapour pressure from the mole fraction in parts per million of moist air. [hPa]."""
    return np.asarray(
        np.asarray(ppmv, dtype=np.float64) / _PARTS_PER_MILLION * np.asarray(pressure, dtype=np.float64)
    )


def ppmv(vapour_pressure: ArrayLike, pressure: ArrayLike) -> Float:
    """Mole fraction of water in moist air. [1e-6]."""
    e, p = np.asarray(vapour_pressure, dtype=np.float64), np.asarray(pressure, dtype=np.float64)
    return np.asarray(_PARTS_PER_MILLION * e / p)


def mixing_ratio(vapour_pressure: ArrayLike, pressure: ArrayLike) -> Float:
    """Mass of water per mass of dry air, 0.622 e / (p - e). [kg kg-1]."""
    e, p = np.asarray(vapour_pressure, dtype=np.float64), np.asarray(pressure, dtype=np.float64)
    return np.asarray(WATER_TO_DRY_AIR_MASS * e / (p - e))


def specific_humidity(vapour_pressure: ArrayLike, pressure: ArrayLike) -> Float:
    """Mass of water per mass of moist air, 0.622 e / (p - 0.378 e). [kg kg-1]."""
    e, p = np.asarray(vapour_pressure, dtype=np.float64), np.asarray(pressure, dtype=np.float64)
    return np.asarray(WATER_TO_DRY_AIR_MASS * e / (p - (1.0 - WATER_TO_DRY_AIR_MASS) * e))


def relative_humidity(vapour_pressure: ArrayLike, temperature: ArrayLike) -> Float:
    """Relative humidity over water. [%]."""
    e = np.asarray(vapour_pressure, dtype=np.float64)
    return np.asarray(100.0 * e / saturation_vapour_pressure(temperature))


def vapour_pressure(measure: str, value: ArrayLike, temperature: ArrayLike, pressure: ArrayLike) -> Float:
    """Vapour pressure from whichever measure of humidity a source gives. [hPa].

    Parameters
    ----------
    measure : str
        ``dew_point`` [K], ``relative_humidity`` [%], ``mixing_ratio`` or ``specific_humidity``
        [kg kg-1], ``ppmv`` [1e-6] or ``vapour_pressure`` [hPa].
    value : array
        The measure.
    temperature, pressure : array
        Of the same air. [K], [hPa]

    Returns
    -------
    array, broadcast shape

    Raises
    ------
    DomainError
        If the measure has no such name.
    """
    if measure == "dew_point":
        return vapour_pressure_of_dew_point(value)
    if measure == "relative_humidity":
        return vapour_pressure_of_relative_humidity(value, temperature)
    if measure == "mixing_ratio":
        return vapour_pressure_of_mixing_ratio(value, pressure)
    if measure == "specific_humidity":
        return vapour_pressure_of_specific_humidity(value, pressure)
    if measure == "ppmv":
        return vapour_pressure_of_ppmv(value, pressure)
    if measure == "vapour_pressure":
        return np.asarray(value, dtype=np.float64)
    raise DomainError(
        f"{measure!r} is no measure of humidity",
        remedy="Use dew_point, relative_humidity, mixing_ratio, specific_humidity, ppmv or vapour_pressure.",
    )
