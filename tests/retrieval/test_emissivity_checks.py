"""Inputs that look like something else: percent, counts, swapped or missing bands, unknown codes."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.errors import ConfigError, InputError
from groundglow.retrieval.emissivity_checks import (
    check_class_codes,
    check_emissivity,
    check_index_bands,
    check_reflectance,
)
from groundglow.retrieval.emissivity_class_table import shipped_class_table

DRAW = np.random.default_rng(23)
RED = DRAW.uniform(0.03, 0.15, (40, 40))
NEAR_INFRARED = DRAW.uniform(0.2, 0.5, (40, 40))


def test_good_inputs_pass_without_a_word() -> None:
    emissivity = DRAW.uniform(0.9, 1.0, 1000)
    emissivity[:300] = np.nan
    check_emissivity(emissivity, where="emissivity.tif")
    check_reflectance(RED, band="red", where="red.tif")
    check_index_bands(RED, NEAR_INFRARED)
    check_class_codes(
        np.array([[1, 2], [10, 255]]), shipped_class_table().by_code(), no_data=255, where="c.tif"
    )


@pytest.mark.parametrize(
    ("factor", "hint"),
    [
        (100.0, "percent: give the scale 0.01"),
        (10000.0, "stored counts"),
        (0.0, "no-data value"),
        (-1.0, "no-data"),
    ],
)
def test_an_emissivity_raster_on_another_scale(factor: float, hint: str) -> None:
    with pytest.raises(InputError) as caught:
        check_emissivity(factor * DRAW.uniform(0.95, 0.99, 500), where="emissivity.tif")
    assert str(caught.value).startswith("emissivity.tif: 100 % of the emissivities")
    assert hint in str(caught.value)


def test_an_emissivity_raster_is_refused_only_if_more_than_half_is_wrong() -> None:
    values = np.full(100, 0.97)
    values[:50] = 1.3
    check_emissivity(values, where="emissivity.tif")
    values[:51] = 1.3
    with pytest.raises(InputError, match="51 %"):
        check_emissivity(values, where="emissivity.tif")


@pytest.mark.parametrize(
    ("factor", "hint"), [(100.0, "percent"), (10000.0, "stored counts"), (255.0, "give the scale")]
)
def test_reflectance_in_percent_or_counts_is_refused(factor: float, hint: str) -> None:
    with pytest.raises(InputError) as caught:
        check_reflectance(factor * RED, band="red", where="red.tif")
    assert hint in str(caught.value)
    assert "red reflectance" in str(caught.value)


def test_reflectance_at_night_is_answered_with_another_date() -> None:
    with pytest.raises(InputError, match="another date"):
        check_reflectance(np.zeros((5, 5)), band="near_infrared", where="nir.tif")


def test_a_raster_of_nothing_is_refused() -> None:
    with pytest.raises(InputError, match=r"not one valid value of emissivity"):
        check_emissivity(np.full((3, 3), np.nan), where="emissivity.tif")


def test_swapped_index_bands_are_noticed() -> None:
    with pytest.raises(InputError, match=r"negative over 100 % of the land.*swapped"):
        check_index_bands(NEAR_INFRARED, RED)


def test_water_does_not_look_like_swapped_bands() -> None:
    water = np.zeros((40, 40), np.bool_)
    water[:36] = True
    red, near_infrared = RED.copy(), NEAR_INFRARED.copy()
    red[water], near_infrared[water] = 0.04, 0.02
    check_index_bands(red, near_infrared, water=water)
    with pytest.raises(InputError, match="open water"):
        check_index_bands(red, near_infrared)


@pytest.mark.parametrize(
    ("red", "near_infrared", "missing"),
    [(None, NEAR_INFRARED, "near-infrared reflectance; red is"), (RED, None, "near_infrared is"),
     (None, None, "red and near_infrared is")],
)  # fmt: skip
def test_a_missing_index_band_is_named(
    red: np.ndarray | None, near_infrared: np.ndarray | None, missing: str
) -> None:
    with pytest.raises(ConfigError, match=missing):
        check_index_bands(red, near_infrared)


def test_class_codes_without_a_class_are_listed_before_the_work_starts() -> None:
    codes = np.array([[1, 2, 77], [77, 255, 3]], dtype=np.uint8)
    with pytest.raises(
        InputError, match=r"landcover\.tif: class codes without a class.*77 \(2 pixels\)"
    ) as caught:
        check_class_codes(codes, shipped_class_table().by_code(), no_data=255, where="landcover.tif")
    assert "255" not in str(caught.value)
