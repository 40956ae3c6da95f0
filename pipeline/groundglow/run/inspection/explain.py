"""The story of one pixel: every step of the chain, with the numbers that the map is made from.

The chain is walked as the run walks it, on a block of one pixel. What a pixel gets depends on no
block, so that the story ends in the value that stands in the map.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.grid import AtmosphereGrid
from groundglow.atmosphere.interpolate import pack
from groundglow.layers.layer_format import LayerFormat
from groundglow.layers.pyramid import TileEncoder
from groundglow.physics.constants import STEFAN_BOLTZMANN
from groundglow.quantities import FLAGS, QUANTITIES
from groundglow.raster.band import RasterSource
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Block, Grid
from groundglow.raster.open import open_raster
from groundglow.raster.relation import OnLattice, relation
from groundglow.raster.source import read_block, source_grid
from groundglow.retrieval import chain
from groundglow.run.blocks.column import ColumnAndGround
from groundglow.run.blocks.worker import AirAndGround, SceneWork, ground_of, radiance_and_flags
from groundglow.run.making.causes import PixelCauses, causes_with_air, causes_with_column
from groundglow.run.planning.plan import ScenePlan

Pixels = NDArray[np.float32]
Numbers = Mapping[str, float | None]
_ONE = slice(0, 1)


@dataclass(frozen=True)
class Story:
    """One pixel, step by step; None where a step has no number.

    Attributes
    ----------
    scene : str
    name : str
        Of the point, where it has one.
    x, y : float
        Map coordinates of the pixel's centre.
    row, column : int
    steps : mapping of str to mapping
        For each step its numbers by name.
    emissivity_origin, atmosphere_origin : mapping
        Where they are from.
    temperature_uncertainty, flux_uncertainty : mapping of str to float or None
        1 sigma by cause [K; W m-2]; independent of each other: their squares add to the total's.
    flags : tuple of str
        Names of the quality flags set.
    masked_by : tuple of str
        Those of them that take the number away.
    layers : mapping of str to float or None
        The values as the map holds them: masked, and rounded to each layer's step.
    """

    scene: str
    name: str
    x: float
    y: float
    row: int
    column: int
    steps: Mapping[str, Numbers]
    emissivity_origin: Mapping[str, Any]
    atmosphere_origin: Mapping[str, Any]
    temperature_uncertainty: Numbers
    flux_uncertainty: Numbers
    flags: tuple[str, ...]
    masked_by: tuple[str, ...]
    layers: Numbers


def explain_pixel(plan: ScenePlan, row: int, column: int, name: str = "") -> Story:
    """Walk one pixel through the chain and keep what every step said.

    Parameters
    ----------
    plan : ScenePlan
    row, column : int
        Within the scene's grid.
    name : str
        Of the point.

    Raises
    ------
    InputError
        If a raster cannot be read.
    """
    work = plan.work
    block = Block(row, column, 1, 1)
    with gdal_environment():
        radiance, flags = radiance_and_flags(work, block)
        maps: dict[str, Pixels] = {
            "brightness_temperature": chain.brightness_temperature(radiance, flags, work.settings)
        }
        sensor = {
            "counts": _stored_number(work.thermal, work.grid, row, column),
            "radiance": _number(radiance),
            "brightness_temperature": _number(maps["brightness_temperature"]),
        }
        ground = ground_of(work, block)
        surface = _Surface({}, {}, {})
        if isinstance(ground, AirAndGround):
            maps |= ground.maps(work, _ONE, _ONE, radiance, flags, list(QUANTITIES))
            causes = causes_with_air(work, ground, radiance).at(0, 0)
            surface = _surface(ground, maps, causes, _air_numbers(plan, ground, block))
        elif isinstance(ground, ColumnAndGround):
            brightness = maps["brightness_temperature"]
            maps |= ground.maps(_ONE, _ONE, radiance, brightness, flags=flags, settings=work.settings)
            causes = causes_with_column(work, ground, radiance, brightness).at(0, 0)
            surface = _surface(ground, maps, causes, {"column_water_vapour": _number(ground.water)})
    x, y = pixel_centre(work.grid, row, column)
    value = int(flags[0, 0])
    return Story(
        scene=plan.name,
        name=name,
        x=x,
        y=y,
        row=row,
        column=column,
        steps={"sensor": sensor, **surface.steps},
        emissivity_origin={} if work.emissivity is None else work.emissivity.describe(),
        atmosphere_origin=_mapping(plan.method.get("atmosphere")),
        temperature_uncertainty=surface.temperature,
        flux_uncertainty=surface.flux,
        flags=tuple(flag.name for flag in FLAGS if value & flag.mask),
        masked_by=tuple(flag.name for flag in FLAGS if value & flag.mask & work.mask),
        layers=_stored_layers(work, maps, flags),
    )


def pixel_centre(grid: Grid, row: int, column: int) -> tuple[float, float]:
    """Map coordinates of the centre of a pixel."""
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    across, down = column + 0.5, row + 0.5
    return c + a * across + b * down, f + d * across + e * down


@dataclass(frozen=True)
class _Surface:
    """What the surface adds to a story."""

    steps: Mapping[str, Numbers]
    temperature: Numbers
    flux: Numbers


def _surface(
    ground: AirAndGround | ColumnAndGround, maps: Mapping[str, Pixels], causes: PixelCauses, air: Numbers
) -> _Surface:
    fields = ground.emissivity.window(_ONE, _ONE)
    steps: dict[str, Numbers] = {
        "emissivity": {
            "emissivity": _number(fields.band),
            "emissivity_uncertainty": _number(fields.band_uncertainty),
            "broadband_emissivity": _number(fields.broadband),
        },
        "atmosphere": air,
        "surface": {
            name: _number(maps[name])
            for name in ("surface_temperature", "emitted_flux", "leaving_flux", "net_longwave_flux")
            if name in maps
        },
    }
    temperature = {
        "noise": causes.noise,
        "calibration": causes.calibration,
        "emissivity": abs(causes.emissivity),
    }
    return _Surface(
        steps,
        _with_total(temperature | dict(causes.air), _number(maps["surface_temperature_uncertainty"])),
        _with_total(_flux_causes(causes, fields, maps), _number(maps["emitted_flux_uncertainty"])),
    )


def _air_numbers(plan: ScenePlan, ground: AirAndGround, block: Block) -> Numbers:
    """The air's terms at the pixel, and where in the air's table it lies."""
    work = plan.work
    air = ground.air(_ONE, _ONE)
    count = work.settings.weighting.size
    sky = None
    if plan.air is not None:
        found = replace(ground, stack=pack(_sky_as_path(plan.air.grid)), same_air={}).air(_ONE, _ONE)
        sky = _number(found[count])
    return {
        "ground_height": _auxiliary(work.elevation, work.grid, block),
        "view_zenith_angle": _auxiliary(work.view_zenith_angle, work.grid, block),
        "transmittance": _number(air[count // 2]),
        "path_radiance": _number(air[count]),
        "sky_radiance": sky,
        "transmitted_sky_radiance": _number(air[count + 1]),
        "sky_flux": _number(air[count + 2]),
    }


def _sky_as_path(grid: AtmosphereGrid) -> AtmosphereGrid:
    """The air's table with the hemispheric sky radiance, which the chain needs not, in the path's place."""
    sky = np.broadcast_to(grid.terms.sky_radiance[..., np.newaxis], grid.terms.path_radiance.shape)
    return replace(grid, terms=replace(grid.terms, path_radiance=sky), causes={})


def _flux_causes(
    causes: PixelCauses, fields: chain.EmissivityFields, maps: Mapping[str, Pixels]
) -> dict[str, float]:
    """The same for the emitted flux: the emissivity's error moves the temperature and the factor before it."""
    t = float(maps["surface_temperature"][0, 0])
    black = STEFAN_BOLTZMANN * t**4
    per_kelvin = 4.0 * float(fields.broadband[0, 0]) * STEFAN_BOLTZMANN * t**3
    shared = per_kelvin * causes.emissivity + black * float(fields.broadband_shared[0, 0])
    return {
        "noise": per_kelvin * causes.noise,
        "calibration": per_kelvin * causes.calibration,
        "emissivity": abs(shared),
        "broadband_rule": black * float(fields.broadband_own[0, 0]),
        **{name: per_kelvin * change for name, change in causes.air.items()},
    }


def _with_total(causes: Mapping[str, float], total: float | None) -> Numbers:
    return {**{name: _finite(value) for name, value in causes.items()}, "total": total}


def _stored_layers(work: SceneWork, maps: Mapping[str, Pixels], flags: NDArray[np.uint16]) -> Numbers:
    found: dict[str, float | None] = {}
    for name, layer_format in work.formats.items():
        if name == "quality":
            found[name] = int(flags[0, 0])
            continue
        values = np.array(maps[name], dtype=np.float32, order="C")
        chain.mask_flagged(values, flags, work.mask)
        found[name] = _rounded(values, layer_format)
    return found


def _rounded(values: Pixels, layer_format: LayerFormat) -> float | None:
    """The value as the layer stores it."""
    return _finite(float(TileEncoder(layer_format).stored(values, (0, 0), (1, 1))[0, 0]))


def _stored_number(source: RasterSource, grid: Grid, row: int, column: int) -> float | None:
    """What the file holds at the pixel; None where the pixel is made from several of the file's."""
    related = relation(source_grid(source), grid)
    if not isinstance(related, OnLattice):
        return None
    row, column = row + related.row_shift, column + related.column_shift
    dataset = open_raster(source.path, indirect=source.indirect)
    if not (0 <= row < dataset.height and 0 <= column < dataset.width):
        return None
    window = ((row, row + 1), (column, column + 1))
    return _finite(float(dataset.read(source.band, window=window)[0, 0]))


def _auxiliary(source: RasterSource | float, grid: Grid, block: Block) -> float | None:
    if not isinstance(source, RasterSource):
        return float(source)
    return _number(read_block(source, grid, block, resampling="continuous").values)


def _mapping(value: object) -> Mapping[str, Any]:
    return value if isinstance(value, Mapping) else {}


def _number(values: Pixels) -> float | None:
    return _finite(float(values[0, 0]))


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
