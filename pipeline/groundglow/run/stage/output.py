"""Makes one stage's output folder: blocks spread over threads, full float32 layers, the record last.

The folder is built under a hidden name beside its place and put there by one rename, so that a
workflow manager finds a stage's output whole or not at all; making it again replaces it.
"""

from __future__ import annotations

import fcntl
import os
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import BusyError, OutputError
from groundglow.layers.encode import EncodedBlock, encode_block
from groundglow.layers.files import output_errors, write_whole
from groundglow.layers.geotiff import LayerSummary, LayerWriter
from groundglow.layers.layer_format import LayerFormat
from groundglow.layers.tags import LayerText, text_of
from groundglow.quantities import QUANTITIES
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Block, Grid
from groundglow.run.batch.interrupt import terminable
from groundglow.run.making.scheduler import Threads
from groundglow.run.placing.publish import building_folder, discard, publish
from groundglow.run.stage.record import RECORD, StageFile, StageRecord
from groundglow.stages.variables import variable

Maps = Mapping[str, NDArray[Any]]
_ALL_BITS = 23


@dataclass(frozen=True)
class StageBlock:
    """What one block of a stage gives back: each variable, encoded."""

    layers: Mapping[str, EncodedBlock]


def stage_format(name: str) -> LayerFormat:
    """How a variable is stored between stages: every bit of a float32 is kept."""
    return LayerFormat(name, "uint16" if name == "quality" else "float32", _ALL_BITS)


def stage_text(name: str) -> LayerText:
    """What the raster of a variable says about itself."""
    if name in QUANTITIES:
        return text_of(name)
    found = variable(name)
    suffix = "" if found.unit == "1" else f" [{found.unit}]"
    band = {"name": name, "long_name": found.long_name, "units": found.unit}
    return LayerText(found.long_name + suffix, found.unit, band)


def encoded(maps: Maps, block: Block, grid: Grid) -> StageBlock:
    """The variables of one block, ready to be written."""
    return StageBlock(
        {
            name: encode_block(np.ascontiguousarray(values), block, grid, stage_format(name))
            for name, values in maps.items()
        }
    )


def make_rasters(
    output: Path,
    grid: Grid,
    names: Sequence[str],
    walk: Callable[[Block], StageBlock],
    record: Callable[[dict[str, StageFile]], StageRecord],
    *,
    workers: int | None = None,
    block: int = 1024,
) -> StageRecord:
    """Make a stage's rasters and its record, and put them in place together.

    Parameters
    ----------
    output : Path
        The stage's folder; replaced if it exists.
    grid : Grid
    names : sequence of str
        The variables.
    walk : callable
        Gives the variables of a block.
    record : callable
        The record, once the files are known.
    workers : int, optional
        Threads; default: the cores this process may use.
    block : int
        Edge of a block; no effect on the files.

    Raises
    ------
    BusyError
        If the same output is being made by another process.
    OutputError
        If it cannot be written; nothing is left behind then.
    """
    with stage_folder(output) as folder, ExitStack() as open_writers, gdal_environment():
        writers = {
            name: open_writers.enter_context(
                LayerWriter(folder / f"{name}.tif", grid, stage_format(name), stage_text(name))
            )
            for name in names
        }

        def sink(result: StageBlock) -> None:
            for name, part in result.layers.items():
                writers[name].add(part)

        Threads(workers).spread(_walked, walk, list(grid.blocks(block)), sink)
        files = {name: _file(writer.finish()) for name, writer in writers.items()}
        made = record(files)
        write_whole(folder / RECORD, made.text().encode())
    return made


@contextmanager
def stage_folder(output: Path) -> Iterator[Path]:
    """A hidden folder to build a stage's output in, which takes the output's place at the end.

    Raises
    ------
    BusyError
        If another process is building the same output.
    OutputError
        If it cannot be made or put in place.
    """
    place = Path(os.path.normpath(output.absolute()))
    parent, name = place.parent, place.name
    _refuse_to_replace(place)
    with output_errors(output):
        parent.mkdir(parents=True, exist_ok=True)
    with terminable(), _sole_writer(parent / f".{name}.lock", output):
        folder = building_folder(parent, name)
        try:
            yield folder
            publish(parent, name)
        except BaseException:
            # Interrupts included: a stage's output is whole or not there.
            discard(parent, name)
            raise


def _refuse_to_replace(place: Path) -> None:
    """A stage replaces its own earlier output, or an empty folder: never a file, nor a folder of something else."""
    if not place.name:
        raise OutputError(
            "this is no folder of its own", where=str(place), remedy="Name a folder to be written"
        )
    if place.is_file():
        raise OutputError("this is a file, and a folder is to be written", where=str(place))
    with output_errors(place):
        entries = list(place.iterdir()) if place.is_dir() else []
    names = {entry.name for entry in entries}
    layers = "quality.tif" in names and any(name.endswith(".json") for name in names)
    if entries and (any(entry.is_dir() for entry in entries) or not (RECORD in names or layers)):
        raise OutputError(
            "the folder holds what no stage wrote, and it would be replaced",
            where=str(place),
            remedy="Name a folder that is new, empty, or a stage's earlier output",
        )


@contextmanager
def _sole_writer(lock: Path, output: Path) -> Iterator[None]:
    """Hold an output against another process that would make it at the same time."""
    busy = BusyError(
        "another process is making this output",
        where=str(output),
        remedy="Wait for it, or name another folder",
    )
    with output_errors(lock):
        handle = lock.open("a")
    with handle:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            raise busy from None
        # The file may have been removed by the one who held it before, between our opening and locking it.
        if not lock.exists() or not os.path.samestat(lock.stat(), os.fstat(handle.fileno())):
            raise busy
        try:
            yield
        finally:
            lock.unlink(missing_ok=True)


def _walked(walk: Callable[[Block], StageBlock], block: Block) -> StageBlock:
    return walk(block)


def _file(summary: LayerSummary) -> StageFile:
    return StageFile(
        file=summary.path.name,
        units=summary.text.unit,
        long_name=variable(summary.name).long_name,
        size=summary.size,
        sha256=summary.sha256,
    )
