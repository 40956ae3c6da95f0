"""Sensors by name (shipped with the package) or by the path of a sensor file."""

from __future__ import annotations

import difflib
from functools import lru_cache
from importlib import resources
from pathlib import Path

from groundglow.documents import checked, read_toml
from groundglow.errors import ConfigError
from groundglow.scene.radiometer import Sensor, SensorBand, TwoConstants
from groundglow.scene.sensor_document import SensorDocument

__all__ = ["Sensor", "SensorBand", "TwoConstants", "load_sensor", "sensor_names"]


def sensor_names() -> tuple[str, ...]:
    """Names of the shipped sensors, sorted."""
    files = resources.files("groundglow").joinpath("sensors").iterdir()
    return tuple(sorted(file.name.removesuffix(".toml") for file in files if file.name.endswith(".toml")))


def load_sensor(name_or_path: str, *, folder: Path | None = None) -> Sensor:
    """A shipped sensor, or one from a file.

    Parameters
    ----------
    name_or_path : str
        A shipped sensor's name, or the path of a sensor file (ending in .toml).
    folder : Path, optional
        Where a relative path starts; default: the working folder.

    Returns
    -------
    Sensor

    Raises
    ------
    ConfigError
        If there is no such sensor, or its file is not as it should be.
    InputError
        If a response table that the file names cannot be read.
    """
    if name_or_path.endswith(".toml"):
        return _read(((folder or Path()) / name_or_path).resolve())
    names = sensor_names()
    if name_or_path not in names:
        near = difflib.get_close_matches(name_or_path, names, n=1)
        hint = f"Did you mean {near[0]!r}? " if near else ""
        raise ConfigError(
            f"there is no sensor {name_or_path!r}",
            remedy=f"{hint}Shipped are {', '.join(names)}; or name a sensor file ending in .toml",
        )
    return _shipped(name_or_path)


@lru_cache(maxsize=32)
def _shipped(name: str) -> Sensor:
    with resources.as_file(resources.files("groundglow").joinpath("sensors")) as folder:
        return _read(folder / f"{name}.toml")


def _read(path: Path) -> Sensor:
    """A sensor file, read and checked."""
    document = checked(SensorDocument, read_toml(path), where=str(path))
    try:
        return document.sensor(path.parent)
    except ConfigError as error:
        raise ConfigError(error.what, where=str(path)) from error
