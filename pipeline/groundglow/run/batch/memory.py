"""What was seen at the last look, so that a batch of finished scenes costs a few file statuses each.

A small database in the run folder. It is a shortcut, never the truth: lost or damaged, it is begun
anew and the outputs' Items are read instead.
"""

from __future__ import annotations

import contextlib
import json
import os
import sqlite3
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from urllib.parse import quote

from groundglow.raster.open import is_local
from groundglow.run.placing.state import Stamp, settled, stamp

_TABLE = "CREATE TABLE IF NOT EXISTS seen (address TEXT PRIMARY KEY, record TEXT NOT NULL) WITHOUT ROWID"


@dataclass(frozen=True)
class Seen:
    """What was found when a scene was made or found up to date.

    Attributes
    ----------
    name : str
        Of the scene.
    job : str
        Digest of the job.
    inputs : mapping of str to Stamp
        Every file that describes the scene or was read, by path.
    outputs : mapping of str to Stamp
        Every file in the scene's folder, by path.
    pixels : int
        Of the scene's grid.
    """

    name: str
    job: str
    inputs: Mapping[str, Stamp | None]
    outputs: Mapping[str, Stamp | None]
    pixels: int = 0

    def still_true(self, job: str) -> bool:
        """Whether no file has changed since, under the same job."""
        if self.job != job:
            return False
        return all(
            known is not None and stamp(path) == tuple(known)
            for found in (self.inputs, self.outputs)
            for path, known in found.items()
        )


class Memory:
    """Remembered looks by the address of the scene.

    Parameters
    ----------
    path : Path or None
        The database; None remembers nothing.
    read_only : bool
        For a plan, which writes nothing.
    """

    def __init__(self, path: Path | None, *, read_only: bool = False) -> None:
        self._read_only = read_only
        self._base: sqlite3.Connection | None = None
        if path is None or (read_only and not path.exists()):
            return
        self._base = _opened(path, read_only=read_only)

    def recall(self, address: str) -> Seen | None:
        """What is known of a scene."""
        if self._base is None:
            return None
        try:
            row = self._base.execute("SELECT record FROM seen WHERE address = ?", (_key(address),)).fetchone()
            return None if row is None else Seen(**json.loads(row[0]))
        except (sqlite3.Error, ValueError, TypeError):
            # A damaged shortcut is no shortcut; the Item will be read.
            return None

    def keep(self, address: str, seen: Seen) -> None:
        """Remember a look, unless a file changed so lately that its stamp proves nothing."""
        if self._base is None or self._read_only or not seen.outputs or not settled(seen.inputs):
            return
        with contextlib.suppress(sqlite3.Error):
            self._base.execute("REPLACE INTO seen VALUES (?, ?)", (_key(address), json.dumps(asdict(seen))))
            self._base.commit()

    def close(self) -> None:
        """Close the database."""
        if self._base is not None:
            self._base.close()


def _key(address: str) -> str:
    """The same from any folder."""
    return os.path.abspath(address) if is_local(address) else address  # noqa: PTH100  (links stay as they are)


def _opened(path: Path, *, read_only: bool) -> sqlite3.Connection | None:
    """The database, begun anew where it is damaged; None where it cannot be had."""
    for _ in range(2):
        base = None
        try:
            base = sqlite3.connect(
                f"file:{quote(str(path))}?mode=ro" if read_only else path, uri=read_only, timeout=5.0
            )
            if not read_only:
                base.execute("PRAGMA synchronous = OFF")
                base.execute(_TABLE)
            base.execute("SELECT count(*) FROM (SELECT 1 FROM seen LIMIT 1)").fetchone()
            return base
        except sqlite3.Error:
            if base is not None:
                base.close()
            if read_only:
                return None
            with contextlib.suppress(OSError):
                path.unlink()
    return None
