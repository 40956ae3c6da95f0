"""A look at the air of one scene at one ground height and angle, before a map is made through it."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.clear_sky import clear_sky_flux
from groundglow.atmosphere.completion import blended
from groundglow.atmosphere.contributions import ProfileAir, air_of_profile
from groundglow.atmosphere.grid import AtmosphereGrid
from groundglow.atmosphere.humidity import dew_point, vapour_pressure_of_ppmv
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.sensor_height import SensorHeight
from groundglow.atmosphere.solve import AirSettings, PlacedProfile, View, solve_atmosphere
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Grid
from groundglow.raster.open import describe_raster
from groundglow.run.config.atmosphere import Solved
from groundglow.run.planning.air_profiles import PlacedAir, profiles_of_job
from groundglow.run.planning.air_source import composition_of, sensor_of
from groundglow.run.planning.raster_range import range_over
from groundglow.scene.model import Scene, ThermalBand

# The surface for which causes are told in kelvin: warmer than the air, as by day, and of ordinary ground.
TEST_EMISSIVITY = 0.97
TEST_EXCESS = 10.0  # K
# Formulas that stand beside the solved sky flux.
COMPARISONS = {"brutsaert": "Brutsaert 1975", "prata": "Prata 1996"}


@dataclass(frozen=True)
class NearGround:
    """Weather at the ground, by the profile.

    Attributes
    ----------
    pressure : float
        [hPa]
    temperature, dew_point : float
        [K]
    vapour_pressure : float
        [hPa]
    """

    pressure: float
    temperature: float
    dew_point: float
    vapour_pressure: float


@dataclass(frozen=True)
class Change:
    """What one standard uncertainty of a cause changes in one band.

    Attributes
    ----------
    transmittance : float
        [1]
    path_radiance, sky_radiance : float
        [W m-2 sr-1 um-1]
    sky_flux : float
        [W m-2]
    surface_temperature : float
        Of a surface of emissivity 0.97, 10 K warmer than the air. [K]
    """

    transmittance: float
    path_radiance: float
    sky_radiance: float
    sky_flux: float
    surface_temperature: float


@dataclass(frozen=True)
class AirLook:
    """The air over one place of a scene.

    Attributes
    ----------
    scene : Scene
    placed : PlacedAir
        Every profile of the scene, and where they are from.
    profile : Profile
        The one that is looked at, in the middle of the scene.
    ground, angle : float
        Above sea level, and of the view at the surface. [m], [deg]
    ground_from, angle_from : str
        Where these two come from.
    sensor : SensorHeight
    near : NearGround
    air : ProfileAir
        Spectra and band values.
    causes : mapping of str to mapping of str to Change
        By cause and band.
    comparisons : mapping of str to float
        Sky flux by published formulas of near-ground weather. [W m-2]
    """

    scene: Scene
    placed: PlacedAir
    profile: Profile
    ground: float
    angle: float
    ground_from: str
    angle_from: str
    sensor: SensorHeight
    near: NearGround
    air: ProfileAir
    causes: Mapping[str, Mapping[str, Change]]
    comparisons: Mapping[str, float]


def look_at_air(
    chosen: Solved,
    scene: Scene,
    bands: Sequence[ThermalBand],
    folder: Path,
    *,
    height: float | None,
    angle: float | None,
) -> AirLook:
    """Solve the air of a scene at one height and angle.

    Parameters
    ----------
    chosen : Solved
        The job's atmosphere table.
    scene : Scene
    bands : sequence of ThermalBand
        Of the scene.
    folder : Path
        Of the job file.
    height : float or None
        Of the ground, above sea level; None for the middle of the scene's range. [m]
    angle : float or None
        View zenith angle at the surface; None for the middle of the scene's range. [deg]

    Raises
    ------
    InputError
        If a file cannot be read or does not cover the scene.
    DomainError
        If the profile is impossible, or does not reach down to the ground.
    """
    grid = describe_raster(bands[0].source.path, indirect=bands[0].source.indirect).grid
    placed = profiles_of_job(chosen, scene, grid, folder)
    profile = _in_the_middle(placed.profiles, grid)
    ground, ground_from = _number(height, scene.elevation, grid, "--height", "elevation")
    if ground is None:
        ground, ground_from = float(profile.height[0]), "the profile's lowest level"
    zenith, angle_from = _number(angle, scene.view_zenith_angle, grid, "--angle", "view zenith angle")
    zenith = 0.0 if zenith is None else abs(zenith)
    sensor = sensor_of(chosen)
    view = View((ground, ground), (zenith, zenith), sensor)
    settings = AirSettings(chosen.absorption, composition_of(chosen), uncertainty=placed.uncertainty)
    responses = {band.number: band.sensor_band.response for band in bands}
    air = air_of_profile(
        profile,
        responses,
        replace(settings, uncertainty=None),
        ground=ground,
        secant=1.0 / math.cos(math.radians(zenith)),
        sensor=sensor.above_sea(ground),
    )
    solved = solve_atmosphere([PlacedProfile(profile)], responses, view, settings)
    near = _near_ground(profile, ground)
    surface = near.temperature + TEST_EXCESS
    changes = {name: _changes(solved[name], responses[name], surface) for name in responses}
    causes = {
        cause: {name: changes[name][cause] for name in responses} for cause in next(iter(changes.values()))
    }
    comparisons = {
        name: float(clear_sky_flux(name, near.temperature, near.vapour_pressure)) for name in COMPARISONS
    }
    return AirLook(
        scene,
        placed,
        profile,
        ground,
        zenith,
        ground_from,
        angle_from,
        sensor,
        near,
        air,
        causes,
        comparisons,
    )


def _in_the_middle(profiles: Sequence[PlacedProfile], grid: Grid) -> Profile:
    """The profile at the middle of the scene, between its nodes of place."""
    if len(profiles) == 1:
        return profiles[0].profile
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    middle = {
        "x": c + a * grid.width / 2 + b * grid.height / 2,
        "y": f + d * grid.width / 2 + e * grid.height / 2,
    }
    weights = np.ones(len(profiles))
    for axis, place in middle.items():
        nodes = np.unique([getattr(one, axis) for one in profiles])
        shares = [np.interp(place, nodes, np.eye(nodes.size)[i]) for i in range(nodes.size)]
        at = np.searchsorted(nodes, [getattr(one, axis) for one in profiles])
        weights *= np.asarray(shares)[at]
    return blended([one.profile for one in profiles], weights.tolist())


def _number(
    asked: float | None, source: RasterSource | float | None, grid: Grid, option: str, what: str
) -> tuple[float | None, str]:
    """A number asked for, else the scene's own, and where it is from."""
    if asked is not None:
        return asked, option
    if source is None:
        return None, ""
    low, high = range_over(source, grid)
    told = f"{low:.0f} to {high:.0f}" if isinstance(source, RasterSource) else f"{low:g}"
    return 0.5 * (low + high), f"the scene's {what}, {told}"


def _near_ground(profile: Profile, ground: float) -> NearGround:
    at = profile.at(np.array([ground]))
    vapour = float(vapour_pressure_of_ppmv(at.water_vapour[0], at.pressure[0]))
    return NearGround(
        pressure=float(at.pressure[0]),
        temperature=float(at.temperature[0]),
        dew_point=float(dew_point(vapour)),
        vapour_pressure=vapour,
    )


def _changes(grid: AtmosphereGrid, response: SpectralResponse, surface: float) -> dict[str, Change]:
    """Every cause's change in one band."""
    middle = grid.surface_temperature.size // 2

    def one(terms: NDArray[np.float64]) -> float:
        return float(terms.ravel()[0])

    black, slope = float(response.band_radiance(surface)), float(response.band_radiance_slope(surface))
    through = one(grid.terms.transmittance[middle])
    found = {}
    for cause, terms in grid.causes.items():
        transmittance, path = one(terms.transmittance[middle]), one(terms.path_radiance)
        at_sensor = TEST_EMISSIVITY * transmittance * black + path
        at_sensor += (1.0 - TEST_EMISSIVITY) * one(terms.transmitted_sky_radiance)
        found[cause] = Change(
            transmittance=transmittance,
            path_radiance=path,
            sky_radiance=one(terms.sky_radiance),
            sky_flux=one(terms.sky_flux),
            # Air believed to emit more leaves less for the surface.
            surface_temperature=-at_sensor / (TEST_EMISSIVITY * through * slope),
        )
    return found
