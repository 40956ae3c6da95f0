"""Invented gridded analyses as NetCDF files: air that is linear in longitude, latitude and time.

Bilinear means and linear ones in time give such air back exactly, whatever the axes look like.
"""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

PRESSURE = np.array([1000.0, 925.0, 850.0, 700.0, 500.0, 300.0, 200.0, 100.0])  # hPa
START = datetime.datetime(2026, 7, 14, 6, tzinfo=datetime.UTC)
HOURS = (0.0, 3.0, 6.0)

# Values at 46 N, 8 E at the start.
TEMPERATURE = np.array([294.0, 290.0, 286.0, 277.0, 259.0, 230.0, 218.0, 210.0])  # K
SPECIFIC_HUMIDITY = np.array([11e-3, 9e-3, 7e-3, 3.5e-3, 8e-4, 6e-5, 8e-6, 3e-6])  # kg kg-1
# Hypsometric equation by hand, R = 287.05, g = 9.80665, virtual temperature T (1 + 0.608 q); to a metre.
GEOPOTENTIAL_HEIGHT = np.array([100.0, 770.0, 1487.0, 3092.0, 5735.0, 9392.0, 12050.0, 16392.0])  # m
OZONE = np.array([5e-8, 5e-8, 6e-8, 7e-8, 8e-8, 1.2e-7, 3e-7, 8e-7])  # kg kg-1
SURFACE_PRESSURE = 960.0  # hPa

SHORT = {
    "temperature": ("t", {"units": "K"}),
    "specific_humidity": ("q", {"units": "kg kg**-1"}),
    "height": ("z", {"units": "m**2 s**-2"}),
    "ozone": ("o3", {"units": "kg kg**-1"}),
    "surface_pressure": ("sp", {"units": "Pa"}),
}
CF = {
    "temperature": ("air", {"units": "K", "standard_name": "air_temperature"}),
    "specific_humidity": ("moisture", {"units": "1", "standard_name": "specific_humidity"}),
    "height": ("heights", {"units": "m", "standard_name": "geopotential_height"}),
    "ozone": ("ozone_there", {"units": "kg kg-1", "standard_name": "mass_fraction_of_ozone_in_air"}),
    "surface_pressure": ("at_ground", {"units": "hPa", "standard_name": "surface_air_pressure"}),
}


def shift(longitude: Any, latitude: Any, hours: Any) -> Any:
    """How far the air is from that at 46 N, 8 E at the start, in units of which each quantity has its own."""
    return 0.1 * (longitude - 8.0) + 0.2 * (latitude - 46.0) + 0.3 * hours


def dataset(
    *,
    longitude: Sequence[float] | NDArray[np.float64] = (7.0, 7.5, 8.0, 8.5, 9.0),
    latitude: Sequence[float] | NDArray[np.float64] = (47.0, 46.5, 46.0, 45.5),
    hours: Sequence[float] = HOURS,
    names: dict[str, tuple[str, dict[str, str]]] = SHORT,
    turn: float = 0.0,
) -> xr.Dataset:
    """A whole analysis; ``turn`` is added to longitudes where the air is worked out, to unroll them."""
    east = np.asarray(longitude, dtype=float)
    unrolled = np.where(east + turn < turn, east + 360.0, east) if turn else east
    s = shift(
        unrolled[None, None, :],
        np.asarray(latitude, dtype=float)[None, :, None],
        np.array(hours)[:, None, None],
    )
    s = s[:, None]
    levels = (None, slice(None), None, None)
    geopotential_height = GEOPOTENTIAL_HEIGHT[levels] + 2.0 * s
    values = {
        "temperature": TEMPERATURE[levels] + s,
        "specific_humidity": SPECIFIC_HUMIDITY[levels] * (1.0 + 0.02 * s),
        "height": geopotential_height * (9.80665 if names["height"][1]["units"].startswith("m**2") else 1.0),
        "ozone": OZONE[levels] * (1.0 + 0.01 * s),
        "surface_pressure": (SURFACE_PRESSURE + s[:, 0])
        * (100.0 if names["surface_pressure"][1]["units"] == "Pa" else 1.0),
    }
    axes = ("time", "level", "latitude", "longitude")
    variables = {
        name: (axes if values[role].ndim == 4 else ("time", *axes[2:]), values[role], attributes)
        for role, (name, attributes) in names.items()
    }
    times = np.datetime64(START.replace(tzinfo=None), "ns") + (np.array(hours) * 3600e9).astype(
        "timedelta64[ns]"
    )
    return xr.Dataset(
        variables,
        {
            "time": ("time", times, {"standard_name": "time"}),
            "level": ("level", PRESSURE, {"units": "millibars"}),
            "latitude": ("latitude", np.asarray(latitude, dtype=float), {"units": "degrees_north"}),
            "longitude": ("longitude", east, {"units": "degrees_east"}),
        },
    )


def written(path: Path, content: xr.Dataset, *, classic: bool = True) -> Path:
    """The dataset as a file: classic NetCDF 3, which is written and read faster, or NetCDF 4."""
    if classic:
        content.to_netcdf(path, engine="scipy", format="NETCDF3_64BIT")
    else:
        content.to_netcdf(path, engine="h5netcdf")
    return path
