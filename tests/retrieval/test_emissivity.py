"""Emissivity that is given: constant, raster, class raster; and what the broadband rules make of it."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.errors import ConfigError, DomainError, InputError
from groundglow.physics.spectral_response import top_hat
from groundglow.quantities import FLAG
from groundglow.retrieval.emissivity import constant_fields, given_ground, ground_of_class, raster_fields
from groundglow.retrieval.emissivity_broadband import (
    RELATIONS,
    broadband_from_band,
    broadband_from_bands,
    relation,
)
from groundglow.retrieval.emissivity_class_raster import class_fields, class_lookup
from groundglow.retrieval.emissivity_class_table import class_table_from_toml, shipped_class_table
from groundglow.retrieval.emissivity_hemispheric import (
    ELSEWHERE,
    HEMISPHERIC_STEPS,
    WATER_REFRACTIVE_INDEX,
    fresnel_emissivity,
    hemispheric_emissivity,
    hemispheric_step,
    water_hemispheric_ratio,
)

BAND = top_hat(10.6, 11.19)


def bits(*names: str) -> int:
    return sum(FLAG[name].mask for name in names)


def test_a_constant_is_the_same_everywhere_and_says_it_is_assumed() -> None:
    fields = constant_fields(given_ground(0.97, 0.01), (3, 4))
    assert fields.band.shape == (3, 4)
    assert fields.band.dtype == np.float32
    assert np.unique(fields.band).tolist() == [np.float32(0.97)]
    assert np.unique(fields.broadband).tolist() == [np.float32(0.97)]
    assert np.unique(fields.broadband_shared).tolist() == [np.float32(0.01)]
    assert np.unique(fields.broadband_own).tolist() == [np.float32(0.03)]
    assert np.unique(fields.flags).tolist() == [bits("emissivity_assumed", "broadband_emissivity_assumed")]


def test_a_given_broadband_value_is_taken_as_it_is() -> None:
    fields = constant_fields(given_ground(0.97, 0.01, broadband=0.94, broadband_uncertainty=0.02), (2, 2))
    assert np.unique(fields.broadband).tolist() == [np.float32(0.94)]
    assert np.unique(fields.broadband_shared).tolist() == [0.0]
    assert np.unique(fields.broadband_own).tolist() == [np.float32(0.02)]
    assert np.unique(fields.flags).tolist() == [bits("emissivity_assumed")]


def test_a_constant_below_0_7_is_bare_metal() -> None:
    fields = constant_fields(given_ground(0.1, 0.05, broadband=0.1), (1, 1))
    assert fields.flags[0, 0] == bits("emissivity_assumed", "bare_metal")


@pytest.mark.parametrize(
    ("value", "uncertainty", "broadband", "complaint"),
    [
        (0.0, 0.01, None, "emissivity must be above 0"),
        (1.3, 0.01, None, "at most 1, not 1.3"),
        (97.0, 0.01, None, "percent"),
        (float("nan"), 0.01, None, "not nan"),
        (0.97, -0.1, None, "uncertainty of the emissivity"),
        (0.97, 0.01, 1.2, "broadband emissivity must be"),
    ],
)
def test_a_constant_that_is_none_is_refused(
    value: float, uncertainty: float, broadband: float | None, complaint: str
) -> None:
    with pytest.raises(DomainError, match=complaint):
        given_ground(value, uncertainty, broadband=broadband)


def test_a_raster_keeps_what_is_possible_and_flags_the_rest() -> None:
    given = np.array([[0.97, 0.0, -0.1, 1.3], [1.0, np.nan, 0.69, np.inf]], dtype=np.float32)
    fields = raster_fields(given, 0.02)
    expected = np.array([[0.97, np.nan, np.nan, np.nan], [1.0, np.nan, 0.69, np.nan]], dtype=np.float32)
    np.testing.assert_array_equal(fields.band, expected)
    np.testing.assert_array_equal(fields.broadband, expected)
    for values, number in (
        (fields.band_uncertainty, 0.02),
        (fields.broadband_shared, 0.02),
        (fields.broadband_own, 0.03),
    ):
        np.testing.assert_array_equal(values, np.full((2, 4), number, np.float32))
    wide = bits("broadband_emissivity_assumed")
    impossible = bits("impossible")
    assert fields.flags.tolist() == [
        [wide, impossible, impossible, impossible],
        [wide, bits("no_data"), wide | bits("bare_metal"), impossible],
    ]
    assert fields.flags.dtype == np.uint16


def test_a_broadband_raster_stands_where_it_has_a_value() -> None:
    given = np.array([[0.97, 0.97, 0.97]], dtype=np.float32)
    wide = np.array([[0.94, np.nan, 1.4]], dtype=np.float32)
    fields = raster_fields(given, np.float32(0.01), broadband=wide, broadband_uncertainty=0.015)
    np.testing.assert_array_equal(fields.broadband, np.array([[0.94, 0.97, 0.97]], dtype=np.float32))
    np.testing.assert_array_equal(fields.broadband_shared, np.array([[0.0, 0.01, 0.01]], dtype=np.float32))
    assert fields.flags.tolist() == [
        [0, bits("broadband_emissivity_assumed"), bits("broadband_emissivity_assumed")]
    ]


def test_class_codes_become_their_values_and_flags() -> None:
    table = shipped_class_table()
    lookup = class_lookup(
        table.by_code({80: "water", 70: "snow_ice", 50: "quartz_sand", 3: "bare_metal"}), BAND
    )
    codes = np.array([[80, 70], [50, 3]], dtype=np.uint8)
    fields = class_fields(codes, lookup)
    assert fields.band == pytest.approx(np.array([[0.989, 0.9775], [0.95, 0.165]]), abs=1e-6)
    assert fields.broadband[1] == pytest.approx([0.905, 0.165], abs=1e-6)
    assert fields.flags.tolist() == [[bits("water"), bits("snow")], [0, bits("bare_metal")]]
    total = np.hypot(fields.broadband_shared, fields.broadband_own)
    # Sand: 0.0087 of the table and 0.01 of 0.905 for the step to the hemisphere, in quadrature.
    assert total[1, 0] == pytest.approx(np.hypot(0.0087, 0.00905), abs=1e-4)


@pytest.mark.parametrize("dtype", [np.uint8, np.int16, np.int32, np.int64])
@pytest.mark.parametrize("other", [2, 120, 70_001])
def test_codes_of_any_kind_and_range_find_their_class(dtype: type, other: int) -> None:
    if other > np.iinfo(dtype).max:
        other = int(np.iinfo(dtype).max)
    table = shipped_class_table()
    lookup = class_lookup(table.by_code({1: "water", other: "asphalt"}), BAND)
    codes = np.array([[1, other, 1], [other, other, 1]], dtype=dtype)
    found = class_fields(codes, lookup)
    assert found.band == pytest.approx(np.where(codes == 1, 0.989, 0.96), abs=1e-6)
    for stranger in (0, other - 1 if other > 2 else 3, np.iinfo(dtype).min if other > 3 else 99):
        with pytest.raises(InputError, match="without a class"):
            class_fields(np.array([[1, stranger]], dtype=dtype), lookup)


def test_no_data_in_a_class_raster_is_no_data() -> None:
    lookup = class_lookup(shipped_class_table().by_code(), BAND)
    fields = class_fields(np.array([[1, 0]]), lookup, known=np.array([[True, False]]))
    assert np.isnan(fields.band).tolist() == [[False, True]]
    assert fields.flags.tolist() == [[bits("water"), bits("no_data")]]


def test_codes_without_a_class_are_listed() -> None:
    lookup = class_lookup(shipped_class_table().by_code(), BAND)
    codes = np.array([[1, 2, 77], [77, 200, 3]])
    with pytest.raises(InputError, match=r"77 \(2 pixels\), 200 \(1 pixels\).*The table knows 1, 2, 3"):
        class_fields(codes, lookup)
    with pytest.raises(InputError, match=r" and 20 more"):
        class_fields(np.arange(100, 130).reshape(5, 6), lookup)
    with pytest.raises(DomainError, match="at least one class"):
        class_lookup({}, BAND)


def test_a_class_without_a_broadband_column_takes_the_bands_value_and_says_so() -> None:
    table = class_table_from_toml(
        '[[class]]\nname = "water"\ncode = 1\n[[class.emissivity]]\nfrom = 8\nto = 12.5\n'
        "value = 0.98\nuncertainty = 0.01",
        where="mine.toml",
    )
    ground = ground_of_class(table.named("water"), BAND)
    assert ground.numbers() == pytest.approx((0.98, 0.01, 0.98, 0.01, 0.03))
    assert ground.flags == bits("water", "broadband_emissivity_assumed")


@pytest.mark.parametrize(
    ("name", "expected"), [("aster-2003", 0.999), ("aster-2013", 0.995), ("modis-2005", 1.001)]
)
def test_published_relations_of_all_bands_one(name: str, expected: float) -> None:
    # Source: sums of the coefficients of Ogawa et al. (2003), Cheng et al. (2013) and Wang et al. (2005)
    # (from memory). An emissivity above 1 is cut to 1.
    chosen = RELATIONS[name]
    assert sum(chosen.coefficients) + chosen.constant == pytest.approx(expected, abs=1e-9)
    count = len(chosen.bands)
    found = broadband_from_bands(chosen, [np.ones(2)] * count, [np.zeros(2)] * count, used=chosen.bands[-1])
    assert found.value == pytest.approx([min(expected, 1.0)] * 2, abs=1e-9)
    assert found.shared.tolist() == [0.0, 0.0]
    assert found.own == pytest.approx([chosen.uncertainty] * 2)


@pytest.mark.parametrize("correlation", [0.0, 0.6, 1.0])
def test_a_relations_error_is_split_between_the_bands_and_itself(correlation: float) -> None:
    # Drawn errors: equal correlation of every band with the one used, the rest independent.
    chosen = relation("aster-2003")
    emissivity, uncertainty = [0.80, 0.80, 0.82, 0.94, 0.95], [0.03, 0.03, 0.02, 0.015, 0.01]
    found = broadband_from_bands(chosen, emissivity, uncertainty, used="13", correlation=correlation)
    draws = np.random.default_rng(5).standard_normal((7, 40_000))
    common = draws[0]
    total = chosen.uncertainty * draws[6]
    for index, (number, weight) in enumerate(zip(chosen.bands, chosen.coefficients, strict=True)):
        rest = np.sqrt(1.0 - correlation**2) * draws[1 + index]
        error = common if number == "13" else correlation * common + rest
        total = total + weight * uncertainty[index] * error
    assert np.hypot(found.shared, found.own) == pytest.approx(np.std(total), rel=0.02)
    assert found.shared == pytest.approx(np.mean(total * common), rel=0.03)


def test_a_relation_with_missing_bands_or_a_foreign_one_is_refused() -> None:
    with pytest.raises(ConfigError, match="29, 31, 32, 2 are given"):
        broadband_from_bands(relation("modis-2005"), [1.0, 1.0], [0.0, 0.0], used="31")
    with pytest.raises(ConfigError, match="does not hold band 30"):
        broadband_from_bands(relation("modis-2005"), [1.0] * 3, [0.0] * 3, used="30")
    with pytest.raises(ConfigError, match="Choose from: aster-2003"):
        relation("aster-1999")


def test_no_value_in_a_band_is_no_broadband_value() -> None:
    found = broadband_from_bands(
        relation("modis-2005"), [np.array([0.9, np.nan]), 0.97, 0.97], [0.02, 0.01, 0.01], used="31"
    )
    for part in (found.value, found.shared, found.own):
        assert np.isnan(part).tolist() == [False, True]


def test_the_bands_value_stands_in_with_a_fully_shared_error_and_0_03_of_its_own() -> None:
    found = broadband_from_band(np.array([0.95, np.nan]), 0.01)
    assert found.value[0] == 0.95
    assert found.shared[0] == 0.01
    assert found.own[0] == 0.03
    assert np.isnan(found.shared[1])


def test_flat_water_emits_near_nadir_what_is_published() -> None:
    # Source: emissivity of water at nadir 0.985-0.993 in 10-12.5 um and 0.98-0.99 in 8-9.5 um, Salisbury and
    # D'Aria (1992), RSE 42:83-106; the refractive index is Hale and Querry's (1973), Applied Optics 12:555
    # (from memory).
    assert 0.985 < fresnel_emissivity(1.153, 0.0968, 0.0) < 0.9935
    assert 0.98 < fresnel_emissivity(1.277, 0.0361, 0.0) < 0.99


def test_the_refractive_index_of_water_runs_smoothly_through_the_window() -> None:
    # Source: Hale and Querry (1973): the real part falls to its least near 12 um, the imaginary part rises
    # throughout (from memory). A slip of a digit would break the run.
    wavelength, real, imaginary = WATER_REFRACTIVE_INDEX.T
    assert np.diff(wavelength) == pytest.approx(0.5)
    assert (np.diff(real)[wavelength[1:] <= 12.0] < 0.0).all()
    assert (np.diff(real)[wavelength[:-1] >= 12.0] > 0.0).all()
    assert (np.diff(imaginary) > 0.0).all()
    assert np.abs(np.diff(real, 2)).max() < 0.03
    nadir = fresnel_emissivity(real, imaginary, 0.0)
    assert nadir.min() > 0.965
    assert nadir.max() < 0.994


def test_water_emits_less_at_grazing_angles() -> None:
    # Source: Masuda et al. (1988), RSE 24:313-329, 11 um, no wind: about 0.99 to 40 degrees, about 0.97 at 60
    # degrees (from memory), falling to 0 at the horizon.
    found = fresnel_emissivity(1.153, 0.0968, np.array([0.0, 40.0, 60.0, 75.0, 90.0]))
    assert (np.diff(found) < 0.0).all()
    assert found[1] == pytest.approx(0.99, abs=0.005)
    assert found[2] == pytest.approx(0.967, abs=0.01)
    assert found[4] == pytest.approx(0.0, abs=1e-9)


def test_a_perfect_transmitter_emits_everything_in_all_directions() -> None:
    assert fresnel_emissivity(1.0, 0.0, np.array([0.0, 30.0, 80.0])) == pytest.approx([1.0] * 3, abs=1e-12)
    assert hemispheric_emissivity(1.0, 0.0) == pytest.approx(1.0, abs=1e-12)


def test_hemispheric_emissivity_of_a_dielectric() -> None:
    # Source: common practice, from memory: diffuse external reflectance 0.0918 for n = 1.5 (paint optics) and
    # 0.0666 for n = 1.3333 (flat water under an overcast sky).
    assert 1.0 - hemispheric_emissivity(1.5, 0.0) == pytest.approx(0.0918, abs=5e-4)
    assert 1.0 - hemispheric_emissivity(1.3333, 0.0) == pytest.approx(0.0666, abs=5e-4)


def test_the_step_to_the_hemisphere() -> None:
    water = hemispheric_step("water")
    assert water.ratio == pytest.approx(water_hemispheric_ratio(), abs=1e-3)
    assert water_hemispheric_ratio(275.0) == pytest.approx(water_hemispheric_ratio(305.0), abs=1e-3)
    assert hemispheric_step("asphalt") == ELSEWHERE
    assert ELSEWHERE.ratio == 1.0
    assert ELSEWHERE.uncertainty > 0.0
    snow = HEMISPHERIC_STEPS["snow_ice"]
    # From flat ice, close to water, to a diffuse emitter: all of it within 1.75 standard uncertainties.
    assert snow.ratio - 1.75 * snow.uncertainty < water.ratio
    assert snow.ratio + 1.75 * snow.uncertainty > 1.0
