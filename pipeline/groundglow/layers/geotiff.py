"""Writes one layer as a cloud-optimised GeoTIFF in a single pass over its pixels.

Blocks come encoded and in any order. Their tiles wait in a spool file beside the target that has
no name; when all are there, the header is computed from their sizes and the tiles are copied
behind it in their final order. The file bears its own name only when it is complete.
"""

from __future__ import annotations

import contextlib
import hashlib
import os
import struct
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import IO

from groundglow.errors import DomainError
from groundglow.layers.encode import EncodedBlock
from groundglow.layers.files import flush_folder, output_errors, part_of
from groundglow.layers.layer_format import LayerFormat
from groundglow.layers.pyramid import Pyramid, TileEncoder, level_shapes, tile_counts
from groundglow.layers.statistics import LayerStatistics, StatisticsCollector
from groundglow.layers.tags import LayerText, describing_tags
from groundglow.layers.tiff_structure import FOUR_GIGABYTES, Level, file_header
from groundglow.raster.grid import Grid


@dataclass(frozen=True)
class LayerSummary:
    """One finished layer.

    Attributes
    ----------
    name : str
        Name of the layer.
    path : Path
        Where it is.
    size : int
        [byte]
    sha256 : str
        Of the whole file, in hexadecimal.
    statistics : LayerStatistics
        Of the stored full-resolution values.
    layer_format : LayerFormat
        How it is stored.
    text : LayerText
        Description, unit and metadata it carries.
    """

    name: str
    path: Path
    size: int
    sha256: str
    statistics: LayerStatistics
    layer_format: LayerFormat
    text: LayerText


class LayerWriter:
    """Collects the encoded blocks of one layer and writes the file.

    Use it from one thread at a time. Leaving it as a context manager without having called
    :meth:`finish` abandons the layer.

    Parameters
    ----------
    path : Path
        The file to write; replaced if it exists. Its folder must exist.
    grid : Grid
        Grid of the layer.
    layer_format : LayerFormat
        The format its blocks were encoded with.
    text : LayerText
        Description, unit and metadata.
    bigtiff_above : int
        Size from which on the file is a BigTIFF. [byte]
    durable : bool
        Whether to wait until the file has reached the disk, against loss of power.

    Raises
    ------
    OutputError
        If nothing can be written beside ``path``; so do :meth:`add` and :meth:`finish`.
    """

    def __init__(
        self,
        path: Path,
        grid: Grid,
        layer_format: LayerFormat,
        text: LayerText,
        *,
        bigtiff_above: int = FOUR_GIGABYTES,
        durable: bool = False,
    ) -> None:
        self.path = path
        self.grid = grid
        self.layer_format = layer_format
        self.text = text
        self._bigtiff_above = bigtiff_above
        self._durable = durable
        self._shapes = level_shapes(*grid.shape)
        self._pyramid = Pyramid(grid.shape, TileEncoder(layer_format))
        self._statistics = StatisticsCollector(grid.height * grid.width, layer_format.flags)
        self._places: dict[tuple[int, int, int], tuple[int, int]] = {}
        self._end = 0
        self._part: Path | None = None
        with output_errors(path):
            self._spool: IO[bytes] = tempfile.TemporaryFile(dir=path.parent, prefix=f".{path.name}.")  # noqa: SIM115 (closed by abandon)

    def __enter__(self) -> LayerWriter:
        return self

    def __exit__(self, *exception: object) -> None:
        self.abandon()

    def add(self, encoded: EncodedBlock) -> None:
        """Take in one block. A block that came before is passed over.

        Parameters
        ----------
        encoded : EncodedBlock
            From ``encode_block`` with the grid and format of this writer.
        """
        first = encoded.tiles[0]
        if (first.level, first.row, first.column) in self._places:
            return
        self._statistics.add(encoded.statistics)
        for part in encoded.parts:
            self._pyramid.take_part(part)
        tiles = [*encoded.tiles, *self._pyramid.tiles]
        self._pyramid.tiles.clear()
        for tile in tiles:
            self._places[tile.level, tile.row, tile.column] = (self._end, len(tile.data))
            self._end += len(tile.data)
        with output_errors(self.path):
            self._spool.writelines(tile.data for tile in tiles)

    def finish(self) -> LayerSummary:
        """Write the file under its own name.

        Returns
        -------
        LayerSummary

        Raises
        ------
        DomainError
            If blocks are missing.
        OutputError
            If the file cannot be written; nothing is left behind then.
        """
        levels = self._levels()
        statistics = self._statistics.result()
        described = describing_tags(self.grid, self.layer_format, self.text, statistics)
        header = file_header(levels, self.layer_format, described, bigtiff_above=self._bigtiff_above)
        self._part = part_of(self.path)
        try:
            with output_errors(self.path):
                size, checksum = self._write(self._part, header)
                self._part.replace(self.path)
                self._part = None
                if self._durable:
                    flush_folder(self.path.parent)
        finally:
            self.abandon()
        return LayerSummary(
            self.layer_format.name, self.path, size, checksum, statistics, self.layer_format, self.text
        )

    def abandon(self) -> None:
        """Give up the layer and leave nothing behind. Harmless after :meth:`finish`."""
        # Closing writes what is still buffered, which fails again on a full disk; it is not wanted any more.
        with contextlib.suppress(OSError):
            self._spool.close()
        if self._part is not None:
            with contextlib.suppress(OSError):
                self._part.unlink(missing_ok=True)
            self._part = None

    def _levels(self) -> list[Level]:
        """Shapes and tile sizes of all levels, row by row."""
        levels = []
        for level, (height, width) in enumerate(self._shapes):
            keys = list(self._keys(level))
            missing = sum(key not in self._places for key in keys)
            if missing:
                raise DomainError(
                    f"{missing} of {len(keys)} tiles are missing at level {level}",
                    where=self.layer_format.name,
                )
            levels.append(Level(height, width, [self._places[key][1] for key in keys]))
        return levels

    def _keys(self, level: int) -> Iterator[tuple[int, int, int]]:
        """The tiles of a level, row by row."""
        rows, columns = tile_counts(self._shapes[level])
        return ((level, row, column) for row in range(rows) for column in range(columns))

    def _write(self, part: Path, header: bytes) -> tuple[int, str]:
        """Write header and tiles; give the size and the SHA-256 of the file."""
        digest = hashlib.sha256(header)
        size = len(header)
        with part.open("wb", buffering=1 << 20) as target:
            target.write(header)
            for level in reversed(range(len(self._shapes))):
                for key in self._keys(level):
                    start, length = self._places[key]
                    self._spool.seek(start)
                    data = self._spool.read(length)
                    piece = b"".join((struct.pack("<I", length), data, data[-4:]))
                    digest.update(piece)
                    target.write(piece)
                    size += len(piece)
            if self._durable:
                target.flush()
                os.fsync(target.fileno())
        return size, digest.hexdigest()
