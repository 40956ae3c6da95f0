"""Level-1 metadata as groups of keys: the text form (ODL) and the JSON form.

Key names recur across groups with other values, so a key is always asked for within its group.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass

from groundglow.errors import InputError

ROOTS = ("LANDSAT_METADATA_FILE", "L1_METADATA_FILE")

# Where the generations of the layout keep what is asked for: Collection 2 first, then the two older.
PLACES = {
    "identity": ("PRODUCT_CONTENTS", "METADATA_FILE_INFO"),
    "files": ("PRODUCT_CONTENTS", "PRODUCT_METADATA"),
    "platform": ("IMAGE_ATTRIBUTES", "PRODUCT_METADATA"),
    "sun": ("IMAGE_ATTRIBUTES",),
    "rescaling": ("LEVEL1_RADIOMETRIC_RESCALING", "RADIOMETRIC_RESCALING"),
    "thermal constants": ("LEVEL1_THERMAL_CONSTANTS", "TIRS_THERMAL_CONSTANTS", "THERMAL_CONSTANTS"),
    "pixel values": ("LEVEL1_MIN_MAX_PIXEL_VALUE", "MIN_MAX_PIXEL_VALUE"),
    "radiances": ("LEVEL1_MIN_MAX_RADIANCE", "MIN_MAX_RADIANCE"),
    "projection": ("PROJECTION_ATTRIBUTES", "PROJECTION_PARAMETERS"),
    "corners": ("PROJECTION_ATTRIBUTES", "PRODUCT_METADATA"),
}


@dataclass(frozen=True)
class Metadata:
    """Groups of keys and values as text.

    Attributes
    ----------
    groups : mapping of str to mapping of str to str
    where : str
        For messages.
    """

    groups: Mapping[str, Mapping[str, str]]
    where: str

    def text(self, place: str, key: str) -> str | None:
        """A value as text, or None where the place has no such key.

        Parameters
        ----------
        place : str
            A key of :data:`PLACES`.
        key : str
            The key within the group.
        """
        for group in PLACES[place]:
            value = self.groups.get(group, {}).get(key)
            if value is not None:
                return value
        return None

    def number(self, place: str, key: str) -> float | None:
        """A value as a finite number, or None where the place has no such key.

        Raises
        ------
        InputError
            If the value is not a finite number.
        """
        text = self.text(place, key)
        if text is None:
            return None
        try:
            value = float(text)
        except ValueError:
            value = math.nan
        if not math.isfinite(value):
            raise InputError(f"{key} must be a number, found {text!r}", where=self.where)
        return value

    def needed(self, place: str, key: str) -> str:
        """A value as text that must be there.

        Raises
        ------
        InputError
            If it is not; the message names the key and its group.
        """
        value = self.text(place, key)
        if value is None:
            raise InputError(f"{key} is missing in group {' or '.join(PLACES[place])}", where=self.where)
        return value


def read_groups(content: bytes, where: str) -> Metadata:
    """Metadata from the bytes of a text or JSON file.

    Parameters
    ----------
    content : bytes
        NUL padding at the end and Windows line ends are fine.
    where : str
        For messages.

    Raises
    ------
    InputError
        If it is neither form, or breaks off.
    """
    try:
        text = content.rstrip(b"\x00 \r\n\t\x1a").decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError("is not a text file in UTF-8", where=where) from error
    if not text.strip():
        raise InputError("the metadata file is empty", where=where, remedy="Fetch it again")
    stripped = text.lstrip()
    if stripped.startswith("<"):
        raise InputError(
            "is the XML form of the metadata",
            where=where,
            remedy="Use the text (_MTL.txt) or JSON form beside it",
        )
    groups = _from_json(stripped, where) if stripped.startswith("{") else _from_odl(text, where)
    return Metadata(groups, where)


def _from_json(text: str, where: str) -> dict[str, dict[str, str]]:
    """Groups of the JSON form."""
    try:
        document = json.loads(text)
    except json.JSONDecodeError as error:
        raise InputError(f"is not valid JSON ({error})", where=where) from error
    root = next((document[name] for name in ROOTS if name in document), None)
    if not isinstance(root, dict):
        raise InputError(f"is not level-1 metadata: needs {' or '.join(ROOTS)} at the top", where=where)
    return {
        name: {key: str(value) for key, value in group.items() if not isinstance(value, dict | list)}
        for name, group in root.items()
        if isinstance(group, dict)
    }


def _from_odl(text: str, where: str) -> dict[str, dict[str, str]]:
    """Groups of the text form."""
    groups: dict[str, dict[str, str]] = {}
    open_groups: list[str] = []
    entries = [line.strip().strip("\x00") for line in text.splitlines()]
    ended = "END" in entries
    if ended:
        entries = entries[: entries.index("END")]
    for number, entry in enumerate(entries, start=1):
        if not entry:
            continue
        key, equals, value = (part.strip() for part in entry.partition("="))
        if not equals:
            if number == len(entries) > 1 and not ended:
                break
            raise InputError(f"line {number} is not of the form KEY = value: {entry[:60]!r}", where=where)
        if key == "GROUP":
            open_groups.append(value)
            groups.setdefault(value, {})
        elif key == "END_GROUP":
            if not open_groups or open_groups.pop() != value:
                if number == len(entries) and not ended:
                    break
                raise InputError(f"line {number} ends a group {value!r} that is not open", where=where)
        elif not open_groups:
            raise InputError(f"line {number}: {key!r} stands outside any group", where=where)
        else:
            groups[open_groups[-1]][key] = value.strip('"').strip()
    if not any(root in groups for root in ROOTS):
        raise InputError(f"is not level-1 metadata: needs GROUP = {' or '.join(ROOTS)}", where=where)
    if not ended or open_groups:
        raise InputError("the metadata breaks off before its END", where=where, remedy="Fetch it again")
    return groups
