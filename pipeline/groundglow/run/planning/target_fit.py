"""Correction of a band's radiance to known targets: water, a reference panel."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from groundglow.atmosphere.interpolate import AirStack, interpolate_plainly
from groundglow.raster.band import Convert, RasterSource
from groundglow.raster.grid import Block, Grid, apply
from groundglow.raster.source import read_block, source_grid
from groundglow.scene.model import RadianceAdjustment, Scene, ThermalBand
from groundglow.scene.target_observation import observe, target_radiance
from groundglow.scene.targets import fit_targets


def adjusted_to_targets(
    scene: Scene,
    band: ThermalBand,
    convert: Convert | None,
    air: AirStack | None,
    *,
    elevation: RasterSource | float,
    noise: float,
) -> tuple[ThermalBand, dict[str, object] | None]:
    """The band with the correction that the scene's targets ask for, and an account of it.

    Parameters
    ----------
    scene : Scene
        Its targets in this band; none leaves the band as it is.
    band : ThermalBand
    convert : callable or None
        What leads from the band's pixels to radiance.
    air : AirStack or None
        On the thermal band's own map coordinates; None is no air.
    elevation : RasterSource or float
        Ground height. [m]
    noise : float
        Of one pixel. [W m-2 sr-1 um-1]

    Returns
    -------
    band : ThermalBand
    account : mapping or None
        Gain, offset, uncertainty and residuals, for the provenance.

    Raises
    ------
    InputError, DomainError
        If a target cannot be used.
    """
    targets = [target for target in scene.targets if target.band == band.number]
    if not targets:
        return band, None
    grid = source_grid(band.source)
    compared = []
    for target in targets:
        terms = {"transmittance": 1.0, "path_radiance": 0.0, "sky_radiance": 0.0}
        if air is not None:
            terms = _air_at(air, grid, elevation, target.x, target.y)
        seen = observe(band.source, target, convert)
        compared.append(target_radiance(target, seen, band.sensor_band.response, noise=noise, **terms))
    fit = fit_targets(compared)
    level = float(np.mean([one.expected for one in compared]))
    uncertainty = float(np.sqrt(np.array([level, 1.0]) @ fit.covariance @ np.array([level, 1.0])))
    names = ", ".join(target.name for target in targets)
    adjustment = RadianceAdjustment(fit.gain, fit.offset, uncertainty, f"fitted to {names}")
    account: dict[str, object] = {
        "gain": fit.gain,
        "offset": fit.offset,
        "uncertainty": uncertainty,
        "targets": [
            {"name": one.name, "observed": one.observed, "expected": one.expected, "residual": residual}
            for one, residual in zip(compared, fit.residuals, strict=True)
        ],
    }
    return replace(band, adjustment=adjustment), account


def _air_at(
    air: AirStack, grid: Grid, elevation: RasterSource | float, x: float, y: float
) -> dict[str, float]:
    height = elevation
    if isinstance(height, RasterSource):
        column, row = apply(~grid.transform, x, y)
        place = Block(int(row), int(column), 1, 1)
        height = float(read_block(height, grid, place, resampling="continuous").values[0, 0])
    secant = float(air.secant[air.secant.size // 2])
    fields = interpolate_plainly(air, np.array(x), np.array(y), height, secant)
    transmittance = float(fields[air.temperatures // 2])
    return {
        "transmittance": transmittance,
        "path_radiance": float(fields[air.temperatures]),
        "sky_radiance": float(fields[air.temperatures + 1]) / transmittance,
    }
