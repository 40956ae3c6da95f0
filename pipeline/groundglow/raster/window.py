"""From stored numbers to physical values, within one window of a raster."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from rasterio.enums import MaskFlags
from rasterio.errors import RasterioError
from rasterio.io import DatasetReader
from rasterio.windows import Window

from groundglow.errors import InputError
from groundglow.raster.band import Mask, Pixels, RasterSource
from groundglow.raster.decode import KINDS, decode, decode_reference
from groundglow.raster.environment import gdal_environment
from groundglow.raster.open import open_raster, unreadable

Stored = NDArray[np.number[Any]]


def read_values(source: RasterSource, window: Window) -> tuple[Pixels, Mask | None]:
    """Physical values within a window of the source.

    Parameters
    ----------
    source : RasterSource
        What to read.
    window : rasterio Window
        Inside the raster.

    Returns
    -------
    values : float32 array
        NaN where there is no value.
    saturated : bool array or None
        None where the source names no saturation.

    Raises
    ------
    InputError
        If the pixels cannot be read or are complex numbers.
    """
    dataset = open_raster(source.path, indirect=source.indirect)
    stored = _stored(dataset, source, window)
    values, saturated = _physical(stored, source, dataset)
    hidden = _hidden(dataset, source, window)
    if hidden is not None:
        values[hidden] = np.nan
        saturated &= ~hidden
    if source.convert is not None:
        values = source.convert(values)
    return values, None if source.saturation is None else saturated


def read_stored_codes(source: RasterSource, window: Window) -> tuple[NDArray[np.integer], Mask]:
    """Integer codes within a window, and where they count.

    Raises
    ------
    InputError
        If the raster holds fractions, or its pixels cannot be read.
    """
    dataset = open_raster(source.path, indirect=source.indirect)
    stored = _stored(dataset, source, window)
    valid = np.ones(stored.shape, dtype=np.bool_)
    nodata = _nodata(source, dataset)
    if stored.dtype.kind == "f":
        valid &= np.isfinite(stored)
    if nodata is not None and not np.isnan(nodata):
        valid &= stored != nodata
    hidden = _hidden(dataset, source, window)
    if hidden is not None:
        valid &= ~hidden
    if stored.dtype.kind == "f":
        whole = np.where(valid, stored, 0.0)
        codes = whole.astype(np.int64)
        if (codes != whole).any():
            raise InputError(
                "holds fractions where whole codes are needed", where=f"{source.path}, band {source.band}"
            )
        return codes, valid
    codes = stored.astype(stored.dtype, copy=True)
    codes[~valid] = 0
    return codes, valid


def _stored(dataset: DatasetReader, source: RasterSource, window: Window) -> Stored:
    """Stored numbers; a missing band or a damaged file is said clearly."""
    if not 1 <= source.band <= dataset.count:
        raise InputError(f"has no band {source.band}; it has {dataset.count}", where=source.path)
    try:
        with gdal_environment():
            stored: Stored = dataset.read(source.band, window=window)
    except RasterioError as error:
        raise unreadable(source.path, error) from error
    if stored.dtype.kind == "c":
        raise InputError("holds complex numbers", where=f"{source.path}, band {source.band}")
    return stored


def _nodata(source: RasterSource, dataset: DatasetReader) -> float | None:
    """The stored value that means "no value": the user's word first."""
    if source.nodata is not None:
        return source.nodata
    value = dataset.nodatavals[source.band - 1]
    return None if value is None else float(value)


def _hidden(dataset: DatasetReader, source: RasterSource, window: Window) -> Mask | None:
    """Pixels that a mask band or an alpha band hides."""
    kinds = dataset.mask_flag_enums[source.band - 1]
    if MaskFlags.nodata in kinds or MaskFlags.per_dataset not in kinds:
        return None
    try:
        with gdal_environment():
            return np.asarray(dataset.read_masks(source.band, window=window) == 0)
    except RasterioError as error:
        raise unreadable(source.path, error) from error


def _physical(stored: Stored, source: RasterSource, dataset: DatasetReader) -> tuple[Pixels, Mask]:
    """Physical values, and where the band is saturated."""
    index = source.band - 1
    scale = float(dataset.scales[index]) if source.scale is None else source.scale
    offset = float(dataset.offsets[index]) if source.offset is None else source.offset
    nodata = _nodata(source, dataset)
    settings = (
        scale,
        offset + source.shift,
        np.nan if nodata is None else _as_stored(nodata, stored.dtype),
        np.inf if source.saturation is None else source.saturation,
    )
    if stored.dtype.name not in KINDS:
        return decode_reference(stored, *settings)
    values = np.empty(stored.shape, dtype=np.float32)
    saturated = np.empty(stored.shape, dtype=np.bool_)
    decode(stored, *settings, values, saturated)
    return values, saturated


def _as_stored(nodata: float, kind: np.dtype[Any]) -> float:
    """A nodata value as the file's floating-point type holds it."""
    if kind != np.float32:
        return nodata
    with np.errstate(over="ignore"):
        return float(np.float32(nodata))
