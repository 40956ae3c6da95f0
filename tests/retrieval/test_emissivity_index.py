"""Emissivity from a vegetation index: thresholds with cavity term, and the logarithm."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from groundglow.errors import ConfigError, DomainError
from groundglow.physics.spectral_response import top_hat
from groundglow.quantities import FLAG
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity import BROADBAND_ASSUMED, ground_of_class
from groundglow.retrieval.emissivity_class_table import shipped_class_table
from groundglow.retrieval.emissivity_index_kernels import index_fields
from groundglow.retrieval.emissivity_logarithmic import logarithmic_emissivity, logarithmic_method
from groundglow.retrieval.emissivity_special_ground import either_ground
from groundglow.retrieval.emissivity_threshold import (
    INDEX_COEFFICIENTS,
    IndexCoefficients,
    ThresholdMethod,
    coefficients_from_classes,
    index_coefficients,
    threshold_emissivity,
    threshold_method,
)
from groundglow.retrieval.vegetation_index import cover_uncertainty, vegetation_cover, vegetation_index

bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)
BAND = top_hat(10.60, 11.19)
TABLE = shipped_class_table()
ASSUMED = FLAG["emissivity_assumed"].mask | int(BROADBAND_ASSUMED)
NAMES = tuple(name for name in EmissivityFields.__dataclass_fields__ if name != "flags")


def reflectances(index: float, total: float = 0.4) -> tuple[NDArray[np.float32], NDArray[np.float32]]:
    """Red and near-infrared with this index."""
    red = 0.5 * total * (1.0 - index)
    return np.array([[red]], np.float32), np.array([[total - red]], np.float32)


def by_threshold(
    index: float, method: ThresholdMethod, flags: int = 0, total: float = 0.4
) -> EmissivityFields:
    return threshold_emissivity(*reflectances(index, total), np.array([[flags]], np.uint16), method)


def by_logarithm(index: float, flags: int = 0, age: float = 0.0) -> EmissivityFields:
    method = logarithmic_method(BAND, TABLE, age_in_days=age)
    return logarithmic_emissivity(*reflectances(index), np.array([[flags]], np.uint16), method)


def test_vegetation_index() -> None:
    # Source: Tucker (1979), RSE 8:127-150: (near infrared - red) / (near infrared + red).
    found = vegetation_index(np.array([0.1, 0.3, 0.2, -0.01]), np.array([0.3, 0.1, 0.2, 0.5]))
    assert found == pytest.approx([0.5, -0.5, 0.0, 1.0])
    assert np.isnan(
        vegetation_index(np.array([np.nan, 0.1, 0.0, -0.2]), np.array([0.3, np.nan, 0.0, 0.1]))
    ).all()


def test_vegetation_cover() -> None:
    # Source: Carlson and Ripley (1997), RSE 62:241-252 with thresholds 0.2 and 0.5: index 0.35, cover 0.25.
    assert vegetation_cover(np.array([0.35])) == pytest.approx([0.25], abs=1e-5)
    assert vegetation_cover(np.array([-0.5, 0.2, 0.5, 0.9])) == pytest.approx([0.0, 0.0, 1.0, 1.0], abs=1e-12)
    assert np.isnan(vegetation_cover(np.nan))


def test_thematic_mapper_band_6() -> None:
    # Source: Sobrino et al. (2004), RSE 90:434-440: 0.986 + 0.004 Pv between the thresholds (from memory).
    method = threshold_method(BAND, TABLE, coefficients=index_coefficients("landsat-5-6"))
    assert by_threshold(0.35, method).band == pytest.approx(0.987, abs=1e-5)
    assert by_threshold(0.9, method).band == pytest.approx(0.99, abs=1e-6)
    assert by_threshold(0.1, method).band == pytest.approx(0.97, abs=1e-6)


def test_the_cavity_term_gives_the_published_line() -> None:
    # Source: the same paper: soil 0.97, vegetation 0.99 and F = 0.55 amount to about 0.986 + 0.004 Pv.
    plain = IndexCoefficients(0.97, 0.0, 0.97, 0.99, 0.55, "test")
    method = threshold_method(BAND, TABLE, coefficients=plain)
    for index in (0.201, 0.3, 0.35, 0.45, 0.5):
        line = 0.986 + 0.004 * float(vegetation_cover(index))
        assert by_threshold(index, method).band == pytest.approx(line, abs=5e-4)


@pytest.mark.parametrize(
    ("name", "index", "expected"),
    [
        # Source: Skokovic et al. (2014), Landsat 8: B10 0.979 - 0.046 red | 0.971 (1 - Pv) + 0.987 Pv |
        # 0.987; B11 0.982 - 0.027 red | 0.977 (1 - Pv) + 0.989 Pv | 0.989 (from memory).
        ("landsat-8-10", 0.1, 0.979 - 0.046 * 0.18),
        ("landsat-8-10", 0.35, 0.971 * 0.75 + 0.987 * 0.25),
        ("landsat-8-10", 0.7, 0.987),
        ("landsat-8-11", 0.1, 0.982 - 0.027 * 0.18),
        ("landsat-8-11", 0.35, 0.977 * 0.75 + 0.989 * 0.25),
        ("landsat-8-11", 0.7, 0.989),
    ],
)
def test_landsat_8(name: str, index: float, expected: float) -> None:
    method = threshold_method(BAND, TABLE, coefficients=index_coefficients(name))
    assert by_threshold(index, method).band == pytest.approx(expected, abs=1e-6)


def test_any_band_takes_soil_and_vegetation_of_the_class_table() -> None:
    found = coefficients_from_classes(top_hat(8.125, 8.475), TABLE)
    assert (found.soil, found.vegetation) == pytest.approx((0.905, 0.975))
    assert found.cavity == 0.55
    method = threshold_method(top_hat(8.125, 8.475), TABLE)
    assert by_threshold(0.1, method).band == pytest.approx(0.905, abs=1e-6)
    assert by_threshold(0.8, method).band == pytest.approx(0.975, abs=1e-6)


@pytest.mark.parametrize(("index", "expected"), [
    # Source: Van de Griend and Owe (1993), IJRS 14:1119-1131, with the pieces outside 0.157-0.727 as printed
    # in Environ. Monit. Assess. (2025) 197:243.
    (0.5, 0.97682), (-0.3, 0.995), (-0.1, 0.970), (0.1, 0.970), (0.8, 0.990),
])  # fmt: skip
def test_logarithmic_form(index: float, expected: float) -> None:
    assert by_logarithm(index).band == pytest.approx(expected, abs=1e-5)


def test_the_logarithmic_form_meets_its_neighbours() -> None:
    assert by_logarithm(0.1571).band == pytest.approx(by_logarithm(0.10).band, abs=0.048)
    assert by_logarithm(0.7269).band == pytest.approx(by_logarithm(0.75).band, abs=0.005)


@pytest.mark.parametrize(
    "solve", [lambda i, f: by_threshold(i, threshold_method(BAND, TABLE), f), by_logarithm]
)
def test_flagged_water_and_snow_have_their_own_values(solve: object) -> None:
    assert callable(solve)
    water, snow = (ground_of_class(TABLE.named(name), BAND) for name in ("water", "snow_ice"))
    for index in (-0.4, 0.1, 0.6):
        wet, white = solve(index, FLAG["water"].mask), solve(index, FLAG["water"].mask | FLAG["snow"].mask)
        assert [float(getattr(wet, name)[0, 0]) for name in NAMES] == pytest.approx(water.numbers())
        assert [float(getattr(white, name)[0, 0]) for name in NAMES] == pytest.approx(snow.numbers())
        assert wet.flags[0, 0] == 0
        assert white.flags[0, 0] == 0


def test_a_negative_index_without_a_flag_is_water_or_snow_and_says_it_is_assumed() -> None:
    found = by_threshold(-0.2, threshold_method(BAND, TABLE))
    assert 0.9775 < found.band < 0.989
    assert found.band_uncertainty > 0.0102
    assert found.flags[0, 0] == ASSUMED
    assert by_logarithm(-0.2).flags[0, 0] == ASSUMED
    assert by_logarithm(-0.1).flags[0, 0] == 0


@pytest.mark.parametrize("logarithmic", [False, True])
def test_a_pixel_without_an_index_gets_a_wide_guess_and_says_so(logarithmic: bool) -> None:
    red, near_infrared = np.array([[np.nan, 0.0]], np.float32), np.array([[0.3, 0.0]], np.float32)
    flags = np.zeros((1, 2), np.uint16)
    if logarithmic:
        found = logarithmic_emissivity(red, near_infrared, flags, logarithmic_method(BAND, TABLE))
    else:
        found = threshold_emissivity(red, near_infrared, flags, threshold_method(BAND, TABLE))
    assert (found.flags == ASSUMED).all()
    # Wide enough for every natural ground of the table, one standard uncertainty a side at least.
    for name in ("soil", "quartz_sand", "green_vegetation"):
        ground = ground_of_class(TABLE.named(name), BAND)
        assert (np.abs(found.band - ground.band) <= found.band_uncertainty * 1.2).all()
        total = np.hypot(found.broadband_shared, found.broadband_own)
        assert (np.abs(found.broadband - ground.broadband) <= 1.3 * total).all()


def test_an_older_index_is_less_certain_but_never_worse_than_knowing_nothing() -> None:
    ages = np.array([0.0, 2.0, 10.0, 25.0, 40.0, 400.0])
    spread = [cover_uncertainty(age) for age in ages]
    assert spread[0] == 0.05
    assert spread == sorted(spread)
    assert cover_uncertainty(-10.0) == cover_uncertainty(10.0)
    # Source: standard deviation of a uniform distribution from 0 to 1, 1 / sqrt(12).
    assert spread[-1] == pytest.approx(0.288675, abs=1e-6)
    fresh, old = (
        by_threshold(0.35, threshold_method(BAND, TABLE, age_in_days=age)).band_uncertainty
        for age in (0.0, 30.0)
    )
    assert old > fresh
    assert by_logarithm(0.35, age=30.0).band_uncertainty > by_logarithm(0.35).band_uncertainty
    with pytest.raises(DomainError, match="number of days"):
        cover_uncertainty(float("nan"))


indices = st.floats(0.0, 1.0)


@bounded
@given(indices, st.sampled_from([None, *INDEX_COEFFICIENTS]))
def test_the_mixture_lies_between_bare_ground_and_vegetation_with_cavities(
    index: float, name: str | None
) -> None:
    chosen = index_coefficients(name) if name else None
    method = threshold_method(BAND, TABLE, coefficients=chosen)
    found = by_threshold(index, method)
    band = method.band
    # 0.4 of the sum of the reflectances is red at most.
    low = min(band.soil, band.vegetation, band.bare + 0.4 * min(band.bare_per_red, 0.0))
    highest = max(band.vegetation, band.soil + (1.0 - band.soil) * band.cavity * band.vegetation, band.bare)
    assert low - 1e-6 <= found.band[0, 0] <= highest + 1e-6
    assert 0.0 < found.band_uncertainty[0, 0] < 0.05
    assert found.flags[0, 0] == 0


@pytest.mark.parametrize("index", [0.05, 0.25, 0.35, 0.45, 0.8])
@pytest.mark.parametrize("age", [0.0, 20.0])
def test_the_stated_uncertainty_is_that_of_drawn_soils_plants_and_covers(index: float, age: float) -> None:
    # Monte Carlo: soil, vegetation and cover drawn apart; the formula written out anew. An index of three
    # weeks before leaves the cover so open that the product of its error and the soil's adds up to a tenth.
    tolerance = 0.05 if age == 0.0 else 0.1
    method = threshold_method(BAND, TABLE, age_in_days=age)
    found = by_threshold(index, method)
    draw = np.random.default_rng(17)
    count = 60_000
    soil_error, plant_error, cover_error, soil_rest, plant_rest = draw.standard_normal((5, count))
    cover = float(vegetation_cover(index)) + method.cover_uncertainty * cover_error
    factor = method.band.cavity if index >= 0.2 else 0.0
    soil = method.soil.band + method.soil.band_uncertainty * soil_error
    plant = method.vegetation.band + method.vegetation.band_uncertainty * plant_error
    band = plant * cover + soil * (1.0 - cover) + (1.0 - soil) * (1.0 - cover) * factor * plant
    s, v = method.soil, method.vegetation
    wide_soil = s.broadband + s.broadband_shared * soil_error + s.broadband_own * soil_rest
    wide_plant = v.broadband + v.broadband_shared * plant_error + v.broadband_own * plant_rest
    wide = wide_plant * cover + wide_soil * (1.0 - cover)
    wide = wide + (1.0 - wide_soil) * (1.0 - cover) * factor * wide_plant
    assert found.band[0, 0] == pytest.approx(band.mean(), abs=4e-4)
    assert found.broadband[0, 0] == pytest.approx(wide.mean(), abs=1e-3)
    assert found.band_uncertainty[0, 0] == pytest.approx(band.std(), rel=tolerance)
    total = float(np.hypot(found.broadband_shared, found.broadband_own)[0, 0])
    assert total == pytest.approx(wide.std(), rel=tolerance)
    shared = np.cov(band, wide)[0, 1] / band.std()
    assert found.broadband_shared[0, 0] == pytest.approx(shared, rel=1.5 * tolerance, abs=5e-4)


@pytest.mark.parametrize("name", [None, *INDEX_COEFFICIENTS, "logarithmic"])
def test_the_compiled_form_equals_the_statement(name: str | None) -> None:
    draw = np.random.default_rng(3)
    shape = (61, 97)
    red = draw.uniform(-0.02, 0.5, shape).astype(np.float32)
    near_infrared = draw.uniform(-0.02, 0.7, shape).astype(np.float32)
    red[draw.uniform(size=shape) < 0.03] = np.nan
    near_infrared[draw.uniform(size=shape) < 0.03] = np.nan
    flags = draw.choice(np.array([0, 0, 0, 64, 128, 192, 4, 1024], dtype=np.uint16), shape)
    if name == "logarithmic":
        log_method = logarithmic_method(BAND, TABLE, age_in_days=5.0)
        found = index_fields(red, near_infrared, flags, log_method)
        stated = logarithmic_emissivity(red, near_infrared, flags, log_method)
    else:
        method = threshold_method(BAND, TABLE, coefficients=index_coefficients(name) if name else None)
        found = index_fields(red, near_infrared, flags, method)
        stated = threshold_emissivity(red, near_infrared, flags, method)
    np.testing.assert_array_equal(found.flags, stated.flags)
    for field in NAMES:
        # The logarithm is a table: one unit in the last place of a float32. The thresholds are equal.
        tolerance = 1.3e-7 if name == "logarithmic" else 0.0
        np.testing.assert_allclose(getattr(found, field), getattr(stated, field), rtol=0.0, atol=tolerance)
        assert not np.isnan(getattr(found, field)).any()


def test_the_compiled_logarithm_is_smooth_over_its_whole_range() -> None:
    index = np.linspace(0.1571, 0.7269, 20_001)
    red = (0.5 * (1.0 - index)).astype(np.float32)[np.newaxis]
    near_infrared = (1.0 - red).astype(np.float32)
    found = index_fields(red, near_infrared, np.zeros(red.shape, np.uint16), logarithmic_method(BAND, TABLE))
    exact = 1.0094 + 0.047 * np.log(vegetation_index(red, near_infrared))
    assert np.abs(found.band - exact).max() < 1e-7
    assert (np.diff(found.band[0]) >= 0.0).all()


def test_either_ground_covers_both_and_keeps_its_parts_consistent() -> None:
    grounds = [
        ground_of_class(TABLE.named(name), BAND) for name in ("water", "snow_ice", "soil", "bare_metal")
    ]
    for first in grounds:
        for second in grounds:
            found = either_ground(first, second)
            for ground in (first, second):
                assert abs(found.band - ground.band) <= found.band_uncertainty + 1e-12
                total = np.hypot(found.broadband_shared, found.broadband_own)
                assert abs(found.broadband - ground.broadband) <= total + 1e-12
    same = either_ground(grounds[0], grounds[0])
    assert same.numbers() == pytest.approx(replace(grounds[0], flags=0).numbers(), rel=1e-9)


def test_unknown_coefficients_are_answered_with_the_known_ones() -> None:
    with pytest.raises(ConfigError, match=r"landsat-8-10.*class table"):
        index_coefficients("landsat-8-12")
