"""Progress of a run: a bar with rate and time left on a terminal, plain lines elsewhere."""

from __future__ import annotations

import sys
import time
from typing import Protocol, TextIO


class Progress(Protocol):
    """Told how far the blocks of a scene are."""

    def start(self, name: str, pixels: int) -> None:
        """A scene begins."""

    def advance(self, pixels: int) -> None:
        """A block of that many pixels is done."""

    def end(self) -> None:
        """The scene has ended, well or not."""


class Quiet:
    """Says nothing."""

    def start(self, name: str, pixels: int) -> None:
        """Nothing."""

    def advance(self, pixels: int) -> None:
        """Nothing."""

    def end(self) -> None:
        """Nothing."""


class Lines:
    """A plain line at most every few seconds, for logs.

    Parameters
    ----------
    stream : text stream
    every : float
        Seconds between lines.
    """

    def __init__(self, stream: TextIO = sys.stderr, every: float = 5.0) -> None:
        self._stream = stream
        self._every = every

    def start(self, name: str, pixels: int) -> None:
        """Note the beginning."""
        self._name, self._total, self._done = name, pixels, 0
        self._began = self._told = time.monotonic()

    def advance(self, pixels: int) -> None:
        """Say how far it is, now and then."""
        self._done += pixels
        now = time.monotonic()
        if now - self._told < self._every:
            return
        self._told = now
        rate = self._done / (now - self._began)
        left = (self._total - self._done) / rate
        share = 100.0 * self._done / self._total
        text = f"{self._name}: {share:.0f} %, {rate / 1e6:.1f} million pixels a second, {left:.0f} s left"
        print(text, file=self._stream, flush=True)

    def end(self) -> None:
        """Nothing: the table says the rest."""


class Bar:
    """A bar on a terminal, with rate and time left."""

    def __init__(self) -> None:
        from rich.console import Console  # noqa: PLC0415  (0.1 s of import, wanted on a terminal only)
        from rich.progress import BarColumn, TextColumn, TimeRemainingColumn  # noqa: PLC0415
        from rich.progress import Progress as RichProgress  # noqa: PLC0415

        self._columns = (
            TextColumn("{task.description}"),
            BarColumn(),
            TextColumn("{task.percentage:>3.0f} %"),
            TextColumn("{task.fields[rate]}"),
            TimeRemainingColumn(),
        )
        self._make = RichProgress
        self._console = Console(stderr=True)

    def start(self, name: str, pixels: int) -> None:
        """Show the bar."""
        self._bar = self._make(*self._columns, console=self._console, transient=True)
        self._task = self._bar.add_task(name, total=pixels, rate="")
        self._began = time.monotonic()
        self._done = 0
        self._bar.start()

    def advance(self, pixels: int) -> None:
        """Move it."""
        self._done += pixels
        rate = self._done / max(time.monotonic() - self._began, 1e-3) / 1e6
        self._bar.update(self._task, advance=pixels, rate=f"{rate:.1f} million pixels a second")

    def end(self) -> None:
        """Take it away."""
        self._bar.stop()


def progress_for(*, quiet: bool) -> Progress:
    """The fitting way for standard error as it is."""
    if quiet:
        return Quiet()
    return Bar() if sys.stderr.isatty() else Lines()
