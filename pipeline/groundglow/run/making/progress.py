"""Progress of a run: bars with rate and time left on a terminal, plain lines elsewhere.

Several scenes may be under way at once, and their blocks come from several threads.
"""

from __future__ import annotations

import sys
import threading
import time
from dataclasses import dataclass, field
from typing import Any, Protocol, TextIO


class Progress(Protocol):
    """Told how far the blocks of each scene are."""

    def start(self, name: str, pixels: int) -> None:
        """A scene begins."""

    def advance(self, name: str, pixels: int) -> None:
        """A block of that many pixels of the scene is done."""

    def end(self, name: str) -> None:
        """The scene has ended, well or not."""

    def close(self) -> None:
        """The run has ended."""


class Quiet:
    """Says nothing."""

    def start(self, name: str, pixels: int) -> None:
        """Nothing."""

    def advance(self, name: str, pixels: int) -> None:
        """Nothing."""

    def end(self, name: str) -> None:
        """Nothing."""

    def close(self) -> None:
        """Nothing."""


@dataclass
class _Count:
    total: int
    done: int = 0
    began: float = field(default_factory=time.monotonic)

    @property
    def rate(self) -> float:
        """Pixels a second."""
        return self.done / max(time.monotonic() - self.began, 1e-3)


class Lines:
    """A plain line at most every few seconds, for logs.

    Parameters
    ----------
    stream : text stream
    every : float
        Seconds between lines.
    """

    def __init__(self, stream: TextIO | None = None, every: float = 5.0) -> None:
        self._stream = stream or sys.stderr
        self._every = every
        self._scenes: dict[str, _Count] = {}
        self._ended = 0
        self._lock = threading.Lock()
        self._told = time.monotonic()

    def start(self, name: str, pixels: int) -> None:
        """Note the beginning."""
        with self._lock:
            self._scenes[name] = _Count(pixels)

    def advance(self, name: str, pixels: int) -> None:
        """Say how far it is, now and then."""
        with self._lock:
            scene = self._scenes[name]
            scene.done += pixels
            now = time.monotonic()
            if now - self._told < self._every:
                return
            self._told = now
            left = (scene.total - scene.done) / scene.rate
            text = (
                f"{name}: {100.0 * scene.done / scene.total:.0f} %, {scene.rate / 1e6:.1f} million pixels a second, "
                f"{left:.0f} s left"
            )
            before = f" ({self._ended} scenes before)" if self._ended else ""
            print(text + before, file=self._stream, flush=True)

    def end(self, name: str) -> None:
        """Count it; the table says the rest."""
        with self._lock:
            self._ended += self._scenes.pop(name, None) is not None

    def close(self) -> None:
        """Nothing: the table says the rest."""


class Bar:
    """A bar for each scene under way, with rate and time left."""

    def __init__(self) -> None:
        from rich.console import Console  # noqa: PLC0415  (0.1 s of import, wanted on a terminal only)
        from rich.progress import BarColumn, TextColumn, TimeRemainingColumn  # noqa: PLC0415
        from rich.progress import Progress as RichProgress  # noqa: PLC0415

        columns = (
            TextColumn("{task.description}"),
            BarColumn(),
            TextColumn("{task.percentage:>3.0f} %"),
            TextColumn("{task.fields[rate]}"),
            TimeRemainingColumn(),
        )
        self._bars = RichProgress(*columns, console=Console(stderr=True), transient=True)
        self._scenes: dict[str, tuple[Any, _Count]] = {}
        self._lock = threading.Lock()
        self._bars.start()

    def start(self, name: str, pixels: int) -> None:
        """Show the bar."""
        with self._lock:
            self._scenes[name] = (self._bars.add_task(name, total=pixels, rate=""), _Count(pixels))

    def advance(self, name: str, pixels: int) -> None:
        """Move it."""
        with self._lock:
            task, scene = self._scenes[name]
            scene.done += pixels
            self._bars.update(task, advance=pixels, rate=f"{scene.rate / 1e6:.1f} million pixels a second")

    def end(self, name: str) -> None:
        """Take it away."""
        with self._lock:
            if name in self._scenes:
                self._bars.remove_task(self._scenes.pop(name)[0])

    def close(self) -> None:
        """Leave the terminal as it was."""
        self._bars.stop()


def progress_for(*, quiet: bool) -> Progress:
    """The fitting way for standard error as it is."""
    if quiet:
        return Quiet()
    return Bar() if sys.stderr.isatty() else Lines()
