"""Which variable of an analysis is what, on which axes, in which unit.

Variables are known by their CF standard name or a common short name, axes by standard name, unit or
name. What cannot be understood for certain is refused.

References
----------
CF metadata conventions, version 1.11, and the standard name table.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import InputError
from groundglow.scene.air_units import Unit, known_units, unit_of
from groundglow.scene.analysis_open import DAMAGED, first_line

if TYPE_CHECKING:
    import xarray as xr

Float = NDArray[np.float64]
Times = NDArray[np.datetime64]


@dataclass(frozen=True)
class Known:
    """How a quantity is named in files.

    Attributes
    ----------
    standard_names, names : tuple of str
        CF standard names, and short names in lower case.
    quantities : tuple of str
        Keys of ``air_units.UNITS``; the unit decides between them.
    on_levels : bool
        Whether it is given at pressure levels, or at the ground.
    """

    standard_names: tuple[str, ...]
    names: tuple[str, ...]
    quantities: tuple[str, ...]
    on_levels: bool = True


VARIABLES: Mapping[str, Known] = MappingProxyType(
    {
        "temperature": Known(
            ("air_temperature",), ("t", "ta", "tmp", "temp", "temperature", "air_temperature"), ("temperature",)
        ),
        "specific_humidity": Known(
            ("specific_humidity",), ("q", "hus", "shum", "spfh", "specific_humidity"), ("specific_humidity",)
        ),
        "relative_humidity": Known(
            ("relative_humidity",), ("r", "rh", "hur", "relative_humidity"), ("relative_humidity",)
        ),
        "height": Known(
            ("geopotential", "geopotential_height"),
            ("z", "gh", "zg", "hgt", "phi", "geopotential", "geopotential_height"),
            ("geopotential", "geopotential_height"),
        ),
        "ozone": Known(
            ("mass_fraction_of_ozone_in_air", "mole_fraction_of_ozone_in_air"),
            ("o3", "ozone", "ozone_mass_mixing_ratio"),
            ("ozone",),
        ),
        "surface_pressure": Known(
            ("surface_air_pressure",), ("sp", "ps", "pressfc", "surface_pressure"), ("pressure",), on_levels=False
        ),
    }
)  # fmt: skip
_LATITUDE = ("latitude", ("degrees_north", "degree_north", "degreesn"), ("lat", "latitude"))
_LONGITUDE = ("longitude", ("degrees_east", "degree_east", "degreese"), ("lon", "longitude", "long"))
_LEVEL_NAMES = ("level", "lev", "plev", "pressure", "pressure_level", "isobaric", "hybrid", "model_level")


@dataclass(frozen=True)
class StoredField:
    """One variable of one file, and how it is stored.

    Attributes
    ----------
    path : Path
    variable : DataArray
        Of an open file; its values are read when they are needed.
    quantity : str
        A key of ``air_units.UNITS``.
    unit : Unit
    times : array (times,)
        In UTC.
    latitude, longitude : array
        In the order of the file. [deg]
    levels : array (levels,) or None
        Pressures in the order of the file; None at the ground. [hPa]
    dimensions : mapping of str to str
        The file's names of ``time`` (if it has one), ``level``, ``latitude`` and ``longitude``.
    """

    path: Path
    variable: xr.DataArray
    quantity: str
    unit: Unit
    times: Times
    latitude: Float
    longitude: Float
    levels: Float | None
    dimensions: Mapping[str, str]

    @property
    def where(self) -> str:
        """File and variable, for messages."""
        return f"{self.path}, variable {self.variable.name!r}"

    def read(self, time: int, latitude: slice, longitude: NDArray[np.int64]) -> Float:
        """Values of a window at one time, in our unit: (levels, latitudes, longitudes) or without levels.

        Raises
        ------
        InputError
            If the file is damaged there.
        """
        chosen: dict[str, int | slice | NDArray[np.int64]] = {
            self.dimensions["latitude"]: latitude,
            self.dimensions["longitude"]: longitude,
            **dict.fromkeys(_idle(self.variable, self.dimensions), 0),
        }
        if "time" in self.dimensions:
            chosen[self.dimensions["time"]] = time
        order = [
            self.dimensions[axis] for axis in ("level", "latitude", "longitude") if axis in self.dimensions
        ]
        try:
            return self.unit.converted(self.variable.isel(chosen).transpose(*order).to_numpy())
        except DAMAGED as error:
            raise InputError(f"cannot be read ({first_line(error)})", where=self.where) from error


def fields_of(path: Path, datasets: Sequence[xr.Dataset]) -> dict[str, StoredField]:
    """The variables of an open file that the air needs, by the keys of ``VARIABLES``.

    Raises
    ------
    InputError
        If a variable is there twice, in an unknown unit, or on axes that are not understood.
    """
    found: dict[str, StoredField] = {}
    for dataset in datasets:
        for role, variable in _known_variables(dataset):
            field = _stored(path, role, variable)
            if role in found and found[role].quantity == field.quantity:
                names = f"{found[role].variable.name!r} and {variable.name!r}"
                raise InputError(
                    f"two variables could be the {role.replace('_', ' ')}: {names}",
                    where=str(path),
                    remedy="Leave one of them out",
                )
            found.setdefault(role, field)
    return found


def looked_for(role: str) -> str:
    """Names by which a quantity would have been known, for a message."""
    known = VARIABLES[role]
    return f"standard name {' or '.join(known.standard_names)}, or one of the names {', '.join(known.names)}"


def _known_variables(dataset: xr.Dataset) -> Iterator[tuple[str, xr.DataArray]]:
    for name in dataset.data_vars:
        variable = dataset[name]
        standard = str(variable.attrs.get("standard_name", ""))
        for role, known in VARIABLES.items():
            named = str(name).lower() in known.names and standard in ("", "unknown")
            # Temperature and humidity at screen height carry the same names as those aloft.
            if (named or standard in known.standard_names) and known.on_levels == _on_levels(variable):
                yield role, variable


def _on_levels(variable: xr.DataArray) -> bool:
    return any(_is_level(variable, str(dimension)) for dimension in variable.dims)


def _is_level(variable: xr.DataArray, dimension: str) -> bool:
    if dimension not in variable.coords:
        return dimension.lower() in _LEVEL_NAMES
    coordinate = variable.coords[dimension]
    return (
        dimension.lower() in _LEVEL_NAMES
        or unit_of("pressure", str(coordinate.attrs.get("units", ""))) is not None
    )


def _stored(path: Path, role: str, variable: xr.DataArray) -> StoredField:
    where = f"{path}, variable {variable.name!r}"
    latitude = _horizontal(variable, _LATITUDE, where)
    longitude = _horizontal(variable, _LONGITUDE, where)
    dimensions = {"latitude": latitude, "longitude": longitude}
    levels = None
    if VARIABLES[role].on_levels:
        dimensions["level"] = next(str(d) for d in variable.dims if _is_level(variable, str(d)))
        levels = _levels(variable, dimensions["level"], where)
    times, time_dimension = _times(variable, where)
    if time_dimension is not None:
        dimensions["time"] = time_dimension
    for dimension in _idle(variable, dimensions):
        if variable.sizes[dimension] > 1:
            raise InputError(
                f"has {variable.sizes[dimension]} values along {dimension!r}, and one is needed",
                where=where,
                remedy="Select one of them before (one ensemble member, one forecast step)",
            )
    quantity, unit = _unit(variable, VARIABLES[role], where)
    return StoredField(
        path=path,
        variable=variable,
        quantity=quantity,
        unit=unit,
        times=times,
        latitude=np.asarray(variable.coords[latitude].to_numpy(), dtype=np.float64),
        longitude=np.asarray(variable.coords[longitude].to_numpy(), dtype=np.float64),
        levels=levels,
        dimensions=dimensions,
    )


def _idle(variable: xr.DataArray, dimensions: Mapping[str, str]) -> list[str]:
    """Dimensions of a variable that are none of the four."""
    return [str(dimension) for dimension in variable.dims if dimension not in dimensions.values()]


def _horizontal(
    variable: xr.DataArray, wanted: tuple[str, tuple[str, ...], tuple[str, ...]], where: str
) -> str:
    """Name of the dimension along which latitude, or longitude, runs."""
    standard_name, units, names = wanted
    for dimension in map(str, variable.dims):
        attributes = variable.coords[dimension].attrs if dimension in variable.coords else {}
        if (
            attributes.get("standard_name") == standard_name
            or str(attributes.get("units", "")).lower() in units
            or (dimension.lower() in names and dimension in variable.coords)
        ):
            return dimension
    raise InputError(
        f"has no axis of {standard_name} (its dimensions: {', '.join(map(str, variable.dims))})",
        where=where,
        remedy="Only grids regular in latitude and longitude are read",
    )


def _levels(variable: xr.DataArray, dimension: str, where: str) -> Float:
    if dimension not in variable.coords:
        raise InputError(f"the levels {dimension!r} have no values", where=where)
    coordinate = variable.coords[dimension]
    text = str(coordinate.attrs.get("units", ""))
    unit = unit_of("pressure", text)
    if unit is None:
        raise InputError(
            f"the levels {dimension!r} are no pressures: their unit is {text!r}",
            where=where,
            remedy="Give the analysis on pressure levels; model levels are not read",
        )
    return unit.converted(coordinate.to_numpy())


def _times(variable: xr.DataArray, where: str) -> tuple[Times, str | None]:
    """Times of a variable, and the dimension along which they run."""
    names = [
        str(name) for name in variable.coords if variable.coords[name].attrs.get("standard_name") == "time"
    ]
    candidates = [name for name in ("valid_time", "time", *names) if name in variable.coords]
    if not candidates:
        raise InputError(
            "has no time", where=where, remedy="Give files whose times follow the CF conventions"
        )
    coordinate = variable.coords[candidates[0]].squeeze()
    if coordinate.ndim > 1:
        raise InputError(
            f"its times run along {' and '.join(map(str, coordinate.dims))}",
            where=where,
            remedy="Select one forecast step, or one start, before",
        )
    values = np.atleast_1d(coordinate.to_numpy())
    if not np.issubdtype(values.dtype, np.datetime64) or np.isnat(values).any():
        raise InputError(
            f"the times {candidates[0]!r} are no dates of the common calendar", where=where,
            remedy="They need a unit such as 'hours since 2026-01-01' and the standard calendar",
        )  # fmt: skip
    if coordinate.ndim == 1:
        return values.astype("datetime64[s]"), str(coordinate.dims[0])
    return values.astype("datetime64[s]"), None


def _unit(variable: xr.DataArray, known: Known, where: str) -> tuple[str, Unit]:
    text = str(variable.attrs.get("units", ""))
    for quantity in known.quantities:
        unit = unit_of(quantity, text)
        if unit is not None:
            return quantity, unit
    listed = ", ".join(known_units(quantity) for quantity in known.quantities)
    what = f"has the unknown unit {text!r}" if text else "names no unit"
    raise InputError(f"{what} (known: {listed})", where=where)
