"""The atmosphere stage, file to file: the air as a small table over place, ground height and view angle.

The air is solved at a few nodes and interpolated at each pixel by the stage that uses it; what travels
is the table itself, as JSON that a reader can look into, in full double precision.
"""

from __future__ import annotations

import hashlib
import json
import math
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.grid import AirTerms, AtmosphereGrid
from groundglow.documents import Document, checked
from groundglow.errors import ConfigError, DomainError, InputError
from groundglow.layers.files import write_whole
from groundglow.raster.band import RasterSource
from groundglow.raster.fingerprint import fingerprint
from groundglow.run.planning.air_source import Air
from groundglow.run.stage.output import stage_folder
from groundglow.run.stage.record import RECORD, StageFile, StageFolder, StageRecord, record_of
from groundglow.run.stage.setting import Setting, StageCall
from groundglow.scene.model import Scene

_FILE = "air.json"
_TERMS = tuple(AirTerms.__dataclass_fields__)
_AXES = ("x", "y", "height", "view_zenith_angle", "surface_temperature")
_UNITS = {
    "x": "map units of the scene's grid",
    "y": "map units of the scene's grid",
    "height": "m",
    "view_zenith_angle": "degree",
    "surface_temperature": "K",
    "transmittance": "1",
    "path_radiance": "W m-2 sr-1 um-1",
    "transmitted_sky_radiance": "W m-2 sr-1 um-1",
    "sky_radiance": "W m-2 sr-1 um-1",
    "sky_flux": "W m-2",
}
_DIMENSIONS = {
    "transmittance": ["surface_temperature", "y", "x", "height", "view_zenith_angle"],
    "path_radiance": ["y", "x", "height", "view_zenith_angle"],
    "transmitted_sky_radiance": ["y", "x", "height", "view_zenith_angle"],
    "sky_radiance": ["y", "x", "height"],
    "sky_flux": ["y", "x", "height"],
}


class AirDocument(Document):
    """The content of ``air.json``: nested lists, null where a value is not known.

    ``elevation`` is the ground height that holds for every pixel [m]; null where the scene's raster is to be
    looked at.
    """

    units: dict[str, str]
    dimensions: dict[str, list[str]]
    elevation: float | None
    axes: dict[str, list[float]]
    terms: dict[str, list[Any]]
    causes: dict[str, dict[str, list[Any]]]
    validity: list[Any] | None


def make_atmosphere(call: StageCall) -> StageRecord:
    """The day's air in the band, from whatever source the job names.

    Raises
    ------
    GroundglowError
        If job or scene cannot be followed, the source of the air cannot be read, or the output not
        written.
    """
    setting = Setting.read(call)
    plan = setting.plan_of_air()
    if plan.air is None:
        raise ConfigError("the job plans no atmosphere", where=str(call.job))
    data = (json.dumps(air_as_json(plan.air), indent=1, allow_nan=False) + "\n").encode()
    inputs = {path.name: fingerprint(str(path)).sha256 or "" for path in plan.air.files}
    described = StageFile(
        file=_FILE,
        units=None,
        long_name="the air between ground and sensor at nodes of place, ground height and view zenith angle",
        size=len(data),
        sha256=hashlib.sha256(data).hexdigest(),
    )
    record = record_of(plan, "atmosphere", {"air": described}, inputs, dict(plan.air.account))
    with stage_folder(call.output) as folder:
        write_whole(folder / _FILE, data)
        write_whole(folder / RECORD, record.text().encode())
    return record


def air_as_json(air: Air) -> dict[str, Any]:
    """The air in plain values; numbers are written with all their digits."""
    grid = air.grid
    return {
        "elevation": None if isinstance(air.elevation, RasterSource) else float(air.elevation),
        "units": _UNITS,
        "dimensions": _DIMENSIONS,
        "axes": {name: getattr(grid, name).tolist() for name in _AXES},
        "terms": _terms_as_json(grid.terms),
        "causes": {name: _terms_as_json(terms) for name, terms in grid.causes.items()},
        "validity": None if grid.validity is None else grid.validity.tolist(),
    }


def read_air(folder: StageFolder, scene: Scene) -> Air:
    """The air of a finished atmosphere stage.

    Parameters
    ----------
    folder : StageFolder
    scene : Scene
        Names the elevation raster, where the air is looked up with one.

    Raises
    ------
    ConfigError
        If the scene names no elevation, and the air needs it.
    InputError
        If its file is not as it should be.
    """
    path = Path(folder.source("air").path)
    try:
        document = checked(AirDocument, json.loads(path.read_text(encoding="utf-8")), where=str(path))
        axes = {name: np.array(document.axes[name], dtype=np.float64) for name in _AXES}
        grid = AtmosphereGrid(
            **axes,
            terms=_terms_of(document.terms),
            causes={name: _terms_of(terms) for name, terms in document.causes.items()},
            validity=None if document.validity is None else np.array(document.validity, dtype=np.bool_),
        )
    except (OSError, ValueError, KeyError, TypeError, ConfigError, DomainError) as error:
        raise InputError(
            f"this is not the air of an atmosphere stage ({error})",
            where=str(path),
            remedy="Run that stage again",
        ) from error
    elevation = scene.elevation if document.elevation is None else document.elevation
    if elevation is None:
        raise ConfigError(
            f"the air is looked up with the ground's height, and the scene {scene.name} names no elevation",
            where=scene.origin or None,
            remedy="Add elevation to the scene file (a raster or a number in m)",
        )
    return Air(grid, elevation, dict(folder.record.method))


def _terms_as_json(terms: AirTerms) -> dict[str, Any]:
    return {name: _without_nan(getattr(terms, name).tolist()) for name in _TERMS}


def _without_nan(value: Any) -> Any:
    if isinstance(value, list):
        return [_without_nan(part) for part in value]
    return None if math.isnan(value) else value


def _terms_of(lists: dict[str, list[Any]]) -> AirTerms:
    return AirTerms(**{name: _array(lists[name]) for name in _TERMS})


def _array(values: list[Any]) -> NDArray[np.float64]:
    return np.array(values, dtype=np.float64)
