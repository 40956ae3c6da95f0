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
from groundglow.run.config.job import Job
from groundglow.run.planning.plan import ScenePlan

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
        [byte]
    sha256 : str or None
        None for what is not a local file.
    tag : str or None
        What the server of a remote input says to tell its states apart.
    """

    role: str
    path: str
    size: int | None
    sha256: str | None
    tag: str | None = None

    def as_json(self) -> dict[str, Any]:
        """In the words of the Item's provenance."""
        known = {"role": self.role, "path": self.path, "size": self.size, "sha256": self.sha256}
        return known if self.tag is None else known | {"entity_tag": self.tag}

    def identity(self) -> list[Any]:
        """What decides: role and content; where its checksum is not known, path and tag."""
        if self.sha256 is not None:
            return [self.role, self.size, self.sha256]
        return [self.role, self.size, self.path, self.tag]


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
    rasters = [_record(role, one) for role, source in plan.inputs() for one in _files(source)]
    inputs = (*rasters, *(_record(role, fingerprint(str(path))) for role, path in plan.files))
    configuration = decisive_configuration(job)
    decisive = {
        "version": __version__,
        "inputs": sorted((one.identity() for one in inputs), key=repr),
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


def tag_now(record: InputRecord) -> str | None:
    """The tag that the server of a remote input gives it now.

    Raises
    ------
    InputError
        If the server does not have it or does not answer.
    """
    return _record(record.role, Fingerprint(record.path, None, None)).tag


def _record(role: str, found: Fingerprint) -> InputRecord:
    if found.sha256 is not None:
        return InputRecord(role, found.path, found.size, found.sha256)
    from groundglow.run.planning.fingerprint_remote import remote_state  # noqa: PLC0415  (most inputs are local)

    size, tag = remote_state(found.path)
    return InputRecord(role, found.path, size, None, tag)


def _files(source: RasterSource) -> list[Fingerprint]:
    return [fingerprint(path) for path in belonging_files(source.path, indirect=source.indirect)]
