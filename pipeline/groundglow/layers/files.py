"""Files that are there whole or not at all, and what the system says when they cannot be."""

from __future__ import annotations

import contextlib
import errno
import os
from collections.abc import Iterator
from pathlib import Path

from groundglow.errors import OutputError

_REMEDIES = {
    errno.ENOSPC: "Free some space (twice the layers' size is needed in passing) or choose another folder",
    errno.EDQUOT: "The quota is used up: free some space or choose another folder",
    errno.EFBIG: "The system limits the size of files here: raise the limit or choose another folder",
    errno.EACCES: "Give the user that runs this the right to write there, or choose another folder",
    errno.EPERM: "Give the user that runs this the right to write there, or choose another folder",
    errno.EROFS: "The file system is read-only: choose another folder",
    errno.ENOENT: "Create the folder first",
}


@contextlib.contextmanager
def output_errors(path: Path) -> Iterator[None]:
    """Turn what the operating system says about writing into an error for the user.

    Raises
    ------
    OutputError
        In place of any ``OSError``.
    """
    try:
        yield
    except OSError as error:
        reason = os.strerror(error.errno) if error.errno else str(error)
        raise OutputError(
            f"cannot be written: {reason}", where=str(path), remedy=_REMEDIES.get(error.errno or 0)
        ) from error


def part_of(path: Path) -> Path:
    """Where a file is written before it gets its own name.

    It is always the same, so that the next run overwrites what a killed one left there.
    """
    return path.with_name(f".{path.name}.part")


def write_whole(path: Path, data: bytes, *, durable: bool = False) -> None:
    """Write a file so that it is there whole or not at all.

    Parameters
    ----------
    path : Path
        Replaced if it exists.
    data : bytes
        All of it.
    durable : bool
        Whether to wait until it has reached the disk.

    Raises
    ------
    OutputError
        If it cannot be written; nothing is left behind then.
    """
    part = part_of(path)
    try:
        with output_errors(path):
            with part.open("wb") as file:
                file.write(data)
                if durable:
                    file.flush()
                    os.fsync(file.fileno())
            part.replace(path)
            if durable:
                flush_folder(path.parent)
    except OutputError:
        with contextlib.suppress(OSError):
            part.unlink(missing_ok=True)
        raise


def flush_folder(folder: Path) -> None:
    """Make a rename within a folder outlast a loss of power, where the system can open folders."""
    if hasattr(os, "O_DIRECTORY"):
        handle = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)
