"""Stage: the emissivity of the ground, from whatever source is given."""

from __future__ import annotations

from functools import partial
from typing import Any, Protocol

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from groundglow.raster.grid import Block, Grid
from groundglow.retrieval.chain import EmissivityFields
from groundglow.stages import schema
from groundglow.stages.grid import grid_of
from groundglow.stages.pixels import Output, over_pixels, read_pixels

NAMES = (
    "emissivity",
    "emissivity_uncertainty",
    "broadband_emissivity",
    "broadband_emissivity_shared_uncertainty",
    "broadband_emissivity_own_uncertainty",
)


class EmissivityReader(Protocol):
    """Gives the emissivity of any block of a grid, as the sources that a job names do."""

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """The five arrays and the flags of one block."""

    def describe(self) -> dict[str, object]:
        """What was done, in words."""


def emissivity(dataset: xr.Dataset, source: EmissivityReader) -> xr.Dataset:
    """Band and broadband emissivity with their uncertainties.

    A Dataset that holds these five variables already, with their units, needs no such stage.

    Parameters
    ----------
    dataset : Dataset
        Holds ``quality`` (y, x), whose grid and chunks the emissivity takes.
    source : EmissivityReader
        For example ``plan.work.emissivity``.

    Returns
    -------
    Dataset
        With ``emissivity``, ``emissivity_uncertainty``, ``broadband_emissivity``,
        ``broadband_emissivity_shared_uncertainty``, ``broadband_emissivity_own_uncertainty`` [1], and
        ``quality``.

    Raises
    ------
    InputError
        If the Dataset has no quality or no place on the Earth.
    """
    schema.require(dataset, quality="1")
    grid = grid_of(dataset)
    outputs = [*(Output(name) for name in NAMES), Output("quality", np.uint16)]
    origin = "; ".join(f"{key}: {value}" for key, value in source.describe().items())
    found = read_pixels(partial(_read, source, grid), dataset["quality"], outputs, origin)
    joined = over_pixels(_or, [dataset["quality"], found.pop("quality")], [Output("quality", np.uint16)])
    return dataset.assign(found | joined)


def _read(source: EmissivityReader, grid: Grid, block: Block) -> tuple[NDArray[Any], ...]:
    fields = source.read(grid, block)
    return (
        fields.band,
        fields.band_uncertainty,
        fields.broadband,
        fields.broadband_shared,
        fields.broadband_own,
        fields.flags,
    )


def _or(one: NDArray[Any], other: NDArray[Any]) -> tuple[NDArray[Any]]:
    return (np.bitwise_or(one, other),)
