"""Soundings of thousands of levels."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.completion import completed
from groundglow.atmosphere.condensation import MOST_LEVELS, condensed
from groundglow.atmosphere.model_atmospheres import model_atmosphere
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.radiative_transfer import column, hemispheric_sky, look_down, spectrum

SUMMER = model_atmosphere("midlatitude_summer")


def every_second(noise: float) -> Profile:
    """A balloon that climbs 5 m a second, with an inversion and a noisy thermometer."""
    random = np.random.default_rng(8)
    height = np.arange(0.0, 15000.0, 5.0)
    air = SUMMER.at(height)
    inversion = 3.0 * np.exp(-(((height - 900.0) / 150.0) ** 2))
    temperature = air.temperature + inversion + random.normal(0.0, noise, height.size)
    water = air.water_vapour * np.exp(random.normal(0.0, noise / 5.0, height.size))
    return completed(Profile(height, air.pressure, temperature, {"water_vapour": water}), SUMMER)


def test_short_profiles_are_left_as_they_are() -> None:
    assert condensed(SUMMER) is SUMMER


@pytest.mark.parametrize("noise", [0.0, 0.1])
def test_condensed_air_looks_the_same(noise: float) -> None:
    whole = every_second(noise)
    short = condensed(whole)
    assert short.height.size <= MOST_LEVELS < whole.height.size
    assert (short.height[0], short.height[-1]) == (whole.height[0], whole.height[-1])
    assert "levels condensed to" in short.notes[-1]
    assert short.column_water_vapour == pytest.approx(whole.column_water_vapour, rel=0.004)
    window = spectrum(np.arange(170, 190), "updated")
    seen = [look_down(column(p, window, 0.0), np.ones(1)) for p in (whole, short)]
    sky = [hemispheric_sky(column(p, window, 0.0)).radiance for p in (whole, short)]
    # 0.001 in transmittance is about 0.02 K for a surface 10 K warmer than the air.
    np.testing.assert_allclose(seen[1][0], seen[0][0], atol=1e-3)
    np.testing.assert_allclose(seen[1][1], seen[0][1], rtol=3e-3)
    np.testing.assert_allclose(sky[1], sky[0], rtol=3e-3)
