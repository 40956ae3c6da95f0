"""From the job's atmosphere table to profiles placed in the map: what is known of the day's air."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from rasterio.warp import transform

from groundglow.atmosphere.completion import completed
from groundglow.atmosphere.model_atmospheres import model_atmosphere, model_for
from groundglow.atmosphere.perturbation import scaled_to_column, scaled_to_surface_temperature
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.solve import PlacedProfile
from groundglow.atmosphere.source_uncertainty import SourceUncertainty, source_uncertainty
from groundglow.atmosphere.surface_weather import profile_of_surface_weather
from groundglow.errors import InputError
from groundglow.raster.grid import Grid
from groundglow.run.config.atmosphere import (
    AnalysisAtmosphere,
    ModelAtmosphere,
    Solved,
    SoundingAtmosphere,
    WeatherAtmosphere,
)
from groundglow.run.planning.raster_range import HEIGHT_MARGIN, range_over
from groundglow.scene.model import Scene

# A scene gets at most this many nodes of place along each axis.
_MOST_PLACES = 7
# Levels of the model closer than this to the ground are left out. [m]
_NEAREST = 1.0
_KILOMETRE = 1000.0
_HOUR = 3600.0


@dataclass(frozen=True)
class PlacedAir:
    """The day's air at one or several places.

    Attributes
    ----------
    profiles : tuple of PlacedProfile
        Completed to the top of the air; in the scene's map coordinates.
    uncertainty : SourceUncertainty
    files : tuple of Path
        What was read.
    account : mapping
        Source, notes and choices, for the provenance.
    """

    profiles: tuple[PlacedProfile, ...]
    uncertainty: SourceUncertainty
    files: tuple[Path, ...]
    account: dict[str, object]


def profiles_of_job(chosen: Solved, scene: Scene, grid: Grid, folder: Path) -> PlacedAir:
    """The profiles that a job names, for one scene.

    Parameters
    ----------
    chosen : Solved
        The job's atmosphere table.
    scene : Scene
        Gives time and place.
    grid : Grid
        The scene's grid.
    folder : Path
        Folder of the job file.

    Returns
    -------
    PlacedAir

    Raises
    ------
    InputError
        If a file cannot be read or does not cover the scene.
    DomainError
        If a profile is impossible.
    """
    longitude, latitude = scene_centre(grid)
    kind: str
    hours = kilometres = 0.0
    files: tuple[Path, ...] = ()
    if isinstance(chosen, SoundingAtmosphere):
        kind = "sounding"
        files = (folder / chosen.path,)
        kilometres = chosen.distance / _KILOMETRE
        if chosen.time is not None:
            hours = abs((scene.acquired - chosen.time).total_seconds()) / _HOUR
        found = [PlacedProfile(_sounding(chosen, files[0], latitude, scene))]
    elif isinstance(chosen, AnalysisAtmosphere):
        kind = "analysis"
        files = tuple(folder / path for path in chosen.paths)
        found = _analysis(chosen, files, latitude, scene, grid)
    elif isinstance(chosen, ModelAtmosphere):
        kind = "climatology"
        found = [PlacedProfile(_model(chosen, latitude, scene, grid))]
    else:
        kind = "surface_weather"
        found = [PlacedProfile(_weather(chosen, latitude, scene))]
    stated = source_uncertainty(kind, hours=hours, kilometres=kilometres)
    uncertainty = _overridden(stated, chosen)
    account: dict[str, object] = {
        "source": chosen.source,
        "files": [str(path) for path in files],
        "places": len(found),
        "column_water_vapour": round(sum(one.profile.column_water_vapour for one in found) / len(found), 3),
        "notes": list(dict.fromkeys(note for one in found for note in one.profile.notes)),
        "uncertainty": {
            "water_vapour": uncertainty.water_vapour,
            "air_temperature": uncertainty.air_temperature,
            "from": "job file"
            if uncertainty is not stated
            else f"planning values for {kind.replace('_', ' ')}",
        },
        "scene_centre": [round(longitude, 5), round(latitude, 5)],
    }
    if kind == "sounding":
        account["sounding_age_hours"] = round(hours, 3)
        account["sounding_distance_km"] = kilometres
    return PlacedAir(tuple(found), uncertainty, files, account)


def scene_centre(grid: Grid) -> tuple[float, float]:
    """Longitude and latitude of the middle of a grid. [deg]"""
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    x = c + a * grid.width / 2 + b * grid.height / 2
    y = f + d * grid.width / 2 + e * grid.height / 2
    return lonlat(grid, [(x, y)])[0]


def lonlat(grid: Grid, points: Sequence[tuple[float, float]]) -> list[tuple[float, float]]:
    """Map coordinates of a grid as longitude and latitude. [deg]"""
    x, y = transform(grid.crs, "EPSG:4326", [p[0] for p in points], [p[1] for p in points])
    if not all(math.isfinite(value) for value in (*x, *y)):
        raise InputError("the scene's map coordinates have no place on the Earth", where=str(grid.crs))
    return list(zip(x, y, strict=True))


def _climatology(name: str | None, latitude: float, scene: Scene) -> Profile:
    return model_atmosphere(name or model_for(latitude, scene.acquired.date()))


def _sounding(chosen: SoundingAtmosphere, path: Path, latitude: float, scene: Scene) -> Profile:
    from groundglow.scene.sounding_file import read_sounding  # noqa: PLC0415  (other sources need no CSV reader)

    profile = read_sounding(
        path,
        columns=chosen.columns,
        ground_height=chosen.ground_height,
        ground_pressure=chosen.ground_pressure,
    )
    return completed(profile, _climatology(chosen.climatology, latitude, scene))


def _analysis(
    chosen: AnalysisAtmosphere, files: Sequence[Path], latitude: float, scene: Scene, grid: Grid
) -> list[PlacedProfile]:
    from groundglow.scene.analysis_file import Analysis  # noqa: PLC0415  (loads xarray, a second)

    climatology = _climatology(chosen.climatology, latitude, scene)
    with Analysis.open(files) as analysis:
        places = _places(grid, analysis.spacing)
        profiles = analysis.profiles_at(lonlat(grid, places), scene.acquired)
    return [
        PlacedProfile(completed(profile, climatology), x, y)
        for profile, (x, y) in zip(profiles, places, strict=True)
    ]


def _places(grid: Grid, spacing: float) -> list[tuple[float, float]]:
    """Nodes over the scene's map rectangle, about as dense as the analysis is. [map coordinates]"""
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    corners = [
        (c + a * column + b * row, f + d * column + e * row)
        for row in (0, grid.height)
        for column in (0, grid.width)
    ]
    west, east = min(x for x, _ in corners), max(x for x, _ in corners)
    south, north = min(y for _, y in corners), max(y for _, y in corners)
    degrees = [lonlat(grid, [(west, y), (east, y)]) for y in (south, north)]
    across = max(abs((right - left + 180.0) % 360.0 - 180.0) for (left, _), (right, _) in degrees)
    down = abs(degrees[1][0][1] - degrees[0][0][1])
    columns = min(max(2, math.ceil(across / spacing) + 1), _MOST_PLACES)
    rows = min(max(2, math.ceil(down / spacing) + 1), _MOST_PLACES)
    return [
        (west + (east - west) * i / (columns - 1), south + (north - south) * j / (rows - 1))
        for j in range(rows)
        for i in range(columns)
    ]


def _model(chosen: ModelAtmosphere, latitude: float, scene: Scene, grid: Grid) -> Profile:
    profile = _climatology(chosen.name, latitude, scene)
    if scene.elevation is not None:
        ground, _ = range_over(scene.elevation, grid, relative_margin=HEIGHT_MARGIN)
        if ground > profile.height[0]:
            levels = np.concatenate([[ground], profile.height[profile.height > ground + _NEAREST]])
            profile = profile.at(levels).with_note(f"standing on the scene's lowest ground, {ground:.0f} m")
    if chosen.air_temperature is not None:
        profile = scaled_to_surface_temperature(profile, chosen.air_temperature)
    if chosen.column_water_vapour is not None:
        profile = scaled_to_column(profile, chosen.column_water_vapour)
    return profile


def _weather(chosen: WeatherAtmosphere, latitude: float, scene: Scene) -> Profile:
    measure, value = "dew_point", chosen.dew_point
    if value is None:
        measure, value = "relative_humidity", chosen.relative_humidity
    assert value is not None  # the config model requires one of the two
    return profile_of_surface_weather(
        _climatology(chosen.climatology, latitude, scene),
        temperature=chosen.air_temperature,
        humidity=value,
        humidity_measure=measure,
        pressure=chosen.pressure,
        ground_height=chosen.ground_height,
        scaling=chosen.scaling,
    )


def _overridden(stated: SourceUncertainty, chosen: Solved) -> SourceUncertainty:
    water, air = chosen.uncertainty.water_vapour, chosen.uncertainty.air_temperature
    if water is None and air is None:
        return stated
    return SourceUncertainty(
        stated.water_vapour if water is None else water, stated.air_temperature if air is None else air
    )
