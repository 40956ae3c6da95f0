"""Soundings from CSV files: radiosondes, masts and drone flights, as people write them.

One table of levels, in either order, under headers that name quantity and unit. Comma, semicolon or tab
between the columns, a point in the numbers, ``#`` before comments; empty cells, NaN and -9999 are missing.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.sounding import profile_of_sounding
from groundglow.atmosphere.structure import geometric_height, hydrostatic_height, standard_pressure
from groundglow.errors import DomainError, InputError
from groundglow.scene.sounding_table import SoundingTable, read_table

Float = NDArray[np.float64]

# Names of the core for measures that the headers call otherwise.
_MEASURES = {"water_vapour": "ppmv"}
# The lowest pressure may differ from the standard atmosphere's at its height by this factor: the deepest
# lows, strongest highs and the cold air over plateaus stay well within; kPa, feet and heights above the
# ground instead of the sea do not.
_PRESSURE_RANGE = (0.82, 1.12)
# Rise of height over that of the hydrostatic heights; radiosondes agree within 1 %.
_THICKNESS_TOLERANCE = 0.1


def read_sounding(
    path: Path,
    *,
    columns: Mapping[str, str] | None = None,
    ground_height: float | None = None,
    ground_pressure: float | None = None,
) -> Profile:
    """The profile that a sounding's file holds.

    Levels that lack their pressure, height or temperature, or their humidity below others that have it,
    are left out; the notes say how many. Heights that are missing at some levels are computed instead.

    Parameters
    ----------
    path : Path
        CSV with one line of headers, such as ``pressure_hPa,temperature_degC,dew_point_degC``: pressure or
        height, temperature, exactly one measure of humidity, and ozone if wanted.
    columns : mapping of str to str, optional
        A header of the file, and the header with quantity and unit that it stands for.
    ground_height : float, optional
        Height of the lowest level above sea level, needed without heights. [m]
    ground_pressure : float, optional
        Pressure of the lowest level, needed without pressures. [hPa]

    Returns
    -------
    Profile
        From the lowest level up to the last one with humidity; not completed.

    Raises
    ------
    InputError
        If the file cannot be read, or what it holds cannot be meant; with file and line.
    ConfigError
        If ``columns`` does not fit the file.
    DomainError
        If the levels make no profile; with the file.
    """
    table = read_table(path, columns or {})
    _refuse_other_units(table, path)
    table, start, notes = _usable(table, ground_height, path)
    _refuse_order(table, path)
    humidity = table.columns["humidity"].quantity
    values = table.values
    try:
        profile = profile_of_sounding(
            temperature=values["temperature"],
            humidity=values["humidity"],
            humidity_measure=_MEASURES.get(humidity, humidity),
            pressure=values.get("pressure"),
            height=values.get("height"),
            ground_height=start,
            ground_pressure=ground_pressure,
            ozone=values.get("ozone"),
            source=f"sounding {path.name}",
        )
    except DomainError as error:
        raise DomainError(error.what, where=str(path), remedy=error.remedy) from error
    _refuse_misplaced(profile, path)
    for note in notes:
        profile = profile.with_note(note)
    return profile


def _refuse_other_units(table: SoundingTable, path: Path) -> None:
    """What has plainly another unit than its header says; the rest is told by the profile's own checks."""
    for role, column in table.columns.items():
        zero = float(column.unit.converted(0.0))
        low, high = float(np.nanmin(table.values[role])), float(np.nanmax(table.values[role]))
        problem = ""
        if column.quantity in ("temperature", "dew_point") and zero > 0.0 and low > zero + 100.0:
            problem = "look like kelvin"
        elif column.quantity == "relative_humidity" and column.unit.factor == 100.0 and high > 200.0:
            problem = "look like percent, not fractions of one"
        elif column.quantity == "pressure" and high < 120.0:
            problem = f"reach {high:g} hPa only"
        if problem:
            raise InputError(
                f"the values of column {column.header!r} {problem}",
                where=str(path),
                remedy="Name the unit that the values have, in the header or in 'columns'",
            )


def _usable(
    table: SoundingTable, ground_height: float | None, path: Path
) -> tuple[SoundingTable, float | None, list[str]]:
    """The table without what is missing, the height of its lowest level if known, and notes on what was done."""
    notes = []
    if table.columns.get("height") and table.columns["height"].quantity != "height":
        table = SoundingTable(
            table.columns, {**table.values, "height": geometric_height(table.values["height"])}, table.lines
        )
    start = _start_of_computed_heights(table, ground_height)
    if start is not None:
        table, ground_height = table.without("height"), start
        notes.append("heights computed from the pressures, as some are missing")
    needed = [values for role, values in table.values.items() if role != "ozone"]
    usable = np.all(np.isfinite(needed), axis=0)
    if usable.sum() < 2:
        raise InputError(
            f"complete levels: {usable.sum()} of {usable.size}, and a profile needs two", where=str(path)
        )
    if not usable.all():
        notes.append(f"{(~usable).sum()} of {usable.size} levels left out, as values are missing there")
    table = table.at(usable)
    if "ozone" in table.values and np.isnan(table.values["ozone"]).any():
        notes.append("the sounding's ozone left out, as it is not known at every level")
        table = table.without("ozone")
    return table, ground_height, notes


def _start_of_computed_heights(table: SoundingTable, ground_height: float | None) -> float | None:
    """Height of the lowest level if heights stop and start beside complete pressures; else None."""
    values = table.values
    if "pressure" not in values or "height" not in values or np.isfinite(values["height"]).all():
        return None
    if not np.isfinite(values["pressure"]).all():
        return None
    lowest = float(values["height"][np.argmax(values["pressure"])])
    return lowest if np.isfinite(lowest) else ground_height


def _refuse_order(table: SoundingTable, path: Path) -> None:
    """Levels that come twice, and pressures that rise with height."""
    first, unit = ("pressure", "hPa") if "pressure" in table.values else ("height", "m")
    order = np.argsort(-table.values[first] if first == "pressure" else table.values[first], kind="stable")
    lines = table.lines[order]
    repeated = np.flatnonzero(np.diff(table.values[first][order]) == 0.0)
    if repeated.size:
        level = int(repeated[0])
        raise InputError(
            f"the level at {table.values[first][order][level]:g} {unit} comes twice",
            where=f"{path}, lines {lines[level]} and {lines[level + 1]}",
            remedy="Each level may stand once",
        )
    if first == "height" or "height" not in table.values:
        return
    height, pressure = table.values["height"][order], table.values["pressure"][order]
    falling = np.flatnonzero(np.diff(height) <= 0.0)
    if falling.size:
        level = int(falling[0])
        raise InputError(
            f"the pressure does not fall with height: {pressure[level]:g} hPa at {height[level]:g} m, "
            f"{pressure[level + 1]:g} hPa at {height[level + 1]:g} m",
            where=f"{path}, lines {lines[level]} and {lines[level + 1]}",
        )


def _refuse_misplaced(profile: Profile, path: Path) -> None:
    """Heights and pressures that cannot belong together: another unit, or heights above the ground."""
    low, high = _PRESSURE_RANGE
    ratio = float(profile.pressure[0] / standard_pressure(profile.height[0]))
    if not low < ratio < high:
        raise InputError(
            f"the lowest level has {profile.pressure[0]:g} hPa at {profile.height[0]:.0f} m, where "
            f"{standard_pressure(profile.height[0]):.0f} hPa are usual",
            where=str(path),
            remedy="Heights count from sea level; check the units of height and pressure",
        )
    vapour = profile.water_vapour * profile.pressure / 1e6
    expected = hydrostatic_height(profile.pressure, profile.temperature, vapour, float(profile.height[0]))
    rise, expected_rise = np.ptp(profile.height), np.ptp(expected)
    if abs(rise / expected_rise - 1.0) > _THICKNESS_TOLERANCE:
        raise InputError(
            f"heights rise by {rise:.0f} m where the pressures mean {expected_rise:.0f} m",
            where=str(path),
            remedy="Check the units of height and pressure",
        )
