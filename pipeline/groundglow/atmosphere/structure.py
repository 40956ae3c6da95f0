"""The air's vertical structure: gravity, hydrostatic heights, the standard atmosphere, columns.

References
----------
US Standard Atmosphere 1976, NOAA-S/T 76-1562.
Moritz, H. (2000), Geodetic Reference System 1980, Journal of Geodesy 74, 128-133.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.physics.constants import (
    DRY_AIR_GAS_CONSTANT,
    EARTH_RADIUS,
    STANDARD_GRAVITY,
    WATER_TO_DRY_AIR_MASS,
)

Float = NDArray[np.float64]

# Normal gravity of the WGS 84 ellipsoid (Somigliana's closed form).
_EQUATORIAL_GRAVITY = 9.7803253359  # m s-2
_GRAVITY_FACTOR = 0.00193185265241
_ECCENTRICITY_SQUARED = 0.00669437999013

STANDARD_TEMPERATURE = 288.15  # K
STANDARD_PRESSURE = 1013.25  # hPa
STANDARD_LAPSE_RATE = 0.0065  # K m-1, geopotential
TROPOPAUSE = 11000.0  # m, geopotential
_STANDARD_EXPONENT = STANDARD_GRAVITY / (DRY_AIR_GAS_CONSTANT * STANDARD_LAPSE_RATE)
# Number density of an ideal gas at 273.15 K and 1013.25 hPa, and the mass of a water molecule.
LOSCHMIDT = 2.686780111e25  # m-3, CODATA
WATER_MOLECULE = 18.01528e-3 / 6.02214076e23  # kg


def gravity(latitude: ArrayLike) -> Float:
    """Normal gravity at sea level. [m s-2].

    Parameters
    ----------
    latitude : array, any shape
        Geodetic latitude. [deg]
    """
    sine_squared = np.sin(np.radians(np.asarray(latitude, dtype=np.float64))) ** 2
    root = np.sqrt(1.0 - _ECCENTRICITY_SQUARED * sine_squared)
    return np.asarray(_EQUATORIAL_GRAVITY * (1.0 + _GRAVITY_FACTOR * sine_squared) / root)


def geopotential_height(height: ArrayLike) -> Float:
    """Geopotential height of a geometric height, R z / (R + z). [m]."""
    z = np.asarray(height, dtype=np.float64)
    return np.asarray(EARTH_RADIUS * z / (EARTH_RADIUS + z))


def geometric_height(geopotential: ArrayLike) -> Float:
    """Geometric height of a geopotential height, R H / (R - H). [m]."""
    h = np.asarray(geopotential, dtype=np.float64)
    return np.asarray(EARTH_RADIUS * h / (EARTH_RADIUS - h))


def standard_temperature(height: ArrayLike) -> Float:
    """US Standard Atmosphere 1976 up to 20 km, at a geometric height. [K]."""
    h = np.minimum(geopotential_height(height), TROPOPAUSE)
    return np.asarray(STANDARD_TEMPERATURE - STANDARD_LAPSE_RATE * h)


def standard_pressure(height: ArrayLike) -> Float:
    """US Standard Atmosphere 1976 up to 20 km, at a geometric height. [hPa]."""
    h = geopotential_height(height)
    low = np.minimum(h, TROPOPAUSE)
    ratio = (STANDARD_TEMPERATURE - STANDARD_LAPSE_RATE * low) / STANDARD_TEMPERATURE
    isothermal = STANDARD_TEMPERATURE - STANDARD_LAPSE_RATE * TROPOPAUSE
    above = np.exp(-STANDARD_GRAVITY * (h - low) / (DRY_AIR_GAS_CONSTANT * isothermal))
    return np.asarray(STANDARD_PRESSURE * ratio**_STANDARD_EXPONENT * above)


def virtual_temperature(temperature: ArrayLike, vapour_pressure: ArrayLike, pressure: ArrayLike) -> Float:
    """Temperature of dry air as dense as this moist air, T / (1 - 0.378 e / p). [K]."""
    e, p = np.asarray(vapour_pressure, dtype=np.float64), np.asarray(pressure, dtype=np.float64)
    return np.asarray(
        np.asarray(temperature, dtype=np.float64) / (1.0 - (1.0 - WATER_TO_DRY_AIR_MASS) * e / p)
    )


def thickness(virtual_temperature: ArrayLike, lower_pressure: ArrayLike, upper_pressure: ArrayLike) -> Float:
    """Geopotential thickness of a layer (hypsometric equation), R T / g0 ln(p1 / p2). [m].

    Parameters
    ----------
    virtual_temperature : array
        Mean of the layer. [K]
    lower_pressure, upper_pressure : array
        At its bottom and top. [hPa]
    """
    ratio = np.asarray(lower_pressure, dtype=np.float64) / np.asarray(upper_pressure, dtype=np.float64)
    scale = DRY_AIR_GAS_CONSTANT * np.asarray(virtual_temperature, dtype=np.float64) / STANDARD_GRAVITY
    return np.asarray(scale * np.log(ratio))


def hydrostatic_height(
    pressure: Float, temperature: Float, vapour_pressure: Float, ground_height: float
) -> Float:
    """Geometric heights of the levels of a sounding that gives only pressure. [m].

    Parameters
    ----------
    pressure, temperature, vapour_pressure : arrays (levels,)
        From the ground up. [hPa], [K], [hPa]
    ground_height : float
        Of the lowest level, above sea level. [m]

    Returns
    -------
    array (levels,)
    """
    virtual = virtual_temperature(temperature, vapour_pressure, pressure)
    steps = thickness(0.5 * (virtual[1:] + virtual[:-1]), pressure[:-1], pressure[1:])
    start = float(geopotential_height(ground_height))
    return geometric_height(start + np.concatenate([[0.0], np.cumsum(steps)]))


def hydrostatic_pressure(
    height: Float, temperature: Float, ground_pressure: float, ppmv: Float | None = None
) -> Float:
    """Pressures of the levels of a profile that gives only heights. [hPa].

    Parameters
    ----------
    height, temperature : arrays (levels,)
        From the ground up. [m], [K]
    ground_pressure : float
        At the lowest level. [hPa]
    ppmv : array (levels,), optional
        Mole fraction of water; dry air if absent. [1e-6]

    Returns
    -------
    array (levels,)
    """
    fraction = np.zeros_like(temperature) if ppmv is None else ppmv / 1e6
    virtual = virtual_temperature(temperature, fraction, 1.0)
    steps = np.diff(geopotential_height(height)) / (0.5 * (virtual[1:] + virtual[:-1]))
    fall = STANDARD_GRAVITY / DRY_AIR_GAS_CONSTANT * np.concatenate([[0.0], np.cumsum(steps)])
    return np.asarray(ground_pressure * np.exp(-fall))


def log_linear_integral(density: Float, height: Float) -> Float:
    """Integral over each layer of a density that varies exponentially with height inside it.

    Parameters
    ----------
    density : array (..., levels)
        At the levels, not negative.
    height : array (levels,)
        Increasing. [m]

    Returns
    -------
    array (..., levels - 1)
        (d1 - d2) / ln(d1 / d2) dz; the mean where the two are almost equal or one is zero.
    """
    low, high = density[..., :-1], density[..., 1:]
    usable = (low > 0.0) & (high > 0.0) & (np.abs(low - high) > 1e-6 * np.abs(low))
    ratio = np.where(usable, low, 2.0) / np.where(usable, high, 1.0)
    curved = (low - high) / np.log(ratio)
    return np.asarray(np.where(usable, curved, 0.5 * (low + high)) * np.diff(height))


def column_water_vapour(height: Float, pressure: Float, temperature: Float, ppmv: Float) -> Float:
    """Column water vapour above each level. [kg m-2].

    Parameters
    ----------
    height, pressure, temperature, ppmv : arrays (levels,)
        From the ground up; ppmv is the mole fraction of water. [m], [hPa], [K], [1e-6]

    Returns
    -------
    array (levels,)
        The first is the whole column.
    """
    number = LOSCHMIDT * (pressure / 1013.25) * (273.15 / temperature) * ppmv / 1e6
    layers = log_linear_integral(WATER_MOLECULE * number, height)
    return np.concatenate([np.cumsum(layers[::-1])[::-1], [0.0]])


def column_of_specific_humidity(specific_humidity: Float, pressure: Float) -> float:
    """Column water vapour (1 / g0) of the integral of q over p, by the trapezoid rule. [kg m-2].

    Parameters
    ----------
    specific_humidity : array (levels,)
        [kg kg-1]
    pressure : array (levels,)
        From the ground up. [hPa]
    """
    return float(np.trapezoid(specific_humidity[::-1], pressure[::-1]) * 100.0 / STANDARD_GRAVITY)
