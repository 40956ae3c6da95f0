"""Runs array functions over the pixels of a Dataset: at once on NumPy, later and in pieces on Dask."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import partial
from typing import Any, NamedTuple

import dask.array as da
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.raster.grid import Block
from groundglow.stages.grid import GRID_MAPPING
from groundglow.stages.variables import CAUSE, WEIGHTING, attributes

Arrays = tuple[NDArray[Any], ...]
Reader = Callable[[Block], Sequence[NDArray[Any]]]
_AIR_AXES = (CAUSE, WEIGHTING)


class Output(NamedTuple):
    """One variable that a function gives: its name, type, and dimensions after (y, x)."""

    name: str
    dtype: type[np.generic] = np.float32
    beside: tuple[str, ...] = ()


def over_pixels(
    function: Callable[..., Arrays],
    inputs: Sequence[xr.DataArray],
    outputs: Sequence[Output],
    *,
    sizes: Mapping[str, int] | None = None,
    origin: str = "",
) -> dict[str, xr.DataArray]:
    """Apply a function to every chunk of some variables.

    Parameters
    ----------
    function : callable
        Takes one array an input, (y, x) first and causes or weighting temperatures behind, and gives one
        array an output.
    inputs : sequence of DataArray
        Lazy if one of them is.
    outputs : sequence of Output
    sizes : mapping, optional
        Sizes of dimensions that only outputs have.
    origin : str
        Where the outputs came from, for their attributes.

    Returns
    -------
    dict of str to DataArray
        With the attributes of their quantities.
    """
    beside = [[axis for axis in _AIR_AXES if axis in one.dims] for one in inputs]
    given = [_bare(one) for one in inputs]
    found = xr.apply_ufunc(
        function if len(outputs) > 1 else partial(_only, function),
        *given,
        input_core_dims=beside,
        output_core_dims=[list(output.beside) for output in outputs],
        dask="parallelized",
        output_dtypes=[output.dtype for output in outputs],
        dask_gufunc_kwargs={"output_sizes": dict(sizes or {})},
    )
    results = found if isinstance(found, tuple) else (found,)
    return {
        output.name: described(result.transpose(*output.beside, "y", "x"), output.name, origin)
        for output, result in zip(outputs, results, strict=True)
    }


def read_pixels(
    reader: Reader, like: xr.DataArray, outputs: Sequence[Output], origin: str = ""
) -> dict[str, xr.DataArray]:
    """Variables that a function reads from elsewhere, block by block of an existing variable.

    Parameters
    ----------
    reader : callable
        Takes a block and gives one array (y, x) an output; whole numbers must fit into a float32.
    like : DataArray (y, x)
        Its chunks are read one by one, when they are needed; at once where it is not lazy.
    outputs : sequence of Output
    origin : str
        As for :func:`over_pixels`.
    """
    if like.chunks is None:
        height, width = like.shape
        arrays: Sequence[Any] = reader(Block(0, 0, height, width))
    else:
        arrays = lazily(reader, (like.chunks[0], like.chunks[1]), outputs)
    return {
        output.name: described(xr.DataArray(values, dims=("y", "x")), output.name, origin)
        for output, values in zip(outputs, arrays, strict=True)
    }


def lazily(
    reader: Reader, chunks: tuple[tuple[int, ...], tuple[int, ...]], outputs: Sequence[Output]
) -> list[da.Array]:
    """One Dask array an output; a block is read once for all of them."""
    stacked = da.map_blocks(
        _read_stacked,
        reader,
        chunks=((len(outputs),), *chunks),
        dtype=np.float32,
        meta=np.empty((0, 0, 0), np.float32),
    )
    return [stacked[index].astype(output.dtype) for index, output in enumerate(outputs)]


def described(values: xr.DataArray, name: str, origin: str) -> xr.DataArray:
    """A variable with its name and attributes."""
    found = attributes(name, origin) | {"grid_mapping": GRID_MAPPING}
    return values.rename(name).assign_attrs(found)


def contiguous(values: NDArray[Any]) -> NDArray[np.float32]:
    """Pixels as the kernels want them; what came over a network is often read-only, which they refuse."""
    return np.require(values, dtype=np.float32, requirements=["C", "W"])


def own_flags(values: NDArray[Any]) -> NDArray[np.uint16]:
    """A copy of flags that a kernel may add to."""
    return np.array(values, dtype=np.uint16, order="C")


def _only(function: Callable[..., Arrays], *given: NDArray[Any]) -> NDArray[Any]:
    """The one output of a function, as xarray wants it where there is one."""
    (found,) = function(*given)
    return found


def _read_stacked(reader: Reader, block_info: Any = None) -> NDArray[np.float32]:
    (_, rows, columns) = block_info[None]["array-location"]
    block = Block(rows[0], columns[0], rows[1] - rows[0], columns[1] - columns[0])
    return np.stack([np.asarray(values, dtype=np.float32) for values in reader(block)])


def _bare(values: xr.DataArray) -> xr.DataArray:
    """Without coordinates: positions, not labels, say which pixels belong together."""
    return xr.DataArray(values.data, dims=values.dims)
