"""Gridded analyses of the air on pressure levels: profiles at any place and time that they cover.

Between grid points the profile is the bilinear mean at each pressure level, between times the linear
one. Temperature, geopotential height and the mole fractions of water and ozone are averaged; levels
below the ground, by the surface pressure or because they are missing, are dropped.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.humidity import ppmv, vapour_pressure
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.sounding import profile_of_sounding
from groundglow.atmosphere.structure import geometric_height
from groundglow.errors import DomainError, InputError
from groundglow.scene.analysis_lattice import Corners, Lattice, lattice_of
from groundglow.scene.analysis_layout import StoredField, Times, fields_of, looked_for
from groundglow.scene.analysis_open import open_analysis_file

Float = NDArray[np.float64]

# Air changes too much in a longer time to be taken as linear in between: twice-daily analyses still count.
LONGEST_STEP = np.timedelta64(12, "h")
# Of one of these, or both in any order; the first one there is used.
_HUMIDITIES = ("specific_humidity", "relative_humidity")
# Wave-like noise of analyses may take humidity below zero, and relative humidity counted over ice exceeds
# 100 % of what is counted over water: both are cut. Beyond these it is another quantity.
_LOWEST_HUMIDITY = {"specific_humidity": -1e-3, "relative_humidity": -20.0}  # kg kg-1, %
_HIGHEST_HUMIDITY = {"specific_humidity": 0.06, "relative_humidity": 200.0}
_SATURATED = 100.0  # %
_KELVIN_RANGE = (150.0, 340.0)


@dataclass(frozen=True)
class Analysis:
    """An open analysis.

    Attributes
    ----------
    fields : mapping of str to tuple of StoredField
        By ``analysis_layout.VARIABLES``: what is there of each, in one file or several.
    lattice : Lattice
        The grid points of all of them.
    names : str
        The files for messages.
    """

    fields: Mapping[str, tuple[StoredField, ...]]
    lattice: Lattice
    names: str

    @classmethod
    @contextmanager
    def open(cls, paths: Sequence[Path]) -> Iterator[Analysis]:
        """An analysis of one file or several, which may share it out by time or by variable.

        Parameters
        ----------
        paths : sequence of Path
            NetCDF files, or GRIB files where cfgrib is installed.

        Raises
        ------
        InputError
            If a file cannot be read, variables are missing, or the files do not fit together.
        """
        names = paths[0].name if len(paths) == 1 else f"{paths[0].name} and {len(paths) - 1} more"
        fields: dict[str, tuple[StoredField, ...]] = {}
        with ExitStack() as stack:
            for path in paths:
                for role, field in fields_of(path, stack.enter_context(open_analysis_file(path))).items():
                    fields[role] = (*fields.get(role, ()), field)
            _refuse_missing(fields, ", ".join(map(str, paths)))
            yield cls(fields, _common_lattice(fields), names)

    @property
    def spacing(self) -> float:
        """Typical distance of grid points along the finer of the two axes. [deg]."""
        return self.lattice.spacing

    @property
    def humidity(self) -> str:
        """The measure of humidity that is used."""
        return next(role for role in _HUMIDITIES if role in self.fields)

    @property
    def times(self) -> Times:
        """Times at which all that is needed is known, in UTC, rising."""
        needed = [self.fields[role] for role in ("temperature", self.humidity, "height")]
        known = [np.unique(np.concatenate([field.times for field in fields])) for fields in needed]
        return np.intersect1d(np.intersect1d(known[0], known[1]), known[2])

    def profiles_at(self, points: Sequence[tuple[float, float]], when: datetime) -> list[Profile]:
        """The air above places at one time.

        Parameters
        ----------
        points : sequence of (float, float)
            Longitude and latitude, east and north positive. [deg]
        when : datetime
            With its offset from UTC.

        Returns
        -------
        list of Profile
            In the order of the points; from the lowest level above the analysis' ground to its highest
            with humidity, not completed.

        Raises
        ------
        InputError
            If the place or the time is not covered, or what is stored there cannot be meant.
        DomainError
            If the levels make no profile.
        """
        shares = self._shares(when)
        try:
            corners = [self.lattice.around(longitude, latitude) for longitude, latitude in points]
        except InputError as error:
            raise InputError(error.what, where=self.names, remedy=error.remedy) from error
        rows = slice(min(c.row for c in corners), max(c.row for c in corners) + 2)
        columns = slice(min(c.column for c in corners), max(c.column for c in corners) + 2)
        window = _mixed([(self._window(time, rows, columns), share) for time, share in shares])
        note = f"analysis {self.names} at {_told(when)}"
        return [
            self._profile(window, corner, (rows.start, columns.start), note, place)
            for corner, place in zip(corners, points, strict=True)
        ]

    def _shares(self, when: datetime) -> list[tuple[np.datetime64, float]]:
        """The times around one, and the weight of each."""
        if when.tzinfo is None:
            raise InputError("the time of the scene has no offset from UTC", where=self.names)
        wanted = np.datetime64(when.astimezone(UTC).replace(tzinfo=None), "us")
        times = self.times
        if times.size == 0 or not times[0] <= wanted <= times[-1]:
            covered = (
                f"from {_told(times[0])} to {_told(times[-1])}"
                if times.size
                else "no time with all variables"
            )
            raise InputError(
                f"does not cover {_told(when)}: it covers {covered}",
                where=self.names,
                remedy="Add the file of the time before or after",
            )
        upper = int(np.searchsorted(times, wanted))
        if times[upper] == wanted:
            return [(times[upper], 1.0)]
        step = times[upper] - times[upper - 1]
        if step > LONGEST_STEP:
            raise InputError(
                f"knows the air at {_told(times[upper - 1])} and next at {_told(times[upper])}, too far apart "
                f"for {_told(when)}",
                where=self.names,
                remedy=f"Give times at most {LONGEST_STEP / np.timedelta64(1, 'h'):.0f} hours apart",
            )
        share = float((wanted - times[upper - 1]) / step)
        return [(times[upper - 1], 1.0 - share), (times[upper], share)]

    def _window(self, time: np.datetime64, rows: slice, columns: slice) -> dict[str, Float]:
        """Every quantity at one time: (levels, rows, columns), from the ground up, in our units."""
        temperature_field = self._field("temperature", time)
        assert temperature_field is not None and temperature_field.levels is not None  # noqa: PT018
        pressure = np.sort(temperature_field.levels)[::-1]
        found = {"pressure": pressure}
        for role in ("temperature", self.humidity, "height", "ozone", "surface_pressure"):
            field = self._field(role, time)
            if field is not None:
                found[role] = self._read(field, time, rows, columns, pressure)
        _refuse_temperatures(found["temperature"], temperature_field.where)
        humidity_field = self._field(self.humidity, time)
        assert humidity_field is not None  # the time is one of those at which it is known
        found["water_vapour"] = _mole_fraction(
            self.humidity, found.pop(self.humidity), found["temperature"], pressure, humidity_field.where
        )
        return found

    def _field(self, role: str, time: np.datetime64) -> StoredField | None:
        return next((field for field in self.fields.get(role, ()) if time in field.times), None)

    def _read(
        self, field: StoredField, time: np.datetime64, rows: slice, columns: slice, pressure: Float
    ) -> Float:
        """One variable in a window of the lattice, at the levels wanted; NaN at levels it lacks."""
        row, column = self.lattice.row[rows], self.lattice.column[columns]
        stored = field.read(
            int(np.flatnonzero(field.times == time)[0]), slice(int(row.min()), int(row.max()) + 1), column
        )
        stored = stored[..., row - row.min(), :]
        if field.levels is None:
            return stored
        values = np.full((pressure.size, *stored.shape[1:]), np.nan)
        place = {round(float(level), 4): index for index, level in enumerate(field.levels)}
        for index, level in enumerate(pressure):
            if round(float(level), 4) in place:
                values[index] = stored[place[round(float(level), 4)]]
        return values

    def _profile(
        self,
        window: Mapping[str, Float],
        corner: Corners,
        start: tuple[int, int],
        note: str,
        place: tuple[float, float],
    ) -> Profile:
        at_place = {
            role: values if role == "pressure" else corner.blend(values, *start)
            for role, values in window.items()
        }
        above = _above_ground(at_place)
        ozone = at_place["ozone"][above] if "ozone" in at_place else None
        try:
            return profile_of_sounding(
                pressure=at_place["pressure"][above],
                height=geometric_height(at_place["height"][above]),
                temperature=at_place["temperature"][above],
                humidity=at_place["water_vapour"][above],
                humidity_measure="ppmv",
                ozone=ozone if ozone is not None and np.isfinite(ozone).all() else None,
                source=note,
            )
        except DomainError as error:
            where = f"{self.names} at longitude {place[0]:.3f}, latitude {place[1]:.3f}"
            raise DomainError(error.what, where=where, remedy=error.remedy) from error


def _refuse_missing(fields: Mapping[str, Sequence[StoredField]], where: str) -> None:
    missing = [role for role in ("temperature", "height") if role not in fields]
    if not any(role in fields for role in _HUMIDITIES):
        missing.extend(_HUMIDITIES)
    if missing:
        told = "; ".join(f"{role.replace('_', ' ')} ({looked_for(role)})" for role in missing)
        either = " (one humidity is enough)" if "specific_humidity" in missing else ""
        raise InputError(f"holds, on pressure levels, no {told}{either}", where=where)


def _common_lattice(fields: Mapping[str, Sequence[StoredField]]) -> Lattice:
    """The lattice that all fields share."""
    every = [field for of_role in fields.values() for field in of_role]
    first = every[0]
    for field in every[1:]:
        for name in ("latitude", "longitude"):
            mine, other = getattr(first, name), getattr(field, name)
            if mine.size != other.size or not np.allclose(mine, other, rtol=0.0, atol=1e-6):
                raise InputError(
                    f"its {name}s differ from those of {first.where}",
                    where=field.where,
                    remedy="Give all variables on one grid",
                )
    return lattice_of(first.latitude, first.longitude, where=str(first.path))


def _mixed(parts: Sequence[tuple[Mapping[str, Float], float]]) -> dict[str, Float]:
    """Weighted mean of windows, of what all of them hold."""
    first = parts[0][0]
    for window, _ in parts[1:]:
        if not np.array_equal(window["pressure"], first["pressure"]):
            raise InputError("the pressure levels differ from time to time")
    return {
        role: np.sum([share * window[role] for window, share in parts], axis=0)
        for role in first
        if all(role in window for window, _ in parts)
    }


def _mole_fraction(measure: str, humidity: Float, temperature: Float, pressure: Float, where: str) -> Float:
    """Mole fraction of water; noise below zero and what is above saturation is cut. [1e-6]."""
    low, high = np.nanmin(humidity, initial=0.0), np.nanmax(humidity, initial=0.0)
    if low < _LOWEST_HUMIDITY[measure] or high > _HIGHEST_HUMIDITY[measure]:
        raise InputError(
            f"values of {low:g} to {high:g} are no {measure.replace('_', ' ')} in the unit stated",
            where=where,
        )
    if measure == "relative_humidity":
        if 0.0 < high <= 1.05:
            raise InputError(
                f"relative humidities of at most {high:g} % look like fractions of one",
                where=where,
                remedy="Their unit must then be '1'",
            )
        humidity = np.minimum(humidity, _SATURATED)
    level_pressure = pressure[:, np.newaxis, np.newaxis]
    return ppmv(
        vapour_pressure(measure, np.maximum(humidity, 0.0), temperature, level_pressure), level_pressure
    )


def _refuse_temperatures(temperature: Float, where: str) -> None:
    known = temperature[np.isfinite(temperature)]
    low, high = _KELVIN_RANGE
    if known.size and not (low <= known.min() and known.max() <= high):
        raise InputError(
            f"temperatures of {known.min():.1f} to {known.max():.1f} K are none of the air's",
            where=where,
            remedy="They look like degrees Celsius" if known.max() < 65.0 else None,
        )


def _above_ground(profile: Mapping[str, Float]) -> NDArray[np.bool_]:
    """Levels above the surface pressure, and above all levels that are missing from the ground up."""
    needed = [profile[role] for role in ("temperature", "height", "water_vapour")]
    known = np.logical_or.accumulate(np.all(np.isfinite(needed), axis=0))
    if "surface_pressure" in profile and np.isfinite(profile["surface_pressure"]):
        known &= profile["pressure"] <= profile["surface_pressure"]
    return np.asarray(known)


def _told(when: datetime | np.datetime64) -> str:
    """A time for the reader, in UTC to the minute."""
    if isinstance(when, datetime):
        return f"{when.astimezone(UTC):%Y-%m-%d %H:%M} UTC"
    return f"{np.datetime_as_string(when, unit='m').replace('T', ' ')} UTC"
