"""A sensor in numbers and as a drawing."""

from __future__ import annotations

from pathlib import Path

import pytest

from groundglow.physics.spectral_response import top_hat
from groundglow.scene.sensor import load_sensor, sensor_names
from groundglow.scene.sensor_report import fit_two_constants, plot_sensor, report_of_sensor


def test_a_narrow_band_has_the_constants_of_its_wavelength() -> None:
    # K1 = c1 / wavelength^5 and K2 = c2 / wavelength for one wavelength (CODATA c1, c2).
    k1, k2 = fit_two_constants(top_hat(10.999, 11.001))
    assert k1 == pytest.approx(1.191042972e8 / 11.0**5, rel=1e-5)
    assert k2 == pytest.approx(14387.76877 / 11.0, rel=1e-6)


@pytest.mark.parametrize("name", sensor_names())
def test_every_shipped_sensor_can_be_fitted(name: str) -> None:
    for band in report_of_sensor(load_sensor(name)):
        assert band.fit_error < (0.32 if name == "microbolometer-camera" else 0.03)
        assert band.limits[0] < band.effective_wavelength < band.limits[1]
        assert band.noise_radiance is not None
        assert band.noise_radiance > 0.0


def test_the_difference_to_published_constants() -> None:
    report = report_of_sensor(load_sensor("landsat-9"))[0]
    assert report.published_difference is not None
    assert report.published_difference == pytest.approx((0.107, 0.138), abs=0.002)
    assert report_of_sensor(load_sensor("microbolometer-camera"))[0].published_difference is None


@pytest.mark.parametrize("suffix", ["png", "svg"])
def test_a_drawing(suffix: str, tmp_path: Path) -> None:
    path = tmp_path / f"aster.{suffix}"
    plot_sensor(load_sensor("aster"), path)
    start = path.read_bytes()[:200]
    assert start.startswith(b"\x89PNG") if suffix == "png" else b"<svg" in path.read_bytes()
