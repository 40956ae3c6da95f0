"""A layer that cannot be written is one clear message, and nothing is left behind."""

from __future__ import annotations

import errno
import os
import resource
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from groundglow.errors import OutputError
from groundglow.layers.encode import encode_block, format_of
from groundglow.layers.geotiff import LayerWriter
from groundglow.layers.tags import text_of
from layers.layer_cases import grid_of, temperature, write_layer


@contextmanager
def files_at_most(size: int) -> Iterator[None]:
    """The system refuses to let any file of this process grow beyond a size."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


@pytest.fixture(scope="module")
def size(tmp_path_factory: pytest.TempPathFactory) -> int:
    """Size of the layer that these tests write."""
    return write_layer(tmp_path_factory.mktemp("size") / "layer.tif", temperature(1100, 1100)).size


@pytest.mark.parametrize("share", [0.1, 0.9, 0.999])
def test_a_file_that_may_not_grow(tmp_path: Path, size: int, share: float) -> None:
    """The limit is met while spooling, near the end of it, and only in the final copy."""
    message = r"layer\.tif: cannot be written: File too large"
    with files_at_most(int(size * share)), pytest.raises(OutputError, match=message):
        write_layer(tmp_path / "layer.tif", temperature(1100, 1100), size=512)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("failing_call", [0, 1, 2])
def test_a_full_disk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, failing_call: int) -> None:
    """What the system says when a disk is full (ENOSPC) becomes a remedy, in the final copy too."""
    opened = Path.open
    calls = iter(range(10))

    class FullDisk:
        def __init__(self, file: Any) -> None:
            self.file = file

        def __enter__(self) -> FullDisk:
            return self

        def __exit__(self, *exception: object) -> None:
            self.file.close()

        def write(self, data: bytes) -> int:
            if next(calls) >= failing_call:
                raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
            return int(self.file.write(data))

    monkeypatch.setattr(Path, "open", lambda path, *rest, **named: FullDisk(opened(path, *rest, **named)))
    with pytest.raises(OutputError, match=r"No space left on device\. Free some space") as caught:
        write_layer(tmp_path / "layer.tif", temperature(1100, 1100))
    assert caught.value.where == str(tmp_path / "layer.tif")
    assert list(tmp_path.iterdir()) == []


def test_a_failed_layer_leaves_the_one_before_it(tmp_path: Path, size: int) -> None:
    path = tmp_path / "layer.tif"
    before = write_layer(path, temperature(1100, 1100, seed=1)).sha256
    with files_at_most(size // 2), pytest.raises(OutputError):
        write_layer(path, temperature(1100, 1100, seed=2))
    assert write_layer(tmp_path / "again.tif", temperature(1100, 1100, seed=1)).sha256 == before
    assert path.read_bytes() == (tmp_path / "again.tif").read_bytes()


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"No such file or directory\. Create the folder first"):
        write_layer(tmp_path / "absent" / "layer.tif", temperature(10, 10))


def test_a_file_in_place_of_the_folder(tmp_path: Path) -> None:
    (tmp_path / "folder").write_text("not a folder")
    with pytest.raises(OutputError, match="Not a directory"):
        write_layer(tmp_path / "folder" / "layer.tif", temperature(10, 10))


def test_a_folder_in_place_of_the_file(tmp_path: Path) -> None:
    (tmp_path / "layer.tif").mkdir()
    with pytest.raises(OutputError, match="Is a directory"):
        write_layer(tmp_path / "layer.tif", temperature(10, 10))
    assert [path.name for path in tmp_path.iterdir()] == ["layer.tif"]


@pytest.mark.parametrize(
    ("number", "remedy"),
    [(errno.EACCES, "the right to write"), (errno.EROFS, "read-only"), (errno.EDQUOT, "quota")],
)
def test_refusals_of_the_system_name_a_remedy(
    number: int, remedy: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(*_: object, **__: object) -> None:
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr("groundglow.layers.geotiff.tempfile.TemporaryFile", refuse)
    with pytest.raises(OutputError, match=remedy):
        write_layer(tmp_path / "layer.tif", temperature(10, 10))


def test_nothing_shows_before_the_end(tmp_path: Path) -> None:
    grid, layer_format = grid_of(600, 600), format_of("surface_temperature")
    writer = LayerWriter(tmp_path / "layer.tif", grid, layer_format, text_of("surface_temperature"))
    for block in grid.blocks(512):
        writer.add(encode_block(np.zeros((block.height, block.width), np.float32), block, grid, layer_format))
        assert list(tmp_path.iterdir()) == []
    writer.abandon()
    writer.abandon()
    assert list(tmp_path.iterdir()) == []


def test_what_a_killed_run_left_is_overwritten(tmp_path: Path) -> None:
    (tmp_path / ".layer.tif.part").write_bytes(b"half a layer" * 1_000_000)
    summary = write_layer(tmp_path / "layer.tif", temperature(600, 600))
    assert [path.name for path in tmp_path.iterdir()] == ["layer.tif"]
    assert summary.path.stat().st_size == summary.size


def test_durable_writing_gives_the_same_bytes(tmp_path: Path) -> None:
    pixels = temperature(600, 600)
    durable = write_layer(tmp_path / "durable.tif", pixels, durable=True)
    assert durable.sha256 == write_layer(tmp_path / "layer.tif", pixels).sha256


def test_permissions_are_those_of_any_new_file(tmp_path: Path) -> None:
    (tmp_path / "plain").touch()
    summary = write_layer(tmp_path / "layer.tif", temperature(10, 10))
    assert summary.path.stat().st_mode == (tmp_path / "plain").stat().st_mode
