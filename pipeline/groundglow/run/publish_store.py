"""The output place that an address names."""

from __future__ import annotations

from pathlib import Path

from groundglow.errors import ConfigError
from groundglow.run.publish_place import LocalPlace, Place


def place_at(address: str) -> Place:
    """The output place at a path or address."""
    if "://" in address:
        raise ConfigError("this kind of address is not written to", where=address, remedy="Give a folder")
    return LocalPlace(Path(address))
