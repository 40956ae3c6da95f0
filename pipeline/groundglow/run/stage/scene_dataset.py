"""A planned scene as a lazy Dataset, and finished layers of a Dataset as files."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from functools import partial
from pathlib import Path
from typing import Any, Literal

import dask.array as da
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.errors import InputError
from groundglow.layers.encode import EncodedBlock, encode_block
from groundglow.layers.files import output_errors
from groundglow.layers.geotiff import LayerSummary, LayerWriter
from groundglow.layers.layer_format import LayerFormat, format_of
from groundglow.layers.tags import text_of
from groundglow.quantities import QUANTITIES
from groundglow.raster.band import RasterSource
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Block, Grid
from groundglow.raster.source import read_block
from groundglow.run.blocks.worker import SceneWork, radiance_and_flags
from groundglow.run.planning.plan import ScenePlan
from groundglow.stages import schema
from groundglow.stages.grid import coordinates, grid_of
from groundglow.stages.pixels import Output, Reader, described, lazily
from groundglow.stages.variables import BAND

Chunks = int | tuple[tuple[int, ...], tuple[int, ...]] | None
_BLOCK = 1024
# Blocks computed together: enough for many workers, bounded whatever the raster's size.
_AT_ONCE = 32


def open_scene_dataset(plan: ScenePlan, *, chunks: Chunks = _BLOCK) -> xr.Dataset:
    """A scene's radiance and what belongs to it, read when it is needed.

    Parameters
    ----------
    plan : ScenePlan
        A job resolved for a scene.
    chunks : int, tuple of tuples of int, or None
        Edge of the Dask chunks, or their heights and widths; None reads everything now, into NumPy.

    Returns
    -------
    Dataset (y, x)
        ``radiance`` [W m-2 sr-1 um-1] of the job's band, ``quality`` (flags of the inputs), ``elevation``
        [m] and ``view_zenith_angle`` [degree] per pixel or as one number; coordinates x, y, spatial_ref,
        band, wavelength (effective, um) and time.

    Raises
    ------
    InputError
        If ``chunks`` is None and a raster cannot be read.
    """
    work = plan.work
    grid = work.grid
    read = _opened(
        partial(radiance_and_flags, work), grid, chunks, [Output("radiance"), Output("quality", np.uint16)]
    )
    origin = f"{Path(work.thermal.path).name}, band {work.thermal.band}, as {plan.band.quantity}"
    radiance, quality = (xr.DataArray(values, dims=("y", "x")) for values in read)
    variables = {
        "radiance": described(radiance, "radiance", origin),
        "quality": described(quality, "quality", "the scene's rasters"),
        "elevation": _auxiliary(work.elevation, "elevation", work, chunks),
        "view_zenith_angle": _auxiliary(work.view_zenith_angle, "view_zenith_angle", work, chunks),
    }
    if work.column is not None:
        variables["column_water_vapour"] = _auxiliary(work.column.water, "column_water_vapour", work, chunks)
    return xr.Dataset(variables, coords={**coordinates(grid), **_labels(plan)}, attrs=_attributes(plan))


def write_layers(
    dataset: xr.Dataset,
    folder: Path | str,
    *,
    names: Sequence[str] | None = None,
    compression: Literal["zstd", "deflate"] = "zstd",
    level: int | None = None,
) -> dict[str, LayerSummary]:
    """Write layers of a Dataset as cloud-optimised GeoTIFFs, rounded once to each layer's honest step.

    Lazy variables are computed block by block by whatever Dask scheduler is in charge, a distributed
    client included; the files are written by this process, each under its own name when it is complete.

    Parameters
    ----------
    dataset : Dataset
        From the stage ``layers``.
    folder : Path
        Made if absent.
    names : sequence of str, optional
        Variables to write; default: all that are layers.
    compression : str
        "zstd", or "deflate" for older readers.
    level : int, optional
        Of the codec.

    Returns
    -------
    dict of str to LayerSummary

    Raises
    ------
    InputError
        If a variable is missing or in another unit.
    OutputError
        If a file cannot be written.
    """
    chosen = [
        str(name) for name in (names or [name for name in map(str, dataset.data_vars) if name in QUANTITIES])
    ]
    schema.require_variables(dataset, chosen)
    grid = grid_of(dataset)
    folder = Path(folder)
    with output_errors(folder):
        folder.mkdir(parents=True, exist_ok=True)
    found = {}
    with gdal_environment():
        formats = {name: format_of(name, compression, level) for name in chosen}
        writers = {
            name: LayerWriter(folder / f"{name}.tif", grid, formats[name], text_of(name)) for name in chosen
        }
        try:
            for encoded in _encoded_blocks(dataset, grid, formats):
                for name, part in encoded.items():
                    writers[name].add(part)
            found = {name: writer.finish() for name, writer in writers.items()}
        finally:
            for writer in writers.values():
                writer.abandon()
    return found


def _encoded_blocks(
    dataset: xr.Dataset, grid: Grid, formats: Mapping[str, LayerFormat]
) -> Iterator[dict[str, EncodedBlock]]:
    """All layers of one block after the other, some blocks computed together where they are lazy."""
    edges = da.core.normalize_chunks(_BLOCK, grid.shape)
    arrays = [da.asarray(dataset[name].data).rechunk(edges) for name in formats]
    promised = da.map_blocks(
        _encode,
        *arrays,
        grid=grid,
        formats=formats,
        dtype=object,
        meta=np.empty((0, 0), object),
        chunks=(1, 1),
    )
    rows, columns = promised.numblocks
    at_once = max(1, _AT_ONCE // columns)
    for first in range(0, rows, at_once):
        yield from promised.blocks[first : first + at_once].compute().ravel()


def _encode(
    *pixels: NDArray[Any], grid: Grid, formats: Mapping[str, LayerFormat], block_info: Any = None
) -> NDArray[Any]:
    """The encoded layers of one block, as the one element of an array."""
    rows, columns = block_info[0]["array-location"]
    block = Block(rows[0], columns[0], rows[1] - rows[0], columns[1] - columns[0])
    found = np.empty((1, 1), dtype=object)
    found[0, 0] = {
        name: encode_block(np.require(values, requirements=["C", "W"]), block, grid, formats[name])
        for name, values in zip(formats, pixels, strict=True)
    }
    return found


def _opened(reader: Reader, grid: Grid, chunks: Chunks, outputs: Sequence[Output]) -> Sequence[Any]:
    if chunks is None:
        return reader(Block(0, 0, grid.height, grid.width))
    heights, widths = da.core.normalize_chunks(chunks, grid.shape)
    return lazily(reader, (heights, widths), outputs)


def _auxiliary(source: RasterSource | float, name: str, work: SceneWork, chunks: Chunks) -> xr.DataArray:
    """Elevation or view angle: per pixel where it is a raster."""
    if not isinstance(source, RasterSource):
        return described(xr.DataArray(float(source)), name, "the scene description, one number")
    (values,) = _opened(partial(_read_one, source, work.grid), work.grid, chunks, [Output(name)])
    return described(xr.DataArray(values, dims=("y", "x")), name, Path(source.path).name)


def _read_one(source: RasterSource, grid: Grid, block: Block) -> tuple[NDArray[np.float32]]:
    return (read_block(source, grid, block, resampling="continuous").values,)


def _labels(plan: ScenePlan) -> dict[str, xr.Variable]:
    """Band, wavelength and time."""
    band = plan.band
    # xarray holds times without an offset: they are in UTC.
    moment = plan.scene.acquired.astimezone().timestamp()
    wavelength = float(band.sensor_band.response.effective_wavelength)
    return {
        BAND: xr.Variable((), band.number, {"long_name": f"band of {plan.scene.sensor.name}"}),
        "wavelength": xr.Variable(
            (),
            wavelength,
            {"units": "um", "standard_name": "radiation_wavelength", "long_name": "effective wavelength"},
        ),
        "time": xr.Variable(
            (), np.datetime64(round(moment * 1e6), "us").astype("datetime64[ns]"), {"standard_name": "time"}
        ),
    }


def _attributes(plan: ScenePlan) -> dict[str, str]:
    if not plan.scene.name:
        raise InputError("the scene has no name", where=plan.scene.origin)
    return {
        "Conventions": "CF-1.11",
        "title": f"{plan.scene.name}, {plan.scene.sensor.title}",
        "scene": plan.scene.name,
        "sensor": plan.scene.sensor.name,
        "acquired": plan.scene.acquired.isoformat(),
    }
