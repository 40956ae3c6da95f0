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

from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.sounding import profile_of_sounding
from groundglow.atmosphere.structure import geometric_height
from groundglow.errors import DomainError, InputError
from groundglow.scene.analysis_lattice import Corners, Lattice, lattice_of
from groundglow.scene.analysis_layout import StoredField, Times, fields_of, looked_for
from groundglow.scene.analysis_open import open_analysis_file
from groundglow.scene.analysis_window import HUMIDITIES, humidity_of, mixed, read_window

Float = NDArray[np.float64]

# Air changes too much in a longer time to be taken as linear in between: twice-daily analyses still count.
LONGEST_STEP = np.timedelta64(12, "h")


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
    def times(self) -> Times:
        """Times at which all that is needed is known, in UTC, rising."""
        needed = [self.fields[role] for role in ("temperature", humidity_of(self.fields), "height")]
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
        window = mixed(
            [(read_window(self.fields, self.lattice, time, rows, columns), share) for time, share in shares],
            where=self.names,
        )
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
    if not any(role in fields for role in HUMIDITIES):
        missing.extend(HUMIDITIES)
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
