"""What a sensor is to the chain: spectral response, calibration, noise and footprint of each thermal band."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from groundglow.errors import ConfigError
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.scene.quality import QualityRule


@dataclass(frozen=True)
class TwoConstants:
    """Published calibration T = K2 / ln(K1 / L + 1).

    Attributes
    ----------
    k1 : float
        [W m-2 sr-1 um-1]
    k2 : float
        [K]
    source : str
    """

    k1: float
    k2: float
    source: str


@dataclass(frozen=True)
class Noise:
    """Noise-equivalent temperature difference of one pixel.

    Attributes
    ----------
    temperature_difference : float
        One standard deviation. [K]
    at : float
        Blackbody temperature at which it is stated. [K]
    source : str
    """

    temperature_difference: float
    at: float
    source: str


@dataclass(frozen=True)
class Calibration:
    """Absolute calibration uncertainty, one error per band and scene.

    Attributes
    ----------
    uncertainty : float
        One standard deviation. [K]
    at : float
        Blackbody temperature at which it is stated. [K]
    source : str
    """

    uncertainty: float
    at: float
    source: str


@dataclass(frozen=True)
class CountScaling:
    """The sensor's standard scaling of counts, used where a description gives none.

    Attributes
    ----------
    scale, offset : float
        Radiance = scale * counts + offset. [W m-2 sr-1 um-1]
    nodata, saturation : float or None
        Stored values.
    source : str
    """

    scale: float
    offset: float
    nodata: float | None
    saturation: float | None
    source: str


@dataclass(frozen=True, eq=False)
class SensorBand:
    """One thermal band.

    Attributes
    ----------
    number : str
    response : SpectralResponse
    response_source : str
    two_constants, noise, calibration, counts : optional
    saturation_temperature : float or None
        Brightness temperature above which the band saturates. [K]
    calibrated_range : tuple of float or None
        Brightness temperatures within which the calibration holds. [K]
    """

    number: str
    response: SpectralResponse
    response_source: str
    two_constants: TwoConstants | None = None
    noise: Noise | None = None
    calibration: Calibration | None = None
    counts: CountScaling | None = None
    saturation_temperature: float | None = None
    calibrated_range: tuple[float, float] | None = None


@dataclass(frozen=True, eq=False)
class Sensor:
    """One radiometer.

    Attributes
    ----------
    name, title, source : str
    native_footprint : float or None
        Size of the sensor's own pixel on the ground. [m]
    calibration_correlation : float
        Correlation of the bands' calibration errors within one scene.
    bands : mapping of str to SensorBand
        By band number, in the file's order.
    flight_height : float or None
        Usual height above the ground; turns angles off nadir into zenith angles. [m]
    reflective : mapping of str to str
        Band numbers of "red" and "near_infrared", where the sensor has them.
    quality_layouts : mapping of str to tuple of QualityRule
        How to read the agency's quality rasters, by the layout's name.
    """

    name: str
    title: str
    source: str
    native_footprint: float | None
    calibration_correlation: float
    bands: Mapping[str, SensorBand]
    flight_height: float | None
    reflective: Mapping[str, str]
    quality_layouts: Mapping[str, tuple[QualityRule, ...]]

    def band(self, number: str) -> SensorBand:
        """The band of that number.

        Raises
        ------
        ConfigError
            If the sensor has none; the message lists all numbers.
        """
        try:
            return self.bands[number]
        except KeyError:
            raise ConfigError(
                f"the sensor {self.name} has no thermal band {number!r}",
                remedy=f"Choose from: {', '.join(self.bands)}",
            ) from None
