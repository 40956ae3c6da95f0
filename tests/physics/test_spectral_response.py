"""Band averages against independent integration, and what a response must be."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
import scipy.integrate
from hypothesis import given, settings
from hypothesis import strategies as st

from groundglow.errors import DomainError
from groundglow.physics.planck import radiance_slope, spectral_radiance, temperature_of_radiance
from groundglow.physics.spectral_response import SpectralResponse, gaussian, top_hat
from responses import RESPONSES

bounded = settings(max_examples=40, derandomize=True, deadline=None, database=None)


def integrated(response: SpectralResponse, spectrum: Callable[[float], float]) -> float:
    """Response-weighted mean by SciPy's adaptive quadrature, node to node."""
    upper = lower = 0.0
    for a, b in zip(response.wavelength[:-1], response.wavelength[1:], strict=True):

        def weight(wavelength: float) -> float:
            return float(np.interp(wavelength, response.wavelength, response.response))

        upper += scipy.integrate.quad(lambda w: weight(w) * spectrum(w), a, b, epsabs=0.0, epsrel=1e-11)[0]
        lower += scipy.integrate.quad(weight, a, b, epsabs=1e-14, epsrel=1e-11)[0]
    return upper / lower


@pytest.mark.parametrize("name", ["narrow", "measured", "uncooled camera", "midwave camera"])
@pytest.mark.parametrize("temperature", [180.0, 300.0, 1300.0])
def test_band_radiance_is_the_integral_over_the_response(name: str, temperature: float) -> None:
    response = RESPONSES[name]
    expected = integrated(response, lambda w: float(spectral_radiance(w, temperature)))
    assert response.band_radiance(temperature) == pytest.approx(expected, rel=1e-9)
    slope = integrated(response, lambda w: float(radiance_slope(w, temperature)))
    assert response.band_radiance_slope(temperature) == pytest.approx(slope, rel=1e-9)


def test_mean_radiance_between_10_and_12_micrometres() -> None:
    # Source: integral of Planck's law at 300 K, 19.05996 W m-2 sr-1, computed apart from this package.
    assert top_hat(10.0, 12.0).band_radiance(300.0) * 2.0 == pytest.approx(19.05996, abs=1e-4)


@pytest.mark.parametrize(
    ("low", "high", "least", "most"),
    [
        # Source: error of treating a top-hat band as its centre wavelength at 240-330 K, computed apart from
        # this package: 0.15-0.34 K for 10.4-12.5 um, about 0.03 K for 10.60-11.19 um, 2-3 K for 8-14 um.
        (10.4, 12.5, 0.15, 0.345),
        (10.60, 11.19, 0.01, 0.04),
        (8.0, 14.0, 2.0, 3.3),
    ],
)
def test_why_the_band_is_integrated(low: float, high: float, least: float, most: float) -> None:
    truth = np.array([240.0, 285.0, 330.0])
    seen = temperature_of_radiance(0.5 * (low + high), top_hat(low, high).band_radiance(truth))
    error = np.abs(seen - truth)
    assert (error >= least).all()
    assert (error <= most).all()


def test_effective_wavelength_width_and_limits() -> None:
    triangle = SpectralResponse(np.array([9.0, 10.0, 12.0]), np.array([0.0, 2.0, 0.0]))
    # Centroid and area of a triangle: (a + b + c) / 3 and half the base (over its height).
    assert triangle.effective_wavelength == pytest.approx(31.0 / 3.0, abs=1e-12)
    assert triangle.width == pytest.approx(1.5, abs=1e-12)
    assert triangle.limits == (9.0, 12.0)
    padded = SpectralResponse(np.array([8.0, 9.0, 10.0, 12.0, 13.0]), np.array([0.0, 0.0, 2.0, 0.0, 0.0]))
    assert padded.limits == (9.0, 12.0)


def test_a_gaussian_has_its_width_at_half_maximum() -> None:
    response = gaussian(11.0, 0.8)
    half = np.interp([10.6, 11.4], response.wavelength, response.response)
    # The response is linear between 201 nodes, hence the tolerance.
    assert half == pytest.approx([0.5, 0.5], abs=2e-3)
    assert response.effective_wavelength == pytest.approx(11.0, abs=1e-9)


@bounded
@given(st.floats(3.0, 12.0), st.floats(0.05, 3.0), st.floats(0.01, 1000.0), st.floats(180.0, 1300.0))
def test_the_scale_of_a_response_is_free(low: float, width: float, scale: float, temperature: float) -> None:
    response = top_hat(low, low + width)
    scaled = SpectralResponse(response.wavelength, response.response * scale)
    assert scaled.band_radiance(temperature) == pytest.approx(
        float(response.band_radiance(temperature)), rel=1e-12
    )


@bounded
@given(st.sampled_from(sorted(RESPONSES)), st.floats(180.0, 1299.0), st.floats(0.001, 1.0))
def test_warmer_always_gives_more(name: str, temperature: float, warming: float) -> None:
    band = RESPONSES[name]
    assert band.band_radiance(temperature + warming) > band.band_radiance(temperature)
    assert band.band_radiance_slope(temperature) > 0.0


def test_shape_is_kept_and_no_value_stays_no_value() -> None:
    temperature = np.array([[300.0, np.nan, 310.0]])
    radiance = top_hat(10.6, 11.2).band_radiance(temperature)
    assert radiance.shape == (1, 3)
    assert np.isnan(radiance).tolist() == [[False, True, False]]


@pytest.mark.parametrize(
    ("wavelength", "response", "complaint"),
    [
        ([11.0], [1.0], "at least two pairs"),
        ([10.0, 11.0], [1.0], "at least two pairs"),
        ([10.0, np.nan], [1.0, 1.0], "NaN"),
        ([10.0, 11.0], [1.0, np.inf], "NaN"),
        ([11.0, 10.0], [1.0, 1.0], "increase"),
        ([10.0, 10.0], [1.0, 1.0], "increase"),
        ([-1.0, 10.0], [1.0, 1.0], "positive"),
        ([10.0, 11.0], [1.0, -0.1], "negative"),
        ([10.0, 11.0], [0.0, 0.0], "zero everywhere"),
    ],
)
def test_a_response_that_is_none_is_refused(
    wavelength: list[float], response: list[float], complaint: str
) -> None:
    with pytest.raises(DomainError, match=complaint):
        SpectralResponse(np.array(wavelength), np.array(response))


@pytest.mark.parametrize("width", [0.0, -1.0, np.nan])
def test_a_gaussian_without_width_is_refused(width: float) -> None:
    with pytest.raises(DomainError, match="width"):
        gaussian(11.0, width)


def test_a_gaussian_that_reaches_wavelength_zero_is_refused() -> None:
    with pytest.raises(DomainError, match="positive"):
        gaussian(3.0, 5.0)
