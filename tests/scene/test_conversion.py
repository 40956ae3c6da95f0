"""Pixels become radiance before anything else: camera settings undone, known corrections applied."""

from __future__ import annotations

import pickle
from dataclasses import replace

import numpy as np
import pytest

from groundglow.errors import ConfigError
from groundglow.physics.band_table import radiance_table, table_from_response, temperature_of_band_radiance
from groundglow.raster.band import RasterSource
from groundglow.scene.conversion import radiance_of_pixels
from groundglow.scene.model import CameraSettings, RadianceAdjustment, ThermalBand
from groundglow.scene.sensor import load_sensor

BAND = load_sensor("microbolometer-camera").band("1")
RESPONSE = BAND.response
TABLE = radiance_table(RESPONSE.band_radiance)
CAMERA = CameraSettings(
    emissivity=0.95, reflected_temperature=263.0, air_temperature=290.0, transmittance=0.97
)
PLAIN = ThermalBand("1", RasterSource("t.tif"), "counts", BAND)


def test_radiance_needs_nothing() -> None:
    assert radiance_of_pixels(PLAIN, TABLE) is None
    assert radiance_of_pixels(replace(PLAIN, quantity="radiance"), TABLE) is None


def test_brightness_temperature_becomes_radiance() -> None:
    convert = radiance_of_pixels(replace(PLAIN, quantity="brightness-temperature"), TABLE)
    assert convert is TABLE


def test_a_cameras_settings_are_undone() -> None:
    # What a camera does (the measurement equation of thermography, common practice): of the radiance
    # received it takes off the reflected part and the air's, and inverts the rest.
    def received(kelvin: float) -> float:
        return float(RESPONSE.band_radiance(kelvin))

    sensed = received(300.0)
    reflected, air = received(263.0), received(290.0)
    of_object = (sensed - (1 - 0.95) * 0.97 * reflected - (1 - 0.97) * air) / (0.95 * 0.97)
    shown = temperature_of_band_radiance(np.array([of_object]), table_from_response(RESPONSE)).astype(
        np.float32
    )
    assert shown[0] > 300.5
    convert = radiance_of_pixels(replace(PLAIN, quantity="object-temperature", camera=CAMERA), TABLE)
    assert convert is not None
    found = convert(shown)
    assert found.dtype == np.float32
    assert float(found[0]) == pytest.approx(sensed, rel=2e-6)


def test_a_camera_set_to_one_shows_what_it_receives() -> None:
    ideal = CameraSettings(1.0, 250.0, 300.0, 1.0)
    convert = radiance_of_pixels(replace(PLAIN, quantity="object-temperature", camera=ideal), TABLE)
    shown = np.array([[280.0, 310.0, np.nan]], dtype=np.float32)
    assert convert is not None
    np.testing.assert_array_equal(convert(shown), TABLE(shown))


def test_unknown_settings_are_refused() -> None:
    with pytest.raises(ConfigError, match="object temperature without the camera's settings"):
        radiance_of_pixels(replace(PLAIN, quantity="object-temperature"), TABLE)


def test_a_correction_follows_whatever_leads_to_radiance() -> None:
    adjustment = RadianceAdjustment(gain=1.02, offset=-0.1, source="panel")
    radiance = np.array([[9.0, np.nan]], dtype=np.float32)
    convert = radiance_of_pixels(replace(PLAIN, adjustment=adjustment), TABLE)
    assert convert is not None
    np.testing.assert_array_equal(convert(radiance), np.array([[1.02 * 9.0 - 0.1, np.nan]], dtype=np.float32))
    kelvin = replace(PLAIN, quantity="brightness-temperature", adjustment=adjustment)
    convert = radiance_of_pixels(kelvin, TABLE)
    assert convert is not None
    shown = np.array([[300.0]], dtype=np.float32)
    assert convert(shown)[0, 0] == pytest.approx(1.02 * TABLE(shown)[0, 0] - 0.1, rel=1e-6)


def test_conversions_can_be_sent_to_workers() -> None:
    band = replace(PLAIN, quantity="object-temperature", camera=CAMERA, adjustment=RadianceAdjustment(1.01))
    convert = radiance_of_pixels(band, TABLE)
    again = pickle.loads(pickle.dumps(convert))
    shown = np.linspace(260, 330, 8, dtype=np.float32).reshape(2, 4)
    assert convert is not None
    np.testing.assert_array_equal(again(shown), convert(shown))
