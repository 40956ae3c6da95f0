"""What a run leaves for people and log collectors: a report in JSON, the same as a table, and a log of events.

All in the run folder; those of the runs before move to ``earlier`` with a running number (a clock may
go back), and only the latest are kept.
"""

from __future__ import annotations

import contextlib
import json
import os
import re
import socket
import threading
from collections.abc import Mapping, Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import IO, Any

from groundglow import __version__
from groundglow.errors import OutputError
from groundglow.layers.files import output_errors, write_whole
from groundglow.run.batch.table import outcome_table
from groundglow.run.making.outcome import SceneOutcome
from groundglow.run.placing.publish import LOG, REPORT, TABLE

EARLIER = "earlier"
_KEPT = 30


class EventLog:
    """One JSON object a line, one line a step, written at once.

    Parameters
    ----------
    folder : Path or None
        The run folder; None keeps no log.
    """

    def __init__(self, folder: Path | None) -> None:
        self._lock = threading.Lock()
        self._stream: IO[str] | None = None
        if folder is not None:
            with output_errors(folder / LOG):
                self._stream = (folder / LOG).open("a", encoding="utf-8")

    def tell(self, event: str, *, at: float | None = None, **more: object) -> None:
        """Note an event.

        Parameters
        ----------
        event : str
        at : float, optional
            When it was, in seconds since 1970; default: now.
        more
            Anything JSON can hold.
        """
        if self._stream is None:
            return
        moment = datetime.now(UTC) if at is None else datetime.fromtimestamp(at, UTC)
        line = json.dumps({"time": moment.isoformat(timespec="milliseconds"), "event": event, **more})
        # A full disk must not end a run that could still finish scenes elsewhere; the report tells it.
        with self._lock, contextlib.suppress(OSError):
            self._stream.write(line + "\n")
            self._stream.flush()

    def close(self) -> None:
        """Close the file."""
        if self._stream is not None:
            with contextlib.suppress(OSError):
                self._stream.close()


def begin_folder(folder: Path) -> None:
    """Move what the last run left to the earlier ones, and drop the oldest of those.

    Raises
    ------
    OutputError
        If the run folder cannot be written.
    """
    earlier = folder / EARLIER
    with output_errors(folder):
        if not any((folder / name).exists() for name in (REPORT, TABLE, LOG)):
            return
        earlier.mkdir(exist_ok=True)
        numbers = {int(found[1]) for path in earlier.iterdir() if (found := re.match(r"(\d+)\.", path.name))}
        number = max(numbers, default=0) + 1
        for name in (REPORT, TABLE, LOG):
            if (folder / name).exists():
                (folder / name).replace(earlier / f"{number:06d}.{name}")
        for path in earlier.iterdir():
            found = re.match(r"(\d+)\.", path.name)
            if found and int(found[1]) <= number - _KEPT:
                path.unlink()


def run_summary(
    outcomes: Sequence[SceneOutcome], output: str, seconds: float, *, ended: str, workers: int
) -> dict[str, Any]:
    """A run in plain values."""
    counts: dict[str, int] = {}
    for outcome in outcomes:
        counts[outcome.status] = counts.get(outcome.status, 0) + 1
    return {
        "groundglow": __version__,
        "output": output,
        "host": socket.gethostname(),
        "process": os.getpid(),
        "finished": datetime.now(UTC).isoformat(timespec="seconds"),
        "ended": ended,
        "seconds": round(seconds, 3),
        "counts": counts,
        "measured": measured(outcomes, seconds, workers),
        "scenes": [outcome.as_json() for outcome in outcomes],
    }


def measured(outcomes: Sequence[SceneOutcome], seconds: float, workers: int) -> dict[str, float] | None:
    """What this run tells about the time the next one needs; None where it made nothing.

    Returns
    -------
    mapping or None
        ``worker_seconds_per_megapixel``, and ``seconds_per_scene`` that do not depend on its size.
    """
    made = [outcome for outcome in outcomes if outcome.status in ("done", "nothing valid")]
    pixels = sum(outcome.pixels for outcome in made)
    if not made or pixels == 0:
        return None
    return {
        "megapixels": round(pixels / 1e6, 3),
        "worker_seconds_per_megapixel": round(seconds * workers / (pixels / 1e6), 4),
    }


def write_report(folder: Path, summary: Mapping[str, Any], outcomes: Sequence[SceneOutcome]) -> None:
    """Write the report and its table.

    Raises
    ------
    OutputError
        If they cannot be written.
    """
    table = outcome_table(outcomes, float(summary["seconds"])) if outcomes else "no scenes"
    write_whole(folder / REPORT, (json.dumps(summary, indent=1) + "\n").encode())
    write_whole(folder / TABLE, (table + "\n").encode())


def last_measured(folder: Path | None) -> float | None:
    """Worker seconds per megapixel of the last run that made something; None without one."""
    if folder is None:
        return None
    try:
        earlier = sorted((folder / EARLIER).glob(f"*.{REPORT}"), reverse=True)
        for path in [folder / REPORT, *earlier[:5]]:
            with contextlib.suppress(FileNotFoundError, ValueError, KeyError, TypeError):
                return float(json.loads(path.read_bytes())["measured"]["worker_seconds_per_megapixel"])
    except OSError as error:
        raise OutputError(f"the reports cannot be read ({error.strerror})", where=str(folder)) from error
    return None
