"""The class table: what is shipped, and what users may bring."""

from __future__ import annotations

import pytest

from groundglow.errors import ConfigError, DomainError, InputError
from groundglow.physics.spectral_response import top_hat
from groundglow.retrieval.emissivity_class_table import (
    class_table_from_csv,
    class_table_from_toml,
    shipped_class_table,
)
from responses import RESPONSES

# Ranges of near-nadir emissivity, in 8-9.5 um, 10-12.5 um and broadband.
# Source: planning ranges spanned by Salisbury and D'Aria (1992), RSE 42:83-106; Snyder et al. (1998), IJRS
# 19:2753-2774; Baldridge et al. (2009), RSE 113:711-715; Kotthaus et al. (2014), ISPRS J. 94:194-212; Oke
# (1987) (from memory), and Sutherland (1986), J. Atmos. Ocean. Technol. 3:199-202 for the sands (read).
PUBLISHED = {
    "water": ((0.98, 0.985), (0.985, 0.993), (0.98, 0.99)),
    "snow_ice": ((0.98, 0.99), (0.96, 0.995), (0.97, 0.99)),
    "green_vegetation": ((0.96, 0.99), (0.97, 0.99), (0.97, 0.99)),
    "dry_vegetation": ((0.88, 0.96), (0.94, 0.98), (0.93, 0.97)),
    "soil": ((0.85, 0.96), (0.94, 0.98), (0.92, 0.97)),
    "quartz_sand": ((0.60, 0.90), (0.93, 0.97), (0.89, 0.92)),
    "asphalt": ((0.93, 0.97), (0.94, 0.98), (0.93, 0.97)),
    "concrete": ((0.88, 0.95), (0.92, 0.97), (0.90, 0.96)),
    "roof_tile": ((0.88, 0.95), (0.90, 0.96), (0.90, 0.95)),
    "bare_metal": ((0.03, 0.30), (0.03, 0.30), (0.03, 0.30)),
}

TOML = """
[[class]]
name = "gravel"
title = "gravel of the river"
code = 31
broadband_correlation = 0.4
[[class.emissivity]]
from = 8.0
to = 9.5
value = 0.80
uncertainty = 0.05
[[class.emissivity]]
from = 10.0
to = 12.5
value = 0.95
uncertainty = 0.01
published = [0.93, 0.97]
source = "measured in the quarry"
[class.broadband]
value = 0.92
uncertainty = 0.02

[[class]]
name = "tarpaulin"
code = 32
[[class.emissivity]]
from = 8.0
to = 13.0
value = 0.93
uncertainty = 0.02
"""

CSV = """\ufeffclass, code, title, from, to, value, uncertainty, published_from, published_to, \
source, broadband_correlation
gravel, 31, gravel of the river, 8.0, 9.5, 0.80, 0.05, , , , 0.4
gravel, 31, gravel of the river, 10.0, 12.5, 0.95, 0.01, 0.93, 0.97, measured in the quarry, 0.4
gravel, 31, gravel of the river, , , 0.92, 0.02, , , , 0.4
tarpaulin, 32, , 8.0, 13.0, 0.93, 0.02, , , ,
"""


@pytest.mark.parametrize("name", sorted(PUBLISHED))
def test_shipped_values_lie_inside_the_published_ranges_and_cover_them(name: str) -> None:
    entry = shipped_class_table().named(name)
    assert entry.broadband is not None
    parts = (*entry.intervals, entry.broadband)
    assert [part.interval for part in parts] == [(8.0, 9.5), (10.0, 12.5), None]
    for part, (low, high) in zip(parts, PUBLISHED[name], strict=True):
        assert low <= part.value <= high
        assert part.range == (low, high)
        assert part.source
        # A uniform distribution over the range, JCGM 100:2008, 4.3.7.
        assert part.uncertainty == pytest.approx((high - low) / 12.0**0.5, abs=1.01e-4)


def test_the_shipped_table_has_no_other_classes() -> None:
    table = shipped_class_table()
    assert set(table.classes) == set(PUBLISHED)
    assert len(table.by_code()) == len(PUBLISHED)
    assert table.by_code()[1].name == "water"


@pytest.mark.parametrize("band", sorted(set(RESPONSES) - {"midwave camera"}))
@pytest.mark.parametrize("name", sorted(PUBLISHED))
def test_every_class_has_a_value_in_every_thermal_band(name: str, band: str) -> None:
    value, uncertainty = shipped_class_table().named(name).in_band(RESPONSES[band])
    (first, second, _) = PUBLISHED[name]
    assert min(first[0], second[0]) <= value <= max(first[1], second[1])
    assert 0.0 < uncertainty < 0.1


def test_a_band_inside_an_interval_has_its_value_and_one_across_lies_between() -> None:
    sand = shipped_class_table().named("quartz_sand")
    assert sand.in_band(top_hat(10.6, 11.2)) == pytest.approx((0.95, 0.0116), abs=1e-9)
    assert sand.in_band(top_hat(8.2, 9.4)) == pytest.approx((0.75, 0.0867), abs=1e-9)
    across, _ = sand.in_band(top_hat(7.5, 13.5))
    # Two um of 0.75, half a um of the mean, three and a half um of 0.95.
    assert across == pytest.approx((2.0 * 0.75 + 0.5 * 0.85 + 3.5 * 0.95) / 6.0, abs=1e-9)


def test_a_band_the_table_does_not_cover_is_refused() -> None:
    with pytest.raises(
        DomainError, match=r"water has emissivities from 8 to 12\.5 um, the band needs 3\.5 to 4\.1"
    ):
        shipped_class_table().named("water").in_band(RESPONSES["midwave camera"])


def test_the_same_table_as_toml_and_as_csv() -> None:
    from_toml = class_table_from_toml(TOML, where="mine.toml")
    from_csv = class_table_from_csv(CSV, where="mine.csv")
    assert from_toml == from_csv
    gravel = from_toml.named("gravel")
    assert gravel.title == "gravel of the river"
    assert gravel.intervals[1].source == "measured in the quarry"
    assert gravel.broadband_correlation == 0.4
    assert from_toml.named("tarpaulin").broadband is None
    assert from_toml.named("tarpaulin").title == "tarpaulin"


def test_the_ends_of_the_ranges_belong_to_them() -> None:
    text = TOML.replace("value = 0.93\nuncertainty = 0.02", "value = 1.0\nuncertainty = 0.0")
    found = class_table_from_toml(text, where="mine.toml").named("tarpaulin")
    assert found.in_band(top_hat(10.6, 11.2)) == pytest.approx((1.0, 0.0))
    # One and a half micrometres beyond the outermost interval, and no more.
    assert found.in_band(top_hat(13.5, 14.5))[0] == pytest.approx(1.0)
    with pytest.raises(DomainError, match="the band needs"):
        found.in_band(top_hat(13.5, 14.6))


def test_a_rasters_own_codes_can_be_named() -> None:
    table = shipped_class_table()
    found = table.by_code({80: "water", 50: "asphalt"})
    assert {code: entry.name for code, entry in found.items()} == {80: "water", 50: "asphalt"}
    with pytest.raises(ConfigError, match=r"no class 'swamp'.*Choose from: water"):
        table.by_code({90: "swamp"})


@pytest.mark.parametrize(
    ("change", "complaint"),
    [
        (("[[class]]", "[[class]"), "not valid TOML"),
        (('name = "gravel"\n', ""), "class number 1 has no name"),
        (("code = 31\n", ""), "class gravel: code must be a whole number, not None"),
        (("code = 31", "code = 31.5"), "code must be a whole number, not 31.5"),
        (("code = 31", "code = 32"), "the code 32 occurs more than once"),
        (('name = "tarpaulin"', 'name = "gravel"'), "the name gravel occurs more than once"),
        (("value = 0.80\n", ""), "value must be a number from 0.001 to 1, not nothing"),
        (("value = 0.80", "value = 0.0"), "value must be a number from 0.001 to 1, not 0.0"),
        (("value = 0.80", "value = 1.3"), "not 1.3"),
        (("value = 0.80", "value = 80.0"), "percent"),
        (("value = 0.80", "value = nan"), "not nan"),
        (("value = 0.80", "value = true"), "not True"),
        (("value = 0.80", 'value = "0.8"'), "not '0.8'"),
        (("uncertainty = 0.05", "uncertainty = -0.05"), "uncertainty must be a number from 0 to 0.5"),
        (("value = 0.95", "value = 0.90"), "must lie within the published range"),
        (("to = 9.5", "to = 7.5"), "must increase"),
        (("to = 9.5", "to = 10.5"), "overlap"),
        (("from = 8.0\nto = 9.5", "from = 8000\nto = 9500"), "from must be a number from 1 to 100"),
        (("broadband_correlation = 0.4", "broadband_correlation = 1.4"), "from -1 to 1, not 1.4"),
        (("title", "titel"), "unknown key titel"),
        (("source =", "sorce ="), "unknown key sorce"),
    ],
)
def test_a_toml_table_out_of_shape_is_answered_by_name(change: tuple[str, str], complaint: str) -> None:
    assert change[0] in TOML
    with pytest.raises(InputError) as caught:
        class_table_from_toml(TOML.replace(*change, 1), where="mine.toml")
    assert complaint in str(caught.value)
    assert str(caught.value).startswith("mine.toml")


@pytest.mark.parametrize("text", ["", "class = 3", "class = []"])
def test_a_toml_table_without_classes_is_refused(text: str) -> None:
    with pytest.raises(InputError, match="no "):
        class_table_from_toml(text, where="mine.toml")


def test_a_class_without_any_interval_is_refused() -> None:
    with pytest.raises(InputError, match="no emissivity for any wavelength interval"):
        class_table_from_toml('[[class]]\nname = "air"\ncode = 4', where="mine.toml")
    with pytest.raises(InputError, match="a table of its own"):
        class_table_from_toml('[[class]]\nname = "air"\ncode = 4\nemissivity = [0.9]', where="mine.toml")


@pytest.mark.parametrize(
    ("change", "complaint"),
    [
        ((", value,", ", wert,"), "lacks the columns value and has unknown columns wert"),
        (("0.80, 0.05", "none, 0.05"), "line 2: value must be a number, not 'none'"),
        (("31, gravel of the river, 8.0", "thirty, gravel of the river, 8.0"), "code must be a whole number"),
        (
            ("31, gravel of the river, 8.0", "30, gravel of the river, 8.0"),
            "line 3: the class gravel has two codes",
        ),
        (("gravel, 31, gravel of the river, 8.0", ", 31, gravel of the river, 8.0"), "the class has no name"),
        (("0.93, 0.02", "93, 2"), "percent"),
        (("8.0, 13.0", ", 13.0"), "from must be a number, not ''"),
        (("8.0, 13.0", ","), "no emissivity for any wavelength interval"),
        (("10.0, 12.5", ","), "more than one broadband"),
    ],
)
def test_a_csv_table_out_of_shape_is_answered_by_line(change: tuple[str, str], complaint: str) -> None:
    assert change[0] in CSV
    with pytest.raises(InputError) as caught:
        class_table_from_csv(CSV.replace(*change, 1), where="mine.csv")
    assert complaint in str(caught.value)
    assert str(caught.value).startswith("mine.csv")


def test_an_empty_csv_table_is_refused() -> None:
    with pytest.raises(InputError, match="lacks the columns"):
        class_table_from_csv("", where="mine.csv")
    with pytest.raises(InputError, match="no rows"):
        class_table_from_csv(CSV.splitlines()[0] + "\n", where="mine.csv")
