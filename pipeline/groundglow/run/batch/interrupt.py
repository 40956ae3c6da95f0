"""Ending on request: SIGTERM is met like an interrupt from the keyboard, so that half-made outputs are removed."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType


@contextmanager
def terminable() -> Iterator[None]:
    """Let SIGTERM raise ``KeyboardInterrupt`` within; outside the main thread nothing changes.

    Workflow managers and schedulers end a job by SIGTERM before they kill it.
    """

    def interrupt(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    try:
        before = signal.signal(signal.SIGTERM, interrupt)
    except ValueError:
        # Only the main thread may handle signals.
        yield
        return
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)
