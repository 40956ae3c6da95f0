"""Sensors agree with what their agencies publish, and a bad sensor file is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from groundglow.errors import ConfigError, GroundglowError, InputError
from groundglow.physics.planck import two_constant_temperature
from groundglow.scene.sensor import load_sensor, sensor_names

TEMPERATURES = np.linspace(250.0, 340.0, 91)

# Published K1 [W m-2 sr-1 um-1] and K2 [K]: Landsat 7 (Chander, Markham & Helder 2009), Landsat 8 and 9
# (USGS level-1 metadata), ASTER (literature; Planck's law at one wavelength).
PUBLISHED = {
    ("landsat-4", "6"): (671.62, 1284.30),
    ("landsat-5", "6"): (607.76, 1260.56),
    ("landsat-7", "6"): (666.09, 1282.71),
    ("landsat-8", "10"): (774.8853, 1321.0789),
    ("landsat-8", "11"): (480.8883, 1201.1442),
    ("landsat-9", "10"): (799.0284, 1329.2405),
    ("landsat-9", "11"): (475.6581, 1198.3494),
    ("aster", "10"): (3040.136, 1735.338),
    ("aster", "11"): (2482.375, 1666.399),
    ("aster", "12"): (1935.060, 1585.420),
    ("aster", "13"): (866.4686, 1350.069),
    ("aster", "14"): (641.3265, 1271.222),
}


def disagreement(sensor: str, band: str) -> np.ndarray:
    """Published two-constant temperature less that of the integrated response. [K]"""
    response = load_sensor(sensor).band(band).response
    return (
        two_constant_temperature(response.band_radiance(TEMPERATURES), *PUBLISHED[sensor, band])
        - TEMPERATURES
    )


@pytest.mark.parametrize(("sensor", "band"), PUBLISHED)
def test_published_constants_are_shipped(sensor: str, band: str) -> None:
    constants = load_sensor(sensor).band(band).two_constants
    assert constants is not None
    assert (constants.k1, constants.k2) == PUBLISHED[sensor, band]


@pytest.mark.parametrize(
    ("sensor", "band"),
    [key for key in PUBLISHED if key[0] not in ("landsat-4", "landsat-5") and key != ("aster", "14")],
)
def test_integrated_response_agrees_with_published_constants(sensor: str, band: str) -> None:
    assert np.abs(disagreement(sensor, band)).max() <= 0.15


def test_where_the_constants_and_the_response_part() -> None:
    # ASTER 14: the constants are those of 11.318 um, the response's mean is 11.293 um.
    aster = disagreement("aster", "14")
    assert np.abs(aster[TEMPERATURES <= 320.0]).max() <= 0.15
    assert np.abs(aster).max() <= 0.22
    # Landsat 4 and 5: prelaunch responses, constants of the calibration in flight.
    assert disagreement("landsat-4", "6").min() >= -0.04
    assert disagreement("landsat-4", "6").max() <= 0.79
    assert disagreement("landsat-5", "6").min() >= 0.26
    assert disagreement("landsat-5", "6").max() <= 0.54


@pytest.mark.parametrize(
    ("sensor", "band", "limits"),
    [
        # Band limits: USGS band tables (Landsat 8), Landsat 7 Science Data Users Handbook (measured
        # half-power points, from memory), ASTER User Handbook.
        ("landsat-7", "6", (10.31, 12.36)),
        ("landsat-8", "10", (10.60, 11.19)),
        ("landsat-8", "11", (11.50, 12.51)),
        ("aster", "10", (8.125, 8.475)),
        ("aster", "12", (8.925, 9.275)),
        ("aster", "13", (10.25, 10.95)),
        ("aster", "14", (10.95, 11.65)),
    ],
)
def test_responses_lie_within_the_published_limits(
    sensor: str, band: str, limits: tuple[float, float]
) -> None:
    response = load_sensor(sensor).band(band).response
    strong = response.wavelength[response.response > 0.5]
    assert strong[0] == pytest.approx(limits[0], abs=0.1)
    assert strong[-1] == pytest.approx(limits[1], abs=0.1)


def test_counts_to_radiance_to_temperature() -> None:
    # ASTER User Handbook: L = (counts - 1) UCC. Check values computed with the constants above.
    for band, radiance, temperature in (("13", 11.38031, 310.676), ("10", 13.63718, 320.686)):
        known = load_sensor("aster").band(band)
        assert known.counts is not None
        assert known.two_constants is not None
        found = known.counts.scale * 2000 + known.counts.offset
        assert found == pytest.approx(radiance, abs=1e-5)
        in_kelvin = two_constant_temperature(found, known.two_constants.k1, known.two_constants.k2)
        assert float(in_kelvin) == pytest.approx(temperature, abs=0.01)
        assert known.counts.nodata == 0.0


def test_the_demonstration_sensor_is_calibrated_to_its_own_response() -> None:
    sensor = load_sensor("ember-two-band")
    for band in sensor.bands.values():
        assert band.two_constants is not None
        radiance = band.response.band_radiance(np.linspace(230.0, 370.0, 29))
        found = two_constant_temperature(radiance, band.two_constants.k1, band.two_constants.k2)
        assert np.abs(found - np.linspace(230.0, 370.0, 29)).max() <= 0.02
    assert sensor.native_footprint == 60.0


def test_every_shipped_sensor_says_where_its_numbers_come_from() -> None:
    assert {"landsat-4", "landsat-5", "landsat-7", "landsat-8", "landsat-9", "aster", "ember-two-band",
            "microbolometer-camera"} == set(sensor_names())  # fmt: skip
    for name in sensor_names():
        sensor = load_sensor(name)
        assert sensor.source
        for band in sensor.bands.values():
            assert band.noise is not None
            assert band.noise.source
            assert band.calibration is not None
            assert band.calibration.source


def test_an_unknown_sensor_names_the_nearest() -> None:
    with pytest.raises(
        ConfigError, match=r"there is no sensor 'landsat8'. Did you mean 'landsat-8'\? Shipped are"
    ):
        load_sensor("landsat8")
    with pytest.raises(ConfigError, match=r"has no thermal band '12'. Choose from: 10, 11"):
        load_sensor("landsat-8").band("12")


GOOD = """
name = "mine"
title = "My camera"
source = "maker's sheet"
[[band]]
number = "1"
response = { top_hat = [8.0, 14.0] }
"""


def sensor_file(folder: Path, text: str) -> str:
    (folder / "mine.toml").write_text(text)
    return "mine.toml"


def test_a_sensor_of_ones_own(tmp_path: Path) -> None:
    sensor = load_sensor(sensor_file(tmp_path, GOOD), folder=tmp_path)
    assert sensor.band("1").response.limits == (8.0, 14.0)
    (tmp_path / "curve.csv").write_text("# mine\nwavelength_um,response\n10,0\n11,1\n12,0\n")
    for response, mean in (
        ("{ gaussian = [10.8, 0.6] }", 10.8),
        ("{ table = 'curve.csv' }", 11.0),
        ("{ wavelength = [10, 11, 12], response = [0, 1, 0] }", 11.0),
    ):
        path = sensor_file(tmp_path, GOOD.replace("{ top_hat = [8.0, 14.0] }", response))
        assert load_sensor(path, folder=tmp_path).band("1").response.effective_wavelength == pytest.approx(
            mean
        )


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("title", "titel", r"unknown key 'titel' \(did you mean 'title'\?\)"),
        (
            "top_hat = [8.0, 14.0]",
            "top_hat = [14.0, 8.0]",
            "wavelengths of a spectral response must be positive",
        ),
        (
            "top_hat = [8.0, 14.0]",
            "gaussian = [1.0, 3.0]",
            "wavelengths of a spectral response must be positive",
        ),
        (
            "top_hat = [8.0, 14.0]",
            "wavelength = [8, 9, 10], response = [0, 1]",
            "two pairs of wavelength and response",
        ),
        ("top_hat = [8.0, 14.0]", "", "needs exactly one of .* found none"),
        ("top_hat = [8.0, 14.0]", "top_hat = [8, 14], gaussian = [10, 1]", "found top_hat, gaussian"),
        ("top_hat = [8.0, 14.0]", "wavelength = [8, 9], response = [nan, 1]", "finite number"),
        ('number = "1"', "number = 1", "valid string"),
        ('name = "mine"', 'name = "My Camera"', "name: string should match"),
        ('number = "1"', 'number = "1"\ncalibrated_range = [300.0, 250.0]', "calibrated_range must increase"),
        (
            'number = "1"',
            'number = "1"\nnoise = { temperature_difference = 0.0, source = "x" }',
            "greater than 0",
        ),
        ('number = "1"', 'number = "1"\ncounts = { scale = 0.0, source = "x" }', "scale must not be 0"),
        (
            'number = "1"',
            'number = "1"\ntwo_constants = { k1 = nan, k2 = 1200.0, source = "x" }',
            "finite number",
        ),
        (
            "[[band]]",
            '[[quality_layouts.x]]\nflag = "clowd"\nbits = [1]\n[[band]]',
            "there is no flag of that name",
        ),
    ],
)
def test_bad_sensor_files(old: str, new: str, message: str, tmp_path: Path) -> None:
    assert old in GOOD
    with pytest.raises(ConfigError, match=message) as caught:
        load_sensor(sensor_file(tmp_path, GOOD.replace(old, new, 1)), folder=tmp_path)
    assert "mine.toml" in str(caught.value)


def test_a_band_described_twice(tmp_path: Path) -> None:
    twice = GOOD + '[[band]]\nnumber = "1"\nresponse = { top_hat = [3.0, 5.0] }\n'
    with pytest.raises(ConfigError, match="band '1' is described twice"):
        load_sensor(sensor_file(tmp_path, twice), folder=tmp_path)


@pytest.mark.parametrize("content", [None, "", "10;1\n11;2\n", "10\n11\n", "a,b\n10,x\n"])
def test_bad_response_tables(content: str | None, tmp_path: Path) -> None:
    if content is not None:
        (tmp_path / "curve.csv").write_text(content)
    path = sensor_file(tmp_path, GOOD.replace("top_hat = [8.0, 14.0]", "table = 'curve.csv'"))
    with pytest.raises(
        GroundglowError, match=r"no such spectral response table|one pair of wavelength|two pairs"
    ) as caught:
        load_sensor(path, folder=tmp_path)
    assert isinstance(caught.value, InputError | ConfigError)


def test_a_missing_sensor_file(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"nothing\.toml: there is no such file"):
        load_sensor("nothing.toml", folder=tmp_path)
