"""The published short form of the single-channel inversion."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from groundglow.errors import ConfigError
from groundglow.physics.planck import two_constant_temperature
from groundglow.quantities import FLAG
from groundglow.retrieval.single_channel_water_vapour import (
    COEFFICIENTS,
    WaterVapourInversion,
    atmospheric_functions,
    coefficients,
    invert_tile_with_water_vapour,
    invert_with_water_vapour,
)
from groundglow.retrieval.uncertainty import propagate_with_water_vapour

bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)
K1, K2 = 774.8853, 1321.0789  # Landsat 8 band 10, the agency's scene metadata


def solved(radiance: float, emissivity: float, water: float, name: str = "landsat-8") -> WaterVapourInversion:
    bright = two_constant_temperature(radiance, K1, K2)
    return invert_with_water_vapour(radiance, bright, emissivity, water, coefficients(name))


@pytest.mark.parametrize(
    ("name", "water", "expected"),
    [
        # Source: Jimenez-Munoz et al. (2014), IEEE GRSL 11:1840, at 2 g cm-2; Jimenez-Munoz and Sobrino
        # (2003), JGR 108:4688, at 1 g cm-2 (coefficients from memory).
        ("landsat-8", 20.0, (1.23431, -4.33596, 2.48302)),
        ("landsat-5-2003", 10.0, (1.11471, -2.08861, 1.43565)),
        # Worked by hand from the rows of Jimenez-Munoz et al. (2009), IEEE TGRS 47:339, TIGR61 (from memory).
        ("landsat-5", 0.0, (1.10188, -0.29887, -0.45476)),
        ("landsat-5", 10.0, (1.09370, -1.57260, 1.03865)),
        ("landsat-5", 20.0, (1.26022, -4.23009, 2.45758)),
        ("landsat-7", 0.0, (1.08565, -0.19379, -0.43199)),
        ("landsat-7", 10.0, (1.09026, -1.51733, 0.99960)),
        ("landsat-7", 20.0, (1.24673, -4.06963, 2.37335)),
        ("landsat-8", 0.0, (1.01523, 0.20324, -0.27514)),
        ("landsat-5-2003", 0.0, (1.1234, -0.52894, -0.39071)),
    ],
)
def test_functions_of_the_atmosphere(name: str, water: float, expected: tuple[float, float, float]) -> None:
    assert atmospheric_functions(water, coefficients(name)) == pytest.approx(expected, abs=1e-5)


def test_worked_value() -> None:
    # Source: the same paper's form with radiance 9.0, 2 g cm-2, emissivity 0.97, b = 1324 K.
    assert solved(9.0, 0.97, 20.0).temperature == pytest.approx(299.1547, abs=1e-3)


@pytest.mark.parametrize("name", sorted(COEFFICIENTS))
def test_each_sensors_functions_look_like_an_atmosphere(name: str) -> None:
    # psi1 is one over the transmittance, psi3 the sky radiance: above 1, above 0, and growing with water
    # vapour.
    water = np.linspace(5.0, 30.0, 26)
    first, second, third = atmospheric_functions(water, coefficients(name))
    assert (first > 1.0).all()
    assert (second < 0.0).all()
    assert (third > 0.0).all()
    assert (np.diff(third) > 0.0).all()
    assert (np.diff(first[water >= 10.0]) > 0.0).all()


@pytest.mark.parametrize("name", sorted(COEFFICIENTS))
def test_the_planck_constant_is_that_of_the_band(name: str) -> None:
    # Source: c2 = 14387.77 um K over the band's effective wavelength, between 10.8 and 12.1 um for all.
    assert 10.8 < 14387.77 / coefficients(name).planck < 12.1


@bounded
@given(st.floats(6.5, 12.0), st.floats(0.8, 1.0), st.floats(5.0, 30.0))
def test_derivatives_agree_with_central_differences(radiance: float, emissivity: float, water: float) -> None:
    found = solved(radiance, emissivity, water)
    step = 1e-5
    by_emissivity = solved(radiance, emissivity - step, water).temperature
    assert found.per_emissivity == pytest.approx(float((found.temperature - by_emissivity) / step), rel=1e-3)
    by_water = solved(radiance, emissivity, water - step).temperature
    assert found.per_water_vapour == pytest.approx(
        float((found.temperature - by_water) / step), rel=1e-2, abs=1e-4
    )
    # The form holds dTb/dL = Tb^2 / (b L), which leaves out a factor 1 + L / K1.
    by_radiance = solved(radiance - step, emissivity, water).temperature
    assert found.per_radiance == pytest.approx(float((found.temperature - by_radiance) / step), rel=0.03)


@bounded
@given(st.floats(6.5, 12.0), st.floats(0.9, 1.0), st.floats(5.0, 30.0))
def test_more_radiance_never_maps_colder(radiance: float, emissivity: float, water: float) -> None:
    assert (
        solved(radiance + 0.01, emissivity, water).temperature
        > solved(radiance, emissivity, water).temperature
    )


@pytest.mark.parametrize(
    ("water", "number", "outside"),
    [
        # Source: abstract of Jimenez-Munoz et al. (2009): good below 2 g cm-2, unacceptable above 3.
        (4.9, True, True),
        (5.0, True, False),
        (20.0, True, False),
        (20.1, True, True),
        (30.0, True, True),
        (30.1, False, True),
        (-1.0, False, True),
        (np.nan, False, False),
    ],
)
def test_range_of_water_vapour(water: float, number: bool, outside: bool) -> None:
    found = solved(9.0, 0.97, water)
    assert np.isfinite(found.temperature) == number
    assert bool(found.outside_validity) == outside


@pytest.mark.parametrize(
    ("radiance", "bright", "emissivity"),
    [(np.nan, 300.0, 0.97), (9.0, np.nan, 0.97), (9.0, 300.0, np.nan), (9.0, 300.0, 0.0), (9.0, 300.0, 1.3),
     (0.0, 300.0, 0.97), (-1.0, 300.0, 0.97)],
)  # fmt: skip
def test_no_value_and_impossible_values_give_no_value(
    radiance: float, bright: float, emissivity: float
) -> None:
    found = invert_with_water_vapour(radiance, bright, emissivity, 10.0, coefficients("landsat-8"))
    for name in ("temperature", "per_radiance", "per_emissivity", "per_water_vapour"):
        assert np.isnan(getattr(found, name))
    missing = bool(np.isnan([radiance, bright, emissivity]).any())
    assert bool(found.impossible) == (not missing)


def test_a_temperature_that_no_ground_has_is_impossible() -> None:
    found = solved(9.0, 0.04, 10.0)
    assert np.isnan(found.temperature)
    assert bool(found.impossible)
    assert not bool(solved(9.0, 0.97, 10.0).impossible)
    assert not bool(solved(9.0, 0.97, 31.0).impossible)


@pytest.mark.parametrize("name", sorted(COEFFICIENTS))
def test_the_compiled_form_equals_the_statement(name: str) -> None:
    draw = np.random.default_rng(11)
    shape = (37, 53)

    def mixed(low: float, high: float) -> NDArray[np.float32]:
        values = draw.uniform(low, high, shape).astype(np.float32)
        values[draw.uniform(size=shape) < 0.03] = np.nan
        return values

    radiance, emissivity, water = mixed(-0.5, 14.0), mixed(-0.1, 1.1), mixed(-2.0, 34.0)
    # The ends of every range exactly.
    radiance[:6, 0], emissivity[:6, 0] = 9.0, (1.0, 1.0, 0.97, 0.97, 0.97, 0.0)
    water[:6, 0] = (0.0, 5.0, 20.0, 30.0, 10.0, 10.0)
    bright = two_constant_temperature(radiance, K1, K2).astype(np.float32)
    outputs = [np.zeros(shape, np.float32) for _ in range(4)]
    flags = np.full(shape, FLAG["water"].mask, np.uint16)
    fit = coefficients(name)
    invert_tile_with_water_vapour(radiance, bright, emissivity, water, fit.packed(), *outputs, flags)
    stated = invert_with_water_vapour(radiance, bright, emissivity, water, fit)
    names = ("temperature", "per_radiance", "per_emissivity", "per_water_vapour")
    for result, attribute in zip(outputs, names, strict=True):
        np.testing.assert_allclose(result, getattr(stated, attribute), rtol=1e-6, atol=1e-6, equal_nan=True)
    bit = FLAG["atmosphere_outside_validity"].mask
    assert ((flags & bit > 0) == stated.outside_validity).all()
    assert ((flags & FLAG["impossible"].mask > 0) == stated.impossible).all()
    assert 0 < np.count_nonzero(stated.impossible) < stated.impossible.size // 2
    assert (flags & FLAG["water"].mask > 0).all()


def test_uncertainty_has_the_forms_own_part() -> None:
    found = solved(9.0, 0.97, 15.0)
    parts = propagate_with_water_vapour(
        found, noise=0.01, calibration=0.04, emissivity=0.01, column_water_vapour=2.0
    )
    assert parts.pixel == pytest.approx(0.01 * float(found.per_radiance))
    assert parts.surface_class == pytest.approx(0.01 * float(found.per_emissivity))
    scene = np.sqrt((0.04 * found.per_radiance) ** 2 + (2.0 * found.per_water_vapour) ** 2 + 1.0)
    assert parts.scene == pytest.approx(float(scene))
    assert parts.total > 1.0


def test_an_unknown_sensor_is_answered_with_the_known_ones() -> None:
    with pytest.raises(ConfigError, match=r"landsat-5.*landsat-8"):
        coefficients("landsat-12")
