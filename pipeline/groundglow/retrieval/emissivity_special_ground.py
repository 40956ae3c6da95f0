"""Ground that the vegetation index says nothing about: water, snow, and pixels without an index."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.quantities import FLAG
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity import ASSUMED, BROADBAND_ASSUMED, GroundValues

Float = NDArray[np.float64]
Mask = NDArray[np.bool_]

WATER = np.uint16(FLAG["water"].mask)
SNOW = np.uint16(FLAG["snow"].mask)


def either_ground(first: GroundValues, second: GroundValues) -> GroundValues:
    """Ground that is one of two kinds, it is not known which: the middle, with what the difference adds.

    Parameters
    ----------
    first, second : GroundValues
        In the same band.

    Returns
    -------
    GroundValues
    """
    half_band = 0.5 * (first.band - second.band)
    half_broadband = 0.5 * (first.broadband - second.broadband)
    band_uncertainty = math.hypot(max(first.band_uncertainty, second.band_uncertainty), half_band)
    total = math.hypot(
        max(math.hypot(g.broadband_shared, g.broadband_own) for g in (first, second)), half_broadband
    )
    shared = max(min(half_band * half_broadband / band_uncertainty, total), -total)
    shared += min(first.broadband_shared, second.broadband_shared)
    shared = min(shared, total)
    return GroundValues(
        0.5 * (first.band + second.band),
        band_uncertainty,
        0.5 * (first.broadband + second.broadband),
        shared,
        math.sqrt(total**2 - shared**2),
        0,
    )


def with_special_ground(
    computed: Sequence[Float],
    flags: ArrayLike,
    places: Sequence[tuple[Mask, GroundValues]],
    assumed: Mask,
    *,
    water: GroundValues,
    snow: GroundValues,
) -> EmissivityFields:
    """Put ground with values of its own in its places; water over the others, snow over all.

    Parameters
    ----------
    computed : sequence of five arrays (rows, columns)
        What the index gave.
    flags : uint16 array (rows, columns)
        Quality bits; water and snow are looked at.
    places : sequence of (bool array, GroundValues)
        Where, and which ground; later ones win.
    assumed : bool array (rows, columns)
        Where the value is an assumption.
    water, snow : GroundValues
        For flagged pixels.

    Returns
    -------
    EmissivityFields
    """
    given = np.asarray(flags, dtype=np.uint16)
    is_water, is_snow = given & WATER != 0, given & SNOW != 0
    fields = list(computed)
    for where, ground in (*places, (is_water, water), (is_snow, snow)):
        fields = [
            np.where(where, number, field) for number, field in zip(ground.numbers(), fields, strict=True)
        ]
    bits = np.where(assumed & ~is_water & ~is_snow, ASSUMED | BROADBAND_ASSUMED, np.uint16(0))
    band, spread, wide, shared, own = (field.astype(np.float32) for field in fields)
    return EmissivityFields(band, spread, wide, shared, own, bits)
