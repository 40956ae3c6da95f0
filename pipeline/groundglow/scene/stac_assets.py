"""The bands of a STAC Item's assets, in one form whichever version of STAC wrote them."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from groundglow.errors import InputError


@dataclass(frozen=True)
class AssetBand:
    """One band of one asset.

    Attributes
    ----------
    key : str
        The asset's key in the Item.
    index : int
        Band within the raster, from 1.
    href : str
        As the Item says.
    name, common_name, description, unit : str
        Empty where the Item says nothing; names in lower case.
    roles : tuple of str
        Of the asset, in lower case.
    centre_wavelength : float or None
        [um]
    data_type : str
        Stored type, empty where the Item says nothing.
    scale, offset, nodata : float or None
    bitfields, classes : list
        Of the classification extension.
    """

    key: str
    index: int
    href: str
    name: str
    common_name: str
    description: str
    unit: str
    roles: tuple[str, ...]
    centre_wavelength: float | None
    data_type: str
    scale: float | None
    offset: float | None
    nodata: float | None
    bitfields: tuple[Mapping[str, Any], ...]
    classes: tuple[Mapping[str, Any], ...]


def asset_bands(item: Mapping[str, Any], where: str) -> Iterator[AssetBand]:
    """All bands of all assets.

    Parameters
    ----------
    item : mapping
        The Item.
    where : str
        For messages.

    Raises
    ------
    InputError
        If assets or their bands are out of shape.
    """
    assets = item.get("assets")
    if not isinstance(assets, dict) or not assets:
        raise InputError("the Item has no assets", where=where)
    for key, asset in assets.items():
        if not isinstance(asset, dict) or not isinstance(asset.get("href"), str) or not asset["href"]:
            raise InputError(f"asset {key!r} has no href", where=where)
        lists = [_list(asset, name, key, where) for name in ("bands", "eo:bands", "raster:bands")]
        for index in range(max(1, *map(len, lists))):
            parts = [entries[index] for entries in lists if index < len(entries)]
            yield _band(key, index + 1, asset, parts, where)


def _list(asset: Mapping[str, Any], name: str, key: str, where: str) -> list[Mapping[str, Any]]:
    """A list of objects under a key of an asset; empty where there is none."""
    value = asset.get(name, [])
    if not isinstance(value, list) or not all(isinstance(entry, dict) for entry in value):
        raise InputError(f"{name} of asset {key!r} must be a list of objects", where=where)
    return value


def _band(
    key: str, index: int, asset: Mapping[str, Any], parts: list[Mapping[str, Any]], where: str
) -> AssetBand:
    """One band: what the band entries say, else what the asset says."""
    sources = [*parts, asset]

    def first(*names: str) -> Any:
        return next((s[n] for s in sources for n in names if s.get(n) is not None), None)

    def text(*names: str) -> str:
        value = first(*names)
        return value if isinstance(value, str) else ""

    def number(*names: str) -> float | None:
        return _number(first(*names), f"{names[0]} of asset {key!r}", where)

    roles = asset.get("roles") or []
    if not isinstance(roles, list) or not all(isinstance(role, str) for role in roles):
        raise InputError(f"roles of asset {key!r} must be a list of words", where=where)
    words = " ".join(
        str(s[n]) for s in sources for n in ("title", "description") if isinstance(s.get(n), str)
    )
    return AssetBand(
        key=key,
        index=index,
        href=asset["href"],
        name=text("name").lower(),
        common_name=text("eo:common_name", "common_name").lower(),
        description=words.lower(),
        unit=text("unit"),
        roles=tuple(role.lower() for role in roles),
        centre_wavelength=number("eo:center_wavelength", "center_wavelength"),
        data_type=text("data_type").lower(),
        scale=number("raster:scale", "scale"),
        offset=number("raster:offset", "offset"),
        nodata=_nodata(first("nodata"), key, where),
        bitfields=tuple(_objects(first("classification:bitfields"))),
        classes=tuple(_objects(first("classification:classes"))),
    )


def _objects(value: Any) -> Iterator[Mapping[str, Any]]:
    """The objects within a value that should be a list of them."""
    if isinstance(value, list):
        yield from (entry for entry in value if isinstance(entry, dict))


def _number(value: Any, what: str, where: str) -> float | None:
    """A finite number or None."""
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise InputError(f"{what} must be a number, found {value!r}", where=where)
    return float(value)


def _nodata(value: Any, key: str, where: str) -> float | None:
    """A nodata value; STAC writes those that JSON cannot hold as words."""
    if isinstance(value, str):
        if value.lower() in ("nan", "inf", "-inf"):
            return None  # never a value in any raster read here
        raise InputError(f"nodata of asset {key!r} must be a number or 'nan', found {value!r}", where=where)
    return _number(value, f"nodata of asset {key!r}", where)
