"""Emissivity of a class raster: what each of its codes means in one band."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import DomainError, InputError
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity import NO_DATA, ground_of_class
from groundglow.retrieval.emissivity_class import SurfaceClass

Pixels = NDArray[np.float32]
Flags = NDArray[np.uint16]

# Widest range of codes for which a dense table is made.
_DENSE = 65_536


@dataclass(frozen=True, eq=False)
class ClassLookup:
    """A class table made ready for one band: what each code of a class raster means.

    Attributes
    ----------
    codes : int64 array (n,)
        Increasing.
    numbers : float32 array (5, n)
        See :class:`GroundValues`.
    flags : uint16 array (n,)
    """

    codes: NDArray[np.int64]
    numbers: Pixels
    flags: Flags


def class_lookup(by_code: Mapping[int, SurfaceClass], response: SpectralResponse) -> ClassLookup:
    """Make a class table ready for one band.

    Parameters
    ----------
    by_code : mapping of int to SurfaceClass
        From ``ClassTable.by_code``; at least one.
    response : SpectralResponse
        Of the band.

    Returns
    -------
    ClassLookup

    Raises
    ------
    DomainError
        If a class does not cover the band, or there is none.
    """
    if not by_code:
        raise DomainError("a class raster needs at least one class code")
    codes = sorted(by_code)
    grounds = [ground_of_class(by_code[code], response) for code in codes]
    return ClassLookup(
        codes=np.array(codes, dtype=np.int64),
        numbers=np.array([ground.numbers() for ground in grounds], dtype=np.float32).T.copy(),
        flags=np.array([ground.flags for ground in grounds], dtype=np.uint16),
    )


def class_fields(
    codes: NDArray[np.integer], lookup: ClassLookup, *, known: NDArray[np.bool_] | None = None
) -> EmissivityFields:
    """Emissivity of a class raster.

    Parameters
    ----------
    codes : int array (rows, columns)
        Codes of the class raster.
    lookup : ClassLookup
        Of the band.
    known : bool array (rows, columns), optional
        False where the class raster has no data: NaN there, with the flag.

    Returns
    -------
    EmissivityFields

    Raises
    ------
    InputError
        If a code is not in the table; the message lists those that are not.
    """
    place = _places(codes, lookup.codes)
    strangers = place < 0 if known is None else known & (place < 0)
    if strangers.any():
        raise unknown_codes_error(codes[strangers], lookup.codes, "the class raster")
    if known is None:
        band, spread, wide, shared, own = (numbers[place] for numbers in lookup.numbers)
        return EmissivityFields(band, spread, wide, shared, own, lookup.flags[place])
    band, spread, wide, shared, own = (
        np.where(known, numbers[place], np.float32(np.nan)) for numbers in lookup.numbers
    )
    return EmissivityFields(band, spread, wide, shared, own, np.where(known, lookup.flags[place], NO_DATA))


def _places(codes: NDArray[np.integer], table: NDArray[np.int64]) -> NDArray[np.intp]:
    """Place of each code in the table, -1 where it has none."""
    first, span = int(table[0]), int(table[-1]) - int(table[0]) + 1
    if span > _DENSE or codes.dtype.itemsize > 4:
        place = np.minimum(np.searchsorted(table, codes), table.size - 1)
        return np.where(table[place] == codes, place, -1)
    # One look-up in a dense table, whose ends stand for everything beyond it.
    dense = np.full(span + 2, -1, dtype=np.intp)
    dense[table - first + 1] = np.arange(table.size)
    return dense[np.clip(codes.astype(np.int64) - (first - 1), 0, span + 1)]


def unknown_codes_error(found: NDArray[np.integer], codes: NDArray[np.int64], where: str) -> InputError:
    """The error that names class codes without a class.

    Parameters
    ----------
    found : int array
        Codes met that the table does not hold.
    codes : int array
        Codes that it holds.
    where : str
        The raster.

    Returns
    -------
    InputError
    """
    names, counts = np.unique(found, return_counts=True)
    listed = ", ".join(
        f"{name} ({count} pixels)" for name, count in zip(names[:10], counts[:10], strict=True)
    )
    more = f" and {names.size - 10} more" if names.size > 10 else ""
    return InputError(
        f"class codes without a class in the table: {listed}{more}",
        where=where,
        remedy=f"The table knows {', '.join(map(str, codes))}; add the missing ones, or name them as no data",
    )
