"""A scene from whatever describes it: the one entry point."""

from __future__ import annotations

from pathlib import Path

from groundglow.errors import InputError
from groundglow.scene.model import Scene


def open_scene(path: str, *, sensor: str | None = None) -> Scene:
    """The scene that a path or address describes.

    Parameters
    ----------
    path : str
        A scene file, a STAC Item, level-1 metadata, or a folder or archive that holds such metadata.
    sensor : str, optional
        Sensor name or file for a STAC Item that does not say it in a way that is understood.

    Returns
    -------
    Scene

    Raises
    ------
    ConfigError
        If a scene file is not as it should be.
    InputError
        If anything else is not.
    """
    # Each reader loads when it is needed: a scheduled run starts often, and mostly needs one of them.
    if "://" not in path:
        file = Path(path)
        if not file.exists():
            raise InputError(
                "there is no such file or folder", where=path, remedy="Check the path of the scene"
            )
        if file.suffix.lower() == ".toml" and file.is_file():
            from groundglow.scene.scene_file import read_scene_file  # noqa: PLC0415  (see above)

            return read_scene_file(file)
    from groundglow.scene.recognise import read_described  # noqa: PLC0415  (see above)

    return read_described(path, sensor)
