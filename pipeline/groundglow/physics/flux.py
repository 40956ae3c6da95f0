"""Longwave fluxes at the surface."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.physics.constants import STEFAN_BOLTZMANN

Float = NDArray[np.float64]


def emitted_flux(emissivity: ArrayLike, temperature: ArrayLike) -> Float:
    """Flux that the surface emits, eps sigma T^4. [W m-2]

    Parameters
    ----------
    emissivity : array
        Broadband emissivity, 0 to 1.
    temperature : array
        Surface temperature. [K]
    """
    t = np.asarray(temperature, dtype=np.float64)
    return np.asarray(np.asarray(emissivity, dtype=np.float64) * STEFAN_BOLTZMANN * t**4)


def leaving_flux(emissivity: ArrayLike, temperature: ArrayLike, sky_flux: ArrayLike) -> Float:
    """Flux that leaves the surface, emitted and reflected: eps sigma T^4 + (1 - eps) sky flux. [W m-2]"""
    reflected = (1.0 - np.asarray(emissivity, dtype=np.float64)) * np.asarray(sky_flux, dtype=np.float64)
    return np.asarray(emitted_flux(emissivity, temperature) + reflected)


def net_longwave_flux(emissivity: ArrayLike, temperature: ArrayLike, sky_flux: ArrayLike) -> Float:
    """Net longwave flux, downward positive: sky flux less leaving flux. [W m-2]"""
    return np.asarray(
        np.asarray(sky_flux, dtype=np.float64) - leaving_flux(emissivity, temperature, sky_flux)
    )
