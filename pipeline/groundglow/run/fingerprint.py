"""What decides a scene's result, as one digest: inputs, configuration, sensor and coefficient data, version."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, fields, is_dataclass
from typing import Any

import numpy as np

from groundglow import __version__
from groundglow.raster.band import RasterSource
from groundglow.raster.fingerprint import Fingerprint, belonging_files, fingerprint
from groundglow.raster.grid import Grid
from groundglow.run.config import Job
from groundglow.run.plan import ScenePlan

# Parts of a job that never change a byte of the layers.
_WITHOUT_EFFECT = {"scenes", "output", "run", "select", "retry"}


@dataclass(frozen=True)
class InputRecord:
    """One input file.

    Attributes
    ----------
    role : str
    path : str
        As the scene or job named it.
    size : int or None
        [byte]; None for addresses.
    sha256 : str or None
    """

    role: str
    path: str
    size: int | None
    sha256: str | None

    def as_json(self) -> dict[str, Any]:
        """In the words of the Item's provenance."""
        return {"role": self.role, "path": self.path, "size": self.size, "sha256": self.sha256}


@dataclass(frozen=True)
class SceneFingerprint:
    """Digest and parts.

    Attributes
    ----------
    digest : str
        SHA-256 over everything below, the paths of the inputs left out.
    inputs : tuple of InputRecord
    configuration : mapping
        The job without the parts that have no effect on the layers.
    """

    digest: str
    inputs: tuple[InputRecord, ...]
    configuration: Mapping[str, Any]


def scene_fingerprint(job: Job, plan: ScenePlan) -> SceneFingerprint:
    """Identify everything that decides the layers of a scene.

    Parameters
    ----------
    job : Job
    plan : ScenePlan

    Returns
    -------
    SceneFingerprint

    Raises
    ------
    InputError
        If an input is missing or cannot be read.
    """
    inputs = tuple(
        InputRecord(role, one.path, one.size, one.sha256)
        for role, source in plan.inputs()
        for one in _files(source)
    )
    configuration = decisive_configuration(job)
    decisive = {
        "version": __version__,
        "inputs": sorted(
            (one.role, one.size, one.sha256, one.path if one.sha256 is None else "") for one in inputs
        ),
        "configuration": configuration,
        "scene": [plan.scene.name, plan.scene.acquired.isoformat(), plan.scene.sensor.name],
        "work": plain(plan.work),
    }
    text = json.dumps(decisive, sort_keys=True)
    return SceneFingerprint(hashlib.sha256(text.encode()).hexdigest(), inputs, configuration)


def decisive_configuration(job: Job) -> dict[str, Any]:
    """The job without the parts that never change a byte of the layers."""
    return job.model_dump(mode="json", exclude=_WITHOUT_EFFECT)


def plain(value: object) -> Any:
    """A value of the work as something JSON can hold: arrays as their digests, rasters without their paths.

    Raises
    ------
    TypeError
        If a part of the work has no plain form; a new kind of part needs one here.
    """
    if isinstance(value, np.ndarray):
        digest = hashlib.sha256(np.ascontiguousarray(value).tobytes()).hexdigest()
        return [str(value.dtype), list(value.shape), digest]
    if isinstance(value, RasterSource):
        return {item.name: plain(getattr(value, item.name)) for item in fields(value) if item.name != "path"}
    if isinstance(value, Grid):
        return [value.crs.to_wkt(), list(value.transform)[:6], value.width, value.height]
    if is_dataclass(value) and not isinstance(value, type):
        return {item.name: plain(getattr(value, item.name)) for item in fields(value)}
    if isinstance(value, Mapping):
        return {str(key): plain(part) for key, part in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(part) for part in value]
    if value is None or isinstance(value, (str, int, float, bool)):
        return repr(value) if isinstance(value, float) else value
    if isinstance(value, np.generic):
        return repr(value.item())
    raise TypeError(f"{type(value).__name__} has no plain form")


def _files(source: RasterSource) -> list[Fingerprint]:
    return [fingerprint(path) for path in belonging_files(source.path, indirect=source.indirect)]
