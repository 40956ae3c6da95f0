"""From the emissivity a sensor sees near nadir to that of the whole hemisphere.

A flux leaves in all directions, and smooth surfaces emit less at grazing angles. For water and ice the
step follows from Fresnel's equations and the measured complex refractive index; rough ground is taken as
equal in all directions, with an uncertainty instead of a correction.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.physics.planck import spectral_radiance

Float = NDArray[np.float64]

# Wavelength [um], real and imaginary part of the refractive index at 25 degC.
# Hale, G. M., Querry, M. R. (1973), Applied Optics 12, 555-563 (from memory).
WATER_REFRACTIVE_INDEX = np.array(
    [
        [8.0, 1.291, 0.0343],
        [8.5, 1.277, 0.0361],
        [9.0, 1.262, 0.0399],
        [9.5, 1.243, 0.0415],
        [10.0, 1.218, 0.0508],
        [10.5, 1.185, 0.0662],
        [11.0, 1.153, 0.0968],
        [11.5, 1.126, 0.142],
        [12.0, 1.111, 0.199],
        [12.5, 1.123, 0.259],
        [13.0, 1.146, 0.305],
        [13.5, 1.177, 0.343],
    ]
)


@dataclass(frozen=True)
class HemisphericStep:
    """Ratio of hemispheric to near-nadir broadband emissivity of one kind of ground.

    Attributes
    ----------
    ratio : float
        Above 0, at most 1.
    uncertainty : float
        Standard uncertainty of the ratio.
    source : str
    """

    ratio: float
    uncertainty: float
    source: str


# Water: :func:`water_hemispheric_ratio` gives 0.955 for a flat surface; waves raise it by a few thousandths.
# Snow and ice lie between flat ice, which is close to water, and a diffuse emitter: the middle of 0.955 to 1
# with the standard uncertainty of a uniform distribution.
HEMISPHERIC_STEPS: Mapping[str, HemisphericStep] = MappingProxyType(
    {
        "water": HemisphericStep(0.955, 0.005, "Fresnel's equations with Hale and Querry (1973)"),
        "snow_ice": HemisphericStep(0.9775, 0.013, "between flat ice and a diffuse emitter (assumed)"),
    }
)
ELSEWHERE = HemisphericStep(1.0, 0.01, "rough ground taken as diffuse (assumed)")


def hemispheric_step(surface_class: str) -> HemisphericStep:
    """The step for a class of ground, by name.

    Parameters
    ----------
    surface_class : str
        Name of a class; any that is not water or snow and ice is taken as rough.

    Returns
    -------
    HemisphericStep
    """
    return HEMISPHERIC_STEPS.get(surface_class, ELSEWHERE)


def fresnel_emissivity(real: ArrayLike, imaginary: ArrayLike, zenith_angle: ArrayLike) -> Float:
    """Emissivity of a flat surface in one direction, one less Fresnel's unpolarised reflectance.

    Parameters
    ----------
    real, imaginary : array
        Complex refractive index n + i k.
    zenith_angle : array, broadcast against them
        0 to 90. [deg]

    Returns
    -------
    array of the broadcast shape
        0 to 1.

    References
    ----------
    Born, M., Wolf, E., Principles of Optics, sections 1.5 and 14.2.
    """
    index = np.asarray(real, dtype=np.float64) + 1j * np.asarray(imaginary, dtype=np.float64)
    cosine = np.cos(np.radians(np.asarray(zenith_angle, dtype=np.float64)))
    inside = np.sqrt(index**2 - (1.0 - cosine**2))
    across = np.abs((cosine - inside) / (cosine + inside)) ** 2
    along = np.abs((index**2 * cosine - inside) / (index**2 * cosine + inside)) ** 2
    return np.asarray(1.0 - 0.5 * (across + along))


def hemispheric_emissivity(real: ArrayLike, imaginary: ArrayLike) -> Float:
    """Emissivity of a flat surface over the hemisphere.

    Parameters
    ----------
    real, imaginary : array (...)
        Complex refractive index n + i k.

    Returns
    -------
    array (...)
        Integral over mu of 2 mu times the directional emissivity, mu the cosine of the zenith angle.
    """
    nodes, weights = np.polynomial.legendre.leggauss(48)
    cosine, weight = 0.5 * (nodes + 1.0), 0.5 * weights
    n, k = (np.asarray(part, dtype=np.float64)[..., np.newaxis] for part in (real, imaginary))
    directional = fresnel_emissivity(n, k, np.degrees(np.arccos(cosine)))
    return np.asarray((directional * 2.0 * cosine * weight).sum(axis=-1))


def water_hemispheric_ratio(temperature: float = 290.0) -> float:
    """Hemispheric over near-nadir emissivity of flat water in 8-13.5 um.

    Parameters
    ----------
    temperature : float
        Weights the wavelengths by Planck's law. [K]

    Returns
    -------
    float
    """
    wavelength, real, imaginary = WATER_REFRACTIVE_INDEX.T
    weight = spectral_radiance(wavelength, temperature)
    nadir = fresnel_emissivity(real, imaginary, 0.0)
    hemisphere = hemispheric_emissivity(real, imaginary)
    return float(np.trapezoid(hemisphere * weight, wavelength) / np.trapezoid(nadir * weight, wavelength))
