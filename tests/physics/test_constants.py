"""Constants against CODATA as SciPy carries it, and against each other."""

from __future__ import annotations

import math

import pytest
import scipy.constants

from groundglow.physics import constants


@pytest.mark.parametrize(
    ("ours", "codata_name", "scale"),
    [
        (constants.PLANCK, "Planck constant", 1.0),
        (constants.LIGHT_SPEED, "speed of light in vacuum", 1.0),
        (constants.BOLTZMANN, "Boltzmann constant", 1.0),
        (constants.FIRST_RADIATION_CONSTANT, "first radiation constant for spectral radiance", 1e24),
        (constants.SECOND_RADIATION_CONSTANT, "second radiation constant", 1e6),
        (constants.STEFAN_BOLTZMANN, "Stefan-Boltzmann constant", 1.0),
        (constants.WIEN_WAVELENGTH, "Wien wavelength displacement law constant", 1e6),
        (constants.WIEN_FREQUENCY, "Wien frequency displacement law constant", 1.0),
    ],
)
def test_radiation_constants_are_those_of_codata(ours: float, codata_name: str, scale: float) -> None:
    # Source: CODATA recommended values as distributed with SciPy. The derived ones are printed there with
    # ten digits, hence the tolerance.
    assert ours == pytest.approx(scipy.constants.value(codata_name) * scale, rel=1e-9)


def test_radiation_constants_have_the_printed_digits() -> None:
    # Source: CODATA 2018 and 2022 tables (c2, sigma and b are exact in the SI of 2019, printed truncated).
    assert pytest.approx(14387.76877, abs=1e-5) == constants.SECOND_RADIATION_CONSTANT
    assert pytest.approx(5.670374419e-8, abs=1e-17) == constants.STEFAN_BOLTZMANN
    assert pytest.approx(2897.771955, abs=1e-6) == constants.WIEN_WAVELENGTH
    assert pytest.approx(5.878925757e10, abs=10.0) == constants.WIEN_FREQUENCY


def test_first_radiation_constant_for_radiance_is_that_for_exitance_over_pi() -> None:
    # Source: CODATA, c1 = 3.741771852e-16 W m2 (hemisphere) and c1L = c1 / pi (per steradian).
    assert math.pi * constants.FIRST_RADIATION_CONSTANT * 1e-24 == pytest.approx(3.741771852e-16, rel=1e-9)


def test_the_ice_point_is_the_one_that_defines_degrees_celsius() -> None:
    # Source: BIPM, SI Brochure, 9th edition, section 2.3.1.
    assert scipy.constants.zero_Celsius == constants.ZERO_CELSIUS
    assert scipy.constants.g == constants.STANDARD_GRAVITY
