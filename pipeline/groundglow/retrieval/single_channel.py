"""One thermal band, solved for the surface temperature: the readable statement.

Ground, air and sensor are joined by

    L = eps t(T) B(T) + (1 - eps) r + p,

with L the radiance at the sensor, eps the emissivity, B the blackbody radiance of the band, t the
transmittance weighted by response times Planck radiance, r the hemispheric sky radiance seen through
the air, and p the path radiance. In a narrow band t is one number, r = t times the sky radiance, and
this is the textbook equation; in a wide one t moves a little with the surface temperature and is
known at three of them.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError
from groundglow.physics.band_table import CELL_SHIFT, BandTable, temperature_of_band_radiance

Float = NDArray[np.float64]
Inverse = Callable[[Float], tuple[Float, Float]]

# Fixed-point passes for a transmittance that depends on the temperature sought; each gains about two
# digits.
_PASSES = 4


@dataclass(frozen=True)
class Air:
    """What lies between ground and sensor, at pixels.

    Attributes
    ----------
    transmittance : array (temperatures, ...)
        Planck- and response-weighted transmittance at each of the surface temperatures. [1]
    path_radiance : array (...)
        [W m-2 sr-1 um-1]
    transmitted_sky_radiance : array (...)
        Hemispheric sky radiance times transmittance. [W m-2 sr-1 um-1]
    surface_temperature : array (1,) or (3,)
        Where the transmittance is weighted, increasing. [K]
    """

    transmittance: Float
    path_radiance: Float
    transmitted_sky_radiance: Float
    surface_temperature: Float

    def __post_init__(self) -> None:
        nodes = np.asarray(self.surface_temperature, dtype=np.float64)
        if nodes.size not in (1, 3) or (np.diff(nodes) <= 0.0).any():
            raise DomainError("the air's transmittance is given at one or three increasing temperatures")
        if np.shape(self.transmittance)[:1] != (nodes.size,):
            raise DomainError(
                f"the transmittance has {np.shape(self.transmittance)[:1]} temperatures on its first axis, "
                f"needed {nodes.size}"
            )


@dataclass(frozen=True)
class Inversion:
    """A surface temperature with what its uncertainty is built from; arrays of one shape.

    Attributes
    ----------
    temperature : array
        Surface temperature; NaN where there is none. [K]
    transmitted_blackbody : array
        t B, what the air lets through of the blackbody radiance. [W m-2 sr-1 um-1]
    response : array
        dL/dT = eps d(t B)/dT, radiance at the sensor per kelvin at the surface.
        [W m-2 sr-1 um-1 K-1]
    """

    temperature: Float
    transmitted_blackbody: Float
    response: Float


@dataclass(frozen=True)
class Sensitivities:
    """Partial derivatives of the surface temperature; arrays of one shape.

    Attributes
    ----------
    radiance : array
        [K per W m-2 sr-1 um-1]
    emissivity : array
        [K]
    transmittance : array
        At a fixed transmitted sky radiance. [K]
    path_radiance, transmitted_sky_radiance : array
        [K per W m-2 sr-1 um-1]
    """

    radiance: Float
    emissivity: Float
    transmittance: Float
    path_radiance: Float
    transmitted_sky_radiance: Float


def narrow_air(transmittance: ArrayLike, path_radiance: ArrayLike, sky_radiance: ArrayLike) -> Air:
    """The air of a narrow band from the textbook's three numbers.

    Parameters
    ----------
    transmittance : array (...)
        0 to 1. [1]
    path_radiance, sky_radiance : array (...)
        Upward emission of the air, and hemispheric sky radiance at the ground. [W m-2 sr-1 um-1]

    Returns
    -------
    Air
    """
    t, p, sky = (
        np.asarray(a, dtype=np.float64)
        for a in np.broadcast_arrays(transmittance, path_radiance, sky_radiance)
    )
    return Air(t[np.newaxis], p, t * sky, np.array([300.0]))


def inverse_of_table(table: BandTable) -> Inverse:
    """Temperature and dT/dB of a blackbody radiance by a band table, for :func:`invert`.

    Parameters
    ----------
    table : BandTable
        Of the band in use.

    Returns
    -------
    callable
        Radiance in, temperature [K] and slope [K per W m-2 sr-1 um-1] out; NaN outside the table.
    """

    def look_up(radiance: Float) -> tuple[Float, Float]:
        temperature = temperature_of_band_radiance(radiance, table)
        known = np.where(np.isnan(temperature), table.lowest_radiance, radiance).astype(np.float32)
        slope = table.slope[(known.view(np.int32) >> CELL_SHIFT) - table.first_key]
        return temperature.astype(np.float64), slope.astype(np.float64)

    return look_up


def radiance_at_sensor(
    blackbody: ArrayLike, emissivity: ArrayLike, air: Air, temperature: ArrayLike
) -> Float:
    """Radiance that the sensor sees: the equation read forwards.

    Parameters
    ----------
    blackbody : array (...)
        Blackbody radiance of the band at the surface temperature. [W m-2 sr-1 um-1]
    emissivity : array (...)
        0 to 1.
    air : Air
        At the same pixels.
    temperature : array (...)
        Surface temperature; looked at where the transmittance depends on it. [K]

    Returns
    -------
    array (...)
        [W m-2 sr-1 um-1]
    """
    eps = np.asarray(emissivity, dtype=np.float64)
    transmittance, _ = transmittance_at(air, temperature)
    reflected = (1.0 - eps) * air.transmitted_sky_radiance
    return np.asarray(eps * transmittance * np.asarray(blackbody) + reflected + air.path_radiance)


def transmittance_at(air: Air, temperature: ArrayLike) -> tuple[Float, Float]:
    """Transmittance for a surface of that temperature, and its slope.

    A parabola in the reciprocal of the temperature through the three nodes. Planck's law weights the
    wavelengths by it, so the parabola also holds far beyond the nodes, over fires as over snow.

    Parameters
    ----------
    air : Air
        At the same pixels.
    temperature : array (...)
        [K]

    Returns
    -------
    transmittance, slope : array (...)
        [1], [K-1]
    """
    t = np.asarray(air.transmittance, dtype=np.float64)
    kelvin = np.asarray(temperature, dtype=np.float64)
    if t.shape[0] == 1:
        return t[0], np.zeros(np.broadcast_shapes(t[0].shape, kelvin.shape))
    low, middle, high = (1.0 / float(node) for node in air.surface_temperature)
    x = 1.0 / kelvin
    first = (t[1] - t[0]) / (middle - low)
    curve = ((t[2] - t[1]) / (high - middle) - first) / (high - low)
    value = t[0] + (x - low) * (first + curve * (x - middle))
    slope = -x * x * (first + curve * ((x - low) + (x - middle)))
    return value, slope


def invert(radiance: ArrayLike, emissivity: ArrayLike, air: Air, inverse: Inverse) -> Inversion:
    """Surface temperature of a radiance at the sensor.

    Parameters
    ----------
    radiance : array (...)
        Radiance at the sensor. [W m-2 sr-1 um-1]
    emissivity : array (...)
        Above 0, at most 1; anything else gives NaN.
    air : Air
        At the same pixels; a transmittance that is not above 0 gives NaN.
    inverse : callable
        Temperature and dT/dB of a blackbody radiance, as :func:`inverse_of_table` makes it.

    Returns
    -------
    Inversion
        NaN where an input is NaN, or where no blackbody has the radiance that is left once the air
        and the reflection are taken away.

    References
    ----------
    Li, Z.-L. et al. (2013), Remote Sensing of Environment 131, 14-37, doi:10.1016/j.rse.2012.12.008.
    """
    eps = np.asarray(emissivity, dtype=np.float64)
    eps = np.where((eps > 0.0) & (eps <= 1.0), eps, np.nan)
    left = np.asarray(radiance, dtype=np.float64) - air.path_radiance
    through = (left - (1.0 - eps) * air.transmitted_sky_radiance) / eps
    middle = np.asarray(air.transmittance, dtype=np.float64)[air.surface_temperature.size // 2]
    t = np.where(middle > 0.0, middle, np.nan) + 0.0 * through
    slope_of_t = np.zeros_like(t)
    for _ in range(_PASSES if air.surface_temperature.size == 3 else 1):
        source = through / t
        temperature, kelvin_per_radiance = inverse(np.where(source > 0.0, source, np.nan))
        if air.surface_temperature.size == 3:
            t, slope_of_t = transmittance_at(air, temperature)
    response = eps * (t / kelvin_per_radiance + slope_of_t * through / t)
    known = np.isfinite(temperature)
    return Inversion(
        np.where(known, temperature, np.nan),
        np.where(known, through, np.nan),
        np.where(known, response, np.nan),
    )


def sensitivities(result: Inversion, emissivity: ArrayLike, air: Air) -> Sensitivities:
    """First derivatives of the surface temperature with all that went into it.

    Parameters
    ----------
    result : Inversion
        What :func:`invert` gave.
    emissivity : array (...)
        As given to :func:`invert`.
    air : Air
        As given to :func:`invert`.

    Returns
    -------
    Sensitivities
        For the textbook's variables (sky radiance at the ground held while the transmittance moves)
        add sky radiance times ``transmitted_sky_radiance`` to ``transmittance``.
    """
    eps = np.asarray(emissivity, dtype=np.float64)
    t, _ = transmittance_at(air, result.temperature)
    per_radiance = 1.0 / result.response
    return Sensitivities(
        radiance=per_radiance,
        emissivity=-(result.transmitted_blackbody - air.transmitted_sky_radiance) * per_radiance,
        transmittance=-eps * result.transmitted_blackbody / t * per_radiance,
        path_radiance=-per_radiance,
        transmitted_sky_radiance=-(1.0 - eps) * per_radiance,
    )
