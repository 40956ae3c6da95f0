"""Compiled decoding of stored numbers: the busiest loop of reading."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from groundglow.kernels import kernel

KINDS = ("uint8", "int8", "uint16", "int16", "float32")


def decode_reference(
    stored: NDArray[Any], scale: float, offset: float, nodata: float, saturation: float
) -> tuple[NDArray[np.float32], NDArray[np.bool_]]:
    """Physical values and saturation, the readable statement of :func:`decode`.

    Parameters
    ----------
    stored : array, any shape and type
        Stored numbers.
    scale, offset : float
        Value = scale * stored + offset, in double precision, rounded once to float32.
    nodata : float
        Stored number without a value; NaN where there is none.
    saturation : float
        Stored number from which on the band is saturated; infinite where there is none.

    Returns
    -------
    values : float32 array
        NaN where there is no value.
    saturated : bool array
    """
    number = stored.astype(np.float64)
    with np.errstate(over="ignore", invalid="ignore"):
        values = (scale * number + offset).astype(np.float32)
    missing = ~np.isfinite(values) | (number == nodata)
    values[missing] = np.nan
    return values, (number >= saturation) & ~missing


@kernel(
    *(
        f"void({kind}[:, ::1], float64, float64, float64, float64, float32[:, ::1], boolean[:, ::1])"
        for kind in KINDS
    )
)
def decode(
    stored: NDArray[Any],
    scale: float,
    offset: float,
    nodata: float,
    saturation: float,
    values: NDArray[np.float32],
    saturated: NDArray[np.bool_],
) -> None:
    """As :func:`decode_reference`, into arrays that are given."""
    largest = np.float32(3.4028235e38)
    for i in range(stored.shape[0]):
        for j in range(stored.shape[1]):
            number = np.float64(stored[i, j])
            value = np.float32(scale * number + offset)
            there = (abs(value) <= largest) & (number != nodata)
            values[i, j] = value if there else np.float32(np.nan)
            saturated[i, j] = (number >= saturation) & there
