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
import re
import shutil
import socket
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from groundglow.errors import BusyError, OutputError

# Everything a run keeps for itself: the lock, its memory, reports and logs.
# Names of the reports within the run folder.
REPORT, TABLE, LOG = "report.json", "report.txt", "log.jsonl"
RUN_FOLDER = ".groundglow"
LOCK_NAME = RUN_FOLDER
_LOCK_FILE = "lock"
_BUILDING = ".{name}.building-{token}"
_ASIDE = ".{name}.aside"
_BUILDING_NAME = re.compile(r"^\..+\.building-[0-9a-z-]*$")


@contextmanager
def locked(output: Path) -> Iterator[None]:
    """Hold the output folder, made if absent, for this process.

    The lock is the operating system's own on an open file: it ends with its holder, so a dead
    process leaves none behind, whatever the file still says.

    Raises
    ------
    BusyError
        Another process holds it; the message names it.
    OutputError
        The folder cannot be made or written.
    """
    try:
        (output / RUN_FOLDER).mkdir(parents=True, exist_ok=True)
        handle = (output / RUN_FOLDER / _LOCK_FILE).open("a+", encoding="utf-8")
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
                f"the output folder is in use by {holder(handle.read())}",
                where=str(output),
                remedy="Wait until that run has ended, or write to another folder",
            ) from None
        handle.seek(0)
        handle.truncate()
        handle.write(this_process())
        handle.flush()
        yield


def this_process() -> str:
    """Who holds a lock, for the one who finds it taken."""
    since = datetime.now(UTC).isoformat(timespec="seconds")
    return json.dumps({"process": os.getpid(), "host": socket.gethostname(), "since": since})


def holder(text: str) -> str:
    """What :func:`this_process` said, in words."""
    try:
        known = json.loads(text)
    except ValueError:
        return "another run"
    return f"process {known.get('process')} on {known.get('host')} since {known.get('since')}"


def building_folder(output: Path, name: str, token: str = "") -> Path:
    """A fresh hidden folder in which a scene is built.

    Parameters
    ----------
    output : Path
    name : str
        The scene's name.
    token : str
        Tells apart two attempts that may overlap, as when a cluster believes a worker dead that is not.

    Raises
    ------
    OutputError
        The folder cannot be made.
    """
    folder = output / _BUILDING.format(name=name, token=token)
    try:
        if folder.exists():
            shutil.rmtree(folder)
        folder.mkdir()
    except OSError as error:
        raise OutputError(f"the folder cannot be made ({error.strerror})", where=str(folder)) from error
    return folder


def publish(output: Path, name: str, token: str = "", *, durable: bool = False) -> Path:
    """Put the built folder in place of the scene's old one.

    Parameters
    ----------
    output : Path
    name, token : str
        As for :func:`building_folder`.
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
    building = output / _BUILDING.format(name=name, token=token)
    aside = output / _ASIDE.format(name=name)
    target = output / name
    try:
        if durable:
            for path in [*building.rglob("*"), building]:
                _flush(path)
        if target.exists():
            target.rename(aside)
        building.rename(target)
        if durable:
            _flush(output)
    except OSError as error:
        discard(output, name, token)
        raise OutputError(
            f"the finished folder cannot be put in place ({error.strerror})", where=str(target)
        ) from error
    finally:
        # Also when interrupted between the two renames.
        if aside.exists():
            _settle_aside(aside, target)
    return target


def discard(output: Path, name: str | None, token: str = "") -> None:
    """Remove what was built of a scene that will not be finished; without a name, what the token begins."""
    folders = [output / _BUILDING.format(name=name, token=token)]
    if name is None:
        folders = list(output.glob(_BUILDING.format(name="*", token=f"{token}*")))
    for folder in folders:
        shutil.rmtree(folder, ignore_errors=True)


def recover(output: Path) -> None:
    """Undo what a killed run left: an old folder aside is put back or removed, half-built ones removed.

    Call it only while the output folder is locked.

    Raises
    ------
    OutputError
        If a leftover cannot be moved or removed.
    """
    prefix, suffix = _ASIDE.split("{name}")
    try:
        with os.scandir(output) as entries:
            hidden = sorted(entry.name for entry in entries if entry.name.startswith("."))
        for name in hidden:
            if name.endswith(suffix):
                _settle_aside(output / name, output / name[len(prefix) : -len(suffix)])
            elif _BUILDING_NAME.match(name):
                shutil.rmtree(output / name)
    except OSError as error:
        raise OutputError(
            f"what an interrupted run left cannot be tidied up ({error.strerror})", where=str(output)
        ) from error


def _settle_aside(aside: Path, target: Path) -> None:
    """Remove the old folder aside where a new one is in place, else put it back."""
    if target.exists():
        shutil.rmtree(aside)
    else:
        aside.rename(target)


def free_bytes(output: Path) -> int:
    """Space left on the disk of the output folder."""
    return shutil.disk_usage(output).free


def _flush(path: Path) -> None:
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
