"""What a stage's output folder says about itself: ``stage.json``, written last, and its checks.

A stage command leaves one folder: one GeoTIFF a variable (or ``air.json``) and the record. The record
holds no clock time and no host, and paths as they were named, so that the same command on the same inputs
gives the same bytes.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from affine import Affine
from rasterio.crs import CRS
from rasterio.errors import CRSError

from groundglow import __version__
from groundglow.documents import Document, checked
from groundglow.errors import ConfigError, InputError
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Grid
from groundglow.run.making.outcome import describe_grid
from groundglow.run.planning.plan import ScenePlan

RECORD = "stage.json"
_AGAIN = "Run that stage again"

StageName = Literal[
    "radiance", "brightness-temperature", "emissivity", "atmosphere", "surface-temperature", "flux"
]


class StageGrid(Document):
    """The grid of a stage's rasters."""

    crs: str
    transform: tuple[float, float, float, float, float, float]
    width: int
    height: int

    @staticmethod
    def of(grid: Grid) -> StageGrid:
        """A grid in plain values."""
        a, b, c, d, e, f = tuple(grid.transform)[:6]
        return StageGrid(
            crs=grid.crs.to_wkt(), transform=(a, b, c, d, e, f), width=grid.width, height=grid.height
        )

    def grid(self) -> Grid:
        """The grid again."""
        return Grid(CRS.from_wkt(self.crs), Affine(*self.transform), self.width, self.height)


class StageFile(Document):
    """One file of a stage's output."""

    file: str
    units: str | None
    long_name: str
    size: int
    sha256: str


class StageRecord(Document):
    """The record of one stage's output."""

    groundglow: str
    stage: StageName
    scene: str
    acquired: str
    sensor: str
    band: str
    grid: StageGrid
    variables: dict[str, StageFile]
    inputs: dict[str, str]
    method: dict[str, Any]

    def text(self) -> str:
        """As JSON."""
        return json.dumps(self.model_dump(mode="json"), indent=2) + "\n"


@dataclass(frozen=True)
class StageFolder:
    """A finished stage's output.

    Attributes
    ----------
    path : Path
        The folder.
    record : StageRecord
    """

    path: Path
    record: StageRecord

    def source(self, name: str) -> RasterSource:
        """One of its rasters.

        Raises
        ------
        InputError
            If the stage made no such variable.
        """
        if name not in self.record.variables:
            raise InputError(
                f"the stage {self.record.stage!r} left no {name}",
                where=str(self.path),
                remedy=f"It holds: {', '.join(self.record.variables)}",
            )
        return RasterSource(str(self.path / self.record.variables[name].file))

    def identity(self) -> str:
        """SHA-256 of the record, which names the checksums of all files."""
        return hashlib.sha256(self.record.text().encode()).hexdigest()


def record_of(
    plan: ScenePlan,
    stage: StageName,
    variables: dict[str, StageFile],
    inputs: dict[str, str],
    method: dict[str, Any],
) -> StageRecord:
    """The record of an output that is complete but for it."""
    scene = plan.scene
    return StageRecord(
        groundglow=__version__,
        stage=stage,
        scene=scene.name,
        acquired=scene.acquired.isoformat(),
        sensor=scene.sensor.name,
        band=plan.band.number,
        grid=StageGrid.of(plan.work.grid),
        variables=variables,
        inputs=inputs,
        method=method,
    )


def read_stage(path: Path, stage: StageName, option: str) -> StageFolder:
    """The output of a stage, checked to be what an option needs.

    Parameters
    ----------
    path : Path
        The folder, or its record.
    stage : str
        The stage that must have made it.
    option : str
        The option that names it, for messages.

    Raises
    ------
    InputError
        If it is missing, incomplete, changed since, or another stage's.
    """
    found = open_stage(path)
    if found.record.stage != stage:
        raise InputError(
            f"this is the output of the stage {found.record.stage!r}, and {option} needs that of {stage!r}",
            where=str(path),
            remedy=f"Give the folder that 'groundglow {stage}' wrote",
        )
    return found


def open_stage(path: Path) -> StageFolder:
    """The output of any stage, with all its files.

    Raises
    ------
    InputError
        If the folder, its record or one of its files is missing or not as the record says.
    """
    folder = path.parent if path.name == RECORD else path
    record = _read_record(folder)
    for one in record.variables.values():
        file = folder / one.file
        size = file.stat().st_size if file.is_file() else None
        if size is None:
            raise InputError(
                "a file that the stage's record names is missing", where=str(file), remedy=_AGAIN
            )
        if size != one.size:
            raise InputError(
                f"the file has {size} bytes, and the stage's record says {one.size}",
                where=str(file),
                remedy=_AGAIN,
            )
    return StageFolder(folder, record)


def agree(folders: Iterable[StageFolder], plan: ScenePlan) -> None:
    """Refuse outputs that are not of the planned scene, band and grid.

    Raises
    ------
    InputError
        Naming the folder, what was found and what was needed.
    """
    for folder in folders:
        record = folder.record
        wanted = {"scene": plan.scene.name, "sensor": plan.scene.sensor.name, "band": plan.band.number}
        for key, value in wanted.items():
            found = getattr(record, key)
            if found != value:
                raise InputError(
                    f"this is of {key} {found!r}, and job and scene file ask for {key} {value!r}",
                    where=str(folder.path),
                    remedy="Give outputs that were made with the same job and scene file",
                )
        grid = record.grid.grid()
        if grid != plan.work.grid:
            raise InputError(
                f"its grid is {describe_grid(grid)} from {_corner(grid)}, "
                f"and the scene's is {describe_grid(plan.work.grid)} from {_corner(plan.work.grid)}",
                where=str(folder.path),
                remedy=_AGAIN,
            )


def _read_record(folder: Path) -> StageRecord:
    file = folder / RECORD
    try:
        content = json.loads(file.read_text(encoding="utf-8"))
    except FileNotFoundError:
        what = "this folder holds no stage.json" if folder.is_dir() else "there is no such stage output"
        raise InputError(
            what,
            where=str(folder),
            remedy="Run the stage that makes it; the record is written when it is complete",
        ) from None
    except (OSError, ValueError) as error:
        raise InputError(
            f"the stage's record cannot be read ({error})", where=str(file), remedy=_AGAIN
        ) from error
    if not isinstance(content, dict):
        raise InputError("the stage's record is not a JSON object", where=str(file), remedy=_AGAIN)
    try:
        record = checked(StageRecord, content, where=str(file))
        record.grid.grid()
    except (ConfigError, CRSError) as error:
        raise InputError(
            f"this is not the record of a stage: {error}", where=str(file), remedy=_AGAIN
        ) from error
    return record


def _corner(grid: Grid) -> str:
    return f"({grid.transform.c:.10g}, {grid.transform.f:.10g})"
