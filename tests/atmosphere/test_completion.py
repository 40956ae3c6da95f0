"""Completing tops and gases, and blending profiles."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.completion import blended, completed
from groundglow.atmosphere.composition import CLIMATOLOGICAL_GASES
from groundglow.atmosphere.model_atmospheres import model_atmosphere
from groundglow.atmosphere.profile import Profile, saturation_ppmv
from groundglow.errors import DomainError

SUMMER = model_atmosphere("midlatitude_summer")


def lower_part(top: float, *, warmer: float = 3.0, moister: float = 1.2) -> Profile:
    kept = SUMMER.height <= top
    return Profile(
        SUMMER.height[kept],
        SUMMER.pressure[kept] * 1.005,
        SUMMER.temperature[kept] + warmer,
        {"water_vapour": SUMMER.water_vapour[kept] * moister},
        ("sounding",),
    )


def test_the_measured_part_is_kept_and_the_rest_is_added() -> None:
    measured = lower_part(9000.0)
    whole = completed(measured, SUMMER)
    np.testing.assert_array_equal(whole.temperature[:10], measured.temperature)
    assert whole.height[-1] == SUMMER.height[-1]
    assert set(whole.gases) == set(CLIMATOLOGICAL_GASES)
    assert any("completed above 9.0 km" in note for note in whole.notes)
    assert any("carbon dioxide" in note for note in whole.notes)


def test_the_joint_is_smooth() -> None:
    whole = completed(lower_part(9000.0), SUMMER)
    difference = np.interp(whole.height, SUMMER.height, SUMMER.temperature)
    offset = (whole.temperature - difference)[9:]
    # Starts at the 3 K of the measured part and fades to nothing over 5 km.
    assert offset[0] == pytest.approx(3.0)
    assert (np.diff(offset) <= 1e-9).all()
    np.testing.assert_allclose(offset[whole.height[9:] > 14000.0], 0.0, atol=1e-9)
    assert (np.diff(whole.pressure) < 0.0).all()
    added = whole.water_vapour[10:]
    limit = saturation_ppmv(whole.pressure[10:], whole.temperature[10:])
    assert (added <= np.maximum(limit, SUMMER.water_vapour[10:]) * (1.0 + 1e-9)).all()


def test_a_mast_can_be_completed() -> None:
    mast = Profile(
        np.array([0.0, 60.0, 120.0]),
        np.array([1013.0, 1006.0, 999.0]),
        np.array([290.0, 291.0, 291.5]),
        {"water_vapour": np.array([14e3, 13.8e3, 13.5e3])},
    )
    whole = completed(mast, SUMMER)
    assert whole.height[3] == 1000.0
    assert whole.height[-1] == 100e3


def test_a_whole_profile_is_left_as_it_is() -> None:
    whole = completed(SUMMER, SUMMER)
    np.testing.assert_array_equal(whole.temperature, SUMMER.temperature)
    assert whole.notes == SUMMER.notes


def test_measured_ozone_is_kept() -> None:
    measured = lower_part(9000.0)
    gases = {**measured.gases, "ozone": np.full(measured.height.size, 0.2)}
    whole = completed(Profile(measured.height, measured.pressure, measured.temperature, gases), SUMMER)
    assert (whole.gases["ozone"][:10] == 0.2).all()
    assert whole.gases["ozone"][-3] == pytest.approx(SUMMER.gases["ozone"][-3])


def test_blending_lies_between() -> None:
    winter = model_atmosphere("midlatitude_winter")
    mixed = blended([SUMMER, winter], [3.0, 1.0])
    np.testing.assert_allclose(mixed.temperature, 0.75 * SUMMER.temperature + 0.25 * winter.temperature)
    expected = SUMMER.water_vapour**0.75 * winter.water_vapour**0.25
    np.testing.assert_allclose(mixed.water_vapour, expected, rtol=1e-9)
    assert blended([SUMMER, winter], [1.0, 0.0]) is SUMMER


def test_blending_profiles_of_different_levels() -> None:
    mixed = blended([lower_part(9000.0), lower_part(6000.0, warmer=1.0)], [0.5, 0.5])
    assert mixed.height[-1] == 6000.0
    np.testing.assert_allclose(mixed.temperature, SUMMER.temperature[:7] + 2.0)


def test_blending_refuses_bad_weights() -> None:
    with pytest.raises(DomainError, match="2 profiles cannot be blended with 1"):
        blended([SUMMER, SUMMER], [1.0])
    with pytest.raises(DomainError, match="must not be negative"):
        blended([SUMMER, SUMMER], [1.0, -0.5])
