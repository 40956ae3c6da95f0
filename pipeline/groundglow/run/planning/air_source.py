"""From the job's atmosphere table to the air grid that the chain interpolates."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from groundglow.atmosphere.composition import Composition
from groundglow.atmosphere.explicit import StatedUncertainty, explicit_grid
from groundglow.atmosphere.grid import AtmosphereGrid
from groundglow.atmosphere.sensor_height import SPACE, SensorHeight
from groundglow.errors import ConfigError, InputError
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Grid
from groundglow.run.config.atmosphere import (
    Atmosphere,
    ColumnAtmosphere,
    ExplicitAtmosphere,
    NoAtmosphere,
    Solved,
)
from groundglow.run.planning.raster_range import HEIGHT_MARGIN, range_over
from groundglow.scene.model import Scene, ThermalBand

_ANGLE_MARGIN = 1.0  # deg
_LARGEST_ANGLE = 80.0  # deg


@dataclass(frozen=True)
class Air:
    """One band's air and where it came from.

    Attributes
    ----------
    grid : AtmosphereGrid
    elevation : RasterSource or float
        Ground height that the air is looked up with. [m]
    account : mapping
        For the provenance: source, reference, assumptions.
    files : tuple of Path
        Files that were read for it.
    """

    grid: AtmosphereGrid
    elevation: RasterSource | float
    account: dict[str, object]
    files: tuple[Path, ...] = ()


def air_of_job(
    atmosphere: Atmosphere, scene: Scene, band: ThermalBand, grid: Grid, folder: Path, *, sky_flux: bool
) -> Air | None:
    """The air of a band; None where the job wants none.

    Parameters
    ----------
    atmosphere : Atmosphere
        The job's table.
    scene : Scene
    band : ThermalBand
        The band used.
    grid : Grid
        The scene's grid.
    folder : Path
        Folder of the job file.
    sky_flux : bool
        Whether a layer needs the broadband sky flux.

    Returns
    -------
    Air or None

    Raises
    ------
    ConfigError
        If job and scene do not fit each other.
    InputError
        If a file cannot be read.
    DomainError
        If the air is impossible.
    """
    if isinstance(atmosphere, NoAtmosphere | ColumnAtmosphere):
        return None
    if isinstance(atmosphere, ExplicitAtmosphere):
        return _explicit(atmosphere, scene, band.number)
    return _solved(atmosphere, scene, band, grid, folder, sky_flux=sky_flux)


def _solved(
    chosen: Solved, scene: Scene, band: ThermalBand, grid: Grid, folder: Path, *, sky_flux: bool
) -> Air:
    # The solver is loaded only by jobs that use it.
    from groundglow.atmosphere.clear_sky import clear_sky_flux  # noqa: PLC0415
    from groundglow.atmosphere.humidity import vapour_pressure_of_ppmv  # noqa: PLC0415
    from groundglow.atmosphere.solve import AirSettings, View, solve_atmosphere  # noqa: PLC0415
    from groundglow.run.planning.air_profiles import profiles_of_job  # noqa: PLC0415

    placed = profiles_of_job(chosen, scene, grid, folder)
    lowest = placed.profiles[0].profile
    elevation = scene.elevation
    notes = []
    if elevation is None:
        elevation = float(lowest.height[0])
        notes.append(
            f"the scene names no elevation: the ground is taken at {elevation:.0f} m, as the profile begins"
        )
    heights = range_over(elevation, grid, relative_margin=HEIGHT_MARGIN)
    angles = _angles(scene.view_zenith_angle, grid)
    sensor = sensor_of(chosen)
    settings = AirSettings(
        absorption=chosen.absorption,
        composition=composition_of(chosen),
        sky_flux=sky_flux,
        uncertainty=placed.uncertainty,
    )
    solved = solve_atmosphere(
        placed.profiles, {band.number: band.sensor_band.response}, View(heights, angles, sensor), settings
    )[band.number]
    vapour = float(vapour_pressure_of_ppmv(lowest.water_vapour[0], lowest.pressure[0]))
    account = placed.account | {
        "absorption": chosen.absorption,
        "composition": {
            name: getattr(settings.composition, name)
            for name in ("carbon_dioxide", "nitrous_oxide", "methane")
        },
        "minor_gases": chosen.minor_gases,
        "sensor": {"above": chosen.sensor_above, "height": chosen.sensor_height},
        "nodes": {
            "place": [solved.y.size, solved.x.size],
            "height": solved.height.tolist(),
            "view_zenith_angle": np.round(solved.view_zenith_angle, 3).tolist(),
        },
        "clear_sky_flux_comparison": {
            name: round(float(clear_sky_flux(name, lowest.temperature[0], vapour)), 1)
            for name in ("brutsaert", "prata")
        },
        "outside_the_model": "aerosol, thin cirrus and gases that the tables do not hold",
    }
    if sky_flux:
        account["sky_flux_range"] = [
            round(float(solved.terms.sky_flux.min()), 1),
            round(float(solved.terms.sky_flux.max()), 1),
        ]
    if notes:
        account["assumed"] = notes
    return Air(solved, elevation, account, placed.files)


def composition_of(chosen: Solved) -> Composition:
    """Amounts of the well-mixed gases: the job's, else recent global means."""
    given = {name: getattr(chosen, name) for name in ("carbon_dioxide", "nitrous_oxide", "methane")}
    return Composition(minor_gases=chosen.minor_gases, **{k: v for k, v in given.items() if v is not None})


def sensor_of(chosen: Solved) -> SensorHeight:
    """Where the sensor is."""
    if chosen.sensor_height is None:
        return SPACE
    return SensorHeight(chosen.sensor_above, chosen.sensor_height)


def _angles(source: RasterSource | float, grid: Grid) -> tuple[float, float]:
    """Smallest and largest view zenith angle. [deg]"""
    low, high = range_over(source, grid)
    if isinstance(source, RasterSource):
        low, high = (
            max(0.0, min(abs(low), abs(high), low) - _ANGLE_MARGIN),
            max(abs(low), abs(high)) + _ANGLE_MARGIN,
        )
    if high > _LARGEST_ANGLE:
        raise InputError(
            f"a view zenith angle of {high:.1f} degrees is beyond {_LARGEST_ANGLE:g}",
            where=source.path if isinstance(source, RasterSource) else "view_zenith_angle",
            remedy="Angle rasters in hundredths of a degree need scale = 0.01",
        )
    return low, high


def _explicit(atmosphere: ExplicitAtmosphere, scene: Scene, band: str) -> Air:
    chosen = next((air for air in atmosphere.air if air.band == band), None)
    if chosen is None:
        raise ConfigError(
            f"the atmosphere holds no values for band {band}",
            where="atmosphere.air",
            remedy=f"Add an [[atmosphere.air]] table with band = {band!r} "
            f"(there are: {', '.join(air.band for air in atmosphere.air)})",
        )
    given = chosen.uncertainty
    typed = {
        "transmittance_path": given.transmittance_path_correlation,
        "transmittance_sky": given.transmittance_sky_correlation,
        "path_sky": given.path_sky_correlation,
    }
    correlations = {name: value for name, value in typed.items() if value is not None}
    stated = StatedUncertainty(
        given.transmittance, given.path_radiance, given.sky_radiance, given.sky_flux, **correlations
    )
    flux = atmosphere.sky_flux
    grid = explicit_grid(
        _one_or_many(chosen.transmittance),
        _one_or_many(chosen.path_radiance),
        _one_or_many(chosen.sky_radiance),
        sky_flux=None if flux is None else _one_or_many(flux),
        height=0.0 if chosen.ground_height is None else list(chosen.ground_height),
        uncertainty=stated,
    )
    account: dict[str, object] = {
        "source": "explicit",
        "reference": atmosphere.reference,
        "uncertainty": {
            name: getattr(stated, name)
            for name in ("transmittance", "path_radiance", "sky_radiance", "sky_flux")
        },
        "correlations": {
            name: {"value": getattr(stated, name), "from": "job file" if name in correlations else "assumed"}
            for name in typed
        },
    }
    return Air(grid, _elevation(scene, grid), account)


def _elevation(scene: Scene, grid: AtmosphereGrid) -> RasterSource | float:
    if scene.elevation is not None:
        return scene.elevation
    if grid.height.size > 1:
        raise ConfigError(
            f"the air is given over ground heights, and the scene {scene.name} names no elevation",
            where="atmosphere",
            remedy="Add elevation to the scene file (a raster or a number in m)",
        )
    return 0.0


def _one_or_many(values: tuple[float, ...]) -> float | list[float]:
    return values[0] if len(values) == 1 else list(values)
