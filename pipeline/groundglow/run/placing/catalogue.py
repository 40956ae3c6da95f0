"""The outputs as a static STAC collection, kept up to date scene by scene.

References
----------
SpatioTemporal Asset Catalog Collection specification 1.1.0.
"""

from __future__ import annotations

import json
import time
from collections.abc import Iterable, Mapping
from typing import Any

from groundglow.layers.cautions import CAUTIONS
from groundglow.layers.stac import STAC_VERSION, json_text
from groundglow.run.placing.place import Place

COLLECTION = "collection.json"
COLLECTION_ID = "groundglow-maps"
# Writing the collection may take this share of a run's time at most; its end is always written.
_SHARE = 0.05

Box = list[float]


def linked(item: dict[str, Any]) -> dict[str, Any]:
    """An Item that knows its collection, one folder above."""
    links = [
        {"rel": relation, "href": f"../{COLLECTION}", "type": "application/json"}
        for relation in ("root", "parent", "collection")
    ]
    return item | {"links": [*links, *item["links"]], "collection": COLLECTION_ID}


class Catalogue:
    """The collection at the top of an output place.

    Parameters
    ----------
    place : Place
        Locked by this process.
    """

    def __init__(self, place: Place) -> None:
        self._place = place
        self._names: set[str] = set()
        self._extent = _Extent()
        self._assets: dict[str, dict[str, Any]] = {}
        self._changed = False
        self._cost = 0.0
        self._written = -1e9

    def refresh(self) -> None:
        """Take up the collection as it is; begin anew from the folders where it does not match them.

        Raises
        ------
        OutputError
            If the place cannot be read or written.
        """
        names = set(self._place.names())
        found = self._read()
        if found is not None and self._take_up(found) and self._names == names:
            return
        self.rebuild(names)

    def rebuild(self, names: Iterable[str] | None = None) -> int:
        """Make the collection anew from the Items in the folders.

        Returns
        -------
        int
            How many scenes it lists.
        """
        self._names, self._extent, self._assets = set(), _Extent(), {}
        for name in sorted(self._place.names() if names is None else names):
            item = self._place.item(name)
            if item is not None:
                self._take_in(name, item)
        if self._names or self._place.read(COLLECTION) is not None:
            self._changed = True
            self.write(always=True)
        return len(self._names)

    def add(self, name: str) -> None:
        """Take in a scene that was put in place, and write the collection."""
        item = self._place.item(name)
        if item is not None:
            self._take_in(name, item)
            self._changed = True
            self.write()

    def write(self, *, always: bool = False) -> None:
        """Write the collection, if it changed and its writing is due.

        A collection of a thousand scenes takes milliseconds; one of a hundred thousand is not written
        anew after each of them.
        """
        if not self._changed or (not always and time.monotonic() - self._written < self._cost / _SHARE):
            return
        began = time.monotonic()
        self._place.write(COLLECTION, json_text(self._document()).encode())
        self._written = time.monotonic()
        self._cost = self._written - began
        self._changed = False

    def _take_in(self, name: str, item: Mapping[str, Any]) -> None:
        self._names.add(name)
        self._extent.take_in(item.get("bbox"), item.get("properties", {}).get("datetime"))
        for key, asset in item.get("assets", {}).items():
            self._assets.setdefault(
                key, {part: asset[part] for part in ("title", "type", "roles") if part in asset}
            )

    def _read(self) -> dict[str, Any] | None:
        data = self._place.read(COLLECTION)
        if data is None:
            return None
        try:
            found = json.loads(data)
        except ValueError:
            return None
        return found if isinstance(found, dict) else None

    def _take_up(self, found: Mapping[str, Any]) -> bool:
        """Continue from a collection of ours; False where it is something else."""
        try:
            hrefs = [link["href"] for link in found["links"] if link["rel"] == "item"]
            box, times = found["extent"]["spatial"]["bbox"][0], found["extent"]["temporal"]["interval"][0]
            self._assets = dict(found["item_assets"])
            self._extent = _Extent()
            for moment in times:
                self._extent.take_in(box, moment)
            self._names = {href.split("/")[1] for href in hrefs}
        except (KeyError, TypeError, IndexError, AttributeError):
            return False
        return found.get("id") == COLLECTION_ID

    def _document(self) -> dict[str, Any]:
        root = {"rel": "root", "href": f"./{COLLECTION}", "type": "application/json"}
        items = [
            {"rel": "item", "href": f"./{name}/{name}.json", "type": "application/geo+json", "title": name}
            for name in sorted(self._names)
        ]
        return {
            "type": "Collection",
            "stac_version": STAC_VERSION,
            "id": COLLECTION_ID,
            "title": "Surface temperature and emitted flux",
            "description": "\n\n".join(
                [
                    "Maps made by Groundglow, one Item a scene.",
                    "Cautions:",
                    *(f"- {text}" for text in CAUTIONS),
                ]
            ),
            "license": "other",
            "keywords": ["surface temperature", "thermal infrared", "longwave flux"],
            "extent": self._extent.as_json(),
            "item_assets": {key: self._assets[key] for key in sorted(self._assets)},
            "links": [root, *items],
        }


class _Extent:
    """The box and the span of time around all scenes."""

    def __init__(self) -> None:
        self._box: Box | None = None
        self._first: str | None = None
        self._last: str | None = None

    def take_in(self, box: object, moment: object) -> None:
        """Grow around a scene. Times are in UTC and of one form, so that their text sorts as they do."""
        if isinstance(box, list) and len(box) == 4:
            self._box = list(box) if self._box is None else union(self._box, box)
        if isinstance(moment, str):
            self._first = moment if self._first is None else min(self._first, moment)
            self._last = moment if self._last is None else max(self._last, moment)

    def as_json(self) -> dict[str, Any]:
        """In the words of STAC; the whole Earth and all time where nothing is known."""
        return {
            "spatial": {"bbox": [self._box or [-180.0, -90.0, 180.0, 90.0]]},
            "temporal": {"interval": [[self._first, self._last]]},
        }


def union(first: Box, second: Box) -> Box:
    """The smallest box around two boxes; west above east where it crosses the antimeridian.

    Parameters
    ----------
    first, second : list of float
        West, south, east, north. [deg]

    Returns
    -------
    list of float
    """
    south, north = min(first[1], second[1]), max(first[3], second[3])
    widths = [(_width(first[0], east), first[0], east) for east in (first[2], second[2])]
    widths += [(_width(second[0], east), second[0], east) for east in (first[2], second[2])]
    around = [
        (width, west, east)
        for width, west, east in widths
        if _covers(west, width, first) and _covers(west, width, second)
    ]
    if not around:
        return [-180.0, south, 180.0, north]
    _, west, east = min(around)
    return [west, south, east, north]


def _width(west: float, east: float) -> float:
    return east - west if east >= west else east - west + 360.0


def _covers(west: float, width: float, box: Box) -> bool:
    start = (box[0] - west) % 360.0
    return start + _width(box[0], box[2]) <= width + 1e-9
