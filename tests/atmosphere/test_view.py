"""Secants and angles at the sensor."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.view import secant, sine_ratio, surface_zenith_angle
from groundglow.errors import DomainError


def test_secant_agrees_with_the_library_cosine() -> None:
    angle = np.linspace(-80.0, 80.0, 4001, dtype=np.float32).reshape(1, -1)
    expected = 1.0 / np.cos(np.radians(angle.astype(np.float64)))
    np.testing.assert_allclose(secant(angle)[0], expected[0], rtol=1e-6)


def test_secant_is_unknown_beyond_80_degrees_and_for_unknown_angles() -> None:
    angle = np.array([[80.5, 90.0, 100.0, 260.0, np.nan, 0.0]], dtype=np.float32)
    found = secant(angle)[0]
    assert np.isnan(found[:5]).all()
    assert found[5] == 1.0


def test_off_nadir_angle_grows_to_the_surface() -> None:
    # From 705 km a swath edge 55 deg off nadir is seen at 65.4 deg: sin z = (R + H)/R sin(off nadir),
    # textbook spherical geometry with R = 6371 km; here with R = 6356.766 km.
    expected = np.degrees(np.arcsin((6356766.0 + 705e3) / 6356766.0 * np.sin(np.radians(55.0))))
    found = surface_zenith_angle(55.0, 705e3)
    assert found == pytest.approx(expected, abs=1e-9)
    assert found == pytest.approx(65.4, abs=0.2)
    from_kernel = secant(np.full((1, 1), 55.0, dtype=np.float32), sine_ratio(705e3))
    assert from_kernel[0, 0] == pytest.approx(1.0 / np.cos(np.radians(expected)), rel=1e-6)


def test_line_of_sight_past_the_earth_is_unknown() -> None:
    assert np.isnan(surface_zenith_angle(70.0, 705e3))
    assert np.isnan(secant(np.full((1, 1), 70.0, dtype=np.float32), sine_ratio(705e3))[0, 0])


def test_sensor_below_the_ground_is_refused() -> None:
    with pytest.raises(DomainError, match="not above the ground"):
        sine_ratio(100.0, 200.0)
