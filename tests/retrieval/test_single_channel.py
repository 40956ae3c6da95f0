"""The inversion of the radiative transfer equation in one band."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from groundglow.errors import DomainError
from groundglow.physics.band_table import table_from_response, table_from_two_constants
from groundglow.physics.planck import (
    spectral_radiance,
    two_constant_radiance,
    two_constant_temperature,
)
from groundglow.retrieval.single_channel import (
    Air,
    Inverse,
    Inversion,
    inverse_of_table,
    invert,
    narrow_air,
    radiance_at_sensor,
    sensitivities,
    transmittance_at,
)
from responses import RESPONSES

Float = NDArray[np.float64]
bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)

# Landsat 8 band 10, the agency's scene metadata.
K1, K2 = 774.8853, 1321.0789
# Worked example: 305 K, emissivity 0.97, transmittance 0.80, path radiance 1.6, sky radiance 2.6.
EMISSIVITY, TRANSMITTANCE, PATH, SKY, TRUTH = 0.97, 0.80, 1.6, 2.6, 305.0


def exact(radiance: Float) -> tuple[Float, Float]:
    """Temperature and dT/dB by the two-constant form."""
    temperature = two_constant_temperature(radiance, K1, K2)
    return temperature, temperature**2 / (K2 * radiance * (1.0 + radiance / K1))


def worked_radiance() -> float:
    return float(
        radiance_at_sensor(
            two_constant_radiance(TRUTH, K1, K2), EMISSIVITY, narrow_air(TRANSMITTANCE, PATH, SKY), TRUTH
        )
    )


def test_the_equation_read_forwards_has_the_worked_value() -> None:
    # Source: L = tau (eps B + (1 - eps) L_sky) + L_path, computed apart from this package: 9.674415, which a
    # sensor without air would read as 300.5432 K.
    assert worked_radiance() == pytest.approx(9.674415, abs=1e-5)
    assert two_constant_temperature(worked_radiance(), K1, K2) == pytest.approx(300.5432, abs=1e-3)


def test_the_worked_value_comes_back() -> None:
    # Source: the same equation solved for the surface.
    found = invert(worked_radiance(), EMISSIVITY, narrow_air(TRANSMITTANCE, PATH, SKY), exact)
    assert found.temperature == pytest.approx(305.0, abs=1e-6)


def test_the_worked_value_comes_back_through_the_table() -> None:
    inverse = inverse_of_table(table_from_two_constants(K1, K2))
    found = invert(worked_radiance(), EMISSIVITY, narrow_air(TRANSMITTANCE, PATH, SKY), inverse)
    assert found.temperature == pytest.approx(305.0, abs=1e-3)


def test_sensitivities_of_the_worked_value() -> None:
    # Source: partial derivatives of the textbook equation, computed apart from this package:
    # dT/dL 8.67323, dT/deps -53.5989, dT/dtau -87.5390 (sky radiance held), dT/dL_sky -0.208157.
    air = narrow_air(TRANSMITTANCE, PATH, SKY)
    slopes = sensitivities(invert(worked_radiance(), EMISSIVITY, air, exact), EMISSIVITY, air)
    assert slopes.radiance == pytest.approx(8.67323, rel=1e-4)
    assert slopes.path_radiance == pytest.approx(-8.67323, rel=1e-4)
    assert slopes.emissivity == pytest.approx(-53.5989, rel=1e-4)
    assert slopes.transmittance + SKY * slopes.transmitted_sky_radiance == pytest.approx(-87.5390, rel=1e-4)
    assert TRANSMITTANCE * slopes.transmitted_sky_radiance == pytest.approx(-0.208157, rel=1e-4)


def test_without_air_and_over_a_blackbody_the_brightness_temperature_is_the_surface_temperature() -> None:
    radiance = two_constant_radiance(np.array([250.0, 300.0, 340.0]), K1, K2)
    found = invert(radiance, 1.0, narrow_air(np.ones(3), np.zeros(3), np.zeros(3)), exact)
    assert found.temperature == pytest.approx([250.0, 300.0, 340.0], abs=1e-9)


pixels = st.tuples(
    st.floats(220.0, 350.0),
    st.floats(0.5, 1.0),
    st.floats(0.2, 1.0),
    st.floats(0.0, 5.0),
    st.floats(0.0, 6.0),
)


@bounded
@given(pixels)
def test_forwards_and_back_returns_home(pixel: tuple[float, float, float, float, float]) -> None:
    truth, emissivity, transmittance, path, sky = pixel
    air = narrow_air(transmittance, path, sky)
    radiance = radiance_at_sensor(two_constant_radiance(truth, K1, K2), emissivity, air, truth)
    found = invert(radiance, emissivity, air, exact)
    assert found.temperature == pytest.approx(truth, abs=1e-8)


@bounded
@given(pixels, st.floats(1e-4, 1.0))
def test_more_radiance_never_maps_colder(
    pixel: tuple[float, float, float, float, float], more: float
) -> None:
    truth, emissivity, transmittance, path, sky = pixel
    air = narrow_air(transmittance, path, sky)
    radiance = radiance_at_sensor(two_constant_radiance(truth, K1, K2), emissivity, air, truth)
    lower, upper = (
        float(invert(level, emissivity, air, exact).temperature) for level in (radiance, radiance + more)
    )
    assert upper > lower


@bounded
@given(pixels)
def test_sensitivities_agree_with_central_differences(
    pixel: tuple[float, float, float, float, float],
) -> None:
    truth, emissivity, transmittance, path, sky = pixel
    emissivity = min(emissivity, 0.999)
    air = narrow_air(transmittance, path, sky)
    radiance = float(radiance_at_sensor(two_constant_radiance(truth, K1, K2), emissivity, air, truth))
    slopes = sensitivities(invert(radiance, emissivity, air, exact), emissivity, air)
    base = np.array([radiance, emissivity, transmittance, path, transmittance * sky])
    names = ("radiance", "emissivity", "transmittance", "path_radiance", "transmitted_sky_radiance")
    for index, name in enumerate(names):
        step = np.zeros(5)
        step[index] = 1e-6

        def solved(values: Float) -> float:
            moved = Air(values[2:3], values[3], values[4], np.array([300.0]))
            return float(invert(values[0], values[1], moved, exact).temperature)

        difference = (solved(base + step) - solved(base - step)) / 2e-6
        assert getattr(slopes, name) == pytest.approx(difference, rel=1e-4, abs=1e-4)


@pytest.mark.parametrize(
    "pixel",
    [
        (np.nan, 0.97, 0.8, 1.6, 2.6),
        (9.0, np.nan, 0.8, 1.6, 2.6),
        (9.0, 0.97, np.nan, 1.6, 2.6),
        (9.0, 0.97, 0.8, np.nan, 2.6),
        (9.0, 0.97, 0.8, 1.6, np.nan),
        (9.0, 0.0, 0.8, 1.6, 2.6),
        (9.0, -0.5, 0.8, 1.6, 2.6),
        (9.0, 1.3, 0.8, 1.6, 2.6),
        (9.0, 0.97, 0.0, 1.6, 2.6),
        (9.0, 0.97, -0.1, 1.6, 2.6),
        (1.0, 0.97, 0.8, 1.6, 2.6),  # less than the air alone sends
    ],
)
@pytest.mark.parametrize("inverse", [exact, inverse_of_table(table_from_two_constants(K1, K2))])
def test_no_value_and_impossible_values_give_no_value(
    pixel: tuple[float, float, float, float, float], inverse: Inverse
) -> None:
    radiance, emissivity, transmittance, path, sky = pixel
    found = invert(
        np.array([radiance, 9.0]),
        np.array([emissivity, 0.97]),
        narrow_air(np.array([transmittance, 0.8]), np.array([path, 1.6]), np.array([sky, 2.6])),
        inverse,
    )
    for name in Inversion.__dataclass_fields__:
        assert np.isnan(getattr(found, name)).tolist() == [True, False]


def test_the_parabola_passes_through_its_nodes_and_has_the_slope_it_states() -> None:
    air = Air(np.array([0.70, 0.72, 0.73]), np.array(1.0), np.array(1.0), np.array([260.0, 300.0, 350.0]))
    assert transmittance_at(air, np.array([260.0, 300.0, 350.0]))[0] == pytest.approx(
        [0.70, 0.72, 0.73], abs=1e-12
    )
    at = np.array([230.0, 265.0, 290.0, 340.0, 500.0])
    upper, lower = (transmittance_at(air, at + sign)[0] for sign in (1e-3, -1e-3))
    assert transmittance_at(air, at)[1] == pytest.approx((upper - lower) / 2e-3, rel=1e-6)


def invented_air(wavelength: Float) -> tuple[Float, Float, Float]:
    """Spectral transmittance, path and sky radiance of an invented window, strongly structured.

    Water vapour eats the short edge, ozone a hole at 9.6 um, carbon dioxide the long edge.
    """
    depth = (
        1.6 * np.exp(-(((wavelength - 7.3) / 0.6) ** 2))
        + 0.6 * np.exp(-(((wavelength - 9.6) / 0.25) ** 2))
        + 1.2 * np.exp(-(((wavelength - 13.8) / 0.7) ** 2))
        + 0.15
    )
    transmittance = np.exp(-depth)
    return (
        transmittance,
        (1.0 - transmittance) * spectral_radiance(wavelength, 278.0),
        (1.0 - transmittance**1.6) * spectral_radiance(wavelength, 280.0),
    )


@pytest.mark.parametrize("name", sorted(set(RESPONSES) - {"midwave camera"}))
def test_wide_bands_within_a_twentieth_of_a_kelvin_of_the_full_spectral_integral(name: str) -> None:
    # The truth is the equation integrated wavelength by wavelength over the response, nothing averaged first.
    band = RESPONSES[name]
    wavelength = band.quadrature_wavelength
    transmittance, path, sky = invented_air(wavelength)
    # Well beyond the nodes too: over snow, and over ground that no sun heats.
    truth = np.concatenate([[210.0, 230.0], np.linspace(250.0, 340.0, 19), [370.0, 400.0]])
    emissivity = 0.95
    leaving = emissivity * spectral_radiance(wavelength, truth[:, np.newaxis]) + (1.0 - emissivity) * sky
    radiance = band.average(transmittance * leaving + path)
    nodes = np.array([250.0, 295.0, 340.0])
    black = spectral_radiance(wavelength, nodes[:, np.newaxis])
    weighted = band.average(transmittance * black) / band.average(black)
    air = Air(
        np.repeat(weighted[:, np.newaxis], truth.size, axis=1),
        np.full(truth.size, band.average(path)),
        np.full(truth.size, band.average(transmittance * sky)),
        nodes,
    )
    found = invert(radiance, emissivity, air, inverse_of_table(table_from_response(band)))
    assert np.abs(found.temperature - truth).max() < 0.05
    # The response is the derivative of what the sensor sees.
    step = radiance[1:] - radiance[:-1]
    middle = 0.5 * (found.response[1:] + found.response[:-1])
    warm = slice(2, -2)
    assert (middle * np.diff(truth))[warm] == pytest.approx(step[warm], rel=0.01)


def test_an_air_that_does_not_fit_its_nodes_is_refused() -> None:
    with pytest.raises(DomainError, match="one or three"):
        Air(np.ones(2), np.array(1.0), np.array(1.0), np.array([280.0, 300.0]))
    with pytest.raises(DomainError, match="one or three increasing"):
        Air(np.ones(3), np.array(1.0), np.array(1.0), np.array([300.0, 280.0, 320.0]))
    with pytest.raises(DomainError, match="needed 3"):
        Air(np.ones((1, 4)), np.ones(4), np.ones(4), np.array([280.0, 300.0, 320.0]))
