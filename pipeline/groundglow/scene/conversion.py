"""From a thermal band's physical values to radiance, pixel by pixel, before anything is averaged."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from groundglow.errors import ConfigError
from groundglow.raster.band import Convert, Pixels
from groundglow.scene.model import CameraSettings, RadianceAdjustment, ThermalBand


@dataclass(frozen=True)
class SensedRadiance:
    """A camera's object temperature turned back into the radiance that it received.

    The camera solved, with its settings (emissivity e, transmittance t, reflected and air
    temperature), ``L = e t B(object) + (1 - e) t B(reflected) + (1 - t) B(air)`` for the object's
    temperature; this is the same equation read forwards.

    Attributes
    ----------
    camera : CameraSettings
        What the camera assumed.
    radiance : callable
        Band radiance of a blackbody, float32 kelvin to float32 W m-2 sr-1 um-1.
    """

    camera: CameraSettings
    radiance: Convert

    def __call__(self, temperature: Pixels) -> Pixels:
        """Radiance at the camera. [W m-2 sr-1 um-1]"""
        known = np.array([self.camera.reflected_temperature, self.camera.air_temperature], dtype=np.float32)
        reflected, air = (float(value) for value in self.radiance(known))
        emissivity, transmittance = self.camera.emissivity, self.camera.transmittance
        constant = (1.0 - emissivity) * transmittance * reflected + (1.0 - transmittance) * air
        emitted = self.radiance(temperature).astype(np.float64)
        return (emissivity * transmittance * emitted + constant).astype(np.float32)


@dataclass(frozen=True)
class Adjusted:
    """Radiance corrected to known targets: gain * radiance + offset, after whatever leads to radiance."""

    adjustment: RadianceAdjustment
    inner: Convert | None = None

    def __call__(self, values: Pixels) -> Pixels:
        """Corrected radiance. [W m-2 sr-1 um-1]"""
        radiance = values if self.inner is None else self.inner(values)
        corrected = self.adjustment.gain * radiance.astype(np.float64) + self.adjustment.offset
        return corrected.astype(np.float32)


def radiance_of_pixels(band: ThermalBand, blackbody_radiance: Convert) -> Convert | None:
    """What leads from the pixels of a band, as read, to radiance at the sensor.

    Parameters
    ----------
    band : ThermalBand
        Its quantity, camera settings and adjustment decide.
    blackbody_radiance : callable
        Band radiance of a blackbody, kelvin in, W m-2 sr-1 um-1 out, float32 arrays.

    Returns
    -------
    callable or None
        None where the pixels are radiance already and need no correction. Give it to
        ``read_block(..., convert=...)``: radiance, not temperature, is what may be averaged.

    Raises
    ------
    ConfigError
        If an object temperature comes without the camera's settings.
    """
    inner: Convert | None = None
    if band.quantity == "brightness-temperature":
        inner = blackbody_radiance
    elif band.quantity == "object-temperature":
        if band.camera is None:
            raise ConfigError(
                f"thermal band {band.number} holds a camera's object temperature without the camera's settings",
                remedy="Give emissivity, reflected and air temperature and transmittance, so that they can be undone",
            )
        inner = SensedRadiance(band.camera, blackbody_radiance)
    return inner if band.adjustment is None else Adjusted(band.adjustment, inner)
