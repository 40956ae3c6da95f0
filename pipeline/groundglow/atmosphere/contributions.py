"""A look at one profile's air: the spectrum of each band, and what each gas takes from it.

Plain arrays, for a table or a plot: an analyst can look at the day's air before trusting a map.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.composition import HALOCARBONS, MINOR_GASES, composed
from groundglow.atmosphere.node_solver import Bands, FluxPlan, sky_flux
from groundglow.atmosphere.profile import WATER, Profile
from groundglow.atmosphere.radiative_transfer import Spectrum, column, hemispheric_sky, look_down
from groundglow.atmosphere.solve import AirSettings
from groundglow.physics.planck import spectral_radiance
from groundglow.physics.spectral_response import SpectralResponse

Float = NDArray[np.float64]

# What is told apart, and which gases each name stands for.
CONTRIBUTORS: Mapping[str, tuple[str, ...]] = {
    "water_vapour": (WATER,),
    "carbon_dioxide": ("carbon_dioxide",),
    "ozone": ("ozone",),
    "nitrous_oxide": ("nitrous_oxide",),
    "methane": ("methane",),
    "halocarbons": HALOCARBONS,
    "minor_gases": MINOR_GASES,
}


@dataclass(frozen=True)
class BandAir:
    """One band's air over one profile.

    Attributes
    ----------
    wavenumber : array (wavenumbers,)
        [cm-1]
    transmittance : array (wavenumbers,)
        Of the path from the ground to the sensor.
    path_radiance, sky_radiance : arrays (wavenumbers,)
        [W m-2 sr-1 um-1]
    band_transmittance : float
        Weighted by response times blackbody radiance at the air's temperature near the ground.
    plain_transmittance : float
        Weighted by response only, for comparison with published figures.
    band_path_radiance, band_sky_radiance : float
        Response-weighted. [W m-2 sr-1 um-1]
    gas_transmittance : mapping of str to array (wavenumbers,)
        With each contributor alone.
    band_gas_transmittance : mapping of str to float
        Response-weighted.
    """

    wavenumber: Float
    transmittance: Float
    path_radiance: Float
    sky_radiance: Float
    band_transmittance: float
    plain_transmittance: float
    band_path_radiance: float
    band_sky_radiance: float
    gas_transmittance: Mapping[str, Float]
    band_gas_transmittance: Mapping[str, float]


@dataclass(frozen=True)
class ProfileAir:
    """What one profile means for a sensor.

    Attributes
    ----------
    column_water_vapour : float [kg m-2]
    sky_flux : float
        NaN if not asked for. [W m-2]
    bands : mapping of str to BandAir
        By the names of the bands.
    """

    column_water_vapour: float
    sky_flux: float
    bands: Mapping[str, BandAir]


def air_of_profile(
    profile: Profile,
    responses: Mapping[str, SpectralResponse],
    settings: AirSettings,
    *,
    ground: float,
    secant: float = 1.0,
    sensor: float | None = None,
) -> ProfileAir:
    """Solve one profile and keep the spectra.

    Parameters
    ----------
    profile : Profile
        Completed to the top of the air.
    responses : mapping of str to SpectralResponse
        Of the bands.
    settings : AirSettings
        How to solve; the uncertainty is not looked at.
    ground : float
        Above sea level. [m]
    secant : float
        Of the view zenith angle at the surface.
    sensor : float, optional
        Height above sea level; None for space. [m]

    Raises
    ------
    DomainError
        If the ground lies too far below the profile.
    """
    air = composed(profile, settings.composition)
    bands = Bands.of(responses, settings.absorption)
    whole = column(air, bands.spectrum, ground, sensor)
    transmittance, emitted = (values[0] for values in look_down(whole, np.array([secant]), sensor))
    sky = hemispheric_sky(whole).radiance
    alone = {
        name: _alone(air, bands.spectrum, gases, ground, secant, sensor)
        for name, gases in CONTRIBUTORS.items()
    }
    flux = np.nan
    if settings.sky_flux:
        flux = sky_flux(air, FluxPlan.full(settings.absorption, 1).broadband, ground)
    found = {}
    for name, weights, place in zip(bands.names, bands.weights, bands.places, strict=True):
        wavenumber = bands.spectrum.wavenumber[place]
        per_wavelength = wavenumber**2 * 1e-4
        planck = weights.weight * spectral_radiance(1e4 / wavenumber, float(whole.temperature[0]))
        found[name] = BandAir(
            wavenumber=wavenumber,
            transmittance=transmittance[place],
            path_radiance=emitted[place] * per_wavelength,
            sky_radiance=sky[place] * per_wavelength,
            band_transmittance=float(planck @ transmittance[place] / planck.sum()),
            plain_transmittance=float(weights.weight @ transmittance[place]),
            band_path_radiance=float(weights.radiance_weight @ emitted[place]),
            band_sky_radiance=float(weights.radiance_weight @ sky[place]),
            gas_transmittance={gas: values[place] for gas, values in alone.items()},
            band_gas_transmittance={
                gas: float(weights.weight @ values[place]) for gas, values in alone.items()
            },
        )
    return ProfileAir(column_water_vapour=whole.water, sky_flux=flux, bands=found)


def _alone(
    air: Profile, tables: Spectrum, gases: tuple[str, ...], ground: float, secant: float, sensor: float | None
) -> Float:
    """Transmittance with some gases only; the air itself stays as it is."""
    # Water stays at a trace, since every profile has some.
    kept = {name: values if name in gases else 1e-12 * values for name, values in air.gases.items()}
    lone = Profile(air.height, air.pressure, air.temperature, kept, air.notes)
    return np.asarray(look_down(column(lone, tables, ground, sensor), np.array([secant]), sensor)[0][0])
