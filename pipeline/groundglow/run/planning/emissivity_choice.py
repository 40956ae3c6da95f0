"""From the job's emissivity table to the source that gives a block its emissivity."""

from __future__ import annotations

import math
from functools import partial
from pathlib import Path

import numpy as np

from groundglow.errors import ConfigError, InputError
from groundglow.quantities import FLAG
from groundglow.raster.grid import Grid
from groundglow.retrieval.emissivity import given_ground, ground_of_class
from groundglow.retrieval.emissivity_broadband import relation
from groundglow.retrieval.emissivity_checks import check_index_bands, check_reflectance
from groundglow.retrieval.emissivity_class import ClassTable
from groundglow.retrieval.emissivity_class_raster import class_lookup
from groundglow.retrieval.emissivity_class_table import (
    class_table_from_csv,
    class_table_from_toml,
    shipped_class_table,
)
from groundglow.retrieval.emissivity_logarithmic import LogarithmicMethod, logarithmic_method
from groundglow.retrieval.emissivity_smoothing import footprint_weights
from groundglow.retrieval.emissivity_threshold import ThresholdMethod, index_coefficients, threshold_method
from groundglow.run.blocks.emissivity_source import (
    ClassEmissivitySource,
    ConstantSource,
    EmissivitySource,
    Footprint,
    IndexEmissivitySource,
    RasterEmissivitySource,
    ReflectanceSource,
    sample,
)
from groundglow.run.config.emissivity import (
    ClassOfGround,
    ConstantEmissivity,
    Emissivity,
    IndexEmissivity,
    LandCoverEmissivity,
    LogarithmicEmissivity,
    RasterEmissivity,
)
from groundglow.run.planning.ground_size import pixel_in_metres
from groundglow.scene.model import Scene, ThermalBand
from groundglow.scene.quality_read import read_flags

_RASTER_UNCERTAINTY = 0.02
_SECONDS_A_DAY = 86_400.0
SHIPPED = "shipped with groundglow"


def emissivity_of_job(
    chosen: Emissivity, scene: Scene, band: ThermalBand, grid: Grid, folder: Path
) -> EmissivitySource:
    """Resolve the job's choice for one scene.

    Parameters
    ----------
    chosen : Emissivity
        The job's table.
    scene : Scene
    band : ThermalBand
        The band used.
    grid : Grid
        The scene's grid.
    folder : Path
        Folder of the job file.

    Returns
    -------
    EmissivitySource

    Raises
    ------
    ConfigError
        If the scene lacks what the choice needs.
    InputError
        If a raster does not hold what it should.
    """
    if isinstance(chosen, ConstantEmissivity):
        ground = given_ground(
            chosen.value,
            chosen.uncertainty,
            broadband=chosen.broadband,
            broadband_uncertainty=chosen.broadband_uncertainty,
        )
        return ConstantSource(ground, "constant")
    if isinstance(chosen, RasterEmissivity):
        return _rasters(chosen, scene, band)
    table = read_class_table(chosen.class_table, folder)
    if isinstance(chosen, ClassOfGround):
        kind = table.named(chosen.name)
        return ConstantSource(ground_of_class(kind, band.sensor_band.response), f"class {kind.name}")
    if isinstance(chosen, LandCoverEmissivity):
        return _land_cover(chosen, scene, band, grid, table)
    return _index(chosen, scene, band, grid, table)


def read_class_table(path: str | None, folder: Path) -> ClassTable:
    """The shipped class table, or one of the user's own.

    Raises
    ------
    ConfigError
        If the file cannot be read or is not a class table.
    """
    if path is None:
        return shipped_class_table()
    file = folder / path
    try:
        text = file.read_text(encoding="utf-8")
    except OSError as error:
        raise ConfigError(f"the class table cannot be read ({error.strerror})", where=str(file)) from error
    except UnicodeDecodeError as error:
        raise ConfigError("the class table is not a text file in UTF-8", where=str(file)) from error
    if file.suffix.lower() == ".csv":
        return class_table_from_csv(text, where=str(file))
    return class_table_from_toml(text, where=str(file))


def _rasters(chosen: RasterEmissivity, scene: Scene, band: ThermalBand) -> EmissivitySource:
    rule = None if chosen.broadband_relation is None else relation(chosen.broadband_relation)
    wanted = [band.number, *(() if rule is None else rule.bands)]
    missing = [number for number in dict.fromkeys(wanted) if number not in scene.emissivity]
    if missing:
        raise ConfigError(
            f"the scene {scene.name} names no emissivity raster for band {', '.join(missing)}",
            where="emissivity.source",
            remedy="Add an [[emissivity]] table to the scene file, or choose another emissivity source",
        )
    if rule is not None and band.number not in rule.bands:
        raise ConfigError(
            f"the relation {chosen.broadband_relation} does not use band {band.number}",
            where="emissivity.broadband_relation",
            remedy=f"It is made for the bands {', '.join(rule.bands)}",
        )
    stated = scene.emissivity[band.number].uncertainty
    uncertainty = next(one for one in (chosen.uncertainty, stated, _RASTER_UNCERTAINTY) if one is not None)
    sources = {number: scene.emissivity[number].source for number in dict.fromkeys(wanted)}
    return RasterEmissivitySource(band.number, sources, uncertainty, chosen.broadband_uncertainty, rule)


def _land_cover(
    chosen: LandCoverEmissivity, scene: Scene, band: ThermalBand, grid: Grid, table: ClassTable
) -> EmissivitySource:
    if scene.land_cover is None:
        raise ConfigError(
            f"the scene {scene.name} names no land cover",
            where="emissivity.source",
            remedy="Add land_cover to the scene file, or choose another emissivity source",
        )
    codes = None
    if chosen.classes is not None:
        try:
            codes = {int(code): name for code, name in chosen.classes.items()}
        except ValueError as error:
            raise ConfigError(
                f"a class code must be a whole number ({error})", where="emissivity.classes"
            ) from error
    lookup = class_lookup(table.by_code(codes), band.sensor_band.response)
    footprint = _footprint(scene, grid, smooth=chosen.smooth)
    return ClassEmissivitySource(scene.land_cover, lookup, footprint, chosen.class_table or SHIPPED)


def _index(
    chosen: IndexEmissivity | LogarithmicEmissivity,
    scene: Scene,
    band: ThermalBand,
    grid: Grid,
    table: ClassTable,
) -> EmissivitySource:
    red, near_infrared = (_reflectance(scene, name) for name in ("red", "near_infrared"))
    if red is None or near_infrared is None:
        check_index_bands(
            None if red is None else [0.1], None if near_infrared is None else [0.1]
        )  # names the missing one
        raise AssertionError("a missing band was not refused")
    _check_sample(scene, red, near_infrared, grid)
    age = _age_in_days(scene)
    response = band.sensor_band.response
    method: ThresholdMethod | LogarithmicMethod
    coefficients = "logarithmic form"
    if isinstance(chosen, LogarithmicEmissivity):
        method = logarithmic_method(response, table, age_in_days=age)
    else:
        published = None if chosen.coefficients is None else index_coefficients(chosen.coefficients)
        method = threshold_method(response, table, coefficients=published, age_in_days=age)
        coefficients = method.band.source
    account: dict[str, object] = {
        "source": chosen.source,
        "coefficients": coefficients,
        "class_table": chosen.class_table or SHIPPED,
        "reflectance": {"red": red.source.path, "near_infrared": near_infrared.source.path},
        "reflectance_age_days": age,
    }
    footprint = _footprint(scene, grid, smooth=chosen.smooth)
    return IndexEmissivitySource(red, near_infrared, method, scene.quality, footprint, account)


def _check_sample(scene: Scene, red: ReflectanceSource, near_infrared: ReflectanceSource, grid: Grid) -> None:
    """Refuse bands that hold nothing, percent or counts, or stand in each other's place."""
    held = sample([red.read, near_infrared.read], grid)
    for name, values, source in zip(("red", "near_infrared"), held, (red, near_infrared), strict=True):
        if not np.isfinite(values).any():
            raise InputError(
                f"the {name} band has no value where the scene lies",
                where=source.source.path,
                remedy="Check that it belongs to this scene; a night scene needs bands of another date",
            )
        check_reflectance(values, band=name, where=source.source.path)
    water = None
    if scene.quality is not None:
        (flags,) = sample([partial(read_flags, scene.quality)], grid)
        water = (flags & (FLAG["water"].mask | FLAG["snow"].mask)) != 0
    check_index_bands(held[0], held[1], water=water)


def _reflectance(scene: Scene, name: str) -> ReflectanceSource | None:
    band = scene.reflectance.get(name)
    if band is None:
        return None
    if band.sun_corrected:
        return ReflectanceSource(band.source, 1.0)
    elevation = band.sun_elevation
    if elevation is None or not elevation > 0.0:
        found = "not known" if elevation is None else f"{elevation:g} degrees"
        raise ConfigError(
            f"the {name} reflectance is to be divided by the sine of the sun's elevation, which is {found}",
            where=f"reflectance.{name}",
            remedy="Set sun_elevation in the scene file, or sun_corrected = true if that is done already",
        )
    return ReflectanceSource(band.source, math.sin(math.radians(elevation)))


def _age_in_days(scene: Scene) -> float:
    """Days between the thermal scene and the older of its reflectance bands."""
    ages = [abs((scene.acquired - band.acquired).total_seconds()) for band in scene.reflectance.values()]
    return round(max(ages, default=0.0) / _SECONDS_A_DAY, 3)


def _footprint(scene: Scene, grid: Grid, *, smooth: bool) -> Footprint | None:
    size = scene.sensor.native_footprint
    if not smooth or size is None:
        return None
    height, width = pixel_in_metres(grid)
    return Footprint(footprint_weights(size, height), footprint_weights(size, width))
