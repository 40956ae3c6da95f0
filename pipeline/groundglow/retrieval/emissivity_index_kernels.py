"""The vegetation-index methods compiled, one tile at a time.

The statements are in ``emissivity_threshold`` and ``emissivity_logarithmic``; a test holds them equal. The
logarithm is a table found from the bits of the number, so that every machine gives the same bytes.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from groundglow.kernels import kernel
from groundglow.retrieval import emissivity_logarithmic as logarithmic
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity import ASSUMED, BROADBAND_ASSUMED
from groundglow.retrieval.emissivity_logarithmic import LogarithmicMethod
from groundglow.retrieval.emissivity_special_ground import SNOW, WATER
from groundglow.retrieval.emissivity_threshold import ThresholdMethod
from groundglow.retrieval.vegetation_index import BARE_BELOW, FULL_ABOVE

Float = NDArray[np.float64]
Pixels = NDArray[np.float32]
Flags = NDArray[np.uint16]

_WATER, _SNOW = WATER, SNOW
_ASSUMED = np.uint16(ASSUMED | BROADBAND_ASSUMED)
_NOTHING = np.uint16(0)
_BARE_BELOW, _FULL_ABOVE = BARE_BELOW, FULL_ABOVE
_LOG_LOW, _LOG_HIGH = logarithmic.LOG_LOW, logarithmic.LOG_HIGH
_LOG_WATER_BELOW = logarithmic.LOG_WATER_BELOW
_LOG_CONSTANT, _LOG_SLOPE = logarithmic.LOG_CONSTANT, logarithmic.LOG_SLOPE
_LOG_WATER, _LOG_BARE, _LOG_FULL = logarithmic.LOG_WATER, logarithmic.LOG_BARE, logarithmic.LOG_FULL
_LOG_UNCERTAINTY, _LOG_OWN = logarithmic.LOG_UNCERTAINTY, logarithmic.LOG_BROADBAND_UNCERTAINTY

# The kernels read the packed numbers of a method from these places on, five for each kind of ground.
_SOIL, _PLANT, _T_WATER, _T_SNOW, _T_NEGATIVE, _T_UNKNOWN = range(6, 36, 5)
_L_WATER, _L_SNOW, _L_UNKNOWN = range(1, 16, 5)

# ln over one doubling, 512 cells: linear inside a cell the error is below 5e-7. Rounded to 12 decimals, so
# that the last bit of the library's logarithm does not matter.
_CELLS = 512
_LN_START = np.array([round(math.log1p(k / _CELLS), 12) for k in range(_CELLS)])
_LN_SLOPE = np.array(
    [round((math.log1p((k + 1) / _CELLS) - math.log1p(k / _CELLS)) * _CELLS, 12) for k in range(_CELLS)]
)
_LN_2 = round(math.log(2.0), 12)
_MANTISSA = np.int64((1 << 52) - 1)
_CELL_SHIFT = np.int64(52 - 9)
_EXPONENT_SHIFT = np.int64(52)

_SIGNATURE = (
    "void(float32[:, ::1], float32[:, ::1], uint16[:, ::1], float64[::1], float32[:, :, ::1], uint16[:, ::1])"
)


@kernel(inline=True)
def _index(red: float, near_infrared: float) -> float:
    """Vegetation index; NaN where there is none."""
    total = near_infrared + red
    index = np.nan
    if total > 0.0:
        index = (near_infrared - red) / total
        index = min(max(index, -1.0), 1.0)
    return index


@kernel(inline=True)
def _special_place(index: float, given: int, bits: Flags, i: int, j: int) -> int:
    """Where the packed numbers of water, snow, or ground without a usable index begin; 0 on plain land."""
    place = 0
    if given & _SNOW:
        place = _T_SNOW
    elif given & _WATER:
        place = _T_WATER
    elif np.isnan(index):
        place = _T_UNKNOWN
        bits[i, j] = _ASSUMED
    elif index < 0.0:
        place = _T_NEGATIVE
        bits[i, j] = _ASSUMED
    return place


@kernel(_SIGNATURE)
def threshold_tile(
    red: Pixels, near_infrared: Pixels, flags: Flags, packed: Float, result: Pixels, bits: Flags
) -> None:
    """Emissivity by thresholds: five float32 planes into ``result``, quality bits into ``bits``."""
    bare, bare_per_red, soil, plant, cavity_factor, u_cover = packed[:6]
    u_soil, wide_soil, shared_soil, own_soil = packed[_SOIL + 1 : _SOIL + 5]
    u_plant, wide_plant, shared_plant, own_plant = packed[_PLANT + 1 : _PLANT + 5]
    soil_variance = shared_soil * shared_soil + own_soil * own_soil
    plant_variance = shared_plant * shared_plant + own_plant * own_plant
    index = np.empty(red.shape[1], dtype=np.float64)
    for i in range(red.shape[0]):
        # Everywhere as if it were land, without a branch, so that the loop runs in vectors.
        for j in range(red.shape[1]):
            r = np.float64(red[i, j])
            n = np.float64(near_infrared[i, j])
            total = n + r
            ratio = (n - r) / (total if total > 0.0 else np.nan)
            found = min(max(ratio, -1.0), 1.0)
            index[j] = found
            cover = min(max((found - _BARE_BELOW) / (_FULL_ABOVE - _BARE_BELOW), 0.0), 1.0)
            cover = cover * cover
            is_bare = found < _BARE_BELOW
            s = min(max(bare + bare_per_red * r, 0.5), 1.0) if is_bare else soil
            cavity = 0.0 if is_bare else cavity_factor
            hollow = (1.0 - s) * (1.0 - cover) * cavity
            value = plant * cover + s * (1.0 - cover) + hollow * plant
            e_soil = (1.0 - cover) * (1.0 - cavity * plant) * u_soil
            e_plant = (cover + hollow) * u_plant
            e_cover = (plant - s - (1.0 - s) * cavity * plant) * u_cover
            spread = np.sqrt(e_soil * e_soil + e_plant * e_plant + e_cover * e_cover)
            hollow = (1.0 - wide_soil) * (1.0 - cover) * cavity
            wide = wide_plant * cover + wide_soil * (1.0 - cover) + hollow * wide_plant
            by_soil = (1.0 - cover) * (1.0 - cavity * wide_plant)
            by_plant = cover + hollow
            w_cover = (wide_plant - wide_soil - (1.0 - wide_soil) * cavity * wide_plant) * u_cover
            together = e_soil * by_soil * shared_soil + e_plant * by_plant * shared_plant + e_cover * w_cover
            variance = (
                (by_soil * by_soil) * soil_variance
                + (by_plant * by_plant) * plant_variance
                + w_cover * w_cover
            )
            shared = together / (spread if spread > 0.0 else np.inf)
            result[0, i, j] = np.float32(min(value, 1.0))
            result[1, i, j] = np.float32(spread)
            result[2, i, j] = np.float32(min(wide, 1.0))
            result[3, i, j] = np.float32(shared)
            result[4, i, j] = np.float32(np.sqrt(max(variance - shared * shared, 0.0)))
            bits[i, j] = _NOTHING
        for j in range(red.shape[1]):
            place = _special_place(index[j], flags[i, j], bits, i, j)
            if place != 0:
                for k in range(5):
                    result[k, i, j] = np.float32(packed[place + k])


@kernel(_SIGNATURE)
def logarithmic_tile(
    red: Pixels, near_infrared: Pixels, flags: Flags, packed: Float, result: Pixels, bits: Flags
) -> None:
    """Emissivity by the logarithm: five float32 planes into ``result``, quality bits into ``bits``."""
    u_index = packed[0]
    number = np.empty(1, dtype=np.float64)
    key = number.view(np.int64)
    for i in range(red.shape[0]):
        for j in range(red.shape[1]):
            index = _index(np.float64(red[i, j]), np.float64(near_infrared[i, j]))
            given = flags[i, j]
            place = 0
            bits[i, j] = _NOTHING
            if given & _SNOW:
                place = _L_SNOW
            elif given & _WATER:
                place = _L_WATER
            elif np.isnan(index):
                place = _L_UNKNOWN
                bits[i, j] = _ASSUMED
            elif index < _LOG_WATER_BELOW:
                bits[i, j] = _ASSUMED
            if place != 0:
                for k in range(5):
                    result[k, i, j] = np.float32(packed[place + k])
                continue
            safe = min(max(index, _LOG_LOW), _LOG_HIGH)
            if index > _LOG_HIGH:
                value = _LOG_FULL
            elif index < _LOG_WATER_BELOW:
                value = _LOG_WATER
            elif index < _LOG_LOW:
                value = _LOG_BARE
            else:
                number[0] = safe
                cell = (key[0] & _MANTISSA) >> _CELL_SHIFT
                exponent = (key[0] >> _EXPONENT_SHIFT) - 1023
                mantissa = np.float64(key[0] & _MANTISSA) / 4503599627370496.0
                logarithm = exponent * _LN_2 + _LN_START[cell] + _LN_SLOPE[cell] * (mantissa - cell / _CELLS)
                value = _LOG_CONSTANT + _LOG_SLOPE * logarithm
            by_index = _LOG_SLOPE / safe * u_index
            spread = np.float32(np.sqrt(_LOG_UNCERTAINTY * _LOG_UNCERTAINTY + by_index * by_index))
            result[0, i, j] = np.float32(value)
            result[1, i, j] = spread
            result[2, i, j] = np.float32(value)
            result[3, i, j] = spread
            result[4, i, j] = np.float32(_LOG_OWN)


def index_fields(
    red: Pixels,
    near_infrared: Pixels,
    flags: Flags,
    method: ThresholdMethod | LogarithmicMethod,
) -> EmissivityFields:
    """Emissivity of a tile or block by either method, compiled.

    Parameters
    ----------
    red, near_infrared : float32 arrays (rows, columns)
        Reflectance, 0 to 1; NaN where there is none.
    flags : uint16 array (rows, columns)
        Quality bits; water and snow are looked at.
    method : ThresholdMethod or LogarithmicMethod
        Made ready for the band.

    Returns
    -------
    EmissivityFields
    """
    result = np.empty((5, *red.shape), dtype=np.float32)
    bits = np.empty(red.shape, dtype=np.uint16)
    walk = threshold_tile if isinstance(method, ThresholdMethod) else logarithmic_tile
    walk(
        np.ascontiguousarray(red),
        np.ascontiguousarray(near_infrared),
        np.ascontiguousarray(flags),
        method.packed(),
        result,
        bits,
    )
    return EmissivityFields(result[0], result[1], result[2], result[3], result[4], bits)
