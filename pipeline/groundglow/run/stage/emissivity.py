"""The emissivity stage, file to file, and its output read back as the ground of a later stage."""

from __future__ import annotations

import threading
from dataclasses import dataclass
from functools import partial

import numpy as np

from groundglow.errors import InputError
from groundglow.quantities import FLAG
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Block, Grid
from groundglow.raster.source import read_block, read_codes
from groundglow.retrieval.chain import EmissivityFields
from groundglow.run.planning.plan import ScenePlan
from groundglow.run.stage.output import StageBlock, encoded, make_rasters
from groundglow.run.stage.radiance import checksums
from groundglow.run.stage.record import StageFile, StageFolder, StageRecord, record_of
from groundglow.run.stage.setting import Setting, StageCall

# Each variable of the stage, and the field of the chain that it holds.
VARIABLES = {
    "emissivity": "band",
    "emissivity_uncertainty": "band_uncertainty",
    "broadband_emissivity": "broadband",
    "broadband_emissivity_shared_uncertainty": "broadband_shared",
    "broadband_emissivity_own_uncertainty": "broadband_own",
}
_IMPOSSIBLE = np.uint16(FLAG["impossible"].mask)


def make_emissivity(call: StageCall) -> StageRecord:
    """Band and broadband emissivity with their uncertainties, and the flags that the method sets.

    Raises
    ------
    GroundglowError
        If job, scene or a raster cannot be read, most values are no emissivities, or the output
        cannot be written.
    """
    setting = Setting.read(call)
    plan = setting.plan_of_ground()
    source = plan.work.emissivity
    if source is None:
        raise InputError("the job plans no emissivity", where=str(call.job))
    tally = _Tally(plan.work.grid.height * plan.work.grid.width)
    inputs = checksums([("emissivity", raster) for raster in source.rasters()])

    def record(files: dict[str, StageFile]) -> StageRecord:
        tally.refuse_if_mostly_impossible(source.rasters())
        return record_of(plan, "emissivity", files, inputs, source.describe())

    return make_rasters(
        call.output,
        plan.work.grid,
        (*VARIABLES, "quality"),
        partial(_emissivity_block, plan, tally),
        record,
        workers=call.workers,
    )


@dataclass(frozen=True)
class StoredEmissivity:
    """The output of the emissivity stage as a source of emissivity.

    Attributes
    ----------
    folder : StageFolder
    """

    folder: StageFolder

    def read(self, grid: Grid, block: Block) -> EmissivityFields:
        """The five arrays and the flags of one block, as they were stored."""
        fields = {
            field: read_block(self.folder.source(name), grid, block).values
            for name, field in VARIABLES.items()
        }
        flags = np.asarray(read_codes(self.folder.source("quality"), grid, block).codes, dtype=np.uint16)
        return EmissivityFields(**fields, flags=flags)

    def rasters(self) -> tuple[RasterSource, ...]:
        """The stage's rasters."""
        return tuple(self.folder.source(name) for name in (*VARIABLES, "quality"))

    def describe(self) -> dict[str, object]:
        """What the stage recorded."""
        return dict(self.folder.record.method)


class _Tally:
    """Counts pixels whose emissivity no surface can have; a few are flagged, most of a map is a wrong raster."""

    def __init__(self, pixels: int) -> None:
        self._pixels = pixels
        self._impossible = 0
        self._lock = threading.Lock()

    def add(self, flags: np.ndarray) -> None:
        """Take in one block."""
        count = int(np.count_nonzero(flags & _IMPOSSIBLE))
        with self._lock:
            self._impossible += count

    def refuse_if_mostly_impossible(self, rasters: tuple[RasterSource, ...]) -> None:
        """Refuse where more than half of the pixels are so."""
        if 2 * self._impossible > self._pixels:
            raise InputError(
                f"the emissivity is not above 0 and at most 1 in {self._impossible} of {self._pixels} pixels",
                where=", ".join(source.path for source in rasters) or "emissivity",
                remedy="Check the raster's scale and offset: an emissivity in percent needs scale = 0.01",
            )


def _emissivity_block(plan: ScenePlan, tally: _Tally, block: Block) -> StageBlock:
    assert plan.work.emissivity is not None
    found = plan.work.emissivity.read(plan.work.grid, block)
    tally.add(found.flags)
    maps = {name: getattr(found, field) for name, field in VARIABLES.items()}
    return encoded({**maps, "quality": found.flags}, block, plan.work.grid)
