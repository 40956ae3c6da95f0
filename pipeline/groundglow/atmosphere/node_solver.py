"""Columns of air at the nodes of an atmosphere grid, solved for all bands and angles at once."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.absorption import wavenumbers
from groundglow.atmosphere.band_weights import NARROW_BAND, BandWeights, band_weights
from groundglow.atmosphere.grid import AirTerms
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.radiative_transfer import (
    Spectrum,
    column,
    hemispheric_sky,
    look_down,
    spectrum,
)
from groundglow.atmosphere.sensor_height import SensorHeight
from groundglow.physics.planck import radiance_slope, spectral_radiance
from groundglow.physics.spectral_response import SpectralResponse

Float = NDArray[np.float64]
Integer = NDArray[np.int64]

# The sky flux bends little with height: its changes are solved at three heights at most.
_FLUX_CHANGE_HEIGHTS = 3
# And at every fourth wavenumber: 20 cm-1 is the resolution of the band model.
_FLUX_CHANGE_STEP = 4
# A narrow band whose absorption is uneven needs three surface temperatures as well.
_SINGLE_TEMPERATURE_COST = 0.04  # K


def sky_flux(air: Profile, broadband: Spectrum, ground: float) -> float:
    """Downwelling longwave flux at the ground, clear sky, over all wavenumbers of the tables. [W m-2].

    Parameters
    ----------
    air : Profile
        With the gases that take part.
    broadband : Spectrum
        At all wavenumbers.
    ground : float
        Above sea level. [m]
    """
    radiance = hemispheric_sky(column(air, broadband, ground)).radiance
    return float(np.pi * np.trapezoid(radiance, broadband.wavenumber))


@dataclass(frozen=True)
class FluxPlan:
    """At which wavenumbers and node heights the sky flux is solved."""

    broadband: Spectrum
    index: Integer

    @staticmethod
    def full(absorption: str, heights: int) -> FluxPlan:
        """Every wavenumber and height."""
        return FluxPlan(spectrum(np.arange(wavenumbers().size), absorption), np.arange(heights))

    @staticmethod
    def scene(absorption: str, heights: int) -> FluxPlan:
        """Every second wavenumber, which costs 0.01 W m-2, and every height."""
        return FluxPlan(spectrum(np.arange(0, wavenumbers().size, 2), absorption), np.arange(heights))

    @staticmethod
    def coarse(absorption: str, heights: int) -> FluxPlan:
        """Enough for differences."""
        index = np.linspace(0, heights - 1, min(heights, _FLUX_CHANGE_HEIGHTS)).round().astype(np.int64)
        return FluxPlan(spectrum(np.arange(0, wavenumbers().size, _FLUX_CHANGE_STEP), absorption), index)

    def over(self, air: Profile, height: Float) -> Float:
        """Sky flux over the heights (height,). [W m-2]."""
        solved = np.array([sky_flux(air, self.broadband, float(h)) for h in height[self.index]])
        if self.index.size == height.size:
            return solved
        order = self.index.size - 1
        return np.asarray(np.polynomial.Polynomial.fit(height[self.index], solved, order)(height))


@dataclass(frozen=True)
class Bands:
    """The bands of a sensor and the tables that serve them all."""

    names: tuple[str, ...]
    weights: tuple[BandWeights, ...]
    places: tuple[slice, ...]
    spectrum: Spectrum
    three_temperatures: tuple[bool, ...]

    @staticmethod
    def of(responses: Mapping[str, SpectralResponse], absorption: str) -> Bands:
        """The bands with these responses, by an absorption set."""
        weights = tuple(band_weights(response) for response in responses.values())
        index = np.unique(np.concatenate([w.index for w in weights]))
        starts = [int(np.searchsorted(index, w.index[0])) for w in weights]
        return Bands(
            names=tuple(responses),
            weights=weights,
            places=tuple(slice(s, s + w.index.size) for s, w in zip(starts, weights, strict=True)),
            spectrum=spectrum(index, absorption),
            three_temperatures=tuple(w.width > NARROW_BAND for w in weights),
        )

    def temperatures(self, band: int, temperatures: Float) -> Float:
        """One surface temperature (the middle one) for a narrow band, three for a wide one."""
        return temperatures if self.three_temperatures[band] else temperatures[1:2]

    def weighted_for(
        self, air: Profile, ground: float, secant: float, sensor: float | None, temperatures: Float
    ) -> Bands:
        """The same bands, with three temperatures where a single one would cost 0.04 K at the outer ones."""
        seen = look_down(column(air, self.spectrum, ground, sensor), np.array([secant]), sensor)[0][0]
        three = []
        for wide, weights, place in zip(self.three_temperatures, self.weights, self.places, strict=True):
            t = np.array([weights.planck_weight(float(at)) @ seen[place] for at in temperatures])
            wavelength = weights.effective_wavelength
            lever = spectral_radiance(wavelength, temperatures) / radiance_slope(wavelength, temperatures)
            three.append(bool(wide or (np.abs(t / t[1] - 1.0) * lever).max() > _SINGLE_TEMPERATURE_COST))
        return replace(self, three_temperatures=tuple(three))


@dataclass(frozen=True)
class Solved:
    """Terms of every band, and what the absorption model's uncertainty needs beside them."""

    terms: list[AirTerms]
    sky_transmittance: list[Float]
    vertical: list[Float]
    water: Float


class NodeSolver:
    """Solves columns at all nodes and gathers them into terms."""

    def __init__(
        self, bands: Bands, height: Float, secant: Float, sensor: SensorHeight, temperatures: Float,
        places: tuple[int, int],
    ) -> None:  # fmt: skip
        self.bands = bands
        self.height = height
        self.secant = secant
        self.sensor = sensor
        self.temperatures = temperatures
        self.places = places
        self.planck = [
            np.array([w.planck_weight(t) for t in bands.temperatures(i, temperatures)])
            for i, w in enumerate(bands.weights)
        ]

    def solve(self, airs: Sequence[Profile], flux: FluxPlan | None) -> Solved:
        """Terms at all nodes; the flux, if wanted, is solved as planned and interpolated in height."""
        count = len(self.bands.names)
        shape = (len(airs), self.height.size)
        nodes = (*shape, self.secant.size)
        transmittance = [np.empty((p.shape[0], *nodes)) for p in self.planck]
        path, transmitted, sky, through, vertical = (
            [np.empty(size) for _ in range(count)] for size in (nodes, nodes, shape, shape, shape)
        )
        water = np.empty(shape)
        broadband = np.full(shape, np.nan)
        for a, air in enumerate(airs):
            for h, ground in enumerate(self.height):
                sensor = self.sensor.above_sea(float(ground))
                air_column = column(air, self.bands.spectrum, float(ground), sensor)
                down = look_down(air_column, self.secant, sensor)
                above = hemispheric_sky(air_column)
                water[a, h] = air_column.water
                for b, (weights, place) in enumerate(zip(self.bands.weights, self.bands.places, strict=True)):
                    seen, emitted = down[0][:, place], down[1][:, place]
                    transmittance[b][:, a, h] = self.planck[b] @ seen.T
                    path[b][a, h] = emitted @ weights.radiance_weight
                    transmitted[b][a, h] = (seen * above.radiance[place]) @ weights.radiance_weight
                    sky[b][a, h] = above.radiance[place] @ weights.radiance_weight
                    through[b][a, h] = above.transmittance[place] @ weights.weight
                    vertical[b][a, h] = above.vertical[place] @ weights.weight
            if flux is not None:
                broadband[a] = flux.over(air, self.height)
        return Solved(
            terms=[
                AirTerms(
                    transmittance=transmittance[b].reshape(-1, *self.places, *nodes[1:]),
                    path_radiance=path[b].reshape(*self.places, *nodes[1:]),
                    transmitted_sky_radiance=transmitted[b].reshape(*self.places, *nodes[1:]),
                    sky_radiance=sky[b].reshape(*self.places, nodes[1]),
                    sky_flux=broadband.reshape(*self.places, nodes[1]),
                )
                for b in range(count)
            ],
            sky_transmittance=[t.reshape(*self.places, nodes[1]) for t in through],
            vertical=[t.reshape(*self.places, nodes[1]) for t in vertical],
            water=water.reshape(*self.places, nodes[1]),
        )

    def with_flux(self, solved: Solved, airs: Sequence[Profile], flux: FluxPlan) -> Solved:
        """The same terms with the sky flux solved by another plan, to be compared with its like."""
        broadband = np.array([flux.over(air, self.height) for air in airs])
        broadband = broadband.reshape(solved.water.shape)
        return replace(solved, terms=[replace(terms, sky_flux=broadband) for terms in solved.terms])
