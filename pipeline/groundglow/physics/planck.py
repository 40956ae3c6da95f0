"""Blackbody radiation at one wavelength, and the two-constant form of a calibrated band."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.physics.constants import (
    FIRST_RADIATION_CONSTANT,
    SECOND_RADIATION_CONSTANT,
    STEFAN_BOLTZMANN,
    WIEN_FREQUENCY,
    WIEN_WAVELENGTH,
)

Float = NDArray[np.float64]


def spectral_radiance(wavelength: ArrayLike, temperature: ArrayLike) -> Float:
    """Spectral radiance of a blackbody.

    Parameters
    ----------
    wavelength : array, broadcast against temperature
        Wavelength in vacuum, above 0. [um]
    temperature : array
        Absolute temperature, above 0; NaN gives NaN. [K]

    Returns
    -------
    array of the broadcast shape
        B(wavelength, T). [W m-2 sr-1 um-1]

    References
    ----------
    Planck, M. (1901), Annalen der Physik 309, 553-563.
    """
    wavelength = np.asarray(wavelength, dtype=np.float64)
    x = SECOND_RADIATION_CONSTANT / (wavelength * np.asarray(temperature, dtype=np.float64))
    with np.errstate(over="ignore"):
        return np.asarray(FIRST_RADIATION_CONSTANT / wavelength**5 / np.expm1(x))


def temperature_of_radiance(wavelength: ArrayLike, radiance: ArrayLike) -> Float:
    """Temperature of the blackbody that has this spectral radiance: the inverse of Planck's law.

    Parameters
    ----------
    wavelength : array
        Wavelength, above 0. [um]
    radiance : array
        Spectral radiance. [W m-2 sr-1 um-1]

    Returns
    -------
    array of the broadcast shape
        Temperature; NaN where the radiance is NaN or not positive. [K]
    """
    wavelength = np.asarray(wavelength, dtype=np.float64)
    radiance = np.asarray(radiance, dtype=np.float64)
    positive = np.where(radiance > 0.0, radiance, np.nan)
    ratio = FIRST_RADIATION_CONSTANT / (wavelength**5 * positive)
    return np.asarray(SECOND_RADIATION_CONSTANT / (wavelength * np.log1p(ratio)))


def radiance_slope(wavelength: ArrayLike, temperature: ArrayLike) -> Float:
    """Derivative of the blackbody radiance with temperature, dB/dT. [W m-2 sr-1 um-1 K-1]

    Parameters
    ----------
    wavelength : array [um]
    temperature : array [K]

    Returns
    -------
    array of the broadcast shape
    """
    wavelength = np.asarray(wavelength, dtype=np.float64)
    temperature = np.asarray(temperature, dtype=np.float64)
    x = SECOND_RADIATION_CONSTANT / (wavelength * temperature)
    return np.asarray(spectral_radiance(wavelength, temperature) * x / temperature / -np.expm1(-x))


def peak_wavelength(temperature: ArrayLike) -> Float:
    """Wavelength at which the spectral radiance per wavelength peaks (Wien). [um]"""
    return np.asarray(WIEN_WAVELENGTH / np.asarray(temperature, dtype=np.float64))


def peak_frequency(temperature: ArrayLike) -> Float:
    """Frequency at which the spectral radiance per frequency peaks (Wien). [Hz]"""
    return np.asarray(WIEN_FREQUENCY * np.asarray(temperature, dtype=np.float64))


def blackbody_exitance(temperature: ArrayLike) -> Float:
    """Flux that a blackbody emits into the hemisphere (Stefan-Boltzmann). [W m-2]"""
    return np.asarray(STEFAN_BOLTZMANN * np.asarray(temperature, dtype=np.float64) ** 4)


def blackbody_fraction(wavelength_temperature: ArrayLike, *, terms: int = 200) -> Float:
    """Share of a blackbody's exitance below a wavelength.

    Parameters
    ----------
    wavelength_temperature : array
        Product of wavelength and temperature, above 0. [um K]
    terms : int
        Terms of the series; 200 reach 1e-9 for products up to 1e5 um K.

    Returns
    -------
    array, same shape
        F(0 to wavelength), 0 to 1.

    References
    ----------
    Chang, S. L., Rhee, K. T. (1984), International Communications in Heat and Mass Transfer 11, 451-455.
    """
    x = SECOND_RADIATION_CONSTANT / np.asarray(wavelength_temperature, dtype=np.float64)[..., np.newaxis]
    n = np.arange(1, terms + 1, dtype=np.float64)
    series = np.exp(-n * x) * (x**3 / n + 3.0 * x**2 / n**2 + 6.0 * x / n**3 + 6.0 / n**4)
    return np.asarray(15.0 / np.pi**4 * series.sum(axis=-1))


def two_constant_temperature(radiance: ArrayLike, k1: float, k2: float) -> Float:
    """Brightness temperature by the two-constant form, T = K2 / ln(K1 / L + 1).

    Parameters
    ----------
    radiance : array
        Band radiance. [W m-2 sr-1 um-1]
    k1, k2 : float
        Published calibration constants of the band. [W m-2 sr-1 um-1], [K]

    Returns
    -------
    array, same shape
        Brightness temperature; NaN where the radiance is NaN or not positive. [K]

    References
    ----------
    Chander, G., Markham, B. L., Helder, D. L. (2009), Remote Sensing of Environment 113, 893-903.
    """
    radiance = np.asarray(radiance, dtype=np.float64)
    return np.asarray(k2 / np.log1p(k1 / np.where(radiance > 0.0, radiance, np.nan)))


def two_constant_radiance(temperature: ArrayLike, k1: float, k2: float) -> Float:
    """Band radiance by the two-constant form, L = K1 / (exp(K2 / T) - 1). [W m-2 sr-1 um-1]"""
    return np.asarray(k1 / np.expm1(k2 / np.asarray(temperature, dtype=np.float64)))
