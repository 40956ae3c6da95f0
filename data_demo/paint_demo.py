"""Paint the invented district of Emberholt and let the invented radiometer look at it.

    python data_demo/paint_demo.py [--output FOLDER]

writes the rasters and the truth of the demo scene. The scene files, the sounding, the air's table
and the sensor's own file are read, never written. The same seed always gives the same pixels.
"""

from __future__ import annotations

import argparse
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import landscape
import numpy as np
import radiometer
from delivery import Form, Writer, describe_classes
from landscape import CELL, COLUMNS, PIXEL, ROWS, District
from numpy.typing import NDArray

from groundglow.physics.constants import STEFAN_BOLTZMANN

HERE = Path(__file__).resolve().parent
SENSOR = HERE.parent / "pipeline" / "groundglow" / "sensors" / "ember-two-band.toml"

# The seed is one for which no scene-wide draw (calibration, air) exceeds 1.5 standard uncertainties:
# an ordinary day.
SEED = 20260714
CAUSES = ("water_vapour", "air_temperature", "absorption_model")
CLOUD_TOP = 277.0  # K, blackbody that an opaque cloud looks like from above
CLOUD_FROM, THIN_FROM, SHADOW_FROM = 0.35, 0.0, 0.1  # opacity, or share of the direct sun taken
SUN, THIN, CLOUD = 0, 1, 2  # the quality raster's two-bit field of the sky
SHADOW_BIT, WATER_BIT, OUTSIDE_BIT = 3, 5, 7


@dataclass(frozen=True)
class Ground:
    """What the delivered pixels' footprints really are, all (rows, columns) of the 30 m grid."""

    emitted: tuple[NDArray[np.float64], NDArray[np.float64]]  # W m-2 sr-1 um-1, bands 1 and 2
    emissivity: tuple[NDArray[np.float64], NDArray[np.float64]]
    broadband: NDArray[np.float64]
    emitted_flux: NDArray[np.float64]  # W m-2
    height: NDArray[np.float64]  # m, at the pixels' centres
    cloud: NDArray[np.float64]  # opacity
    shadow: NDArray[np.float64]
    water: NDArray[np.float64]  # share of the footprint


def see_ground(
    sensor: radiometer.Radiometer, district: District, emissivity: list[NDArray[np.float64]]
) -> Ground:
    """Average what the fine cells emit and are over the sensor's own footprint.

    Emissivities are rounded before they are used, so that the stored ones are exactly those at work.
    """
    cells = round(sensor.native_footprint / CELL)

    def mean(fine: NDArray[np.float64]) -> NDArray[np.float64]:
        return radiometer.footprint_mean(fine, cells)

    east, south = np.meshgrid((np.arange(COLUMNS) + 0.5) * PIXEL, (np.arange(ROWS) + 0.5) * PIXEL)
    first, second = (
        mean(values * band.radiance(district.temperature))
        for values, band in zip(emissivity, sensor.bands, strict=False)
    )
    return Ground(
        emitted=(first, second),
        emissivity=(stored(mean(emissivity[0]), 12), stored(mean(emissivity[1]), 12)),
        broadband=stored(mean(emissivity[2]), 12),
        emitted_flux=mean(emissivity[2] * STEFAN_BOLTZMANN * district.temperature**4),
        height=landscape.bilinear(district.nodes, east, south),
        cloud=mean(district.cloud),
        shadow=mean(district.shadow),
        water=mean((district.classes == landscape.WATER).astype(float)),
    )


def stored(values: NDArray[np.float64], bits: int) -> NDArray[np.float64]:
    """Values rounded to so many bits after the binary point."""
    return np.asarray(np.rint(values * 2.0**bits) / 2.0**bits)


def outside_swath() -> NDArray[np.bool_]:
    """Pixels beyond the slanted edge of the swath, in the north-east."""
    row, column = np.mgrid[0:ROWS, 0:COLUMNS]
    return np.asarray(column - 0.35 * row > 520.0)


def expose(
    sensor: radiometer.Radiometer,
    ground: Ground,
    air: list[radiometer.Air],
    errors: list[NDArray[np.float64]],
    scaling: list[dict[str, Any]],
) -> NDArray[np.uint16]:
    """Counts of both bands; ``errors`` are added to the radiance at the sensor."""
    counts = np.empty((2, ROWS, COLUMNS), dtype=np.uint16)
    for place, band in enumerate(sensor.bands):
        clear = radiometer.at_sensor(air[place], ground.emitted[place], ground.emissivity[place])
        cloud_top = band.radiance(np.array(CLOUD_TOP))
        radiance = (1.0 - ground.cloud) * clear + ground.cloud * cloud_top + errors[place]
        entry = scaling[place]
        counts[place] = radiometer.to_counts(radiance, band.saturation, entry["scale"], entry["offset"])
    counts[:, outside_swath()] = 0
    return counts


def quality_words(ground: Ground) -> NDArray[np.uint8]:
    """The quality raster: bits 0-1 sky, 3 cloud shadow, 5 open water, 7 outside the swath."""
    words = np.full(ground.cloud.shape, SUN, dtype=np.uint8)
    words[ground.cloud > THIN_FROM] = THIN
    words[ground.cloud >= CLOUD_FROM] = CLOUD
    words[ground.shadow >= SHADOW_FROM] |= 1 << SHADOW_BIT
    words[ground.water > 0.5] |= 1 << WATER_BIT
    words[outside_swath()] = 1 << OUTSIDE_BIT
    return words


def draw_scene_errors(
    random: np.random.Generator, sensor: radiometer.Radiometer
) -> tuple[dict[str, float], list[float]]:
    """One draw of every error that a whole scene shares: the air's causes, and each band's calibration."""
    causes = dict(zip(CAUSES, random.standard_normal(len(CAUSES)).tolist(), strict=True))
    shared, own = random.standard_normal(2).tolist()
    return causes, [shared, landscape.mixed(sensor.calibration_correlation, shared, own)]


def write_truth(writer: Writer, sensor: radiometer.Radiometer, ground: Ground) -> dict[str, float]:
    """The truth rasters; returns how far the two bands' radiometric temperatures lie apart."""
    temperature, other = (
        band.temperature(emitted / emissivity)
        for band, emitted, emissivity in zip(sensor.bands, ground.emitted, ground.emissivity, strict=True)
    )
    inside = ~outside_swath()
    writer.truth(
        "surface_temperature",
        stored(temperature, 7),
        inside,
        "true radiometric surface temperature",
        unit="K",
    )
    writer.truth("emissivity_band_1", ground.emissivity[0], inside, "true emissivity, band 1")
    writer.truth("emissivity_band_2", ground.emissivity[1], inside, "true emissivity, band 2")
    writer.truth("broadband_emissivity", ground.broadband, inside, "true broadband emissivity")
    writer.truth("emitted_flux", stored(ground.emitted_flux, 4), inside, "true emitted flux", unit="W m-2")
    apart = (other - temperature)[inside]
    return {
        "root_mean_square_K": float(np.sqrt(np.mean(apart**2))),
        "largest_K": float(np.abs(apart).max()),
        "share_above_0.05_K": float(np.mean(np.abs(apart) > 0.05)),
    }


def write_reflectance(
    writer: Writer, random: np.random.Generator, district: District, scene: dict[str, Any]
) -> None:
    """The finer red and near-infrared bands, times the sine of the sun's elevation as they are delivered."""
    sine = np.sin(np.radians(scene["scene"]["sun_elevation"]))
    for band in ("red", "near_infrared"):
        values = landscape.reflectance(random, district, band) * sine
        counts = np.clip(np.rint(values / scene["reflectance"][band]["scale"]), 1, 65535).astype(np.uint16)
        form = Form(f"{band.replace('_', '-')} reflectance times sine of sun elevation, scaled", CELL, 0)
        writer.raster(f"{band}.tif", counts, form)


def describe_draws(
    sensor: radiometer.Radiometer, causes: dict[str, float], calibration: list[float]
) -> dict[str, Any]:
    """The draws that the whole scene shares, and the noise of a pixel."""
    names = [f"band_{band.number}" for band in sensor.bands]
    return {
        "air_in_standard_uncertainties": causes,
        "calibration_in_standard_uncertainties": dict(zip(names, calibration, strict=True)),
        "calibration_radiance": {
            name: draw * band.calibration
            for name, draw, band in zip(names, calibration, sensor.bands, strict=True)
        },
        "pixel_noise_radiance": {name: band.noise for name, band in zip(names, sensor.bands, strict=True)},
    }


def write_thermal(
    writer: Writer,
    sensor: radiometer.Radiometer,
    ground: Ground,
    scaling: list[dict[str, Any]],
    draws: tuple[dict[str, float], list[float]],
) -> dict[str, int]:
    """Counts with every error drawn once, and with noise alone; returns how many pixels saturate."""
    correlated, independent = (np.random.default_rng([SEED, part]) for part in (2, 3))
    table = tomllib.loads((HERE / "air.toml").read_text(encoding="utf-8"))
    shared = round(sensor.native_footprint / PIXEL)
    full, noise_only = [], []
    for band, draw in zip(sensor.bands, draws[1], strict=True):
        noise = radiometer.footprint_noise(correlated, (ROWS, COLUMNS), shared)
        full.append(draw * band.calibration + band.noise * noise)
        noise_only.append(band.noise * independent.standard_normal((ROWS, COLUMNS)))
    saturated = {}
    for name, errors, causes in (("thermal", full, draws[0]), ("thermal_noise_only", noise_only, {})):
        air = [radiometer.air_at(table, band.number, ground.height, causes) for band in sensor.bands]
        counts = expose(sensor, ground, air, errors, scaling)
        writer.raster(f"{name}.tif", counts, Form("counts", nodata=0))
        saturated[name] = int((counts == 65535).any(axis=0).sum())
    return saturated


def make(output: Path) -> None:
    """Paint, expose and write everything."""
    scene = tomllib.loads((HERE / "scene.toml").read_text(encoding="utf-8"))
    sensor = radiometer.load_radiometer(SENSOR)
    painting, errors, optical = (np.random.default_rng([SEED, part]) for part in (0, 1, 4))
    district = landscape.paint(painting, scene["scene"]["sun_elevation"])
    causes, calibration = draw_scene_errors(errors, sensor)
    emissivity, class_draws = landscape.emissivities(errors, district)
    ground = see_ground(sensor, district, emissivity)

    writer = Writer(output)
    saturated = write_thermal(writer, sensor, ground, scene["thermal"], (causes, calibration))
    words = quality_words(ground)
    writer.raster("quality.tif", words, Form("quality word, layout in the scene file"))
    writer.relief_and_classes(district)
    write_reflectance(writer, optical, district, scene)
    apart = write_truth(writer, sensor, ground)
    writer.document(
        "truth.json",
        {
            "note": "invented place, invented sensor",
            "seed": SEED,
            "draws": describe_draws(sensor, causes, calibration),
            "classes": describe_classes(district, class_draws),
            "band_2_temperature_minus_band_1": apart,
            "saturated_pixels": saturated,
            "share_of_pixels": {
                "cloud": float(np.mean(words & 3 == CLOUD)),
                "thin_cloud": float(np.mean(words & 3 == THIN)),
                "outside_swath": float(np.mean(outside_swath())),
            },
        },
    )


def main() -> None:
    """Command line."""
    parser = argparse.ArgumentParser(description="Paint the demo scene anew.")
    parser.add_argument(
        "--output", type=Path, default=HERE, help="folder to write into (default: beside this script)"
    )
    make(parser.parse_args().output)


if __name__ == "__main__":
    main()
