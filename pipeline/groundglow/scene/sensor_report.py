"""What a sensor file amounts to: effective wavelength, two-constant fit and its error, noise as radiance."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from groundglow.errors import ConfigError
from groundglow.physics.planck import two_constant_temperature
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.scene.radiometer import Sensor, SensorBand

# The usual range of surfaces on the Earth, over which agencies' constants are compared.
COLDEST, WARMEST = 250.0, 340.0


@dataclass(frozen=True)
class BandReport:
    """One band in numbers.

    Attributes
    ----------
    number : str
    limits : tuple of float
        Wavelengths between which the response is at least half of its maximum. [um]
    effective_wavelength, width : float
        [um]
    fitted_constants : tuple of float
        K1 [W m-2 sr-1 um-1] and K2 [K] fitted to the response.
    fit_error : float
        Largest error of that fit over 250-340 K. [K]
    published_difference : tuple of float or None
        Least and greatest difference, published constants less integrated response, over 250-340 K. [K]
    noise_radiance : float or None
        [W m-2 sr-1 um-1]
    """

    number: str
    limits: tuple[float, float]
    effective_wavelength: float
    width: float
    fitted_constants: tuple[float, float]
    fit_error: float
    published_difference: tuple[float, float] | None
    noise_radiance: float | None


def report_of_sensor(sensor: Sensor) -> tuple[BandReport, ...]:
    """All bands of a sensor in numbers, in the sensor's order."""
    return tuple(_report(band) for band in sensor.bands.values())


def fit_two_constants(
    response: SpectralResponse, low: float = COLDEST, high: float = WARMEST
) -> tuple[float, float]:
    """The two constants that follow a response best.

    Gauss-Newton steps on the temperature error, from the constants of the effective wavelength.

    Parameters
    ----------
    response : SpectralResponse
        The band.
    low, high : float
        Range of temperatures. [K]

    Returns
    -------
    k1 : float
        [W m-2 sr-1 um-1]
    k2 : float
        [K]
    """
    temperature = np.linspace(low, high, 91)
    radiance = response.band_radiance(temperature)
    wavelength = response.effective_wavelength
    k2 = 14387.76877 / wavelength  # second radiation constant in um K (CODATA)
    k1 = float(np.median(radiance * np.expm1(k2 / temperature)))
    for _ in range(20):
        found = two_constant_temperature(radiance, k1, k2)
        ratio = k1 / radiance
        by_k1 = -k2 / (np.log1p(ratio) ** 2 * radiance * (1.0 + ratio))
        by_k2 = found / k2
        step, *_ = np.linalg.lstsq(np.stack([by_k1, by_k2], axis=1), temperature - found, rcond=None)
        k1, k2 = k1 + float(step[0]), k2 + float(step[1])
    return k1, k2


def plot_sensor(sensor: Sensor, path: Path) -> None:
    """Draw the responses of a sensor's bands into a PNG or SVG file.

    Parameters
    ----------
    sensor : Sensor
        What to draw.
    path : Path
        Its suffix decides the format.

    Raises
    ------
    ConfigError
        If matplotlib, which draws it, is not installed.
    """
    try:
        from matplotlib.figure import Figure  # noqa: PLC0415  (an extra, and slow to load)
    except ImportError as error:
        raise ConfigError("drawing needs matplotlib", remedy="pip install 'groundglow[plot]'") from error
    figure = Figure(figsize=(7.0, 3.5), layout="constrained")
    axes = figure.add_subplot()
    for band in sensor.bands.values():
        wavelength, response = band.response.wavelength, band.response.response
        edge = [wavelength[0], *wavelength, wavelength[-1]]
        axes.plot(edge, [0.0, *(response / response.max()), 0.0], label=f"band {band.number}")
    axes.set(xlabel="wavelength [um]", ylabel="relative response", title=sensor.title, ylim=(0.0, 1.05))
    axes.legend()
    figure.savefig(path)


def _report(band: SensorBand) -> BandReport:
    """One band in numbers."""
    response = band.response
    temperature = np.linspace(COLDEST, WARMEST, 91)
    radiance = response.band_radiance(temperature)
    constants = fit_two_constants(response)
    fit_error = np.abs(two_constant_temperature(radiance, *constants) - temperature).max()
    published = band.two_constants
    difference = None
    if published is not None:
        error = two_constant_temperature(radiance, published.k1, published.k2) - temperature
        difference = (float(error.min()), float(error.max()))
    noise = band.noise
    strong = response.wavelength[response.response >= 0.5 * response.response.max()]
    return BandReport(
        number=band.number,
        limits=(float(strong[0]), float(strong[-1])),
        effective_wavelength=response.effective_wavelength,
        width=response.width,
        fitted_constants=constants,
        fit_error=float(fit_error),
        published_difference=difference,
        noise_radiance=None
        if noise is None
        else noise.temperature_difference * float(response.band_radiance_slope(noise.at)),
    )
