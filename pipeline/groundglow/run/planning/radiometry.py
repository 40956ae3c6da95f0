"""What the chain needs to know of a thermal band: tables, limits, noise and calibration."""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import partial

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import ConfigError
from groundglow.physics.band_table import (
    BandTable,
    radiance_table,
    table_from_response,
    table_from_two_constants,
)
from groundglow.physics.planck import two_constant_radiance
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.raster.band import Convert
from groundglow.retrieval.chain import ChainSettings
from groundglow.run.config.job import Temperature
from groundglow.scene.conversion import radiance_of_pixels
from groundglow.scene.model import ThermalBand

# Stated where a sensor file is silent; planning values, recorded as assumed.
ASSUMED_NOISE = 0.1  # K at 300 K
ASSUMED_CALIBRATION = 0.5  # K at 300 K
_REFERENCE_TEMPERATURE = 300.0


def band_table(band: ThermalBand, radiometry: str) -> BandTable:
    """Radiance to temperature, by the job's choice.

    Raises
    ------
    ConfigError
        If the two-constant form is asked for and no constants are known.
    """
    if radiometry == "spectral-response":
        return table_from_response(band.sensor_band.response)
    constants = band.two_constants
    if constants is None:
        raise ConfigError(
            f"no two-constant calibration is known for band {band.number}",
            where="temperature.radiometry",
            remedy="Use radiometry = 'spectral-response', or add two_constants to the sensor file",
        )
    return table_from_two_constants(constants.k1, constants.k2)


def radiance_conversion(band: ThermalBand, radiometry: str) -> Convert | None:
    """What turns a band's pixels, as read, into radiance, so that radiance is what is averaged."""
    if band.quantity in ("counts", "radiance"):
        return radiance_of_pixels(band, _no_temperature)
    law: Callable[[ArrayLike], NDArray[np.float64]] = band.sensor_band.response.band_radiance
    if radiometry == "two-constants" and band.two_constants is not None:
        law = partial(two_constant_radiance, k1=band.two_constants.k1, k2=band.two_constants.k2)
    return radiance_of_pixels(band, radiance_table(law))


def _no_temperature(temperature: NDArray[np.float32]) -> NDArray[np.float32]:
    """Stands where no temperature is converted."""
    return temperature


def radiance_step(response: SpectralResponse, kelvin: float, at: float) -> float:
    """A temperature step at a temperature as a radiance step. [W m-2 sr-1 um-1]"""
    return kelvin * float(response.band_radiance_slope(at))


def chain_settings(
    band: ThermalBand, choice: Temperature, weighting: np.ndarray, causes: int, step: float
) -> tuple[ChainSettings, dict[str, object]]:
    """Settings of the chain, and an account of the noise and calibration for the provenance.

    Parameters
    ----------
    band : ThermalBand
    choice : Temperature
        The job's.
    weighting : array
        Surface temperatures of the air's transmittance. [K]
    causes : int
        Causes of uncertainty that the air carries.
    step : float
        Radiance of one step of the stored numbers; 0 where they are floating point.
    """
    sensor = band.sensor_band
    response = sensor.response
    noise = sensor.noise
    calibration = sensor.calibration
    random = radiance_step(
        response,
        noise.temperature_difference if noise else ASSUMED_NOISE,
        noise.at if noise else _REFERENCE_TEMPERATURE,
    )
    shared = radiance_step(
        response,
        calibration.uncertainty if calibration else ASSUMED_CALIBRATION,
        calibration.at if calibration else _REFERENCE_TEMPERATURE,
    )
    if band.adjustment is not None and band.adjustment.uncertainty is not None:
        shared = band.adjustment.uncertainty
    table = band_table(band, choice.radiometry)
    limits = [_radiance_at(table, t) for t in (choice.lowest, choice.highest)]
    low, high = sensor.calibrated_range or (0.0, math.inf)
    settings = ChainSettings(
        table=table,
        lowest_radiance=limits[0],
        highest_radiance=limits[1],
        possible_range=(choice.lowest, choice.highest),
        calibrated_range=(low, high),
        saturation_temperature=sensor.saturation_temperature or math.inf,
        weighting=np.asarray(weighting, dtype=np.float32),
        causes=causes,
        noise=math.hypot(random, step / math.sqrt(12.0)),
        calibration=shared,
    )
    account: dict[str, object] = {
        "noise": {"radiance": random, "source": noise.source if noise else "assumed, 0.1 K at 300 K"},
        "quantisation_step": step,
        "calibration": {
            "radiance": shared,
            "source": calibration.source if calibration else "assumed, 0.5 K at 300 K",
        },
    }
    return settings, account


def _radiance_at(table: BandTable, temperature: float) -> float:
    """Radiance at which a band table reaches a temperature."""
    cell = int(np.searchsorted(table.temperature, temperature, side="right")) - 1
    cell = min(max(cell, 0), table.start.size - 1)
    level = float(table.start[cell]) + (temperature - float(table.temperature[cell])) / float(
        table.slope[cell]
    )
    return min(max(level, table.lowest_radiance), table.highest_radiance)
