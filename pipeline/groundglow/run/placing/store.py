"""Results in an S3-compatible object store.

A store has no rename and no lock that ends with its holder. A scene is built in a folder of this
machine and uploaded object by object, each there whole or not at all; its Item goes up last and comes
down first, so that what a reader finds by its Item is always complete. The lock is an object that
its holder renews; one that was not renewed for minutes of the store's own clock is a dead holder's.
"""

from __future__ import annotations

import json
import os
import shutil
import tempfile
import threading
from collections.abc import Iterator, Mapping
from contextlib import AbstractContextManager, contextmanager, suppress
from pathlib import Path
from typing import Any
from uuid import uuid4

from groundglow.errors import BusyError, ConfigError, OutputError
from groundglow.run.access.store_client import is_store_address, store_client
from groundglow.run.access.store_client import store_errors as _store_errors
from groundglow.run.placing.place import LocalPlace, Place
from groundglow.run.placing.publish import LOG, REPORT, RUN_FOLDER, TABLE, holder, this_process
from groundglow.run.placing.state import Stamp, fault_of_outputs

_LOCK = f"{RUN_FOLDER}/lock"
_CLOCK = f"{RUN_FOLDER}/clock"
_RENEWED_EVERY = 60.0  # s
_DEAD_AFTER = 600.0  # s
# Two runs that both find a dead holder's lock must both have written before either looks again.
_SECOND_LOOK = 2.0  # s


def place_at(address: str) -> Place:
    """The output place at a path or address.

    Raises
    ------
    ConfigError
        If the address has a scheme that is not written to.
    """
    if is_store_address(address):
        return StorePlace(address)
    if "://" in address:
        raise ConfigError(
            "addresses of this kind are not written to",
            where=address,
            remedy="Give a folder or s3://bucket/prefix",
        )
    return LocalPlace(Path(address))


class StorePlace:
    """A prefix of a bucket.

    Parameters
    ----------
    address : str
        ``s3://bucket/prefix``.
    """

    put_by_maker = True

    def __init__(self, address: str) -> None:
        self._root = address.removeprefix("s3://").strip("/")
        self.address = f"s3://{self._root}"
        self._run_folder: str | None = None
        if not self._root:
            raise ConfigError("names no bucket", where=address, remedy="For example s3://bucket/prefix")

    @contextmanager
    def _held(self) -> Iterator[None]:
        client, path = store_client(), f"{self._root}/{_LOCK}"
        mine = json.dumps(json.loads(this_process()) | {"token": uuid4().hex}).encode()
        self._take(path, mine)
        ended = threading.Event()

        def renew() -> None:
            while not ended.wait(_RENEWED_EVERY):
                # A store out of reach for a minute is no reason to end; the next minute may reach it.
                with suppress(OutputError), _store_errors(self.address):
                    client.pipe_file(path, mine)

        renewer = threading.Thread(target=renew, name="lock", daemon=True)
        renewer.start()
        self._run_folder = tempfile.mkdtemp(prefix="groundglow-run-")
        try:
            yield
        finally:
            ended.set()
            renewer.join()
            try:
                self._upload_reports(Path(self._run_folder))
            finally:
                shutil.rmtree(self._run_folder, ignore_errors=True)
                self._run_folder = None
                with _store_errors(self.address):
                    if self._cat(path) == mine:
                        client.rm_file(path)

    def locked(self) -> AbstractContextManager[None]:
        """See :class:`Place`.

        Raises
        ------
        BusyError
            Another run holds the place.
        OutputError
            The store cannot be reached or written.
        """
        return self._held()

    def recover(self) -> None:
        """Nothing: what a killed run left has no Item, and the next upload replaces it."""

    def building(self, name: str, token: str) -> Path:
        """See :class:`Place`."""
        folder = self._staging(token) / name
        try:
            folder.mkdir(parents=True)
        except OSError as error:
            raise OutputError(f"the folder cannot be made ({error.strerror})", where=str(folder)) from error
        return folder

    def put(self, name: str, token: str, *, durable: bool) -> None:
        """Upload a scene, its Item last; a store's answer means that it is kept, whatever ``durable``."""
        client, target = store_client(), f"{self._root}/{name}"
        folder, item = self._staging(token) / name, f"{name}.json"
        files = sorted(path.name for path in folder.iterdir() if path.name != item)
        try:
            with _store_errors(self.folder(name)):
                before = [str(one).rpartition("/")[2] for one in self._listed(target)]
                if item in before:
                    client.rm_file(f"{target}/{item}")
                for file in files:
                    client.put_file(str(folder / file), f"{target}/{file}")
                for file in sorted(set(before) - {*files, item}):
                    client.rm_file(f"{target}/{file}")
                client.put_file(str(folder / item), f"{target}/{item}")
        finally:
            self.discard(name, token)

    def discard(self, name: str | None, token: str) -> None:
        """See :class:`Place`."""
        staging = self._staging(token)
        for folder in staging.parent.glob(f"{staging.name}*"):
            shutil.rmtree(folder, ignore_errors=True)

    def folder(self, name: str) -> str:
        """See :class:`Place`."""
        return f"{self.address}/{name}"

    def item(self, name: str) -> dict[str, Any] | None:
        """See :class:`Place`."""
        data = self.read(f"{name}/{name}.json")
        if data is None:
            return None
        try:
            found = json.loads(data)
        except ValueError:
            return None
        return found if isinstance(found, dict) else None

    def fault(self, name: str, item: Mapping[str, Any]) -> str | None:
        """See :class:`Place`."""
        with _store_errors(self.folder(name)):
            sizes = {
                f"./{path.rpartition('/')[2]}": size
                for path, size in self._listed(f"{self._root}/{name}").items()
            }
        return fault_of_outputs(item, sizes)

    def outputs(self, name: str) -> dict[str, Stamp | None]:
        """Empty: a store's objects have no stamps that a folder's files have."""
        return {}

    def names(self) -> list[str]:
        """See :class:`Place`."""
        with _store_errors(self.address):
            found = store_client().find(self._root, maxdepth=2)
        parts = [str(path).removeprefix(f"{self._root}/").split("/") for path in found]
        return sorted(pair[0] for pair in parts if len(pair) == 2 and pair[1] == f"{pair[0]}.json")

    def read(self, name: str) -> bytes | None:
        """See :class:`Place`."""
        with _store_errors(self.address):
            return self._cat(f"{self._root}/{name}")

    def write(self, name: str, data: bytes) -> None:
        """See :class:`Place`."""
        with _store_errors(self.address):
            store_client().pipe_file(f"{self._root}/{name}", data)

    def run_folder(self) -> Path | None:
        """A passing local folder while the place is locked; its reports are uploaded in the end."""
        return None if self._run_folder is None else Path(self._run_folder)

    def _take(self, path: str, mine: bytes) -> None:
        """Create the lock object, or take it over from a dead holder."""
        client = store_client()
        with _store_errors(self.address):
            if self._created(path, mine):
                return
            client.pipe_file(f"{self._root}/{_CLOCK}", b"")
            # Both times are the store's, so that no other clock matters.
            times = [self._changed(f"{self._root}/{_CLOCK}"), self._changed(path)]
            known = self._cat(path) or b""
            if None not in times and (times[0] - times[1]).total_seconds() < _DEAD_AFTER:
                raise BusyError(
                    f"the output place is in use by {holder(known.decode(errors='replace'))}",
                    where=self.address,
                    remedy="Wait until that run has ended, or write to another place",
                )
            client.rm_file(path)
            taken = self._created(path, mine)
            threading.Event().wait(_SECOND_LOOK)
            if not taken or self._cat(path) != mine:
                raise BusyError("another run has just taken the output place over", where=self.address)

    def _created(self, path: str, mine: bytes) -> bool:
        """Whether an object that was not there was made."""
        try:
            store_client().pipe_file(path, mine, mode="create")
        except FileExistsError:
            return False
        return True

    def _changed(self, path: str) -> Any:
        try:
            return store_client().info(path, refresh=True)["LastModified"]
        except FileNotFoundError:
            return None

    def _cat(self, path: str) -> bytes | None:
        try:
            return bytes(store_client().cat_file(path))
        except FileNotFoundError:
            return None

    def _listed(self, path: str) -> dict[str, int]:
        """Objects below a path and their sizes."""
        try:
            found = store_client().find(path, detail=True, refresh=True)
        except FileNotFoundError:
            return {}
        return {str(key): int(value["size"]) for key, value in found.items()}

    def _upload_reports(self, folder: Path) -> None:
        for name in (REPORT, TABLE, LOG):
            if (folder / name).is_file():
                self.write(f"{RUN_FOLDER}/{name}", (folder / name).read_bytes())

    def _staging(self, token: str) -> Path:
        return Path(tempfile.gettempdir()) / f"groundglow-{os.getuid()}-{token}"
