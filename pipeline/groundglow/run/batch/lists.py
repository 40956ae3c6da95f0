"""The scenes that a job names, one after another: patterns, single descriptions, and lists in STAC.

A list may hold a hundred thousand scenes: it is read as it goes, and no scene is opened here.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import IO, Any
from urllib.parse import unquote, urljoin, urlsplit

from groundglow.errors import ConfigError, InputError
from groundglow.run.batch.entry import SceneEntry, entry_of_item
from groundglow.run.batch.json_lists import top_members
from groundglow.run.batch.select import left_out
from groundglow.run.config.job import Job
from groundglow.scene.stac_fetch import fetch_document, has_scheme

# Enough of a JSON file to tell a scene from a list of scenes.
_PEEK = 65536
_DEEPEST = 12


def wanted_scenes(job: Job, folder: Path) -> Iterator[SceneEntry]:
    """The scenes of a job, each once, in the job's order, sorted within a pattern.

    Parameters
    ----------
    job : Job
    folder : Path
        Folder of the job file.

    Yields
    ------
    SceneEntry
        Those that their list shows to be unwanted are passed over.

    Raises
    ------
    ConfigError
        If a name or pattern meets nothing.
    InputError
        If a list cannot be read.
    """
    seen: set[str] = set()
    for name in job.scenes:
        for entry in _named(name, folder):
            if entry.address not in seen:
                seen.add(entry.address)
                if left_out(job.select, entry) is None:
                    yield entry


def _named(name: str, folder: Path) -> Iterator[SceneEntry]:
    if has_scheme(name):
        yield from _document(name)
        return
    if any(mark in name for mark in "*?["):
        matches = _matches(name, folder)
    else:
        matches = [str(folder / name)] if (folder / name).exists() else []
    if not matches:
        raise ConfigError(
            f"there is no scene {name!r}", where="scenes", remedy=f"Paths are relative to {folder.resolve()}"
        )
    for path in matches:
        if path.lower().endswith((".json", ".geojson")):
            yield from _document(path)
        else:
            yield SceneEntry(path)


def _matches(pattern: str, folder: Path) -> list[str]:
    root = Path(Path(pattern).anchor) if Path(pattern).is_absolute() else folder
    relative = str(Path(pattern).relative_to(root)) if Path(pattern).is_absolute() else pattern
    return sorted(str(path) for path in root.glob(relative))


def _document(address: str) -> Iterator[SceneEntry]:
    """A JSON document: one Item, a list of Items, a catalogue, or another reader's metadata."""
    if has_scheme(address):
        document = fetch_document(address)
        kind = document.get("type")
        if kind == "FeatureCollection":
            yield from _features(document.get("features"), address)
        elif kind in ("Catalog", "Collection"):
            yield from _catalogue(document, address)
        else:
            yield entry_of_item(document, address, within=False)
        return
    try:
        with Path(address).open(encoding="utf-8-sig") as stream:
            start = stream.read(_PEEK)
            if '"FeatureCollection"' in start:
                stream.seek(0)
                yield from _streamed(stream, address)
                return
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"cannot be read ({error})", where=address) from error
    if '"Catalog"' in start or '"Collection"' in start:
        yield from _catalogue(fetch_document(address), address)
    elif '"Feature"' in start:
        yield entry_of_item(fetch_document(address), address, within=False)
    else:
        yield SceneEntry(address)


def _streamed(stream: IO[str], address: str) -> Iterator[SceneEntry]:
    """Items of a local ItemCollection, one in memory at a time."""
    try:
        for key, value in top_members(stream, spread="features"):
            if key == "features":
                yield from _features([value], address)
    except json.JSONDecodeError as error:
        raise InputError(f"is not valid JSON ({error})", where=address) from error


def _features(features: object, address: str) -> Iterator[SceneEntry]:
    if not isinstance(features, list) or not all(isinstance(item, Mapping) for item in features):
        raise InputError("is an ItemCollection whose features are no Items", where=address)
    for item in features:
        yield entry_of_item(item, address, within=True)


def _catalogue(document: Mapping[str, Any], address: str, depth: int = 0) -> Iterator[SceneEntry]:
    """Items of a static catalogue, its own before those of its children."""
    if depth > _DEEPEST:
        raise InputError(f"is nested more than {_DEEPEST} catalogues deep", where=address)
    links = document.get("links")
    if not isinstance(links, list):
        raise InputError("is a catalogue without links", where=address)
    for relation in ("item", "child"):
        for link in links:
            if (
                not isinstance(link, Mapping)
                or link.get("rel") != relation
                or not isinstance(link.get("href"), str)
            ):
                continue
            target = linked_address(link["href"], address)
            if relation == "child":
                yield from _catalogue(fetch_document(target), target, depth + 1)
            else:
                yield entry_of_item(fetch_document(target), target, within=False)


def linked_address(href: str, document: str) -> str:
    """Where a link of a catalogue leads.

    Parameters
    ----------
    href : str
    document : str
        Path or address of the catalogue.

    Returns
    -------
    str

    Raises
    ------
    InputError
        If it has a scheme that is not followed, or leads from the network into this machine.
    """
    if has_scheme(document) and not document.startswith("file://"):
        target = urljoin(document, href)
        allowed: tuple[str, ...] = ("http", "https")
    elif has_scheme(href):
        target, allowed = href, ("http", "https", "file")
    else:
        base = unquote(urlsplit(document).path) if has_scheme(document) else document
        return str(Path(base).parent / href)
    if urlsplit(target).scheme.lower() not in allowed:
        raise InputError(
            f"the link {href!r} leads to a place that is not followed",
            where=document,
            remedy=f"Links of this catalogue may lead to: {', '.join(allowed)}",
        )
    return target
