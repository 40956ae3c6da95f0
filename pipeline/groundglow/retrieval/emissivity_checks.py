"""Inputs of the emissivity methods that look like something else than they should be.

Each check looks at a sample of a whole raster (an overview does) before the work starts, says nothing where
all is well, and otherwise raises an error that names what the numbers look like.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import ConfigError, InputError
from groundglow.retrieval.emissivity_class import SurfaceClass
from groundglow.retrieval.emissivity_class_raster import unknown_codes_error
from groundglow.retrieval.vegetation_index import vegetation_index

Float = NDArray[np.float64]


def check_emissivity(emissivity: ArrayLike, *, where: str) -> None:
    """An emissivity raster holds fractions above 0 and at most 1.

    Parameters
    ----------
    emissivity : array, any shape
        Sample of the raster; NaN is no data.
    where : str
        The raster.

    Raises
    ------
    InputError
        If there is no number, or more than half of them are no emissivity.
    """
    values = _valid(emissivity, "emissivity", where)
    wrong = np.count_nonzero((values <= 0.0) | (values > 1.0))
    if 2 * wrong <= values.size:
        return
    middle = float(np.median(values))
    raise InputError(
        f"{100.0 * wrong / values.size:.0f} % of the emissivities are not above 0 and at most 1; "
        f"the middle value is {middle:g}",
        where=where,
        remedy=_scale_hint(middle, 100.0),
    )


def check_reflectance(reflectance: ArrayLike, *, band: str, where: str) -> None:
    """A reflectance band holds fractions, not percent and not counts.

    Parameters
    ----------
    reflectance : array, any shape
        Sample of the scaled band; NaN is no data.
    band : str
        "red" or "near_infrared".
    where : str
        The raster.

    Raises
    ------
    InputError
        If there is no number, the middle one is above 1.5 or not above 0: percent, counts, or night.
    """
    values = _valid(reflectance, f"{band} reflectance", where)
    middle = float(np.median(values))
    if middle > 1.5:
        raise InputError(
            f"the {band} reflectance should lie between 0 and 1; its middle value is {middle:g}",
            where=where,
            remedy=_scale_hint(middle, 100.0, counts=True),
        )
    if middle <= 0.0:
        raise InputError(
            f"the {band} reflectance should be above 0; its middle value is {middle:g}",
            where=where,
            remedy="A scene without sunlight has no reflectance: give a red and near-infrared pair of "
            "another date with its 'acquired', or another source of emissivity; else check scale and offset",
        )


def check_index_bands(
    red: ArrayLike | None, near_infrared: ArrayLike | None, *, water: ArrayLike | None = None
) -> None:
    """Both bands of a vegetation index are there, and not in each other's place.

    Parameters
    ----------
    red, near_infrared : arrays of one shape, or None
        Samples of the reflectance; NaN is no data.
    water : bool array of that shape, optional
        True over water and snow, which are not looked at.

    Raises
    ------
    ConfigError
        If a band is missing.
    InputError
        If the index is negative over more than 80 % of the land, as it is when the bands are swapped.
    """
    missing = [name for name, band in (("red", red), ("near_infrared", near_infrared)) if band is None]
    if red is None or near_infrared is None:
        raise ConfigError(
            f"a vegetation index needs red and near-infrared reflectance; {' and '.join(missing)} is missing",
            where="reflectance",
            remedy="Name both in the scene, from another date for a scene at night, or choose another source "
            "of emissivity",
        )
    index = vegetation_index(red, near_infrared)
    land = ~np.isnan(index)
    if water is not None:
        land &= ~np.asarray(water, dtype=np.bool_)
    count = np.count_nonzero(land)
    negative = np.count_nonzero(index[land] < 0.0)
    if count and negative > 0.8 * count:
        raise InputError(
            f"the vegetation index is negative over {100.0 * negative / count:.0f} % of the land",
            where="reflectance",
            remedy="Ground and plants have a positive index: the red and near-infrared bands look swapped. "
            "Where it is open water throughout, take the class 'water' instead",
        )


def check_class_codes(
    codes: NDArray[np.integer], by_code: dict[int, SurfaceClass], *, no_data: int | None = None, where: str
) -> None:
    """Every code of a class raster has a class in the table.

    Parameters
    ----------
    codes : int array, any shape
        The class raster.
    by_code : dict of int to SurfaceClass
        From ``ClassTable.by_code``.
    no_data : int, optional
        Code that means nothing.
    where : str
        The raster.

    Raises
    ------
    InputError
        If a code has no class; the message lists them with their numbers of pixels.
    """
    known = np.array(sorted(by_code), dtype=np.int64)
    strangers = ~np.isin(codes, known)
    if no_data is not None:
        strangers &= codes != no_data
    if strangers.any():
        raise unknown_codes_error(codes[strangers], known, where)


def _valid(values: ArrayLike, what: str, where: str) -> Float:
    """The numbers among the values; an error where there are none."""
    array = np.asarray(values, dtype=np.float64)
    found = array[np.isfinite(array)]
    if found.size == 0:
        raise InputError(
            f"there is not one valid value of {what}",
            where=where,
            remedy="Check its no-data value and its extent",
        )
    return found


def _scale_hint(middle: float, percent: float, *, counts: bool = False) -> str:
    if 1.3 < middle <= percent:
        return "They look like percent: give the scale 0.01"
    if counts or middle > percent:
        return "They look like stored counts: give the scale and offset that turn them into fractions"
    return "Check the raster's scale, offset and no-data value"
