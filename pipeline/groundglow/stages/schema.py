"""The door of every stage: which variables a Dataset must hold, in which units, on which grid."""

from __future__ import annotations

from collections.abc import Iterable
from types import MappingProxyType

import xarray as xr

from groundglow.errors import InputError
from groundglow.stages.variables import BAND, variable

# Other spellings of the units used here; anything else is refused, never converted in silence.
_SPELLINGS = MappingProxyType(
    {
        "kelvin": "K",
        "": "1",
        "dimensionless": "1",
        "W/m2/sr/um": "W m-2 sr-1 um-1",
        "W m^-2 sr^-1 um^-1": "W m-2 sr-1 um-1",
        "W/m2": "W m-2",
        "W m^-2": "W m-2",
        "metre": "m",
        "meter": "m",
        "degrees": "degree",
        "deg": "degree",
    }
)


def require(dataset: xr.Dataset, **units: str) -> None:
    """Refuse a Dataset that lacks variables, or holds them in other units or dimensions.

    Parameters
    ----------
    dataset : Dataset
        With ``y`` and ``x`` as the last dimensions of every variable.
    **units : str
        The unit that each variable must state in its attributes.

    Raises
    ------
    InputError
        Listing every variable at fault, what was needed and what came.
    """
    faults = [fault for name, unit in units.items() if (fault := _fault(dataset, name, unit))]
    if faults:
        raise InputError(
            "; ".join(faults),
            where="Dataset",
            remedy="Run the stages before; where a function of your own dropped attributes, give them back with "
            "assign_attrs",
        )


def require_variables(dataset: xr.Dataset, names: Iterable[str]) -> None:
    """As :func:`require`, with the units that each variable always has."""
    require(dataset, **{name: variable(name).unit for name in names})


def _fault(dataset: xr.Dataset, name: str, unit: str) -> str | None:
    """What is wrong with one variable."""
    if name not in dataset:
        return f"{name}: needed in {unit!r}, missing"
    found = dataset[name]
    if BAND in found.dims:
        return f"{name}: needed for one band, found {found.sizes[BAND]} (choose with dataset.sel({BAND}=...))"
    if found.ndim and found.dims[-2:] != ("y", "x"):
        return f"{name}: needed with dimensions ending in (y, x), found ({', '.join(map(str, found.dims))})"
    stated = found.attrs.get("units")
    if stated is None:
        return f"{name}: needed in {unit!r}, found without units"
    if _SPELLINGS.get(str(stated), str(stated)) != unit:
        return f"{name}: needed in {unit!r}, found in {str(stated)!r}"
    return None
