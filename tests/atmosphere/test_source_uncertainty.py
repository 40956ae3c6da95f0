"""Stated uncertainties of sources and of the absorption model."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.absorption_uncertainty import (
    change_of_emission,
    change_of_transmittance,
    relative_depth_uncertainty,
    transmittance_uncertainty,
)
from groundglow.atmosphere.source_uncertainty import (
    DEFAULT_UNCERTAINTY,
    SourceUncertainty,
    source_uncertainty,
)
from groundglow.errors import DomainError


def test_defaults_are_the_planning_values() -> None:
    # Planning values of the project: sounding 5 % and 0.5 K, analysis 10 % and 1 K, surface weather
    # 20 % and 2 K, climatology 30 % and 4 K.
    found = {name: (u.water_vapour, u.air_temperature) for name, u in DEFAULT_UNCERTAINTY.items()}
    assert found == {
        "sounding": (0.05, 0.5),
        "analysis": (0.10, 1.0),
        "surface_weather": (0.20, 2.0),
        "climatology": (0.30, 4.0),
    }


def test_a_sounding_grows_old_but_never_worse_than_climatology() -> None:
    fresh, old = source_uncertainty("sounding"), source_uncertainty("sounding", hours=6.0, kilometres=100.0)
    assert fresh == SourceUncertainty(0.05, 0.5)
    assert old.water_vapour == pytest.approx(np.sqrt(0.05**2 + 6 * 0.02**2 + 100 * 0.01**2))
    assert old.air_temperature == pytest.approx(np.sqrt(0.25 + 1.5 + 1.0))
    ancient = source_uncertainty("sounding", hours=500.0)
    assert ancient == DEFAULT_UNCERTAINTY["climatology"]
    assert source_uncertainty("analysis", hours=6.0) == DEFAULT_UNCERTAINTY["analysis"]


def test_bad_uncertainties_are_refused() -> None:
    with pytest.raises(DomainError, match=r"5 % is 0\.05"):
        SourceUncertainty(5.0, 0.5)
    with pytest.raises(DomainError, match="0 to 20 K"):
        SourceUncertainty(0.05, -1.0)
    with pytest.raises(DomainError, match="Choose one of"):
        source_uncertainty("guess")
    with pytest.raises(DomainError, match="negative"):
        source_uncertainty("sounding", hours=-1.0)


@pytest.mark.parametrize(
    ("wavelength", "water", "expected"),
    # The residual table of the updated absorption set, by band and column.
    [(10.9, 2.5, 0.005), (10.9, 10.0, 0.009), (10.9, 22.0, 0.016), (10.9, 60.0, 0.027), (12.0, 10.0, 0.011),
     (8.3, 1.0, 0.018), (9.1, 22.0, 0.011), (13.0, 22.0, 0.015)],
)  # fmt: skip
def test_residual_table(wavelength: float, water: float, expected: float) -> None:
    assert transmittance_uncertainty("updated", wavelength, water) == pytest.approx(expected)


def test_the_older_set_is_never_better() -> None:
    water = np.linspace(0.0, 60.0, 13)
    for wavelength in (8.3, 9.1, 10.9, 12.0, 13.0):
        newer = transmittance_uncertainty("updated", wavelength, water)
        assert (transmittance_uncertainty("lowtran7", wavelength, water) >= newer).all()
    with pytest.raises(DomainError):
        transmittance_uncertainty("guess", 11.0, 10.0)


def test_an_error_of_the_depth_returns_as_the_stated_error_of_transmittance() -> None:
    t = np.array([0.3, 0.6, 0.9])
    depth = relative_depth_uncertainty(t, 0.01)
    np.testing.assert_allclose(change_of_transmittance(t, depth), -0.01, rtol=1e-9)


def test_more_opaque_air_emits_at_its_own_temperature() -> None:
    # Isothermal air: radiance (1 - t) B, so its change is minus the transmittance's times B.
    assert change_of_emission(np.array(0.4 * 9.0), np.array(0.6), np.array(-0.02)) == pytest.approx(
        0.02 * 9.0
    )


def test_clear_air_has_nothing_to_be_wrong_about() -> None:
    assert relative_depth_uncertainty(1.0, 0.01) == pytest.approx(1.0)
    assert change_of_transmittance(np.array(1.0), np.array(1.0)) == 0.0
