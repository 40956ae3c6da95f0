"""SIGINT and SIGTERM end a run, but never in the middle of a step that belongs together."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType
from typing import Any


class Interruption:
    """Turns both signals into ``KeyboardInterrupt``, put off while a step is under way."""

    def __init__(self) -> None:
        self._putting_off = False
        self._asked = False

    @contextmanager
    def heeded(self) -> Iterator[None]:
        """Heed the signals within; outside the main thread they are not ours to heed."""
        before: dict[signal.Signals, Any] = {}
        try:
            for number in (signal.SIGINT, signal.SIGTERM):
                before[number] = signal.signal(number, self._ask)
        except ValueError:
            # Signals belong to the main thread.
            before = {}
        try:
            yield
        finally:
            for number, handler in before.items():
                signal.signal(number, handler)

    @contextmanager
    def put_off(self) -> Iterator[None]:
        """Let what happens within happen as a whole.

        Raises
        ------
        KeyboardInterrupt
            Afterwards, if a signal came meanwhile.
        """
        if self._putting_off:
            yield
            return
        self._putting_off = True
        try:
            yield
        finally:
            self._putting_off = False
        if self._asked:
            self._asked = False
            raise KeyboardInterrupt

    def _ask(self, number: int, frame: FrameType | None) -> None:
        if not self._putting_off:
            raise KeyboardInterrupt
        self._asked = True
