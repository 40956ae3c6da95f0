"""One thermal band and the column water vapour: the published short form of the inversion.

The three functions of the atmosphere are fitted polynomials of the column water vapour alone, and
Planck's law is linearised around the brightness temperature:

    T = gamma ((psi1 L + psi2) / eps + psi3) + delta,
    gamma = Tb^2 / (b L),  delta = Tb - Tb^2 / b,

with L the radiance and Tb the brightness temperature at the sensor. No profile is needed; the price is
accuracy, and a narrow range of water vapour in which the fits hold.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import ConfigError
from groundglow.kernels import kernel
from groundglow.physics.band_table import HIGHEST_TEMPERATURE, LOWEST_TEMPERATURE
from groundglow.quantities import FLAG

Float = NDArray[np.float64]
Pixels = NDArray[np.float32]
Flags = NDArray[np.uint16]

# kg m-2, 10 of which are 1 g cm-2. The published fits are good to about 1 K below 2 g cm-2, become
# unphysical (a negative sky radiance) below 0.3 to 0.5, and must not be used above 3.
LEAST_WATER_VAPOUR = 5.0
GREATEST_WATER_VAPOUR = 20.0
REFUSED_WATER_VAPOUR = 30.0
# Standard uncertainty of the form itself within its range, from the published comparison. [K]
METHOD_UNCERTAINTY = 1.0

_IMPOSSIBLE = np.uint16(FLAG["impossible"].mask)
_OUTSIDE = np.uint16(FLAG["atmosphere_outside_validity"].mask)
_NAN = np.float32(np.nan)


@dataclass(frozen=True)
class WaterVapourCoefficients:
    """Coefficients of one sensor's band.

    Attributes
    ----------
    first, second, third : tuple of float
        Quadratic, linear and constant coefficient of psi1, psi2 and psi3, water vapour in g cm-2.
    planck : float
        b, the second radiation constant over the band's effective wavelength. [K]
    source : str
    """

    first: tuple[float, float, float]
    second: tuple[float, float, float]
    third: tuple[float, float, float]
    planck: float
    source: str

    def packed(self) -> Float:
        """All ten numbers in the order of the attributes, for the compiled form."""
        return np.array([*self.first, *self.second, *self.third, self.planck], dtype=np.float64)


_2003 = "Jimenez-Munoz and Sobrino (2003), JGR 108:4688"
_2009 = "Jimenez-Munoz et al. (2009), IEEE TGRS 47:339-349, TIGR61 database"
_2014 = "Jimenez-Munoz et al. (2014), IEEE GRSL 11:1840-1843"

# From memory of the papers; the 2014 row with high, the 2009 rows with medium confidence.
COEFFICIENTS: Mapping[str, WaterVapourCoefficients] = MappingProxyType(
    {
        "landsat-5-2003": WaterVapourCoefficients(
            first=(0.14714, -0.15583, 1.1234),
            second=(-1.1836, -0.37607, -0.52894),
            third=(-0.04554, 1.8719, -0.39071),
            planck=1256.0,
            source=_2003,
        ),
        "landsat-5": WaterVapourCoefficients(
            first=(0.08735, -0.09553, 1.10188),
            second=(-0.69188, -0.58185, -0.29887),
            third=(-0.03724, 1.53065, -0.45476),
            planck=1256.0,
            source=_2009,
        ),
        "landsat-7": WaterVapourCoefficients(
            first=(0.07593, -0.07132, 1.08565),
            second=(-0.61438, -0.70916, -0.19379),
            third=(-0.02892, 1.46051, -0.43199),
            planck=1277.0,
            source=_2009,
        ),
        "landsat-8": WaterVapourCoefficients(
            first=(0.04019, 0.02916, 1.01523),
            second=(-0.38333, -1.50294, 0.20324),
            third=(0.00918, 1.36072, -0.27514),
            planck=1324.0,
            source=_2014,
        ),
    }
)


@dataclass(frozen=True)
class WaterVapourInversion:
    """Surface temperature by the short form and its first derivatives; arrays of one shape.

    Attributes
    ----------
    temperature : array
        NaN where there is none. [K]
    per_radiance : array
        [K per W m-2 sr-1 um-1]
    per_emissivity : array
        [K]
    per_water_vapour : array
        [K per kg m-2]
    outside_validity : bool array
        True where the water vapour is below 0.5 or above 2 g cm-2.
    impossible : bool array
        True where all inputs are numbers and the water vapour may be used, and still no temperature between
        150 K and 1,500 K follows.
    """

    temperature: Float
    per_radiance: Float
    per_emissivity: Float
    per_water_vapour: Float
    outside_validity: NDArray[np.bool_]
    impossible: NDArray[np.bool_]


def coefficients(name: str) -> WaterVapourCoefficients:
    """Coefficients by name.

    Parameters
    ----------
    name : str
        A key of :data:`COEFFICIENTS`.

    Returns
    -------
    WaterVapourCoefficients

    Raises
    ------
    ConfigError
        If nothing is published for it; the message lists what there is.
    """
    try:
        return COEFFICIENTS[name]
    except KeyError:
        raise ConfigError(
            f"no coefficients of the water-vapour form are known for {name!r}",
            remedy=f"Choose from: {', '.join(COEFFICIENTS)}; or give the atmosphere as a profile",
        ) from None


def atmospheric_functions(
    column_water_vapour: ArrayLike, fit: WaterVapourCoefficients
) -> tuple[Float, Float, Float]:
    """The three functions psi of the atmosphere.

    Parameters
    ----------
    column_water_vapour : array (...)
        0 to 30; NaN elsewhere. [kg m-2]
    fit : WaterVapourCoefficients
        Of the band.

    Returns
    -------
    psi1, psi2, psi3 : array (...)
        [1], [W m-2 sr-1 um-1], [W m-2 sr-1 um-1]
    """
    w = np.asarray(column_water_vapour, dtype=np.float64)
    w = 0.1 * np.where((w >= 0.0) & (w <= REFUSED_WATER_VAPOUR), w, np.nan)
    first, second, third = ((a * w + b) * w + c for a, b, c in (fit.first, fit.second, fit.third))
    return first, second, third


def invert_with_water_vapour(
    radiance: ArrayLike,
    brightness_temperature: ArrayLike,
    emissivity: ArrayLike,
    column_water_vapour: ArrayLike,
    fit: WaterVapourCoefficients,
) -> WaterVapourInversion:
    """Surface temperature from one band and the column water vapour.

    Parameters
    ----------
    radiance : array (...)
        At the sensor, above 0. [W m-2 sr-1 um-1]
    brightness_temperature : array (...)
        Of that radiance. [K]
    emissivity : array (...)
        Above 0, at most 1; anything else gives NaN.
    column_water_vapour : array (...)
        0 to 30; anything else gives NaN. [kg m-2]
    fit : WaterVapourCoefficients
        Of the band.

    Returns
    -------
    WaterVapourInversion
        The derivatives hold dTb/dL = gamma, as the form itself does.

    References
    ----------
    Jimenez-Munoz, J. C. et al. (2014), IEEE Geoscience and Remote Sensing Letters 11, 1840-1843,
    doi:10.1109/LGRS.2014.2312032.
    """
    level = np.asarray(radiance, dtype=np.float64)
    level = np.where(level > 0.0, level, np.nan)
    bright = np.asarray(brightness_temperature, dtype=np.float64)
    eps = np.asarray(emissivity, dtype=np.float64)
    eps = np.where((eps > 0.0) & (eps <= 1.0), eps, np.nan)
    water = np.asarray(column_water_vapour, dtype=np.float64)
    first, second, third = atmospheric_functions(water, fit)
    gamma = bright * bright / (fit.planck * level)
    delta = bright - bright * bright / fit.planck
    bracket = (first * level + second) / eps + third
    w = 0.1 * water
    growth = [2.0 * a * w + b for a, b, _ in (fit.first, fit.second, fit.third)]
    found = gamma * bracket + delta
    known = (found >= LOWEST_TEMPERATURE) & (found <= HIGHEST_TEMPERATURE)
    usable = (water >= 0.0) & (water <= REFUSED_WATER_VAPOUR)
    for given in (radiance, brightness_temperature, emissivity):
        usable = usable & ~np.isnan(np.asarray(given, dtype=np.float64))
    per_radiance = (
        gamma * first / eps
        + bracket * gamma * (2.0 * gamma / bright - 1.0 / level)
        + gamma * (1.0 - 2.0 * bright / fit.planck)
    )
    per_water = 0.1 * gamma * ((growth[0] * level + growth[1]) / eps + growth[2])
    return WaterVapourInversion(
        temperature=np.where(known, found, np.nan),
        per_radiance=np.where(known, per_radiance, np.nan),
        per_emissivity=np.where(known, -gamma * (first * level + second) / (eps * eps), np.nan),
        per_water_vapour=np.where(known, per_water, np.nan),
        outside_validity=(water < LEAST_WATER_VAPOUR) | (water > GREATEST_WATER_VAPOUR),
        impossible=usable & ~known,
    )


@kernel(
    "void(float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1], float64[::1],"
    " float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1], uint16[:, ::1])"
)
def invert_tile_with_water_vapour(
    radiance: Pixels,
    brightness_temperature: Pixels,
    emissivity: Pixels,
    column_water_vapour: Pixels,
    packed: Float,
    temperature: Pixels,
    per_radiance: Pixels,
    per_emissivity: Pixels,
    per_water_vapour: Pixels,
    flags: Flags,
) -> None:
    """The compiled form of :func:`invert_with_water_vapour` on one tile.

    The four results are written, and ``flags`` gains "atmosphere outside validity" and "impossible";
    ``packed`` is :meth:`WaterVapourCoefficients.packed`.
    """
    a1, b1, c1, a2, b2, c2, a3, b3, c3, planck = packed
    for i in range(radiance.shape[0]):
        for j in range(radiance.shape[1]):
            level = np.float64(radiance[i, j])
            bright = np.float64(brightness_temperature[i, j])
            eps = np.float64(emissivity[i, j])
            water = np.float64(column_water_vapour[i, j])
            if water < LEAST_WATER_VAPOUR or water > GREATEST_WATER_VAPOUR:
                flags[i, j] |= _OUTSIDE
            temperature[i, j] = _NAN
            per_radiance[i, j] = _NAN
            per_emissivity[i, j] = _NAN
            per_water_vapour[i, j] = _NAN
            if np.isnan(level) or np.isnan(bright) or np.isnan(eps):
                continue
            if not (water >= 0.0 and water <= REFUSED_WATER_VAPOUR):
                continue
            if not (level > 0.0 and eps > 0.0 and eps <= 1.0):
                flags[i, j] |= _IMPOSSIBLE
                continue
            w = 0.1 * water
            first = (a1 * w + b1) * w + c1
            second = (a2 * w + b2) * w + c2
            gamma = bright * bright / (planck * level)
            ground = (first * level + second) / eps
            bracket = ground + ((a3 * w + b3) * w + c3)
            found = gamma * bracket + (bright - bright * bright / planck)
            if not (found >= LOWEST_TEMPERATURE and found <= HIGHEST_TEMPERATURE):
                flags[i, j] |= _IMPOSSIBLE
                continue
            temperature[i, j] = found
            per_radiance[i, j] = (
                gamma * first / eps
                + bracket * gamma * (2.0 * gamma / bright - 1.0 / level)
                + gamma * (1.0 - 2.0 * bright / planck)
            )
            per_emissivity[i, j] = -gamma * ground / eps
            growth = (2.0 * a1 * w + b1) * level + (2.0 * a2 * w + b2)
            per_water_vapour[i, j] = 0.1 * gamma * (growth / eps + (2.0 * a3 * w + b3))
