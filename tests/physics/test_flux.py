"""Emitted, leaving and net longwave flux."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from groundglow.physics.flux import emitted_flux, leaving_flux, net_longwave_flux

bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)


def test_worked_example() -> None:
    # Source: eps sigma T^4 and its balance with 350 W m-2 from the sky, computed apart from this package.
    assert emitted_flux(0.97, 300.0) == pytest.approx(445.521, abs=1e-3)
    assert leaving_flux(0.97, 300.0, 350.0) == pytest.approx(456.021, abs=1e-3)
    assert net_longwave_flux(0.97, 300.0, 350.0) == pytest.approx(-106.021, abs=1e-3)


def test_flux_changes_by_about_6_watts_a_kelvin_at_300_kelvin() -> None:
    # Source: derivative of Stefan-Boltzmann's law, 4 sigma T^3 = 6.12 W m-2 K-1 at 300 K (common practice).
    assert emitted_flux(1.0, 300.5) - emitted_flux(1.0, 299.5) == pytest.approx(6.12, abs=0.005)


@bounded
@given(st.floats(0.05, 1.0), st.floats(180.0, 1300.0), st.floats(0.0, 600.0))
def test_net_flux_is_the_emissivity_times_the_blackbody_balance(
    emissivity: float, temperature: float, sky: float
) -> None:
    # Kirchhoff's law: a grey surface exchanges eps (sky - sigma T^4).
    balance = emissivity * (sky - float(emitted_flux(1.0, temperature)))
    assert net_longwave_flux(emissivity, temperature, sky) == pytest.approx(balance, rel=1e-9, abs=1e-7)


def test_under_a_sky_as_warm_as_the_ground_nothing_is_exchanged() -> None:
    sky = float(emitted_flux(1.0, 290.0))
    assert net_longwave_flux(0.6, 290.0, sky) == pytest.approx(0.0, abs=1e-9)


def test_no_value_stays_no_value() -> None:
    temperature = np.array([300.0, np.nan, 300.0, 300.0])
    emissivity = np.array([0.97, 0.97, np.nan, 0.97])
    sky = np.array([350.0, 350.0, 350.0, np.nan])
    assert np.isnan(emitted_flux(emissivity, temperature)).tolist() == [False, True, True, False]
    assert np.isnan(leaving_flux(emissivity, temperature, sky)).tolist() == [False, True, True, True]
    assert np.isnan(net_longwave_flux(emissivity, temperature, sky)).tolist() == [False, True, True, True]
