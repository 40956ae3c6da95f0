"""Quality rules from what a STAC Item says about its quality asset (classification extension)."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from groundglow.errors import ConfigError, InputError
from groundglow.scene.quality import QualityRule
from groundglow.scene.stac_assets import AssetBand

# Names of classes and fields in use, and the flag each one means.
_FLAGS = {
    "fill": "no_data", "nodata": "no_data", "no_data": "no_data",
    "cloud": "cloud", "clouds": "cloud",
    "cirrus": "thin_cloud", "thin_cloud": "thin_cloud", "thin_cirrus": "thin_cloud",
    "dilated_cloud": "near_cloud", "dilated": "near_cloud", "near_cloud": "near_cloud",
    "cloud_shadow": "shadow", "shadow": "shadow", "cloud_shadows": "shadow",
    "water": "water", "snow": "snow", "ice": "snow", "snow_ice": "snow", "saturated": "saturated",
}  # fmt: skip
_NEGATIONS = ("not_", "no_", "non_", "clear")


def rules_of_classification(band: AssetBand, where: str) -> tuple[QualityRule, ...]:
    """Rules for the flags that a band's classes or bit fields name; none where it has no such names.

    Parameters
    ----------
    band : AssetBand
        The band of a quality asset.
    where : str
        For messages.

    Raises
    ------
    InputError
        If a class or field is out of shape.
    """
    try:
        rules = [rule for field in band.bitfields if (rule := _of_field(field)) is not None]
        if not rules:
            rules = [
                QualityRule(_FLAGS[name], values=(int(entry["value"]),))
                for entry in band.classes
                if (name := _plain(entry.get("name"))) in _FLAGS
            ]
    except (KeyError, TypeError, ValueError, ConfigError) as error:
        raise InputError(
            f"the classification of asset {band.key!r} is out of shape ({error})", where=where
        ) from error
    return tuple(rules)


def _of_field(field: Mapping[str, Any]) -> QualityRule | None:
    """The rule of one bit field: its classes that mean the flag, or its one bit."""
    offset, length = int(field["offset"]), int(field["length"])
    own = _FLAGS.get(_plain(field.get("name")))
    if length == 1:
        return None if own is None else QualityRule(own, bits=(offset,))
    named = {
        int(entry["value"]): _FLAGS[name]
        for entry in field.get("classes", [])
        if (name := _plain(entry.get("name"))) in _FLAGS and not name.startswith(_NEGATIONS[:1])
    }
    flags = set(named.values())
    if len(flags) != 1:
        return None  # degrees of confidence are no flag
    return QualityRule(flags.pop(), field=(offset, length), equals=tuple(named))


def _plain(name: object) -> str:
    """A name in lower case with underscores."""
    return str(name).strip().lower().replace("-", "_").replace(" ", "_")
