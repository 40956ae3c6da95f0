"""A raster band as a value, and what reading a block of it gives.

A :class:`RasterSource` says where a band is and what its stored numbers mean; it can be pickled and
holds no open file.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Pixels = NDArray[np.float32]
Mask = NDArray[np.bool_]
Convert = Callable[[Pixels], Pixels]


@dataclass(frozen=True)
class RasterSource:
    """One band of one raster and the meaning of its stored numbers.

    Attributes
    ----------
    path : str
        A local path, an address, or a path of one of GDAL's virtual file systems.
    band : int
        Band within the raster, from 1.
    nodata : float or None
        Stored value that means "no value"; None takes what the file itself says. NaN, infinite
        numbers and pixels that a mask band hides never have a value.
    scale, offset : float or None
        Physical value = scale * stored + offset; None takes what the file itself says, else 1 and 0.
    shift : float
        Added to the physical value, for example 273.15 where the file says degrees Celsius.
    convert : callable or None
        Applied to physical values pixel by pixel, float32 in and out, before anything is averaged. A
        small value object, so that the source can be compared and pickled.
    saturation : float or None
        Stored value from which on the band is saturated.
    indirect : bool
        True where another file named this one (metadata, catalogue, archive): drivers that could
        read further files through it are then refused.
    """

    path: str
    band: int = 1
    nodata: float | None = None
    scale: float | None = None
    offset: float | None = None
    shift: float = 0.0
    convert: Convert | None = None
    saturation: float | None = None
    indirect: bool = False


@dataclass(frozen=True)
class BlockRead:
    """Pixels of one block on the target grid.

    Attributes
    ----------
    values : float32 array (height, width)
        Physical values, NaN where there is none.
    mixed : bool array or None
        True where a value was made from pixels of which some have no value; None where the source
        lies on the target grid, so that nothing is mixed.
    saturated : bool array or None
        True where a saturated pixel went into the value; None where the source names no saturation.
    """

    values: Pixels
    mixed: Mask | None
    saturated: Mask | None


@dataclass(frozen=True)
class CodeRead:
    """Codes (classes, quality words) of one block on the target grid.

    Attributes
    ----------
    codes : integer array (height, width)
        In the file's own integer type; 0 where there is no value.
    valid : bool array (height, width)
        False where there is no value.
    mixed : bool array or None
        True where several codes meet in the pixel; None where the source lies on the target grid.
    """

    codes: NDArray[np.integer]
    valid: Mask
    mixed: Mask | None
