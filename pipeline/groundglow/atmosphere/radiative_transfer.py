"""Clear-sky thermal radiative transfer of one column of air, at steps of 5 cm-1, without scattering.

A column is prepared once (absorber amounts, continuum depths, blackbody radiances of its layers) and
then looked through: down to the ground from a sensor in space or in the air, at any angles, and up
from the ground. Path radiance sums the mean blackbody radiance of each layer's edges times the
transmittance lost in the layer; the hemispheric sky uses four Gauss points in the cosine.

Aerosol, cloud and gases outside the tables are not in the model; neither is the Sun.

References
----------
Kneizys, F. X. et al. (1988), Users Guide to LOWTRAN 7, AFGL-TR-88-0177 (band model, continuum).
Pincus, R., Mlawer, E. J., Delamere, J. S. (2019), J. Adv. Model. Earth Syst. 11, 3074-3089
(spectroscopy of the updated set).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache, lru_cache

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.absorption import BAND_GASES, HALOCARBONS, AbsorptionSet, absorption_at
from groundglow.atmosphere.layering import solution_levels
from groundglow.atmosphere.profile import WATER, Profile
from groundglow.atmosphere.transfer_kernels import continuum_depths, follow_path, planck_per_wavenumber
from groundglow.physics.constants import EARTH_RADIUS

Float = NDArray[np.float64]
Integer = NDArray[np.int64]

# Constants that the tables were made with; not those of today's metrology.
_PRESSURE = 1013.25  # hPa
_TEMPERATURE = 273.15  # K
_LOSCHMIDT = 2.6868e19  # cm-3
_WATER_MASS = 2.989e-23  # g m-3 per ppmv and cm-3
_GAS_AMOUNT = 3.7194e-21  # atm-cm km-1 per ppmv and cm-3
_CONTINUUM_TEMPERATURE = 296.0  # K
_COLD_CONTINUUM_TEMPERATURE = 260.0  # K
_BOLTZMANN = 0.6952  # cm-1 K-1
_OXYGEN_TEMPERATURE = 220.0  # K

SKY_POINTS = 4


@cache
def hemisphere_points(count: int = SKY_POINTS) -> tuple[Float, Float]:
    """Cosines and weights of the integral of f(m) 2 m over m from 0 to 1.

    Gauss-Jacobi points for the weight m, by the eigenvalues of the recurrence matrix (Golub and
    Welsch 1969, Math. Comp. 23, 221-230). Weights sum to one, so that an isotropic sky gives its
    radiance.
    """
    k = np.arange(count, dtype=np.float64)
    # Jacobi polynomials with alpha = 0, beta = 1 on -1 to 1.
    diagonal = 1.0 / ((2.0 * k + 1.0) * (2.0 * k + 3.0))
    k = k[1:]
    side = np.sqrt(k * (k + 1.0)) / (2.0 * k + 1.0)
    values, vectors = np.linalg.eigh(np.diag(diagonal) + np.diag(side, 1) + np.diag(side, -1))
    return 0.5 * (values + 1.0), vectors[0] ** 2


@dataclass(frozen=True)
class Spectrum:
    """An absorption set at some wavenumbers, laid out for the kernels.

    Attributes
    ----------
    absorption : AbsorptionSet
        The tables.
    log_coefficient, exponent : arrays (packed,)
        Band model of all runs, one after another.
    run_first : integer array (runs + 1,)
        Where each run begins in the packed arrays.
    self_296, self_260, log_ratio : arrays (wavenumbers,)
        Self continuum with its radiation term, and ln(self_260 / self_296).
    coefficients : array (absorbers, wavenumbers)
        Absorbers linear in the path.
    absorbers : tuple of str
        Their names, those that absorb anything here.
    """

    absorption: AbsorptionSet
    log_coefficient: Float
    exponent: Float
    run_first: Integer
    self_296: Float
    self_260: Float
    log_ratio: Float
    coefficients: Float
    absorbers: tuple[str, ...]

    @property
    def wavenumber(self) -> Float:
        """Wavenumbers at which the spectrum is solved. [cm-1]."""
        return self.absorption.wavenumber


def spectrum(index: Integer, absorption: str) -> Spectrum:
    """The tables of a named absorption set at the wavenumbers ``absorption.wavenumbers()[index]``."""
    return _spectrum(tuple(int(i) for i in index), absorption)


@lru_cache(maxsize=16)
def _spectrum(index: tuple[int, ...], name: str) -> Spectrum:
    tables = absorption_at(np.array(index, dtype=np.int64), name)
    runs = list(zip(tables.run_gas, tables.run_start, tables.run_stop, strict=True))
    wavenumber = tables.wavenumber
    radiation = _radiation_term(wavenumber, _CONTINUUM_TEMPERATURE)
    room = 1e-20 * radiation * tables.self_296
    cold = 1e-20 * _radiation_term(wavenumber, _COLD_CONTINUUM_TEMPERATURE) * tables.self_260
    linear = {
        "foreign": 1e-20 * radiation * tables.foreign_296,
        **dict(zip(HALOCARBONS, tables.halocarbon_cross_section, strict=True)),
        "nitrogen": tables.nitrogen,
        "nitric_acid": tables.nitric_acid,
        "oxygen_0": tables.oxygen[0],
        "oxygen_1": tables.oxygen[0] * tables.oxygen[1],
        "oxygen_2": tables.oxygen[0] * tables.oxygen[2],
    }  # fmt: skip
    linear = {key: values for key, values in linear.items() if values.any()}
    return Spectrum(
        absorption=tables,
        log_coefficient=np.concatenate([tables.log_coefficient[g, a:b] for g, a, b in runs]),
        exponent=np.concatenate([tables.exponent[g, a:b] for g, a, b in runs]),
        run_first=np.concatenate([[0], np.cumsum(tables.run_stop - tables.run_start)]),
        self_296=room,
        self_260=cold,
        log_ratio=np.log(cold / room),
        coefficients=np.array(list(linear.values())),
        absorbers=tuple(linear),
    )


def _radiation_term(wavenumber: Float, temperature: float) -> Float:
    """Stimulated emission and the rising part of the spectrum: v tanh(h c v / 2 k T). [cm-1]."""
    return np.asarray(wavenumber * np.tanh(wavenumber / (2.0 * _BOLTZMANN * temperature)))


@dataclass(frozen=True)
class Column:
    """One column of air, ready to be looked through.

    Attributes
    ----------
    spectrum : Spectrum
        Its wavenumbers and tables.
    height, temperature : arrays (levels,)
        From the ground to the top. [m], [K]
    water : float
        Column water vapour. [kg m-2]
    amounts : array (runs, layers)
        Scaled absorber amounts.
    continuum : array (layers, wavenumbers)
        Optical depths linear in the path.
    source : array (levels, wavenumbers)
        Blackbody radiance at the levels. [W m-2 sr-1 (cm-1)-1]
    """

    spectrum: Spectrum
    height: Float
    temperature: Float
    water: float
    amounts: Float
    continuum: Float
    source: Float


def column(
    profile: Profile,
    spectrum: Spectrum,
    ground: float,
    sensor: float | None = None,
    *,
    refinement: int = 1,
    levels: Float | None = None,
) -> Column:
    """Prepare the air above a ground height.

    Parameters
    ----------
    profile : Profile
        With the gases that take part (``composition.composed``).
    spectrum : Spectrum
        Where to solve.
    ground : float
        Above sea level, at most 500 m below the lowest level of the profile. [m]
    sensor : float, optional
        Height of a sensor within the air; None for one in space. [m]
    refinement : int
        Every step between levels is cut into this many, for tests of convergence.
    levels : array, optional
        Levels to use instead of our own layering. [m]

    Raises
    ------
    DomainError
        If the ground lies too far below the profile.
    """
    heights = (
        solution_levels(profile.height, ground, sensor, refinement=refinement) if levels is None else levels
    )
    air = profile.at(heights)
    thickness = np.diff(heights) / 1000.0  # km
    log_pressure = np.log(air.pressure / _PRESSURE)
    log_temperature = np.log(_TEMPERATURE / air.temperature)
    number = _LOSCHMIDT * np.exp(log_pressure + log_temperature)
    source = np.empty((heights.size, spectrum.wavenumber.size))
    planck_per_wavenumber(spectrum.wavenumber, air.temperature, source)
    middle = 0.5 * (air.temperature[1:] + air.temperature[:-1])
    continuum = np.empty((heights.size - 1, spectrum.wavenumber.size))
    continuum_depths(
        spectrum.self_296,
        spectrum.self_260,
        spectrum.log_ratio,
        spectrum.coefficients,
        _linear_amounts(air, spectrum, number, middle, thickness),
        middle,
        spectrum.absorption.exponential_self,
        continuum,
    )
    return Column(
        spectrum=spectrum,
        height=heights,
        temperature=air.temperature,
        water=_column_water(air, number, thickness),
        amounts=_scaled_amounts(air, spectrum.absorption, number, log_pressure, log_temperature, thickness),
        continuum=continuum,
        source=source,
    )


def look_down(column: Column, secant: Float, sensor: float | None = None) -> tuple[Float, Float]:
    """Transmittance of the path from the ground to the sensor, and what its air emits towards it.

    Parameters
    ----------
    column : Column
        From :func:`column`, with the same sensor.
    secant : array (angles,)
        Of the view zenith angle at the surface; the path bends over the curved Earth.
    sensor : float, optional
        Height of a sensor within the air; None for space. [m]

    Returns
    -------
    transmittance, radiance : arrays (angles, wavenumbers)
        [1], [W m-2 sr-1 (cm-1)-1]
    """
    layers = column.amounts.shape[1]
    if sensor is not None:
        layers = int(np.searchsorted(column.height, min(sensor, float(column.height[-1])) - 1e-6))
    path = slice(layers - 1, None, -1) if layers < column.amounts.shape[1] else slice(None, None, -1)
    edges = slice(layers, None, -1)
    middle = 0.5 * (column.height[1:] + column.height[:-1])
    return _follow(column, path, edges, secant, _stretch(middle, float(column.height[0]), secant))


def look_up(column: Column, secant: Float) -> tuple[Float, Float]:
    """Transmittance from the ground to space and radiance of the sky, at zenith angles (plane air).

    Parameters
    ----------
    column : Column
        From :func:`column`.
    secant : array (angles,)
        Of the zenith angles.

    Returns
    -------
    transmittance, radiance : arrays (angles, wavenumbers)
        [1], [W m-2 sr-1 (cm-1)-1]
    """
    return _follow(column, slice(None), slice(None), secant, np.ones((secant.size, column.height.size - 1)))


@dataclass(frozen=True)
class Sky:
    """The sky above the ground, spectrally.

    Attributes
    ----------
    transmittance : array (wavenumbers,)
        To space, of isotropic radiance from the ground.
    radiance : array (wavenumbers,)
        Hemispheric: irradiance / pi. [W m-2 sr-1 (cm-1)-1]
    vertical : array (wavenumbers,)
        Transmittance to space straight up, from the steepest Gauss point.
    """

    transmittance: Float
    radiance: Float
    vertical: Float


def hemispheric_sky(column: Column) -> Sky:
    """Hemispheric sky radiance at the ground, and the transmittance to space.

    Parameters
    ----------
    column : Column
        From :func:`column`.
    """
    cosine, weight = hemisphere_points()
    transmittance, radiance = look_up(column, 1.0 / cosine)
    return Sky(weight @ transmittance, weight @ radiance, transmittance[-1] ** cosine[-1])


def _follow(column: Column, path: slice, edges: slice, secant: Float, stretch: Float) -> tuple[Float, Float]:
    tables = column.spectrum
    shape = (secant.size, tables.wavenumber.size)
    transmittance, radiance = np.empty(shape), np.empty(shape)
    follow_path(
        tables.log_coefficient,
        tables.exponent,
        tables.run_first,
        tables.absorption.run_start,
        np.ascontiguousarray(column.amounts[:, path]),
        np.ascontiguousarray(column.continuum[path]),
        np.ascontiguousarray(column.source[edges]),
        np.ascontiguousarray(secant, dtype=np.float64),
        np.ascontiguousarray(stretch[:, path]),
        transmittance,
        radiance,
    )
    return transmittance, radiance


def _stretch(height: Float, ground: float, secant: Float) -> Float:
    """Local secant of a straight ray at each height, over its secant at the surface (angles, layers)."""
    if (secant == 1.0).all():
        return np.ones((secant.size, height.size))
    sine_squared = 1.0 - 1.0 / secant[:, np.newaxis] ** 2
    shrink = (EARTH_RADIUS + ground) / (EARTH_RADIUS + height)
    return np.asarray(1.0 / (np.sqrt(1.0 - sine_squared * shrink**2) * secant[:, np.newaxis]))


def _scaled_amounts(
    air: Profile, tables: AbsorptionSet, number: Float, log_pressure: Float, log_temperature: Float,
    thickness: Float,
) -> Float:  # fmt: skip
    """Amounts u (p/p0)^n (T0/T)^m of every run in every layer (runs, layers)."""
    nothing = np.zeros_like(number)
    density = np.array([air.gases.get(gas, nothing) for gas in BAND_GASES]) * number
    density *= np.where(np.array(BAND_GASES) == WATER, 0.1 * _WATER_MASS, _GAS_AMOUNT)[:, np.newaxis]
    log_density = np.log(np.maximum(density, 1e-60))[tables.run_gas]
    log_density = log_density + np.outer(tables.run_pressure, log_pressure)
    log_density += np.outer(tables.run_temperature, log_temperature)
    return _exponential_mean(np.exp(log_density), log_density) * thickness


def _column_water(air: Profile, number: Float, thickness: Float) -> float:
    """Water in the column. [kg m-2]."""
    density = _WATER_MASS * air.gases[WATER] * number  # g m-3, which is kg m-2 per km
    return float(_exponential_mean(density[np.newaxis], np.log(density)[np.newaxis])[0] @ thickness)


def _linear_amounts(
    air: Profile, spectrum: Spectrum, number: Float, middle: Float, thickness: Float
) -> Float:
    """Amounts of the self continuum and of the other absorbers linear in the path, in every layer."""
    nothing = np.zeros_like(number)

    def gas(name: str) -> Float:
        return air.gases.get(name, nothing)

    everything = number / _LOSCHMIDT
    density = _WATER_MASS * gas(WATER) * number
    water = 3.3429e21 * density / 2.6868e24
    squeeze = 2.6868e24 / (_TEMPERATURE / _CONTINUUM_TEMPERATURE)
    relative_pressure = air.pressure / _PRESSURE
    found = {"self": squeeze * water**2}
    for name in spectrum.absorbers:
        if name == "foreign":
            found[name] = squeeze * water * (everything - water)
        elif name in HALOCARBONS:
            found[name] = 1e5 * 1e-6 * gas(name) * number  # molecules cm-2 per km
        elif name == "nitrogen":
            temperature_term = (_TEMPERATURE / air.temperature) ** 1.5
            found[name] = 1e-6 * gas(name) * relative_pressure**2 * temperature_term
        elif name == "nitric_acid":
            found[name] = 1e-4 * 1e3 * gas(name) * everything
        else:
            found[name] = _GAS_AMOUNT * number * gas("oxygen") * relative_pressure
    densities = np.array(list(found.values()))
    amounts = _exponential_mean(densities, np.log(np.maximum(densities, 1e-60))) * thickness
    for power in (1, 2):
        name = f"oxygen_{power}"
        if name in spectrum.absorbers:
            amounts[list(found).index(name)] *= (middle - _OXYGEN_TEMPERATURE) ** power
    return np.ascontiguousarray(amounts)


def _exponential_mean(density: Float, log_density: Float) -> Float:
    """Mean of each layer of a density exponential in height, from edge values and their logarithms."""
    low, high = density[:, :-1], density[:, 1:]
    fall = log_density[:, :-1] - log_density[:, 1:]
    small = np.abs(fall) < 1e-5
    return np.where(small, 0.5 * (low + high), (low - high) / np.where(small, 1.0, fall))
