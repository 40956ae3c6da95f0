"""Where results go, seen from the batch: a folder of this machine, or of a store (see ``publish_store``)."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from contextlib import AbstractContextManager
from pathlib import Path
from typing import Any, Protocol

from groundglow.errors import OutputError
from groundglow.layers.files import write_whole
from groundglow.run.placing import publish
from groundglow.run.placing.state import Stamp, fault_of_outputs, stamps


class Place(Protocol):
    """An output place. Picklable, so that the workers of a cluster can use it."""

    address: str
    # Whether the maker of a scene also puts it in place; else the one run that holds the lock does.
    put_by_maker: bool

    def locked(self) -> AbstractContextManager[None]:
        """Hold the place for this run."""

    def recover(self) -> None:
        """Tidy up what a killed run left."""

    def building(self, name: str, token: str) -> Path:
        """A fresh local folder in which a scene is built."""

    def put(self, name: str, token: str, *, durable: bool) -> None:
        """Make the built scene the one that readers find."""

    def discard(self, name: str | None, token: str) -> None:
        """Remove what was built of a scene; without a name, what bears the token."""

    def folder(self, name: str) -> str:
        """Where readers find a scene."""

    def item(self, name: str) -> dict[str, Any] | None:
        """The Item of a complete scene."""

    def fault(self, name: str, item: Mapping[str, Any]) -> str | None:
        """What is wrong with the files that the Item lists."""

    def outputs(self, name: str) -> dict[str, Stamp | None]:
        """Stamps of the files of a scene; empty where there are none."""

    def names(self) -> list[str]:
        """The complete scenes, sorted."""

    def read(self, name: str) -> bytes | None:
        """A file at the top of the place."""

    def write(self, name: str, data: bytes) -> None:
        """Replace a file at the top of the place, whole or not at all."""

    def run_folder(self) -> Path | None:
        """Local folder for the run's own files."""


class LocalPlace:
    """A folder of this machine or of a shared file system.

    Parameters
    ----------
    output : Path
    """

    put_by_maker = False

    def __init__(self, output: Path) -> None:
        self.output = output
        self.address = str(output)

    def locked(self) -> AbstractContextManager[None]:
        """See :class:`Place`."""
        return publish.locked(self.output)

    def recover(self) -> None:
        """See :class:`Place`."""
        publish.recover(self.output)

    def building(self, name: str, token: str) -> Path:
        """See :class:`Place`."""
        return publish.building_folder(self.output, name, token)

    def put(self, name: str, token: str, *, durable: bool) -> None:
        """See :class:`Place`."""
        publish.publish(self.output, name, token, durable=durable)

    def discard(self, name: str | None, token: str) -> None:
        """See :class:`Place`."""
        publish.discard(self.output, name, token)

    def folder(self, name: str) -> str:
        """See :class:`Place`."""
        return str(self.output / name)

    def item(self, name: str) -> dict[str, Any] | None:
        """See :class:`Place`."""
        return read_json(self.output / name / f"{name}.json")

    def fault(self, name: str, item: Mapping[str, Any]) -> str | None:
        """See :class:`Place`."""
        hrefs = [asset["href"] for asset in item.get("assets", {}).values()]
        found = stamps(self.output / name / href for href in hrefs)
        sizes = {href: one[0] if one else None for href, one in zip(hrefs, found.values(), strict=True)}
        return fault_of_outputs(item, sizes)

    def outputs(self, name: str) -> dict[str, Stamp | None]:
        """See :class:`Place`."""
        folder = self.output / name
        return stamps(sorted(folder.iterdir())) if folder.is_dir() else {}

    def names(self) -> list[str]:
        """See :class:`Place`."""
        try:
            with os.scandir(self.output) as entries:
                folders = [
                    entry.name for entry in entries if not entry.name.startswith(".") and entry.is_dir()
                ]
        except FileNotFoundError:
            return []
        except OSError as error:
            raise OutputError(f"the folder cannot be read ({error.strerror})", where=self.address) from error
        return sorted(name for name in folders if (self.output / name / f"{name}.json").is_file())

    def read(self, name: str) -> bytes | None:
        """See :class:`Place`."""
        try:
            return (self.output / name).read_bytes()
        except FileNotFoundError:
            return None
        except OSError as error:
            raise OutputError(f"cannot be read ({error.strerror})", where=str(self.output / name)) from error

    def write(self, name: str, data: bytes) -> None:
        """See :class:`Place`."""
        write_whole(self.output / name, data)

    def run_folder(self) -> Path | None:
        """See :class:`Place`."""
        return self.output / publish.RUN_FOLDER


def read_json(path: Path) -> dict[str, Any] | None:
    """A JSON object; None where the file is missing, cut short or something else."""
    try:
        value = json.loads(path.read_bytes())
    except (OSError, ValueError):
        return None
    return value if isinstance(value, dict) else None
