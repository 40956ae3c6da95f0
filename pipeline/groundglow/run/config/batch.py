"""The job file's tables for batches: which of many scenes are wanted, and how often a scene is tried."""

from __future__ import annotations

from datetime import UTC, date, datetime, time, timedelta
from typing import Annotated

from pydantic import Field, field_validator, model_validator

from groundglow.documents import Document

Longitude = Annotated[float, Field(ge=-180.0, le=180.0)]
Latitude = Annotated[float, Field(ge=-90.0, le=90.0)]


class Select(Document):
    """Which of the scenes named are wanted. A scene that does not say what is asked about passes."""

    since: datetime | date | None = Field(
        None, description="Acquired at or after this: a date (from 00:00 UTC) or a time with offset from UTC."
    )
    until: datetime | date | None = Field(
        None,
        description="Acquired at or before this: a date (to its end in UTC) or a time with offset from UTC.",
    )
    bbox: tuple[Longitude, Latitude, Longitude, Latitude] | None = Field(
        None, description="West, south, east, north. [deg] West above east crosses the antimeridian."
    )
    cloud_cover_below: float | None = Field(
        None, gt=0.0, le=100.0, description="Cloud cover as the provider states it. [%]"
    )

    @field_validator("since", "until", mode="before")
    @classmethod
    def _day(cls, value: object) -> object:
        # A day in quotes is the day, not its midnight.
        return (
            date.fromisoformat(value) if isinstance(value, str) and len(value) == len("2026-07-14") else value
        )

    @field_validator("since", "until")
    @classmethod
    def _has_an_offset(cls, value: datetime | date | None) -> datetime | date | None:
        if isinstance(value, datetime) and value.tzinfo is None:
            raise ValueError(
                f"needs its offset from UTC, for example 2026-07-14T10:32:00+02:00, found {value}"
            )
        return value

    @model_validator(mode="after")
    def _makes_sense(self) -> Select:
        first, last = self.span()
        if first is not None and last is not None and first >= last:
            raise ValueError(f"since ({self.since}) must be before until ({self.until})")
        if self.bbox is not None and self.bbox[1] >= self.bbox[3]:
            raise ValueError(
                f"bbox is west, south, east, north, and south ({self.bbox[1]}) is not below north"
            )
        return self

    def span(self) -> tuple[datetime | None, datetime | None]:
        """First moment wanted, and the first one after those wanted."""
        first = None if self.since is None else _moment(self.since)
        if self.until is None:
            return first, None
        step = timedelta(microseconds=1) if isinstance(self.until, datetime) else timedelta(days=1)
        return first, _moment(self.until) + step

    @property
    def wants_everything(self) -> bool:
        """Whether nothing is left out."""
        return self == Select()


class Retry(Document):
    """How reading errors that may pass (a network, a file being replaced) are met."""

    attempts: int = Field(2, ge=1, le=10, description="How often a scene is tried before it is given up.")
    delay: float = Field(
        1.0,
        ge=0.0,
        le=3600.0,
        description="Pause before the second attempt, doubled before each further one. [s]",
    )


def _moment(value: datetime | date) -> datetime:
    return value if isinstance(value, datetime) else datetime.combine(value, time(0), UTC)
