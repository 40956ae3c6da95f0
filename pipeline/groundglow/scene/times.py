"""Times of acquisition: with their offset from UTC, and within the age of thermal imaging."""

from __future__ import annotations

from datetime import UTC, datetime

EARLIEST = datetime(1960, 1, 1, tzinfo=UTC)
LATEST = datetime(2100, 1, 1, tzinfo=UTC)


def checked_time(value: object) -> datetime:
    """A time that says its offset from UTC and lies within the age of thermal imaging.

    Raises
    ------
    ValueError
        Saying what is needed.
    """
    example = "for example 2026-07-14T10:32:00+02:00"
    if not isinstance(value, datetime):
        raise ValueError(f"must be a date and time, {example}, found {value!s}")
    if value.tzinfo is None:
        raise ValueError(f"needs its offset from UTC, {example}, found {value.isoformat()}")
    if not EARLIEST <= value < LATEST:
        raise ValueError(f"must lie between {EARLIEST.year} and {LATEST.year}, found {value.isoformat()}")
    return value
