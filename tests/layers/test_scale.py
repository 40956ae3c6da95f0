"""Round steps, units and names as a reader wants them."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from groundglow.errors import DomainError
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.layer_format import format_of
from groundglow.layers.scale import (
    _FLAG_COLOURS,
    colour_scale,
    flag_classes,
    readable_unit,
    title_of,
)
from groundglow.layers.statistics import LayerStatistics
from groundglow.layers.tags import text_of
from groundglow.quantities import FLAG, FLAGS, QUANTITIES


def layer(name: str, low: float = 290.0, high: float = 310.0) -> LayerSummary:
    """A finished layer whose values spread evenly, without a file."""
    spread = high - low
    statistics = LayerStatistics(
        100, 100, low, high, (low + high) / 2, spread / 3.46, low + 0.05 * spread, (low + high) / 2,
        high - 0.05 * spread,
    )  # fmt: skip
    return LayerSummary(name, Path(f"{name}.tif"), 1, "00", statistics, format_of(name), text_of(name))


def flagged(*values: int) -> LayerSummary:
    counted = tuple((value, 10) for value in sorted(values))
    return replace(layer("quality"), statistics=LayerStatistics(100, 100, values=counted))


def test_celsius_is_round_and_kelvin_is_stored() -> None:
    scale = colour_scale(layer("surface_temperature"))
    assert scale.unit == "°C"
    assert scale.numbers == ("15", "20", "25", "30", "35", "40")
    assert scale.ticks == (288.15, 293.15, 298.15, 303.15, 308.15, 313.15)
    assert scale.labels[0] == "15 °C"


def test_kelvin_is_round_where_it_is_shown() -> None:
    scale = colour_scale(layer("surface_temperature"), "kelvin")
    assert scale.labels == ("290 K", "295 K", "300 K", "305 K", "310 K")
    assert scale.ticks == (290.0, 295.0, 300.0, 305.0, 310.0)


def test_frost_has_a_true_minus_sign_and_no_minus_zero() -> None:
    scale = colour_scale(layer("surface_temperature", 263.0, 283.0))
    assert "−10 °C" in scale.labels
    assert "0 °C" in scale.labels


def test_differences_of_temperature_stay_in_kelvin() -> None:
    scale = colour_scale(layer("surface_temperature_uncertainty", 0.4, 2.4))
    assert scale.unit == "K"
    assert scale.ramp == "doubt"


@given(st.floats(-1e4, 1e4), st.floats(1e-3, 1e4))
def test_steps_enclose_the_range_in_a_few_even_steps(low: float, spread: float) -> None:
    scale = colour_scale(layer("net_longwave_flux", low, low + spread))
    assert scale.low <= low + 0.05 * spread
    assert scale.high >= low + 0.95 * spread
    assert 4 <= len(scale.ticks) <= 11
    assert len(set(scale.numbers)) == len(scale.numbers), "every label is another number"
    steps = [after - before for before, after in zip(scale.ticks, scale.ticks[1:], strict=False)]
    assert max(steps) - min(steps) < 1e-6 * max(steps) + 1e-8


@pytest.mark.parametrize("name", [name for name in QUANTITIES if name != "quality"])
def test_one_value_or_none_still_gives_a_scale(name: str) -> None:
    assert colour_scale(layer(name, 0.97, 0.97)).high > colour_scale(layer(name, 0.97, 0.97)).low
    assert colour_scale(layer(name, 0.0, 0.0)).high > 0
    nothing = replace(layer(name), statistics=LayerStatistics(100, 0))
    assert colour_scale(nothing).high > colour_scale(nothing).low


@pytest.mark.parametrize(
    ("unit", "shown"),
    [("W m-2", "W m⁻²"), ("W m-2 sr-1 um-1", "W m⁻² sr⁻¹ µm⁻¹"), ("K", "K"), ("1", ""), ("kg m-2", "kg m⁻²")],
)
def test_units_are_typeset(unit: str, shown: str) -> None:
    assert readable_unit(unit) == shown


def test_titles_name_the_unit_shown() -> None:
    assert title_of(layer("surface_temperature")) == "radiometric surface (skin) temperature [°C]"
    assert title_of(layer("surface_temperature"), "kelvin").endswith("[K]")
    assert title_of(layer("emissivity", 0.9, 1.0)) == "surface emissivity in the thermal band"


def test_combinations_are_named_by_their_gravest_flag() -> None:
    cloud, water, near = FLAG["cloud"].mask, FLAG["water"].mask, FLAG["near_cloud"].mask
    classes = flag_classes(flagged(0, water, cloud | water, cloud | near | water))
    assert [(one.value, one.label) for one in classes] == [
        (cloud | water, "cloud (also: water)"),
        (cloud | near | water, "cloud (also: near a cloud; water)"),
        (water, "water"),
        (0, "nothing flagged"),
    ]
    assert classes[0].colour == classes[1].colour != classes[2].colour


def test_every_flag_has_its_own_colour() -> None:
    assert set(_FLAG_COLOURS) == {flag.name for flag in FLAGS}
    assert len(set(_FLAG_COLOURS.values())) == len(FLAGS)


def test_flags_have_no_scale_and_numbers_no_flags() -> None:
    with pytest.raises(DomainError, match="no scale"):
        colour_scale(flagged(0))
    with pytest.raises(DomainError, match="no flags"):
        flag_classes(layer("emissivity"))
