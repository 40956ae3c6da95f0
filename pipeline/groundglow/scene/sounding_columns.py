"""Which column of a sounding's table is what: quantity and unit, from the headers or as told.

A header is a quantity and its unit, ``temperature_degC`` or ``temperature [degC]``. Headers that begin
with no known quantity are none of ours and are left alone.
"""

from __future__ import annotations

import difflib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from groundglow.errors import ConfigError, InputError
from groundglow.scene.air_units import Unit, known_units, unit_of

# Words at the start of a header and the quantities they stand for, the longer words first.
_WORDS = (
    ("geopotential_height", "geopotential_height"),
    ("specific_humidity", "specific_humidity"),
    ("relative_humidity", "relative_humidity"),
    ("vapour_pressure", "vapour_pressure"),
    ("vapor_pressure", "vapour_pressure"),
    ("water_vapour", "water_vapour"),
    ("water_vapor", "water_vapour"),
    ("mixing_ratio", "mixing_ratio"),
    ("geopotential", "geopotential"),
    ("temperature", "temperature"),
    ("dew_point", "dew_point"),
    ("dewpoint", "dew_point"),
    ("pressure", "pressure"),
    ("altitude", "height"),
    ("height", "height"),
    ("ozone", "ozone"),
)
# What a column does for the profile; of each there is at most one.
_ROLES: Mapping[str, tuple[str, ...]] = {
    "pressure": ("pressure",),
    "height": ("height", "geopotential_height", "geopotential"),
    "temperature": ("temperature",),
    "humidity": (
        "dew_point", "relative_humidity", "mixing_ratio", "specific_humidity", "vapour_pressure", "water_vapour",
    ),
    "ozone": ("ozone",),
}  # fmt: skip
_ROLE_OF = {quantity: role for role, quantities in _ROLES.items() for quantity in quantities}
_EXAMPLE = "Headers name quantity and unit, such as pressure_hPa, temperature_degC or dew_point_degC"


@dataclass(frozen=True)
class Column:
    """One column of the table that the profile needs.

    Attributes
    ----------
    index : int
        Its place in the table, from 0.
    header : str
        As the file writes it.
    quantity : str
        A key of ``air_units.UNITS``.
    unit : Unit
    """

    index: int
    header: str
    quantity: str
    unit: Unit


def columns_of(
    headers: Sequence[str], told: Mapping[str, str], *, path: Path, line: int
) -> dict[str, Column]:
    """The columns by what they do: ``pressure``, ``height``, ``temperature``, ``humidity``, ``ozone``.

    Parameters
    ----------
    headers : sequence of str
        Of the table.
    told : mapping of str to str
        A header of the file, and the header with quantity and unit that it stands for; a column told
        here is taken whatever the other headers say.
    path : Path
        Of the file, for messages.
    line : int
        Of the headers, for messages.

    Raises
    ------
    ConfigError
        If what is told does not fit the file.
    InputError
        If a needed column is missing, comes twice, or has no known unit.
    """
    where = f"{path}, line {line}"
    found = _told(headers, told, where)
    unknown: dict[str, str] = {}
    candidates: dict[str, list[Column]] = {}
    for index, header in enumerate(headers):
        quantity, unit_text = _parsed(header)
        if quantity is None or header in told:
            continue
        role = _ROLE_OF[quantity]
        unit = unit_of(quantity, unit_text)
        if unit is None:
            unknown.setdefault(role, _unit_problem(header, quantity, unit_text))
        else:
            candidates.setdefault(role, []).append(Column(index, header, quantity, unit))
    for role in _ROLES:
        if role in found:
            continue
        of_role = candidates.get(role, [])
        if len(of_role) > 1:
            names = ", ".join(repr(column.header) for column in of_role)
            raise InputError(
                f"more than one column could be the {role}: {names}",
                where=where,
                remedy="Keep one, or name the one to take in 'columns'",
            )
        if of_role:
            found[role] = of_role[0]
        elif role in unknown:
            raise InputError(unknown[role], where=where, remedy=_EXAMPLE)
    _refuse_missing(found, headers, where)
    return found


def _told(headers: Sequence[str], told: Mapping[str, str], where: str) -> dict[str, Column]:
    found: dict[str, Column] = {}
    for header, meaning in told.items():
        if header not in headers:
            near = difflib.get_close_matches(header, headers, n=1)
            hint = f"did you mean {near[0]!r}?" if near else f"its columns: {', '.join(headers)}"
            raise ConfigError(
                f"'columns' names {header!r}, which the file does not have ({hint})", where=where
            )
        if headers.count(header) > 1:
            raise InputError(f"two columns are headed {header!r}", where=where)
        quantity, unit_text = _parsed(meaning)
        if quantity is None:
            raise ConfigError(
                f"'columns' says that {header!r} is {meaning!r}, which is no known quantity",
                where=where,
                remedy=f"{_EXAMPLE}; known are {', '.join(_ROLE_OF)}",
            )
        unit = unit_of(quantity, unit_text)
        if unit is None:
            raise ConfigError(
                f"in 'columns', {_unit_problem(meaning, quantity, unit_text)}", where=where, remedy=_EXAMPLE
            )
        role = _ROLE_OF[quantity]
        if role in found:
            raise ConfigError(
                f"'columns' gives the {role} twice, as {found[role].header!r} and {header!r}", where=where
            )
        found[role] = Column(headers.index(header), header, quantity, unit)
    return found


def _parsed(header: str) -> tuple[str | None, str]:
    """Quantity and unit of a header; no quantity if it begins with none."""
    text = header.strip()
    plain = text.lower().replace(" ", "_").replace("-", "_")
    for word, quantity in _WORDS:
        rest = text[len(word) :]
        if plain.startswith(word) and (not rest or not rest[0].isalnum()):
            rest = rest.strip(" _-,:")
            if rest[:1] + rest[-1:] in ("[]", "()"):
                rest = rest[1:-1]
            return quantity, rest.strip()
    return None, ""


def _unit_problem(header: str, quantity: str, unit_text: str) -> str:
    if not unit_text:
        return f"the column {header!r} names no unit (known: {known_units(quantity)})"
    return f"the column {header!r} has the unknown unit {unit_text!r} (known: {known_units(quantity)})"


def _refuse_missing(found: Mapping[str, Column], headers: Sequence[str], where: str) -> None:
    missing = [role for role in ("temperature", "humidity") if role not in found]
    if "pressure" not in found and "height" not in found:
        missing.insert(0, "pressure or height")
    if missing:
        raise InputError(
            f"a sounding needs {' and '.join(missing)}; the columns are {', '.join(headers)}",
            where=where,
            remedy=f"{_EXAMPLE}; or say in 'columns' which column is what",
        )
