"""Quality words become our flags by rule."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.errors import ConfigError
from groundglow.quantities import FLAG
from groundglow.scene.quality import QualityRule, flags_of_codes, lookup_table
from groundglow.scene.sensor import load_sensor


def names(word: int, rules: tuple[QualityRule, ...], kind: str = "uint16") -> set[str]:
    value = int(flags_of_codes(np.array([word], dtype=kind), rules)[0])
    return {flag.name for flag in FLAG.values() if value & flag.mask}


def test_collection_2_words() -> None:
    # USGS, Landsat Collection 2 QA_PIXEL: bit 0 fill, 1 dilated cloud, 2 cirrus, 3 cloud, 4 shadow,
    # 5 snow, 6 clear, 7 water, 8-15 confidences. 21824 is "clear, low confidences", 22280 "cloud, high
    # confidence", 1 "fill" (USGS table of common values, read in the STAC classification extension).
    rules = load_sensor("landsat-8").quality_layouts["collection-2"]
    assert names(21824, rules) == set()
    assert names(22280, rules) == {"cloud"}
    assert names(1, rules) == {"no_data"}
    assert names(21952, rules) == {"water"}
    assert names(23888, rules) == {"shadow"}
    assert names(30048, rules) == {"snow"}
    assert names(54596, rules) == {"thin_cloud"}
    assert names(1 << 1, rules) == {"near_cloud"}


def test_cirrus_needs_a_cirrus_band() -> None:
    for sensor in ("landsat-4", "landsat-5", "landsat-7"):
        assert names(1 << 2, load_sensor(sensor).quality_layouts["collection-2"]) == set()


def test_collection_1_words() -> None:
    # USGS, Landsat Collection 1 BQA (from memory): bit 0 fill, 4 cloud, 5-6 cloud confidence,
    # 7-8 shadow, 9-10 snow, 11-12 cirrus; 2720 is clear, 2800 cloud with high confidence.
    rules = load_sensor("landsat-8").quality_layouts["collection-1"]
    assert names(2720, rules) == set()
    assert names(2800, rules) == {"cloud"}
    assert names(1, rules) == {"no_data"}
    assert names(2720 | 3 << 7, rules) == {"shadow"}
    assert names(2720 | 3 << 9, rules) == {"snow"}
    assert names(2720 | 3 << 11, rules) == {"thin_cloud"}


def test_words_before_the_collections() -> None:
    # USGS, Landsat 8 quality band before 2016 (from memory): bits 4-5 water, 10-11 snow,
    # 12-13 cirrus, 14-15 cloud; 61440 is the well-known word of thick cloud with cirrus.
    rules = load_sensor("landsat-8").quality_layouts["before-collections"]
    assert names(20480, rules) == set()
    assert names(61440, rules) == {"cloud", "thin_cloud"}
    assert names(53248, rules) == {"cloud"}
    assert names(28672, rules) == {"thin_cloud"}
    assert names(20512, rules) == set()
    assert names(20528, rules) == {"water"}
    assert names(36864, rules) == {"near_cloud"}
    assert names(1, rules) == {"no_data"}


def test_bits_fields_and_values() -> None:
    rules = (
        QualityRule("cloud", bits=(3, 15)),
        QualityRule("thin_cloud", field=(14, 2), equals=(1, 3)),
        QualityRule("water", values=(160, 0)),
    )
    assert names(1 << 3, rules) == {"cloud"}
    assert names(3 << 14, rules) == {"cloud", "thin_cloud"}
    assert names(2 << 14, rules) == {"cloud"}
    assert names(1 << 14, rules) == {"thin_cloud"}
    assert names(160, rules) == {"water"}
    assert names(0, rules) == {"water"}
    assert names(161, rules) == set()


def test_every_type_gives_the_same_flags_as_the_table() -> None:
    rules = (QualityRule("cloud", bits=(3,)), QualityRule("snow", field=(5, 2), equals=(2,)),
             QualityRule("water", values=(200,)))  # fmt: skip
    words = np.arange(256)
    by_table = lookup_table(rules, 8)
    for kind in ("uint8", "uint16", "int32", "uint32", "int64"):
        np.testing.assert_array_equal(flags_of_codes(words.astype(kind), rules), by_table)
    assert by_table.dtype == np.uint16


def test_the_sign_bit_of_a_signed_word_is_a_bit_like_any_other() -> None:
    assert names(-32768, (QualityRule("cloud", bits=(15,)),), "int16") == {"cloud"}


@pytest.mark.parametrize(
    ("rule", "message"),
    [
        ({"flag": "clowd", "bits": (1,)}, "there is no flag of that name; choose from no_data"),
        ({"flag": "cloud"}, "needs exactly one of bits, field .* or values, found none"),
        ({"flag": "cloud", "bits": (1,), "values": (2,)}, "found bits, values"),
        ({"flag": "cloud", "bits": (32,)}, r"bits must lie in 0 to 31, found \[32\]"),
        ({"flag": "cloud", "field": (3, 2)}, "field and equals belong together"),
        ({"flag": "cloud", "bits": (3,), "equals": (2,)}, "field and equals belong together"),
        ({"flag": "cloud", "field": (31, 2), "equals": (1,)}, "within 32 bits"),
        (
            {"flag": "cloud", "field": (3, 2), "equals": (4,)},
            r"a field of 2 bits holds 0 to 3, found equals \[4\]",
        ),
    ],
)
def test_rules_that_make_no_sense(rule: dict[str, object], message: str) -> None:
    with pytest.raises(ConfigError, match=message):
        QualityRule(**rule)  # type: ignore[arg-type]  # wrong on purpose
