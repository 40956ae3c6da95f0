"""The air at each pixel: a compiled multilinear interpolation of one band's atmosphere grid.

:func:`pack` lays the terms of an :class:`AtmosphereGrid` out once per scene, all fields of a node
side by side; :func:`interpolate` fills a tile from them. Field order, for the best estimate and
then for each cause of uncertainty in turn: the transmittance at each surface temperature, path
radiance, transmitted sky radiance, sky flux (see :func:`field_names`).

Interpolation is linear in map x, map y, ground height and the secant of the view zenith angle. An
axis with one node holds everywhere and its coordinate is not looked at; beyond the outermost nodes
their value is kept. A NaN coordinate on an axis with several nodes gives NaN in every field.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.grid import AirTerms, AtmosphereGrid
from groundglow.atmosphere.interpolate_kernels import LANES, interpolate_pixels, interpolate_rows
from groundglow.errors import DomainError

Float = NDArray[np.float64]
Float32 = NDArray[np.float32]


@dataclass(frozen=True)
class AirStack:
    """One band's air, packed for the kernel.

    Attributes
    ----------
    values : float32 array (y, x, height, angle, lanes), C-contiguous
        All fields of a node side by side, padded with zeros to a multiple of eight.
    x, y : float64 arrays
        Map coordinates of the nodes, increasing.
    height : float32 array
        Ground heights of the nodes, increasing. [m]
    secant : float32 array
        Secants of the view zenith angle of the nodes, increasing.
    temperatures : int
        Number of surface temperatures at which the transmittance is given: 1 or 3.
    causes : tuple of str
        Names of the causes of uncertainty, in the order of their fields.
    """

    values: Float32
    x: Float
    y: Float
    height: Float32
    secant: Float32
    temperatures: int
    causes: tuple[str, ...]

    @property
    def fields(self) -> int:
        """Number of fields: (temperatures + 3) x (1 + causes)."""
        return (self.temperatures + 3) * (1 + len(self.causes))


def field_names(temperatures: int, causes: tuple[str, ...]) -> tuple[str, ...]:
    """Names of the fields in the order of the output planes.

    Parameters
    ----------
    temperatures : int
        Surface temperatures of the transmittance: 1 or 3.
    causes : tuple of str
        Names of the causes.

    Returns
    -------
    tuple of str
        ``transmittance_0`` ..., ``path_radiance``, ``transmitted_sky_radiance``, ``sky_flux``, then
        the same with ``<cause>.`` in front for each cause.
    """
    terms = [f"transmittance_{i}" for i in range(temperatures)]
    terms += ["path_radiance", "transmitted_sky_radiance", "sky_flux"]
    return (*terms, *(f"{cause}.{term}" for cause in causes for term in terms))


def pack(grid: AtmosphereGrid) -> AirStack:
    """Lay the terms of a grid out as float32 with the fields of each node side by side."""
    groups = [_fields_of(terms) for terms in (grid.terms, *grid.causes.values())]
    fields = np.concatenate(groups, axis=0)
    lanes = -(-fields.shape[0] // LANES) * LANES
    values = np.zeros((*fields.shape[1:], lanes), dtype=np.float32)
    values[..., : fields.shape[0]] = np.moveaxis(fields, 0, -1)
    return AirStack(
        values=values,
        x=np.ascontiguousarray(grid.x, dtype=np.float64),
        y=np.ascontiguousarray(grid.y, dtype=np.float64),
        height=grid.height.astype(np.float32),
        secant=(1.0 / np.cos(np.radians(grid.view_zenith_angle))).astype(np.float32),
        temperatures=grid.surface_temperature.size,
        causes=tuple(grid.causes),
    )


def interpolate(
    stack: AirStack,
    x: Float,
    y: Float,
    height: Float32 | float,
    secant: Float32 | float,
    out: Float32 | None = None,
) -> Float32:
    """All fields at the pixels of a tile on a north-up grid.

    Parameters
    ----------
    stack : AirStack
        From :func:`pack`.
    x : float64 array (cols,)
        Map x of each column, in the coordinates of the stack.
    y : float64 array (rows,)
        Map y of each row.
    height : float32 array (rows, cols), or a number
        Ground height above sea level. [m]
    secant : float32 array (rows, cols), or a number
        Secant of the view zenith angle at the surface (:func:`groundglow.atmosphere.view.secant`).
    out : float32 array (stack.fields, rows, cols), C-contiguous, optional
        Filled and given back; made anew if absent.

    Returns
    -------
    float32 array (stack.fields, rows, cols)
        In the order of :func:`field_names`.

    Raises
    ------
    DomainError
        If shapes do not agree.
    """
    across, row_cell, row_share, column_cell, column_share = _map_position(stack, x, y)
    heights, secants, values, height_nodes, secant_nodes = _coordinates(stack, height, secant, across)
    out = _output(stack, across, out)
    interpolate_rows(
        values, height_nodes, secant_nodes, row_cell, row_share, column_cell, column_share,
        heights, secants, out,
    )  # fmt: skip
    return out


def interpolate_anywhere(
    stack: AirStack,
    x: Float,
    y: Float,
    height: Float32 | float,
    secant: Float32 | float,
    out: Float32 | None = None,
) -> Float32:
    """All fields at pixels whose map coordinates vary freely: a rotated grid, or another CRS.

    Parameters
    ----------
    stack : AirStack
        From :func:`pack`.
    x, y : float64 arrays (rows, cols)
        Map coordinates of each pixel in the coordinates of the stack.
    height, secant, out
        As for :func:`interpolate`.

    Returns
    -------
    float32 array (stack.fields, rows, cols)

    Raises
    ------
    DomainError
        If shapes do not agree.
    """
    x, y = np.ascontiguousarray(x, dtype=np.float64), np.ascontiguousarray(y, dtype=np.float64)
    if x.ndim != 2 or x.shape != y.shape:
        raise DomainError(f"map x and y must be two-dimensional and alike, not {x.shape} and {y.shape}")
    across = (x.shape[0], x.shape[1])
    heights, secants, values, height_nodes, secant_nodes = _coordinates(stack, height, secant, across)
    out = _output(stack, across, out)
    interpolate_pixels(values, stack.x, stack.y, height_nodes, secant_nodes, x, y, heights, secants, out)
    return out


def interpolate_plainly(
    stack: AirStack, x: Float, y: Float, height: Float32 | float, secant: Float32 | float
) -> Float:
    """The readable NumPy statement of :func:`interpolate`, in float64; for tests and single pixels.

    ``x`` and ``y`` are broadcast against ``height`` and ``secant``; the fields are the first axis.
    """
    coordinates = [np.asarray(c, dtype=np.float64) for c in np.broadcast_arrays(y, x, height, secant)]
    nodes = [np.asarray(axis, dtype=np.float64) for axis in (stack.y, stack.x, stack.height, stack.secant)]
    cells, shares = [], []
    for coordinate, axis in zip(coordinates, nodes, strict=True):
        cell, share = _cell_and_share(axis, coordinate)
        cells.append(cell)
        shares.append(share)
    result = np.zeros((*coordinates[0].shape, stack.values.shape[-1]))
    for corner in np.ndindex(*(2 if axis.size > 1 else 1 for axis in nodes)):
        weight = np.ones(coordinates[0].shape)
        for side, share, axis in zip(corner, shares, nodes, strict=True):
            if axis.size > 1:
                weight = weight * (share if side else 1.0 - share)
        node = tuple(cell + side for cell, side in zip(cells, corner, strict=True))
        result += weight[..., np.newaxis] * stack.values[node]
    return np.moveaxis(result, -1, 0)[: stack.fields]


def _fields_of(terms: AirTerms) -> Float:
    """The terms as one array (fields, y, x, height, angle)."""
    shape = terms.path_radiance.shape
    flux = np.broadcast_to(terms.sky_flux[..., np.newaxis], shape)
    rest = np.stack([terms.path_radiance, terms.transmitted_sky_radiance, flux])
    return np.concatenate([terms.transmittance, rest])


def _cell_and_share(nodes: Float, coordinate: Float) -> tuple[NDArray[np.intp], Float]:
    """Cell in which each coordinate falls, and how far along it is, 0 to 1 (NaN stays NaN)."""
    if nodes.size == 1:
        return np.zeros(coordinate.shape, dtype=np.intp), np.zeros(coordinate.shape)
    cell = np.clip(np.searchsorted(nodes, coordinate, side="right") - 1, 0, nodes.size - 2)
    share = (coordinate - nodes[cell]) / (nodes[cell + 1] - nodes[cell])
    return cell.astype(np.intp), np.clip(share, 0.0, 1.0)


def _map_position(
    stack: AirStack, x: Float, y: Float
) -> tuple[tuple[int, int], NDArray[np.intp], Float32, NDArray[np.intp], Float32]:
    x, y = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if x.ndim != 1 or y.ndim != 1:
        raise DomainError(f"map x and y of a tile must be one-dimensional, not {x.ndim} and {y.ndim}")
    row_cell, row_share = _cell_and_share(stack.y, y)
    column_cell, column_share = _cell_and_share(stack.x, x)
    return (
        (y.size, x.size),
        row_cell,
        row_share.astype(np.float32),
        column_cell,
        column_share.astype(np.float32),
    )


def _coordinates(
    stack: AirStack, height: Float32 | float, secant: Float32 | float, across: tuple[int, int]
) -> tuple[Float32, Float32, Float32, Float32, Float32]:
    """Rasters of height and secant, and the packed values with axes of one number taken out."""
    values, height_nodes, secant_nodes = stack.values, stack.height, stack.secant
    heights, height_nodes, values = _settle(values, height_nodes, height, 2, across, "height")
    secants, secant_nodes, values = _settle(values, secant_nodes, secant, 3, across, "secant")
    return heights, secants, np.ascontiguousarray(values), height_nodes, secant_nodes


def _settle(
    values: Float32, nodes: Float32, given: Float32 | float, axis: int, across: tuple[int, int], name: str
) -> tuple[Float32, Float32, Float32]:
    """Interpolate along an axis at once where its coordinate is one number for the whole tile."""
    raster = np.asarray(given, dtype=np.float32)
    if raster.ndim == 0:
        cell, share = _cell_and_share(nodes.astype(np.float64), raster.astype(np.float64))
        if nodes.size > 1:
            low, high = (np.take(values, [int(cell) + side], axis=axis) for side in (0, 1))
            values = (low * (1.0 - share) + high * share).astype(np.float32)
        return np.zeros((1, 1), dtype=np.float32), nodes[:1], values
    if raster.shape != across:
        raise DomainError(f"{name} has shape {raster.shape}, the tile {across}")
    return np.ascontiguousarray(raster), nodes, values


def _output(stack: AirStack, across: tuple[int, int], out: Float32 | None) -> Float32:
    wanted = (stack.fields, *across)
    if out is None:
        return np.empty(wanted, dtype=np.float32)
    if out.shape != wanted or out.dtype != np.float32 or not out.flags.c_contiguous:
        raise DomainError(f"the output of the interpolation must be contiguous float32 {wanted}")
    return out
