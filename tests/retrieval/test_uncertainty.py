"""Propagation of uncertainty: worked values, groups, the flux's covariance, footprints."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from groundglow.errors import DomainError
from groundglow.physics.constants import STEFAN_BOLTZMANN
from groundglow.physics.planck import two_constant_radiance, two_constant_temperature
from groundglow.retrieval.single_channel import Inversion, invert, narrow_air, radiance_at_sensor
from groundglow.retrieval.uncertainty import (
    AirChange,
    Causes,
    TemperatureUncertainty,
    independent_footprints,
    noise_of_radiance,
    propagate,
    propagate_flux,
)

Float = NDArray[np.float64]
bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)

K1, K2 = 774.8853, 1321.0789  # Landsat 8 band 10, the agency's scene metadata
EMISSIVITY, TRANSMITTANCE, PATH, SKY, TRUTH = 0.97, 0.80, 1.6, 2.6, 305.0
AIR = narrow_air(TRANSMITTANCE, PATH, SKY)


def exact(radiance: Float) -> tuple[Float, Float]:
    """Temperature and dT/dB by the two-constant form."""
    temperature = two_constant_temperature(radiance, K1, K2)
    return temperature, temperature**2 / (K2 * radiance * (1.0 + radiance / K1))


def worked() -> Inversion:
    radiance = radiance_at_sensor(two_constant_radiance(TRUTH, K1, K2), EMISSIVITY, AIR, TRUTH)
    return invert(radiance, EMISSIVITY, AIR, exact)


def change(*, transmittance: float = 0.0, path: float = 0.0, sky: float = 0.0) -> AirChange:
    """A cause that moves the textbook's three numbers, to first order."""
    reflected = TRANSMITTANCE * sky + SKY * transmittance
    return AirChange(np.array(transmittance), np.array(path), np.array(reflected))


def test_independent_causes_of_the_worked_example() -> None:
    # Source: GUM (JCGM 100:2008) equation 10 with u = 0.05 (radiance), 0.01 (emissivity), 0.02
    # (transmittance), 0.1 (path radiance), 0.2 (sky radiance), computed apart from this package: 2.0723 K.
    causes = Causes(0.05, 0.0, 0.01, (change(transmittance=0.02), change(path=0.1), change(sky=0.2)))
    parts = propagate(worked(), EMISSIVITY, AIR, causes)
    assert parts.total == pytest.approx(2.0723, abs=1e-3)
    # The parts, from the sensitivities of the same example.
    assert parts.pixel == pytest.approx(8.67323 * 0.05, rel=1e-4)
    assert parts.surface_class == pytest.approx(-53.5989 * 0.01, rel=1e-4)
    scene = np.sqrt((87.5390 * 0.02) ** 2 + (8.67323 * 0.1) ** 2 + (0.208157 * 0.2) ** 2)
    assert parts.scene == pytest.approx(scene, rel=1e-4)


def test_correlated_air_is_the_matrix_form_of_the_gum() -> None:
    # Source: GUM equation 13: the causes are columns of a factor of the covariance, so their squares add up
    # to the quadratic form of the sensitivities.
    correlation = np.array([[1.0, -0.9, -0.9], [-0.9, 1.0, 0.9], [-0.9, 0.9, 1.0]])
    spread = np.array([0.02, 0.1, 0.2])
    factor = np.linalg.cholesky(correlation) * spread[:, np.newaxis]
    causes = Causes(0.0, 0.0, 0.0, [change(transmittance=a, path=b, sky=c) for a, b, c in factor.T])
    parts = propagate(worked(), EMISSIVITY, AIR, causes)
    slopes = np.array([-87.5390, -8.67323, -0.208157])
    expected = np.sqrt(slopes @ (correlation * np.outer(spread, spread)) @ slopes)
    assert parts.scene == pytest.approx(expected, rel=1e-4)
    # A clearer air that also emits less: the two errors largely cancel.
    assert parts.scene < 0.7 * np.sqrt(((slopes * spread) ** 2).sum())


def test_calibration_is_a_scene_error_and_noise_a_pixel_error() -> None:
    parts = propagate(worked(), EMISSIVITY, AIR, Causes(0.01, 0.03, 0.0))
    assert parts.pixel == pytest.approx(8.67323 * 0.01, rel=1e-4)
    assert parts.scene == pytest.approx(8.67323 * 0.03, rel=1e-4)
    assert parts.surface_class == pytest.approx(0.0, abs=0.0)
    assert parts.total == pytest.approx(8.67323 * np.hypot(0.01, 0.03), rel=1e-4)


def test_noise_of_radiance() -> None:
    # Source: worked by hand: 0.1 K at 0.14 W m-2 sr-1 um-1 K-1 is 0.014; an eight-bit step of 0.055 adds
    # 0.055 / sqrt(12) = 0.015877 in quadrature (GUM F.2.2.1): 0.021168.
    assert noise_of_radiance(0.1, 0.14) == pytest.approx(0.014)
    assert noise_of_radiance(0.1, 0.14, quantisation_step=0.055) == pytest.approx(0.021168, abs=1e-6)
    for wrong in ((-0.1, 0.14, 0.0), (0.1, np.nan, 0.0), (0.1, 0.14, np.inf)):
        with pytest.raises(DomainError, match="at least 0"):
            noise_of_radiance(wrong[0], wrong[1], quantisation_step=wrong[2])


def test_the_same_noise_is_worth_more_kelvin_over_cold_ground() -> None:
    truth = np.array([250.0, 300.0, 350.0])
    air = narrow_air(*(np.full(3, value) for value in (0.8, 1.0, 1.5)))
    radiance = radiance_at_sensor(two_constant_radiance(truth, K1, K2), 0.97, air, truth)
    parts = propagate(invert(radiance, 0.97, air, exact), 0.97, air, Causes(0.01, 0.0, 0.0))
    assert (np.diff(parts.pixel) < 0.0).all()


def test_no_value_stays_no_value() -> None:
    air = narrow_air(np.array([0.8, 0.8]), np.array([1.6, 1.6]), np.array([2.6, 2.6]))
    result = invert(np.array([np.nan, 9.67]), EMISSIVITY, air, exact)
    parts = propagate(result, EMISSIVITY, air, Causes(0.01, 0.03, 0.01, (change(path=0.1),)))
    flux = propagate_flux(result.temperature, parts, 0.95, shared=0.01, own=0.02)
    for values in (
        parts.pixel,
        parts.surface_class,
        parts.scene,
        parts.total,
        flux.total,
        flux.surface_class,
    ):
        assert np.isnan(values).tolist() == [True, False]


def test_flux_at_300_kelvin_by_hand() -> None:
    # Source: GUM equation 13 by hand at 300 K with a broadband emissivity of 0.95: sigma T^4 = 459.3003 W
    # m-2, 4 eps sigma T^3 = 5.81780 W m-2 K-1.
    parts = TemperatureUncertainty(np.array(0.1), np.array(-0.5), np.array(0.4))
    found = propagate_flux(300.0, parts, 0.95, shared=0.008, own=0.02)
    assert found.pixel == pytest.approx(0.581780, abs=1e-5)
    assert found.scene == pytest.approx(2.32712, abs=1e-5)
    # -0.5 K x 5.81780 + 0.008 x 459.3003: the band's error works both ways.
    assert found.surface_class == pytest.approx(0.765502, abs=1e-5)
    assert found.broadband_rule == pytest.approx(9.186006, abs=1e-5)
    assert found.total == pytest.approx(
        np.sqrt(0.581780**2 + 2.32712**2 + 0.765502**2 + 9.186006**2), abs=1e-5
    )


def test_the_covariance_of_flux_with_its_emissivity_is_that_of_draws() -> None:
    # A grey surface: the broadband error is the band's. Drawn emissivities, each inverted and multiplied out.
    draws = np.random.default_rng(9).normal(EMISSIVITY, 0.005, 40_000)
    radiance = radiance_at_sensor(two_constant_radiance(TRUTH, K1, K2), EMISSIVITY, AIR, TRUTH)
    air = narrow_air(*(np.full(draws.size, value) for value in (TRANSMITTANCE, PATH, SKY)))
    temperature = invert(np.full(draws.size, radiance), draws, air, exact).temperature
    flux = draws * STEFAN_BOLTZMANN * temperature**4
    parts = propagate(worked(), EMISSIVITY, AIR, Causes(0.0, 0.0, 0.005))
    stated = propagate_flux(TRUTH, parts, EMISSIVITY, shared=0.005, own=0.0)
    assert stated.total == pytest.approx(flux.std(), rel=0.02)
    # Without the covariance it would be several times that.
    apart = np.hypot(4.0 * EMISSIVITY * STEFAN_BOLTZMANN * TRUTH**3 * parts.surface_class, 0.005 * 490.66)
    assert apart > 3.0 * stated.total


spreads = st.floats(0.0, 0.3)


@bounded
@given(spreads, spreads, st.floats(0.0, 0.05), st.lists(st.tuples(spreads, spreads, spreads), max_size=4))
def test_groups_add_as_squares_and_more_doubt_never_means_less(
    noise: float, calibration: float, emissivity: float, air: list[tuple[float, float, float]]
) -> None:
    changes = [change(transmittance=0.1 * t, path=p, sky=s) for t, p, s in air]
    parts = propagate(worked(), EMISSIVITY, AIR, Causes(noise, calibration, emissivity, changes))
    squares = parts.pixel**2 + parts.surface_class**2 + parts.scene**2
    assert parts.total**2 == pytest.approx(float(squares), rel=1e-12, abs=1e-15)
    more = Causes(noise + 0.01, calibration + 0.01, emissivity + 0.001, [*changes, change(path=0.01)])
    worse = propagate(worked(), EMISSIVITY, AIR, more)
    assert worse.pixel > parts.pixel
    assert abs(worse.surface_class) > abs(parts.surface_class)
    assert worse.scene > parts.scene


@bounded
@given(spreads, spreads, spreads)
def test_a_cause_cut_into_two_independent_halves_weighs_the_same(t: float, path: float, sky: float) -> None:
    share = np.sqrt(0.5)
    whole = change(transmittance=0.1 * t, path=path, sky=sky)
    half = change(transmittance=0.1 * t * share, path=path * share, sky=sky * share)
    one, two = (
        propagate(worked(), EMISSIVITY, AIR, Causes(0.0, 0.0, 0.0, air)) for air in ([whole], [half, half])
    )
    assert one.scene == pytest.approx(float(two.scene), rel=1e-9, abs=1e-12)


@bounded
@given(st.floats(1.0, 500.0), st.floats(10.0, 120.0), st.floats(10.0, 2000.0))
def test_footprints_never_count_more_than_pixels_nor_less_than_one(
    pixels: float, pixel_size: float, footprint: float
) -> None:
    found = float(independent_footprints(pixels, pixel_size=pixel_size, native_footprint=footprint))
    assert 1.0 <= found <= pixels * (1.0 + 1e-12)


def test_without_finer_delivery_each_pixel_counts() -> None:
    assert independent_footprints(np.array([1.0, 4.0, 9.0]), pixel_size=90.0) == pytest.approx(
        [1.0, 4.0, 9.0]
    )
    assert independent_footprints(9.0, pixel_size=30.0, native_footprint=90.0) == pytest.approx(1.0)
    assert independent_footprints(36.0, pixel_size=30.0, native_footprint=90.0) == pytest.approx(4.0)
    assert np.isnan(independent_footprints(np.array([0.0, np.nan]), pixel_size=30.0)).all()


def test_regridding_reduces_the_noise_as_the_footprints_say() -> None:
    # Noise of 90 m footprints delivered on 30 m pixels, averaged to 180 m and 270 m.
    noise = np.random.default_rng(2).standard_normal((1080, 1080))
    delivered = np.kron(noise, np.ones((3, 3)))
    for pixels in (6, 9):
        size = delivered.shape[0] // pixels
        averaged = delivered.reshape(size, pixels, size, pixels).mean(axis=(1, 3))
        count = independent_footprints(pixels**2, pixel_size=30.0, native_footprint=90.0)
        assert averaged.std() == pytest.approx(1.0 / np.sqrt(float(count)), rel=0.03)


@pytest.mark.parametrize(("pixel", "footprint"), [(0.0, 90.0), (30.0, -1.0), (np.nan, 90.0)])
def test_sizes_that_are_none_are_refused(pixel: float, footprint: float) -> None:
    with pytest.raises(DomainError, match="positive number of metres"):
        independent_footprints(4.0, pixel_size=pixel, native_footprint=footprint)
