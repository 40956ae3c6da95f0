"""Whether a scene's outputs are those its inputs would give now, and if not, why.

Two answers of different cost. The outputs' Item holds the fingerprint of everything that decided
them; comparing it needs the scene planned and its inputs read. Before that, what was remembered of
the last look (sizes, times and inode numbers of every file involved) may already show that nothing
has changed since; only then is the scene not opened at all.
"""

from __future__ import annotations

import hashlib
import json
import os
import time
import tomllib
from collections.abc import Iterable, Iterator, Mapping
from importlib import resources
from pathlib import Path
from typing import Any

from groundglow import __version__
from groundglow.raster.open import is_local
from groundglow.run.config.job import Job
from groundglow.run.planning.fingerprint import SceneFingerprint, decisive_configuration

# Size [byte], time of the last change [ns], inode number.
Stamp = tuple[int, int, int]

# A file changed within the resolution of a file system's clock may change again under the same stamp.
_SETTLED_NANOSECONDS = 2_000_000_000
_LARGEST_SIDE_FILE = 50_000_000
_DEPTH = 3


def stamp(path: str | Path) -> Stamp | None:
    """What tells one state of a file from the next; None where there is none."""
    try:
        status = os.stat(path)  # noqa: PTH116  (called a million times for a large batch; a Path costs as much again)
    except OSError:
        return None
    return status.st_size, status.st_mtime_ns, status.st_ino


def stamps(paths: Iterable[str | Path]) -> dict[str, Stamp | None]:
    """Stamps of several files by their absolute paths, so that they hold from any folder."""
    return {os.path.abspath(path): stamp(path) for path in paths}  # noqa: PTH100  (links stay as they are)


def settled(found: Mapping[str, Stamp | None]) -> bool:
    """Whether all files are there and none changed so lately (or in the future) that its stamp proves nothing."""
    latest = time.time_ns() - _SETTLED_NANOSECONDS
    return all(one is not None and one[1] < latest for one in found.values())


def description_files(address: str) -> list[Path]:
    """The local files that describe a scene: the named one, what it names in turn, or a folder's content."""
    if not is_local(address):
        return []
    path = Path(address)
    if path.is_dir():
        return [path, *sorted(path.iterdir())]
    return [path, *_named_in(path, _DEPTH)]


def _named_in(path: Path, depth: int) -> Iterator[Path]:
    """Files named by the strings of a TOML file, and by those files in turn."""
    if path.suffix.lower() != ".toml" or depth == 0:
        return
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        # Not there or not TOML: opening the scene will say so.
        return
    for text in strings(content):
        file = path.parent / text
        if len(text) < 1024 and "\n" not in text and "\0" not in text and file.is_file():
            yield file
            yield from _named_in(file, depth - 1)


def strings(value: object) -> Iterator[str]:
    """All strings within nested mappings and lists."""
    if isinstance(value, str):
        yield value
    elif isinstance(value, Mapping):
        for part in value.values():
            yield from strings(part)
    elif isinstance(value, list | tuple):
        for part in value:
            yield from strings(part)


def job_digest(job: Job, folder: Path) -> str:
    """Digest of what a job itself decides: configuration, the files it names, our data files and version.

    Parameters
    ----------
    job : Job
    folder : Path
        Folder of the job file.

    Returns
    -------
    str
    """
    configuration = decisive_configuration(job)
    decisive = {
        "version": __version__,
        "configuration": configuration,
        "files": [_side_file(folder, text) for text in sorted(set(strings(configuration)))],
        "data": _package_data(),
    }
    return hashlib.sha256(json.dumps(decisive, sort_keys=True).encode()).hexdigest()


def fault_of_outputs(item: Mapping[str, Any], sizes: Mapping[str, int | None]) -> str | None:
    """What is wrong with the files that an Item lists; None where all are there in their sizes.

    Parameters
    ----------
    item : mapping
    sizes : mapping of str to int or None
        Sizes found, by the href of the asset; None for missing files.
    """
    for key, asset in item.get("assets", {}).items():
        found = sizes.get(asset["href"])
        if found is None:
            return f"the file of {key} is missing"
        if asset.get("file:size", found) != found:
            return f"the file of {key} has {found} bytes, not {asset['file:size']}"
    return None


def why_changed(item: Mapping[str, Any], fingerprint: SceneFingerprint) -> str | None:
    """Why outputs are not what would be made now; None where they are.

    Parameters
    ----------
    item : mapping
        Of the outputs.
    fingerprint : SceneFingerprint
        Of what would be made.
    """
    known = item.get("properties", {}).get("groundglow:provenance", {})
    if known.get("fingerprint") == fingerprint.digest:
        return None
    reasons = [*_version_reason(item), *_configuration_reasons(known, fingerprint.configuration)]
    before = {(one["role"], one["sha256"], one.get("entity_tag")) for one in known.get("inputs", [])}
    after = {(one.role, one.sha256, one.tag) for one in fingerprint.inputs}
    reasons += [f"input {role} changed" for role in sorted({role for role, *_ in before ^ after})]
    return "; ".join(reasons) or "the scene's description, its sensor or coefficient data changed"


def why_changed_by_headers(item: Mapping[str, Any], job: Job) -> str | None:
    """As :func:`why_changed`, as far as it can be told without reading the inputs' content."""
    known = item.get("properties", {}).get("groundglow:provenance", {})
    reasons = [*_version_reason(item), *_configuration_reasons(known, decisive_configuration(job))]
    for one in known.get("inputs", []):
        if one["size"] is None or not is_local(one["path"]):
            continue
        now = stamp(one["path"])
        if now is not None and now[0] != one["size"]:
            reasons.append(f"input {one['role']} changed")
    return "; ".join(dict.fromkeys(reasons)) or None


def _version_reason(item: Mapping[str, Any]) -> list[str]:
    made = item.get("properties", {}).get("processing:software", {}).get("groundglow")
    return [] if made == __version__ else [f"made by version {made}, this is {__version__}"]


def _configuration_reasons(known: Mapping[str, Any], now: Mapping[str, Any]) -> list[str]:
    before, after = _flat(known.get("configuration", {})), _flat(json.loads(json.dumps(now)))
    keys = sorted(key for key in before.keys() | after.keys() if before.get(key) != after.get(key))
    if not keys:
        return []
    more = f" and {len(keys) - 4} more keys" if len(keys) > 4 else ""
    return [f"configuration changed: {', '.join(keys[:4])}{more}"]


def _flat(value: object, prefix: str = "") -> dict[str, object]:
    if not isinstance(value, Mapping):
        return {prefix: value}
    found: dict[str, object] = {}
    for key, part in value.items():
        found |= _flat(part, f"{prefix}.{key}" if prefix else str(key))
    return found


def _side_file(folder: Path, text: str) -> list[object]:
    """A file that the job names, by content; what a folder or a pattern holds, by stamps."""
    if not text or "\0" in text or len(text) > 1024 or not is_local(text):
        return []
    if any(mark in text for mark in "*?[") and not Path(text).is_absolute():
        return [[str(path), stamp(path)] for path in sorted(folder.glob(text))]
    path = folder / text
    found = stamp(path)
    if found is None:
        return []
    if path.is_dir():
        return [[str(entry), stamp(entry)] for entry in sorted(path.iterdir())]
    if found[0] > _LARGEST_SIDE_FILE:
        return [str(path), found]
    return [text, hashlib.sha256(path.read_bytes()).hexdigest()]


def _package_data() -> list[list[object]]:
    """Name and size of every data file of the package: sensors, absorption tables, class tables."""
    found: list[list[object]] = []
    for name in ("sensors", "atmosphere", "retrieval"):
        with resources.as_file(resources.files("groundglow") / name) as folder:
            found += [
                [path.name, path.stat().st_size, path.stat().st_mtime_ns]
                for path in sorted(folder.rglob("*"))
                if path.is_file() and path.suffix not in (".py", ".pyc", ".nbi", ".nbc")
            ]
    return found
