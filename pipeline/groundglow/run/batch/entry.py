"""One scene as a list names it, before it is opened."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import datetime
from pathlib import PurePosixPath
from typing import Any

# West, south, east, north. [deg] West above east crosses the antimeridian.
Box = tuple[float, float, float, float]


@dataclass(frozen=True)
class SceneEntry:
    """What a list says about a scene.

    Attributes
    ----------
    address : str
        What to open; for an Item within a list, the list's address, '#' and the Item's name.
    acquired : datetime or None
    box : Box or None
    cloud_cover : float or None
        As the provider states it. [%]
    item : mapping or None
        The whole Item, where it came within a list.
    """

    address: str
    acquired: datetime | None = None
    box: Box | None = None
    cloud_cover: float | None = None
    item: Mapping[str, Any] | None = None

    @property
    def label(self) -> str:
        """A name for the scene while its own is not known."""
        if self.item is not None:
            return str(self.item.get("id"))
        path = PurePosixPath(self.address)
        return path.stem if path.suffix.lower() in (".toml", ".json", ".tar", ".zip") else path.name

    @property
    def list_address(self) -> str:
        """Where the list is that an Item came within: its relative hrefs start there."""
        return self.address.rpartition("#")[0]

    @property
    def digest(self) -> str:
        """What tells one state of an Item within a list from the next; empty without one."""
        if self.item is None:
            return ""
        return hashlib.sha256(json.dumps(self.item, sort_keys=True).encode()).hexdigest()

    def known_better(self, acquired: datetime, box: Box | None) -> SceneEntry:
        """With what the opened scene says itself."""
        return replace(self, acquired=acquired, box=box or self.box)


def entry_of_item(item: Mapping[str, Any], address: str, *, within: bool) -> SceneEntry:
    """What a STAC Item says about itself; anything out of shape is left for its reader to refuse.

    Parameters
    ----------
    item : mapping
    address : str
        Of the Item, or of the list it came within.
    within : bool
    """
    properties = item.get("properties")
    known: Mapping[str, Any] = properties if isinstance(properties, Mapping) else {}
    cover = known.get("eo:cloud_cover")
    return SceneEntry(
        address=f"{address}#{item.get('id')}" if within else address,
        acquired=_moment(known.get("datetime") or known.get("start_datetime")),
        box=_box(item.get("bbox")),
        cloud_cover=float(cover) if isinstance(cover, int | float) and not isinstance(cover, bool) else None,
        item=item if within else None,
    )


def _moment(text: object) -> datetime | None:
    if not isinstance(text, str):
        return None
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        return None
    return moment if moment.tzinfo is not None else None


def _box(value: object) -> Box | None:
    if not isinstance(value, list) or len(value) not in (4, 6):
        return None
    if not all(isinstance(number, int | float) for number in value):
        return None
    half = len(value) // 2
    return float(value[0]), float(value[1]), float(value[half]), float(value[half + 1])
