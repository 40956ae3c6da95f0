"""Planck's law, its inverse, slope, peak and integrals, against printed and independently computed values."""

from __future__ import annotations

import math

import numpy as np
import pytest
import scipy.integrate
from hypothesis import given, settings
from hypothesis import strategies as st

from groundglow.physics.constants import FIRST_RADIATION_CONSTANT, SECOND_RADIATION_CONSTANT
from groundglow.physics.planck import (
    blackbody_exitance,
    blackbody_fraction,
    peak_frequency,
    peak_wavelength,
    radiance_slope,
    spectral_radiance,
    temperature_of_radiance,
    two_constant_radiance,
    two_constant_temperature,
)

bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)
wavelengths = st.floats(3.0, 15.0)
temperatures = st.floats(180.0, 1300.0)


@pytest.mark.parametrize(
    ("wavelength", "temperature", "expected", "tolerance"),
    [
        # Source: Planck's law with the CODATA constants, evaluated apart from this package.
        (10.0, 300.0, 9.924033, 1e-5),
        (11.0, 300.0, 9.573180, 1e-5),
        (12.0, 300.0, 8.961372, 1e-5),
        (10.0, 288.15, 8.135519, 1e-5),
        (4.0, 1000.0, 3277.664, 0.01),
    ],
)
def test_spectral_radiance(wavelength: float, temperature: float, expected: float, tolerance: float) -> None:
    assert spectral_radiance(wavelength, temperature) == pytest.approx(expected, abs=tolerance)


def test_temperature_of_a_radiance() -> None:
    # Source: the inverse of Planck's law, evaluated apart from this package.
    assert temperature_of_radiance(11.0, 9.5) == pytest.approx(299.4796, abs=1e-3)


def test_slope_of_the_radiance() -> None:
    # Source: derivative of Planck's law, evaluated apart from this package.
    assert radiance_slope(11.0, 300.0) == pytest.approx(0.140929, abs=1e-5)


@bounded
@given(wavelengths, temperatures)
def test_slope_agrees_with_a_central_difference(wavelength: float, temperature: float) -> None:
    step = 0.01
    upper, lower = (spectral_radiance(wavelength, temperature + sign * step) for sign in (1.0, -1.0))
    assert radiance_slope(wavelength, temperature) == pytest.approx(float(upper - lower) / 0.02, rel=1e-6)


@bounded
@given(wavelengths, temperatures)
def test_temperature_to_radiance_and_back_returns_home(wavelength: float, temperature: float) -> None:
    back = temperature_of_radiance(wavelength, spectral_radiance(wavelength, temperature))
    assert abs(float(back) - temperature) < 1e-9


@bounded
@given(wavelengths, temperatures, st.floats(0.001, 50.0))
def test_warmer_always_emits_more(wavelength: float, temperature: float, warming: float) -> None:
    assert spectral_radiance(wavelength, temperature + warming) > spectral_radiance(wavelength, temperature)


def test_no_value_stays_no_value() -> None:
    nothing = np.array([np.nan, 300.0])
    for result in (
        spectral_radiance(11.0, nothing),
        radiance_slope(11.0, nothing),
        temperature_of_radiance(11.0, nothing),
        two_constant_temperature(nothing, 774.8853, 1321.0789),
        two_constant_radiance(nothing, 774.8853, 1321.0789),
        blackbody_exitance(nothing),
        blackbody_fraction(10.0 * nothing),
        peak_wavelength(nothing),
    ):
        assert np.isnan(result[0])
        assert np.isfinite(result[1])


@pytest.mark.parametrize("radiance", [0.0, -1.0, np.nan])
def test_a_radiance_that_no_blackbody_has_gives_no_temperature(radiance: float) -> None:
    assert np.isnan(temperature_of_radiance(11.0, radiance))
    assert np.isnan(two_constant_temperature(radiance, 774.8853, 1321.0789))


def test_wien_peaks_at_300_kelvin() -> None:
    # Source: CODATA displacement constants over 300 K.
    assert peak_wavelength(300.0) == pytest.approx(9.65924, abs=1e-5)
    assert peak_frequency(300.0) == pytest.approx(1.763678e13, abs=1e8)


def test_the_peak_is_where_the_curve_is_highest() -> None:
    around = np.linspace(9.6, 9.72, 1201)
    found = around[np.argmax(spectral_radiance(around, 300.0))]
    assert found == pytest.approx(float(peak_wavelength(300.0)), abs=1e-4)


def test_peaks_per_wavelength_and_per_frequency_differ() -> None:
    # Source: common practice; the product of the two peaks is 0.5683 c, not c.
    assert peak_wavelength(300.0) * 1e-6 * peak_frequency(300.0) / 299792458.0 == pytest.approx(
        0.56825, abs=1e-4
    )


def test_the_sun_is_a_blackbody_of_5778_kelvin_that_peaks_in_green_light() -> None:
    # Source: common practice: total irradiance 1361 W m-2 at 149.6e9 m from a disc of radius 695.7e6 m
    # (IAU 2015 Resolution B3 nominal values) means an effective temperature of 5,772-5,778 K, peaking near
    # 0.5015 um.
    exitance_at_the_disc = 1361.0 * (149.597870700e9 / 695.7e6) ** 2
    assert blackbody_exitance(5778.0) == pytest.approx(exitance_at_the_disc, rel=0.005)
    assert peak_wavelength(5778.0) == pytest.approx(0.5015, abs=1e-4)


def test_stefan_boltzmann() -> None:
    # Source: sigma T^4 with the CODATA constant; 288.15 K is the US Standard Atmosphere's sea level.
    assert blackbody_exitance(288.15) == pytest.approx(390.9185, abs=1e-3)
    assert blackbody_exitance(300.0) == pytest.approx(459.3003, abs=1e-3)


def test_a_surface_at_288_15_kelvin_emits_390_9_watts() -> None:
    # Source: common practice, the round number quoted for the Earth's mean surface temperature of 15 degC.
    assert round(float(blackbody_exitance(288.15)), 1) == 390.9


def test_a_steady_230_watts_balance_a_blackbody_near_minus_21_celsius() -> None:
    # Source: common practice, radiative balance of a planet that absorbs 230 W m-2: 252-253 K.
    assert 252.0 < (230.0 / blackbody_exitance(1.0)) ** 0.25 < 253.0


def test_the_global_mean_balance() -> None:
    # Source: Kopp and Lean (2011), GRL 38:L01706 (1360.8 W m-2), planetary albedo 0.294: 240.18 W m-2
    # absorbed, the well-known effective temperature of 255 K.
    absorbed = 1360.8 / 4.0 * (1.0 - 0.294)
    assert absorbed == pytest.approx(240.18, abs=0.01)
    assert (absorbed / blackbody_exitance(1.0)) ** 0.25 == pytest.approx(255.1, abs=0.1)


@pytest.mark.parametrize("temperature", [200.0, 300.0, 1000.0, 5778.0])
def test_planck_integrates_to_stefan_boltzmann(temperature: float) -> None:
    # In the variable x = c2 / (wavelength T) the tails are harmless.
    def integrand(x: float) -> float:
        wavelength = SECOND_RADIATION_CONSTANT / (x * temperature)
        return float(spectral_radiance(wavelength, temperature)) * wavelength / x

    radiance, _ = scipy.integrate.quad(integrand, 1e-6, 200.0, epsabs=0.0, epsrel=1e-10, limit=200)
    assert math.pi * radiance == pytest.approx(float(blackbody_exitance(temperature)), rel=1e-6)


def test_radiance_between_10_and_12_micrometres() -> None:
    # Source: integral of Planck's law, evaluated apart from this package: 19.05996 W m-2 sr-1.
    radiance, _ = scipy.integrate.quad(
        lambda wavelength: float(spectral_radiance(wavelength, 300.0)), 10.0, 12.0
    )
    assert radiance == pytest.approx(19.05996, abs=1e-4)


@pytest.mark.parametrize(
    ("product", "handbook", "exact"),
    [
        # Source: Incropera and DeWitt, Fundamentals of Heat and Mass Transfer, table of blackbody radiation
        # functions (from memory; its last digits reflect older constants), beside the exact values.
        (1000.0, 0.000321, 0.000321),
        (2000.0, 0.066728, 0.066730),
        (2898.0, 0.250108, 0.250106),
        (3000.0, 0.273232, 0.273229),
        (4000.0, 0.480877, 0.480865),
        (5000.0, 0.633747, 0.633726),
        (6000.0, 0.737818, 0.737789),
        (8000.0, 0.856288, 0.856251),
        (10000.0, 0.914199, 0.914157),
        (20000.0, 0.985602, 0.985554),
        (50000.0, 0.998953, 0.998904),
    ],
)
def test_blackbody_fraction(product: float, handbook: float, exact: float) -> None:
    assert blackbody_fraction(product) == pytest.approx(handbook, abs=6e-5)
    assert blackbody_fraction(product) == pytest.approx(exact, abs=6e-7)


def test_half_of_the_energy_lies_below_4107_micrometre_kelvin() -> None:
    # Source: median of Planck's law, x = 3.503018826 (computed apart from this package).
    assert blackbody_fraction(4107.25) == pytest.approx(0.5, abs=1e-6)


def test_the_thermal_window_holds_about_a_quarter_to_three_eighths_of_the_flux() -> None:
    # Source: blackbody fractions at 300 K, computed apart from this package: 26.3 % in 8-12 um, 37.6 % in
    # 8-14 um.
    below_8, below_12, below_14 = blackbody_fraction(300.0 * np.array([8.0, 12.0, 14.0]))
    assert below_12 - below_8 == pytest.approx(0.263, abs=5e-4)
    assert below_14 - below_8 == pytest.approx(0.376, abs=5e-4)


@pytest.mark.parametrize("product", [1e5, 1e6, 1e8])
def test_all_of_the_energy_lies_below_very_long_wavelengths(product: float) -> None:
    assert blackbody_fraction(product) == pytest.approx(1.0, abs=2e-4)
    assert blackbody_fraction(product) <= 1.0 + 1e-9


@bounded
@given(st.floats(500.0, 6e4), st.floats(1.001, 1.5))
def test_the_fraction_agrees_with_an_independent_integral_and_grows(product: float, factor: float) -> None:
    def integrand(x: float) -> float:
        return 15.0 / math.pi**4 * x**3 * math.exp(-x) / -math.expm1(-x)

    expected, _ = scipy.integrate.quad(integrand, SECOND_RADIATION_CONSTANT / product, 100.0, epsabs=1e-12)
    assert blackbody_fraction(product) == pytest.approx(expected, abs=1e-9)
    assert blackbody_fraction(product * factor) > blackbody_fraction(product)


@pytest.mark.parametrize(
    ("k1", "k2", "radiance", "expected"),
    [
        # Source of the constants: Chander et al. (2009), RSE 113:893-903 (TM and ETM+; the TM rows from
        # memory); the agency's scene metadata (TIRS). Expected values: K2 / ln(K1 / L + 1).
        (671.62, 1284.30, 9.0, 296.8945),
        (607.76, 1260.56, 9.0, 298.1982),
        (666.09, 1282.71, 9.0, 297.0872),
        (480.8883, 1201.1442, 9.0, 300.5150),
        (475.6581, 1198.3494, 9.0, 300.6231),
        (774.8853, 1321.0789, 8.4550, 291.7056),
        (799.0284, 1329.2405, 9.6, 299.8122),
    ],
)
def test_two_constant_temperature(k1: float, k2: float, radiance: float, expected: float) -> None:
    assert two_constant_temperature(radiance, k1, k2) == pytest.approx(expected, abs=1e-3)


@pytest.mark.parametrize(
    ("counts", "scale", "offset", "expected"),
    [
        # Source: rescaling of the published level-1 metadata, L = scale DN + offset; the last row is the
        # RADIANCE_MAXIMUM_BAND_10 of scene LC09_L1TP_029030_20240616.
        (25000, 3.342e-4, 0.1, 8.4550),
        (25000, 3.8e-4, 0.1, 9.6000),
        (65535, 3.8e-4, 0.1, 25.0033),
    ],
)
def test_counts_to_radiance_has_the_agencys_worked_values(
    counts: int, scale: float, offset: float, expected: float
) -> None:
    assert scale * counts + offset == pytest.approx(expected, abs=1e-4)


@bounded
@given(st.floats(400.0, 4000.0), st.floats(1100.0, 1800.0), temperatures)
def test_two_constant_form_returns_home(k1: float, k2: float, temperature: float) -> None:
    back = two_constant_temperature(two_constant_radiance(temperature, k1, k2), k1, k2)
    assert abs(float(back) - temperature) < 1e-9


@bounded
@given(wavelengths, temperatures)
def test_at_one_wavelength_the_two_constant_form_is_plancks_law(
    wavelength: float, temperature: float
) -> None:
    k1 = FIRST_RADIATION_CONSTANT / wavelength**5
    k2 = SECOND_RADIATION_CONSTANT / wavelength
    assert two_constant_radiance(temperature, k1, k2) == pytest.approx(
        float(spectral_radiance(wavelength, temperature)), rel=1e-12
    )


@pytest.mark.parametrize(
    ("k1", "k2", "wavelength"),
    [
        # Source: the constants in use for ASTER's bands are Planck's law at one wavelength (from memory).
        (3040.136, 1735.338, 8.291),
        (2482.375, 1666.399, 8.634),
        (1935.060, 1585.420, 9.075),
        (866.4686, 1350.069, 10.657),
        (641.3265, 1271.222, 11.318),
    ],
)
def test_constants_in_use_for_aster_are_plancks_law_at_one_wavelength(
    k1: float, k2: float, wavelength: float
) -> None:
    assert (FIRST_RADIATION_CONSTANT / k1) ** 0.2 == pytest.approx(wavelength, abs=6e-4)
    assert SECOND_RADIATION_CONSTANT / k2 == pytest.approx(wavelength, abs=6e-4)


@pytest.mark.parametrize(
    ("k1", "k2", "unit_conversion", "radiance", "temperature"),
    [
        # Source: ASTER User Handbook v2 (Abrams et al. 2002): L = (DN - 1) UCC, bands 13 and 10, DN 2000
        # (from memory), with the constants in use above.
        (866.4686, 1350.069, 0.005693, 11.38031, 310.676),
        (3040.136, 1735.338, 0.006822, 13.63718, 320.686),
    ],
)
def test_aster_counts_to_temperature(
    k1: float, k2: float, unit_conversion: float, radiance: float, temperature: float
) -> None:
    found = (2000 - 1) * unit_conversion
    assert found == pytest.approx(radiance, abs=1e-5)
    assert two_constant_temperature(found, k1, k2) == pytest.approx(temperature, abs=0.01)
