"""Reading a table of kinds of ground and their emissivity.

A table arrives as text, TOML or CSV, and leaves as values; reading files is not done here. In TOML each
``[[class]]`` has ``name``, ``code``, optional ``title`` and ``broadband_correlation``, one
``[[class.emissivity]]`` per wavelength interval (``from``, ``to`` in um, ``value``, ``uncertainty``,
optional ``published`` range and ``source``) and an optional ``[class.broadband]``. In CSV each row is one
interval, columns ``class, code, from, to, value, uncertainty`` and the optional ones; a row without ``from``
and ``to`` is the broadband value.
"""

from __future__ import annotations

import csv
import io
import tomllib
from collections.abc import Mapping
from functools import cache
from importlib import resources
from itertools import pairwise

from groundglow.errors import InputError
from groundglow.retrieval.emissivity_class import ClassTable, Published, SurfaceClass

_DEFAULT_CORRELATION = 0.5

_CLASS_KEYS = {"name", "title", "code", "broadband_correlation", "emissivity", "broadband"}
_VALUE_KEYS = {"value", "uncertainty", "published", "source"}
_CSV_NEEDED = {"class", "code", "from", "to", "value", "uncertainty"}
_CSV_OPTIONAL = {"title", "broadband_correlation", "published_from", "published_to", "source"}


@cache
def shipped_class_table() -> ClassTable:
    """The table that comes with the package.

    Returns
    -------
    ClassTable
    """
    text = resources.files("groundglow.retrieval").joinpath("class_table.toml").read_text(encoding="utf-8")
    return class_table_from_toml(text, where="the shipped class table")


def class_table_from_toml(text: str, *, where: str) -> ClassTable:
    """A class table from TOML.

    Parameters
    ----------
    text : str
        The document.
    where : str
        Name of the file, for messages.

    Returns
    -------
    ClassTable

    Raises
    ------
    InputError
        If it is not TOML, a key is unknown or missing, or a number is out of range.
    """
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"the class table is not valid TOML ({error})", where=where) from error
    _only_known(document, {"class"}, where)
    entries = document.get("class")
    if not isinstance(entries, list) or not entries:
        raise InputError("the class table has no [[class]]", where=where)
    found = []
    for position, entry in enumerate(entries, start=1):
        name = entry.get("name")
        if not isinstance(name, str) or not name:
            raise InputError(f"class number {position} has no name", where=where)
        spot = f"{where}, class {name}"
        _only_known(entry, _CLASS_KEYS, spot)
        parts = [_published(part, spot, banded=True) for part in entry.get("emissivity", [])]
        if "broadband" in entry:
            parts.append(_published(entry["broadband"], spot, banded=False))
        found.append(_surface_class(entry, parts, spot))
    return _table(found, where)


def class_table_from_csv(text: str, *, where: str) -> ClassTable:
    """A class table from CSV with a header row.

    Parameters
    ----------
    text : str
        The document.
    where : str
        Name of the file, for messages.

    Returns
    -------
    ClassTable

    Raises
    ------
    InputError
        If a column is unknown or missing, a cell is not a number, or a number is out of range.
    """
    reader = csv.DictReader(io.StringIO(text.lstrip("\ufeff")), skipinitialspace=True)
    columns = {(name or "").strip() for name in reader.fieldnames or ()}
    missing, unknown = _CSV_NEEDED - columns, columns - _CSV_NEEDED - _CSV_OPTIONAL
    if missing or unknown:
        said = [f"lacks the columns {', '.join(sorted(missing))}"] if missing else []
        said += [f"has unknown columns {', '.join(sorted(unknown))}"] if unknown else []
        raise InputError(
            f"the class table {' and '.join(said)}",
            where=where,
            remedy=f"Columns: {', '.join(sorted(_CSV_NEEDED))}; optional: {', '.join(sorted(_CSV_OPTIONAL))}",
        )
    heads: dict[str, dict[str, object]] = {}
    parts: dict[str, list[Published]] = {}
    for number, raw in enumerate(reader, start=2):
        row = {
            (key or "").strip(): (cell or "").strip() for key, cell in raw.items() if isinstance(cell, str)
        }
        spot = f"{where}, line {number}"
        name = row.get("class", "")
        if not name:
            raise InputError("the class has no name", where=spot)
        head, part = _csv_row(row, spot)
        if heads.setdefault(name, head)["code"] != head["code"]:
            raise InputError(f"the class {name} has two codes", where=spot)
        parts.setdefault(name, []).append(_published(part, spot, banded="from" in part))
    if not heads:
        raise InputError("the class table has no rows", where=where)
    return _table(
        [_surface_class(heads[name], parts[name], f"{where}, class {name}") for name in heads], where
    )


def _csv_row(row: Mapping[str, str], where: str) -> tuple[dict[str, object], dict[str, object]]:
    """One line as the keys of a class and of one of its values."""
    head: dict[str, object] = {"name": row["class"], "code": _csv_number(row, "code", where, whole=True)}
    if row.get("title"):
        head["title"] = row["title"]
    if row.get("broadband_correlation"):
        head["broadband_correlation"] = _csv_number(row, "broadband_correlation", where)
    part: dict[str, object] = {key: _csv_number(row, key, where) for key in ("value", "uncertainty")}
    if row.get("from") or row.get("to"):
        part |= {key: _csv_number(row, key, where) for key in ("from", "to")}
    if row.get("published_from") or row.get("published_to"):
        part["published"] = [_csv_number(row, key, where) for key in ("published_from", "published_to")]
    if row.get("source"):
        part["source"] = row["source"]
    return head, part


def _csv_number(row: Mapping[str, str], key: str, where: str, *, whole: bool = False) -> float:
    text = row.get(key, "")
    try:
        return int(text) if whole else float(text)
    except ValueError:
        kind = "a whole number" if whole else "a number"
        raise InputError(f"{key} must be {kind}, not {text!r}", where=where) from None


def _only_known(entry: Mapping[str, object], known: set[str], where: str) -> None:
    unknown = sorted(set(entry) - known)
    if unknown:
        raise InputError(
            f"unknown key {', '.join(unknown)}", where=where, remedy=f"Known keys: {', '.join(sorted(known))}"
        )


def _number(entry: Mapping[str, object], key: str, low: float, high: float, where: str) -> float:
    value = entry.get(key)
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not low <= value <= high:
        given = "nothing" if value is None else repr(value)
        hint = None
        if key == "value" and isinstance(value, (int, float)) and 1.3 < value <= 100.0:
            hint = "It looks like percent: give a fraction"
        raise InputError(
            f"{key} must be a number from {low:g} to {high:g}, not {given}", where=where, remedy=hint
        )
    return float(value)


def _published(entry: object, where: str, *, banded: bool) -> Published:
    if not isinstance(entry, Mapping):
        raise InputError("an emissivity must be a table of its own", where=where)
    _only_known(entry, _VALUE_KEYS | ({"from", "to"} if banded else set()), where)
    interval = None
    if banded:
        interval = (_number(entry, "from", 1.0, 100.0, where), _number(entry, "to", 1.0, 100.0, where))
        if not interval[0] < interval[1]:
            raise InputError(f"the interval {interval[0]:g} to {interval[1]:g} um must increase", where=where)
    value = _number(entry, "value", 1e-3, 1.0, where)
    limits = entry.get("published")
    if limits is not None and not (
        isinstance(limits, list)
        and len(limits) == 2
        and all(isinstance(limit, (int, float)) for limit in limits)
        and 0.0 < limits[0] <= value <= limits[1] <= 1.0
    ):
        raise InputError(f"the value {value:g} must lie within the published range {limits}", where=where)
    return Published(
        value=value,
        uncertainty=_number(entry, "uncertainty", 0.0, 0.5, where),
        interval=interval,
        range=(float(limits[0]), float(limits[1])) if limits is not None else None,
        source=str(entry.get("source", "given by the user")),
    )


def _surface_class(entry: Mapping[str, object], parts: list[Published], where: str) -> SurfaceClass:
    banded = sorted((part for part in parts if part.interval), key=lambda part: part.interval or (0.0, 0.0))
    broad = [part for part in parts if part.interval is None]
    if not banded:
        raise InputError("the class has no emissivity for any wavelength interval", where=where)
    if len(broad) > 1:
        raise InputError("the class has more than one broadband emissivity", where=where)
    edges = [edge for part in banded for edge in part.interval or ()]
    if any(later < earlier for earlier, later in pairwise(edges)):
        raise InputError("the wavelength intervals of the class overlap", where=where)
    code = entry.get("code")
    if isinstance(code, bool) or not isinstance(code, int):
        raise InputError(f"code must be a whole number, not {code!r}", where=where)
    correlation = _DEFAULT_CORRELATION
    if "broadband_correlation" in entry:
        correlation = _number(entry, "broadband_correlation", -1.0, 1.0, where)
    name = str(entry["name"])
    return SurfaceClass(
        name=name,
        title=str(entry.get("title", name)),
        code=code,
        intervals=tuple(banded),
        broadband=broad[0] if broad else None,
        broadband_correlation=correlation,
    )


def _table(entries: list[SurfaceClass], where: str) -> ClassTable:
    for kind, keys in (("name", [e.name for e in entries]), ("code", [str(e.code) for e in entries])):
        twice = sorted({key for key in keys if keys.count(key) > 1})
        if twice:
            raise InputError(f"the {kind} {', '.join(twice)} occurs more than once", where=where)
    return ClassTable({entry.name: entry for entry in entries})
