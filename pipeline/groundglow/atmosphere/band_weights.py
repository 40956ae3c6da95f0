"""A band's spectral response as weights on the wavenumbers of the absorption tables."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.absorption import STEP, wavenumbers
from groundglow.errors import DomainError
from groundglow.physics.planck import spectral_radiance
from groundglow.physics.spectral_response import SpectralResponse

Float = NDArray[np.float64]
Integer = NDArray[np.int64]

# Above this width of a band its transmittance depends noticeably on the surface temperature.
NARROW_BAND = 0.7  # um


@dataclass(frozen=True)
class BandWeights:
    """Quadrature weights of one band; spectra are linear between the wavenumbers of the tables.

    Attributes
    ----------
    index : integer array (n,)
        Positions in ``absorption.wavenumbers()``, consecutive.
    weight : array (n,)
        Of the response-weighted mean over wavelength; they add up to one.
    radiance_weight : array (n,)
        The same for radiances per wavenumber, in W m-2 sr-1 um-1 per W m-2 sr-1 (cm-1)-1.
    effective_wavelength : float [um]
    width : float
        Equivalent width. [um]
    """

    index: Integer
    weight: Float
    radiance_weight: Float
    effective_wavelength: float
    width: float

    def planck_weight(self, temperature: float) -> Float:
        """Weights of the mean over response times blackbody radiance; they add up to one (n,)."""
        wavelength = 1e4 / wavenumbers()[self.index]
        product = self.weight * spectral_radiance(wavelength, temperature)
        return np.asarray(product / product.sum())


def band_weights(response: SpectralResponse) -> BandWeights:
    """Weights of a spectral response.

    Raises
    ------
    DomainError
        If the band reaches beyond 3.34 to 2000 um, where there are no tables.
    """
    grid = wavenumbers()
    wavenumber = 1e4 / response.quadrature_wavelength
    if wavenumber.min() < grid[0] or wavenumber.max() > grid[-1]:
        low, high = response.limits
        raise DomainError(
            f"the air is solved from {1e4 / grid[-1]:.2f} to {1e4 / grid[0]:.0f} um, "
            f"the band reaches from {low:g} to {high:g} um"
        )
    place = wavenumber / STEP - 1.0
    cell = np.minimum(place.astype(np.int64), grid.size - 2)
    share = place - cell
    weight = np.zeros(grid.size)
    np.add.at(weight, cell, response.quadrature_weight * (1.0 - share))
    np.add.at(weight, cell + 1, response.quadrature_weight * share)
    used = np.flatnonzero(weight)
    index = np.arange(used[0], used[-1] + 1)
    weight = weight[index]
    return BandWeights(
        index=index,
        weight=weight,
        radiance_weight=weight * grid[index] ** 2 * 1e-4,
        effective_wavelength=response.effective_wavelength,
        width=response.width,
    )
