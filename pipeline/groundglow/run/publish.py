"""Folders that a reader never sees half-written, and the lock that keeps two runs apart.

A scene is built in a hidden folder beside its target and put in place by renaming: the old folder
aside, the new one in, the old one removed. After a kill at any moment the next run finds either
the old scene, or the new one, or the old one aside, which :func:`recover` puts back. The scene's
STAC Item is written last, so a folder without it is never complete.
"""

from __future__ import annotations

import fcntl
import json
import os
import shutil
import socket
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from groundglow.errors import BusyError, OutputError

LOCK_NAME = ".groundglow.lock"
_BUILDING = ".{name}.building"
_ASIDE = ".{name}.aside"


@contextmanager
def locked(output: Path) -> Iterator[None]:
    """Hold the output folder, made if absent, for this process.

    The lock is the operating system's own on an open file: it ends with its holder, so a dead
    process leaves none behind.

    Raises
    ------
    BusyError
        Another process holds it; the message names it.
    OutputError
        The folder cannot be made or written.
    """
    try:
        output.mkdir(parents=True, exist_ok=True)
        handle = (output / LOCK_NAME).open("a+", encoding="utf-8")
    except OSError as error:
        raise OutputError(
            f"the output folder cannot be written ({error.strerror})",
            where=str(output),
            remedy="Choose another folder or change its permissions",
        ) from error
    with handle:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            handle.seek(0)
            raise BusyError(
                f"the output folder is in use by {_holder(handle.read())}",
                where=str(output),
                remedy="Wait until that run has ended, or write to another folder",
            ) from None
        handle.seek(0)
        handle.truncate()
        json.dump(
            {
                "process": os.getpid(),
                "host": socket.gethostname(),
                "since": datetime.now(UTC).isoformat(timespec="seconds"),
            },
            handle,
        )
        handle.flush()
        yield


def building_folder(output: Path, name: str) -> Path:
    """A fresh hidden folder in which a scene is built; what a killed run left there is removed.

    Raises
    ------
    OutputError
        The folder cannot be made.
    """
    folder = output / _BUILDING.format(name=name)
    try:
        if folder.exists():
            shutil.rmtree(folder)
        folder.mkdir()
    except OSError as error:
        raise OutputError(f"the folder cannot be made ({error.strerror})", where=str(folder)) from error
    return folder


def publish(output: Path, name: str, *, durable: bool = False) -> Path:
    """Put the built folder in place of the scene's old one.

    Parameters
    ----------
    output : Path
    name : str
        The scene's name.
    durable : bool
        Flush everything to disk first, against a power loss.

    Returns
    -------
    Path
        The scene's folder.

    Raises
    ------
    OutputError
        If a rename fails; the old folder is then still in place or put back.
    """
    building = output / _BUILDING.format(name=name)
    aside = output / _ASIDE.format(name=name)
    target = output / name
    if durable:
        for path in [*building.rglob("*"), building]:
            _flush(path)
    try:
        if target.exists():
            target.rename(aside)
        building.rename(target)
        if durable:
            _flush(output)
        if aside.exists():
            shutil.rmtree(aside)
    except OSError as error:
        recover(output)
        raise OutputError(
            f"the finished folder cannot be put in place ({error.strerror})", where=str(target)
        ) from error
    return target


def discard(output: Path, name: str) -> None:
    """Remove what was built of a scene that will not be finished."""
    shutil.rmtree(output / _BUILDING.format(name=name), ignore_errors=True)


def recover(output: Path) -> None:
    """Undo what a killed run left: an old folder aside is put back or removed, half-built ones removed.

    Call it only while the output folder is locked.
    """
    prefix, suffix = _ASIDE.split("{name}")
    for aside in output.glob(_ASIDE.format(name="*")):
        target = output / aside.name[len(prefix) : -len(suffix)]
        if target.exists():
            shutil.rmtree(aside)
        else:
            aside.rename(target)
    for building in output.glob(_BUILDING.format(name="*")):
        shutil.rmtree(building)


def free_bytes(output: Path) -> int:
    """Space left on the disk of the output folder."""
    return shutil.disk_usage(output).free


def _flush(path: Path) -> None:
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def _holder(text: str) -> str:
    try:
        known = json.loads(text)
    except ValueError:
        return "another run"
    return f"process {known.get('process')} on {known.get('host')} since {known.get('since')}"
