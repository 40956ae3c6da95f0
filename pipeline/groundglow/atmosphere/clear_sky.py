"""Published one-line formulas from near-surface weather: clear-sky emissivity and column water vapour.

They serve as comparisons to the solved sky flux and as a first guess of the column when nothing
but the weather at the ground is known. All are for cloudless sky; T is the screen temperature in
kelvin and e the vapour pressure in hPa.
"""

from __future__ import annotations

from collections.abc import Callable
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.physics.constants import STEFAN_BOLTZMANN

Float = NDArray[np.float64]


def brunt(temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Clear-sky emissivity 0.52 + 0.065 sqrt(e); Brunt (1932), QJRMS 58, 389-420."""
    _, e = _both(temperature, vapour_pressure)
    return np.asarray(0.52 + 0.065 * np.sqrt(e))


def swinbank(temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Clear-sky emissivity 5.31e-13 T^6 / (sigma T^4), no humidity; Swinbank (1963), QJRMS 89, 339-348."""
    t, _ = _both(temperature, vapour_pressure)
    return np.asarray(5.31e-13 * t**2 / STEFAN_BOLTZMANN)


def idso_jackson(temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Clear-sky emissivity 1 - 0.261 exp(-7.77e-4 (273 - T)^2); Idso and Jackson (1969), JGR 74, 5397."""
    t, _ = _both(temperature, vapour_pressure)
    return np.asarray(1.0 - 0.261 * np.exp(-7.77e-4 * (273.0 - t) ** 2))


def brutsaert(temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Clear-sky emissivity 1.24 (e / T)^(1/7); Brutsaert (1975), Water Resources Research 11, 742-744."""
    t, e = _both(temperature, vapour_pressure)
    return np.asarray(1.24 * (e / t) ** (1.0 / 7.0))


def prata(temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Clear-sky emissivity 1 - (1 + w) exp(-sqrt(1.2 + 3 w)), w = 46.5 e / T; Prata (1996)."""
    t, e = _both(temperature, vapour_pressure)
    w = 46.5 * e / t
    return np.asarray(1.0 - (1.0 + w) * np.exp(-np.sqrt(1.2 + 3.0 * w)))


CLEAR_SKY_EMISSIVITIES: MappingProxyType[str, Callable[[ArrayLike, ArrayLike], Float]] = MappingProxyType(
    {
        "brunt": brunt,
        "swinbank": swinbank,
        "idso_jackson": idso_jackson,
        "brutsaert": brutsaert,
        "prata": prata,
    }
)


def clear_sky_flux(name: str, temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Downwelling longwave flux of a named formula, emissivity times sigma T^4. [W m-2].

    Parameters
    ----------
    name : str
        A key of ``CLEAR_SKY_EMISSIVITIES``.
    temperature, vapour_pressure : array
        Near the surface. [K], [hPa]
    """
    t, _ = _both(temperature, vapour_pressure)
    return np.asarray(CLEAR_SKY_EMISSIVITIES[name](temperature, vapour_pressure) * STEFAN_BOLTZMANN * t**4)


def prata_column(temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Column water vapour from near-surface weather, 46.5 e / T cm; Prata (1996). [kg m-2]."""
    t, e = _both(temperature, vapour_pressure)
    return np.asarray(10.0 * 46.5 * e / t)


def gueymard_column(temperature: ArrayLike, vapour_pressure: ArrayLike) -> Float:
    """Column water vapour from near-surface weather; within 20 % for 10 to 30 kg m-2. [kg m-2].

    0.1 H rho with the scale height H = 0.4976 + 1.5265 x + exp(13.6897 x - 14.9188 x^3) km,
    x = T / 273.15, and the vapour density rho = 216.7 e / T g m-3.

    References
    ----------
    Gueymard, C. (1994), Solar Energy 53, 57-71.
    """
    t, e = _both(temperature, vapour_pressure)
    x = t / 273.15
    scale_height = 0.4976 + 1.5265 * x + np.exp(13.6897 * x - 14.9188 * x**3)
    return np.asarray(scale_height * 216.7 * e / t)


def _both(temperature: ArrayLike, vapour_pressure: ArrayLike) -> tuple[Float, Float]:
    return np.asarray(temperature, dtype=np.float64), np.asarray(vapour_pressure, dtype=np.float64)
