"""The invented radiometer, forwards: from painted ground through the day's air to counts.

Written apart from the package on purpose: Planck's law is integrated over the spectral response
here, directly, and only physical constants are shared, so that what the package makes of the counts
is compared with something that does not rest on the package.
"""

from __future__ import annotations

import csv
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from groundglow.physics.constants import FIRST_RADIATION_CONSTANT, SECOND_RADIATION_CONSTANT

Float = NDArray[np.float64]

_STEP = 0.002  # um, of the integration over the response
_TEMPERATURES = np.arange(180.0, 900.0, 0.02)  # K; linear between them, better than 1e-6 K


@dataclass(frozen=True)
class Band:
    """One band: its number, blackbody radiance over temperature, and its errors in radiance."""

    number: str
    radiance_table: Float  # W m-2 sr-1 um-1 at _TEMPERATURES
    noise: float  # W m-2 sr-1 um-1, one standard deviation of a pixel
    calibration: float  # W m-2 sr-1 um-1, one standard deviation of a scene
    saturation: float  # W m-2 sr-1 um-1

    def radiance(self, temperature: Float) -> Float:
        """Blackbody radiance averaged over the response."""
        return np.asarray(np.interp(temperature, _TEMPERATURES, self.radiance_table))

    def temperature(self, radiance: Float) -> Float:
        """Temperature of the blackbody of that radiance."""
        return np.asarray(np.interp(radiance, self.radiance_table, _TEMPERATURES))


@dataclass(frozen=True)
class Radiometer:
    """The sensor: its bands, the size of its own pixel and how far its calibration errors agree."""

    native_footprint: float  # m
    calibration_correlation: float
    bands: tuple[Band, ...]


def load_radiometer(path: Path) -> Radiometer:
    """Read the sensor's file and integrate Planck's law over its responses."""
    document = tomllib.loads(path.read_text(encoding="utf-8"))
    bands = tuple(_band(entry, path.parent) for entry in document["band"])
    return Radiometer(document["native_footprint"], document["calibration_correlation"], bands)


def _band(entry: Mapping[str, Any], folder: Path) -> Band:
    wavelength, weight = _response(entry["response"], folder)
    table = np.concatenate(
        [_planck(wavelength, part[:, np.newaxis]) @ weight for part in np.array_split(_TEMPERATURES, 60)]
    )
    noise, calibration = entry["noise"], entry["calibration"]

    def radiance_change(change: float, at: float) -> float:
        slope = _planck(wavelength, np.array([[at - 0.01], [at + 0.01]])) @ weight
        return float(change * (slope[1] - slope[0]) / 0.02)

    return Band(
        number=entry["number"],
        radiance_table=table,
        noise=radiance_change(noise["temperature_difference"], noise["at"]),
        calibration=radiance_change(calibration["uncertainty"], calibration["at"]),
        saturation=float(np.interp(entry["saturation_temperature"], _TEMPERATURES, table)),
    )


def _planck(wavelength: Float, temperature: Float) -> Float:
    emitted = (
        FIRST_RADIATION_CONSTANT
        / wavelength**5
        / np.expm1(SECOND_RADIATION_CONSTANT / (wavelength * temperature))
    )
    return np.asarray(emitted)


def _response(entry: Mapping[str, Any], folder: Path) -> tuple[Float, Float]:
    """Wavelengths in even steps and the weights of the mean over the response (trapezoids)."""
    if "top_hat" in entry:
        nodes, values = np.array(entry["top_hat"], dtype=float), np.ones(2)
    elif "gaussian" in entry:
        centre, width = entry["gaussian"]
        nodes = np.linspace(centre - 1.6 * width, centre + 1.6 * width, 401)
        values = np.exp(-4.0 * np.log(2.0) * ((nodes - centre) / width) ** 2)
    elif "table" in entry:
        with (folder / entry["table"]).open(encoding="utf-8", newline="") as stream:
            lines = (line for line in stream if not line.startswith("#"))
            rows = np.array([[float(cell) for cell in row[:2]] for row in list(csv.reader(lines))[1:]])
        nodes, values = rows[:, 0], rows[:, 1]
    else:
        nodes, values = np.array(entry["wavelength"], dtype=float), np.array(entry["response"], dtype=float)
    count = round((nodes[-1] - nodes[0]) / _STEP) + 1
    wavelength = np.linspace(nodes[0], nodes[-1], count)
    weight = np.interp(wavelength, nodes, values)
    weight[[0, -1]] *= 0.5
    return wavelength, weight / weight.sum()


@dataclass(frozen=True)
class Air:
    """One band's air at each pixel."""

    transmittance: Float  # 1
    path_radiance: Float  # W m-2 sr-1 um-1
    sky_radiance: Float  # W m-2 sr-1 um-1


def air_at(table: Mapping[str, Any], number: str, height: Float, draws: Mapping[str, float]) -> Air:
    """The air over each ground height, off the table by so many standard uncertainties of each cause.

    Parameters
    ----------
    table : mapping
        The content of ``air.toml``.
    number : str
        Band number.
    height : array
        Ground height. [m]
    draws : mapping
        Standard normal number of each cause; empty for the table itself.
    """
    band = next(entry for entry in table["band"] if entry["number"] == number)

    def term(name: str) -> Float:
        column = np.array(band[name])
        for cause, draw in draws.items():
            column = column + draw * np.array(band["change"][cause][name])
        return np.asarray(np.interp(height, table["height"], column))

    return Air(term("transmittance"), term("path_radiance"), term("sky_radiance"))


def at_sensor(air: Air, emitted: Float, emissivity: Float) -> Float:
    """Radiance at the sensor of ground that emits so much and mirrors the rest of the sky."""
    return air.transmittance * (emitted + (1.0 - emissivity) * air.sky_radiance) + air.path_radiance


def footprint_mean(fine: Float, cells: int) -> Float:
    """Mean over the sensor's own footprint about the centre of every delivered pixel.

    A delivered pixel is two by two fine cells; the footprint is ``cells`` by ``cells`` (even). Beyond
    the district its outermost cells go on.
    """
    pad = cells // 2 - 1
    padded = np.pad(fine, pad, mode="edge")
    rows, columns = fine.shape
    total = np.zeros((rows // 2, columns // 2))
    for down in range(cells):
        for right in range(cells):
            total += padded[down : down + rows - 1 : 2, right : right + columns - 1 : 2]
    return total / cells**2


def footprint_noise(random: np.random.Generator, shape: tuple[int, int], pixels: int) -> Float:
    """Unit noise of the delivered pixels, shared by those that lie within one native footprint."""
    white = random.standard_normal((shape[0] + pixels - 1, shape[1] + pixels - 1))
    total = np.zeros(shape)
    for down in range(pixels):
        for right in range(pixels):
            total += white[down : down + shape[0], right : right + shape[1]]
    return total / pixels


def to_counts(radiance: Float, saturation: float, scale: float, offset: float) -> NDArray[np.uint16]:
    """Counts as stored: 1 to 65534, and 65535 from the saturation radiance on."""
    counts = np.clip(np.rint((radiance - offset) / scale), 1, 65534)
    counts[radiance >= saturation] = 65535
    return np.asarray(counts.astype(np.uint16))
