"""A scene from whatever describes it."""

from __future__ import annotations

from pathlib import Path

from groundglow.errors import ConfigError
from groundglow.scene.model import Scene
from groundglow.scene.scene_file import read_scene_file


def open_scene(path: str) -> Scene:
    """The scene that a path describes.

    Parameters
    ----------
    path : str
        A scene file (TOML).

    Returns
    -------
    Scene

    Raises
    ------
    ConfigError
        If the description is missing or not as it should be.
    """
    file = Path(path)
    if file.suffix.lower() != ".toml":
        raise ConfigError(
            "is not a scene description", where=path, remedy="Name a scene file ending in .toml"
        )
    return read_scene_file(file)
