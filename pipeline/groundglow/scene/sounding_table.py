"""The table in a sounding's file: text in, the needed columns in our units out, with their lines."""

from __future__ import annotations

import csv
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import InputError
from groundglow.scene.sounding_columns import Column, columns_of

Float = NDArray[np.float64]

MISSING = -9999.0
_LARGEST_FILE = 32 << 20  # bytes; a flight of two hours at ten levels a second fills a tenth
_MISSING_WORDS = frozenset({"", "nan", "na", "n/a", "null", "none"})


@dataclass(frozen=True)
class SoundingTable:
    """The columns that the profile needs, in the order of the file.

    Attributes
    ----------
    columns : mapping of str to Column
        By what they do: ``pressure``, ``height``, ``temperature``, ``humidity``, ``ozone``.
    values : mapping of str to array (levels,)
        Of the same columns, in our units; missing ones are NaN.
    lines : array (levels,)
        Of the file, from 1.
    """

    columns: Mapping[str, Column]
    values: Mapping[str, Float]
    lines: NDArray[np.int64]

    def at(self, wanted: NDArray[np.bool_]) -> SoundingTable:
        """Some of the levels."""
        values = {role: values[wanted] for role, values in self.values.items()}
        return SoundingTable(self.columns, values, self.lines[wanted])

    def without(self, role: str) -> SoundingTable:
        """All columns but one."""
        values = {name: values for name, values in self.values.items() if name != role}
        return SoundingTable(self.columns, values, self.lines)


def read_table(path: Path, told: Mapping[str, str]) -> SoundingTable:
    """The needed columns of a file.

    Parameters
    ----------
    path : Path
        Text in UTF-8.
    told : mapping of str to str
        See ``sounding_columns.columns_of``.

    Raises
    ------
    InputError
        If the file cannot be read, or is no table of numbers with the needed columns.
    ConfigError
        If what is told does not fit the file.
    """
    rows = _rows(_text(path), path)
    line, headers = next(rows, (0, []))
    if len(headers) < 2:
        raise InputError(
            "there is no table of columns" if headers else "the file is empty",
            where=str(path),
            remedy="Separate columns by comma, semicolon or tab, under one line of headers",
        )
    found = columns_of(headers, told, path=path, line=line)
    lines: list[int] = []
    cells: dict[str, list[float]] = {role: [] for role in found}
    for number, row in rows:
        where = f"{path}, line {number}"
        if len(row) < len(headers) or any(row[len(headers) :]):
            raise InputError(f"has {len(row)} columns, the headers {len(headers)}", where=where)
        lines.append(number)
        for role, column in found.items():
            cells[role].append(_number(row[column.index], column, where))
    values = {role: found[role].unit.converted(cells[role]) for role in found}
    for role, column in found.items():
        if not np.isfinite(values[role]).any():
            raise InputError(f"the column {column.header!r} holds no values", where=str(path))
    return SoundingTable(found, values, np.array(lines, dtype=np.int64))


def _text(path: Path) -> str:
    try:
        if path.stat().st_size > _LARGEST_FILE:
            raise InputError(f"is larger than {_LARGEST_FILE >> 20} MiB: no sounding is", where=str(path))
        return path.read_text(encoding="utf-8-sig")
    except FileNotFoundError:
        raise InputError("there is no such file", where=str(path)) from None
    except UnicodeDecodeError as error:
        raise InputError("this is not a text file in UTF-8", where=str(path)) from error
    except OSError as error:
        raise InputError(f"the file cannot be read ({error.strerror})", where=str(path)) from error


def _rows(text: str, path: Path) -> Iterator[tuple[int, list[str]]]:
    """Lines with something on them, cut into cells, with their numbers; the first line sets the separator."""
    separator = ""
    for number, line in enumerate(text.splitlines(), start=1):
        content = line.partition("#")[0] if separator else line
        if not content.strip(" ,;\t") or content.lstrip().startswith("#"):
            continue
        if not separator:
            separator = next((sign for sign in (";", "\t", ",") if sign in content), ",")
        try:
            cells = next(csv.reader([content], delimiter=separator, strict=True))
        except csv.Error as error:
            raise InputError(
                f"cannot be cut into columns ({error})", where=f"{path}, line {number}"
            ) from error
        yield number, [cell.strip() for cell in cells]


def _number(cell: str, column: Column, where: str) -> float:
    if cell.casefold() in _MISSING_WORDS:
        return np.nan
    try:
        value = float(cell)
    except ValueError:
        comma = "," in cell and cell.replace(",", "", 1).lstrip("+-").replace(".", "", 1).isdigit()
        raise InputError(
            f"{cell!r} in column {column.header!r} is not a number",
            where=where,
            remedy="Write a decimal point, not a comma" if comma else None,
        ) from None
    if np.isinf(value):
        raise InputError(f"{cell!r} in column {column.header!r} is not a finite number", where=where)
    return np.nan if value == MISSING else value
