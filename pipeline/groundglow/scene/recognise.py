"""Which reader a description is for, where it is no scene file: STAC Items, level-1 metadata, archives."""

from __future__ import annotations

from pathlib import Path, PurePosixPath

from groundglow.errors import ConfigError, InputError
from groundglow.scene.files import SceneFiles, scene_files
from groundglow.scene.level1 import is_level1_name, read_level1
from groundglow.scene.model import Scene
from groundglow.scene.scene_file import read_scene_file
from groundglow.scene.stac import is_item, read_item
from groundglow.scene.stac_fetch import fetch_document, has_scheme

_WHAT_IS_READ = (
    "Name a scene file (.toml), a STAC Item (.json, or its address), level-1 metadata (_MTL.txt, _MTL.json), "
    "or a folder, tar, tar.gz or zip that holds such metadata"
)


def read_described(path: str, sensor: str | None) -> Scene:
    """The scene of an address, a metadata file, a folder or an archive.

    Parameters
    ----------
    path : str
        An address, or something that exists and does not end in .toml.
    sensor : str or None
        For a STAC Item that does not say its sensor.

    Raises
    ------
    InputError
        If it is none of them, or not as it should be.
    ConfigError
        If it holds several scenes.
    """
    if has_scheme(path):
        return read_item(fetch_document(path), path, sensor=sensor)
    file = Path(path)
    if is_level1_name(file.name):
        return _level1_beside(file)
    if file.suffix.lower() == ".json":
        return _from_json(file, sensor)
    files = scene_files(file)
    if files is None:
        raise InputError("is not a description of a scene", where=path, remedy=_WHAT_IS_READ)
    return _from_files(files, sensor)


def _level1_beside(file: Path) -> Scene:
    """Level-1 metadata named itself: its rasters lie beside it."""
    files = scene_files(file.absolute().parent)
    if files is None:
        raise InputError("is not in a folder", where=str(file))
    return read_level1(files, file.name)


def _from_json(file: Path, sensor: str | None) -> Scene:
    """A JSON file that is not named like level-1 metadata."""
    document = fetch_document(str(file))
    if is_item(document):
        return read_item(document, str(file), sensor=sensor)
    if "LANDSAT_METADATA_FILE" in document or "L1_METADATA_FILE" in document:
        return _level1_beside(file)
    raise InputError(
        f"is JSON, but neither a STAC Item nor level-1 metadata (type is {document.get('type')!r})",
        where=str(file),
        remedy=_WHAT_IS_READ,
    )


def _from_files(files: SceneFiles, sensor: str | None) -> Scene:
    """A folder or archive: the one description in it."""
    metadata = [name for name in files.names.values() if is_level1_name(name)]
    # Of two forms of the same metadata the text form, which comes last, stands for both.
    metadata.sort(key=lambda name: (name.lower().endswith(".txt"), name))
    products = {str(PurePosixPath(name).with_suffix("")).lower(): name for name in metadata}
    if len(products) == 1:
        return read_level1(files, next(iter(products.values())))
    if len(products) > 1:
        raise ConfigError(
            f"holds {len(products)} scenes, and one is needed",
            where=str(files.root),
            remedy=f"Name one of: {', '.join(sorted(products.values())[:5])}",
        )
    if files.kind == "folder":
        described = sorted(name for name in files.names.values() if name.lower().endswith((".toml", ".json")))
        if len(described) == 1:
            found = files.root / described[0]
            return read_scene_file(found) if found.suffix.lower() == ".toml" else _from_json(found, sensor)
    raise InputError("holds no description of a scene", where=str(files.root), remedy=_WHAT_IS_READ)
