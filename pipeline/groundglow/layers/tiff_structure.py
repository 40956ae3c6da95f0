"""The header of a cloud-optimised GeoTIFF, computed before a byte of it is written.

The order in the file is: TIFF header, GDAL's note on the structure, the directory of full
resolution, the directories of the overviews in decreasing size, then the tiles of the smallest
overview first and those of full resolution last, row by row, each between its size and a copy of
its last four bytes.

References
----------
TIFF Revision 6.0, Aldus, 1992. TIFF Technical Note 3, Adobe, 2005 (predictor 3).
OGC 21-026, OGC Cloud Optimized GeoTIFF Standard, version 1.0.
GDAL, "Cloud Optimized GeoTIFF driver", section on the header ghost area.
"""

from __future__ import annotations

import struct
from collections.abc import Sequence
from dataclasses import dataclass

from groundglow.layers.layer_format import LayerFormat
from groundglow.raster.grid import TILE

FOUR_GIGABYTES = 1 << 32
LEADER = 4
TRAILER = 4

SHORT, LONG, LONG8 = 3, 4, 16
TYPE_SIZES = {1: 1, 2: 1, 3: 2, 4: 4, 5: 8, 7: 1, 12: 8, 16: 8}
_FORMATS = {SHORT: "H", LONG: "I", LONG8: "Q"}

NEW_SUBFILE_TYPE, IMAGE_WIDTH, IMAGE_LENGTH, BITS_PER_SAMPLE, COMPRESSION = 254, 256, 257, 258, 259
PHOTOMETRIC, SAMPLES_PER_PIXEL, PLANAR_CONFIGURATION, PREDICTOR = 262, 277, 284, 317
TILE_WIDTH, TILE_LENGTH, TILE_OFFSETS, TILE_BYTE_COUNTS, SAMPLE_FORMAT = 322, 323, 324, 325, 339
GDAL_NODATA = 42113

_COMPRESSIONS = {"zstd": 50000, "deflate": 8}

_STRUCTURE = (
    b"LAYOUT=IFDS_BEFORE_DATA\n"
    b"BLOCK_ORDER=ROW_MAJOR\n"
    b"BLOCK_LEADER=SIZE_AS_UINT4\n"
    b"BLOCK_TRAILER=LAST_4_BYTES_REPEATED\n"
    b"KNOWN_INCOMPATIBLE_EDITION=NO\n "
)
_NOTE = b"GDAL_STRUCTURAL_METADATA_SIZE=%06d bytes\n" % len(_STRUCTURE) + _STRUCTURE


@dataclass(frozen=True)
class Tag:
    """One field of a TIFF directory: its number, type, number of values and their little-endian bytes."""

    number: int
    kind: int
    count: int
    value: bytes


@dataclass(frozen=True)
class Level:
    """Full resolution or one overview: its shape and the compressed size of its tiles, row by row."""

    height: int
    width: int
    tile_sizes: Sequence[int]


def tag(number: int, kind: int, *values: int) -> Tag:
    """A tag of whole numbers."""
    return Tag(number, kind, len(values), struct.pack(f"<{len(values)}{_FORMATS[kind]}", *values))


def file_header(
    levels: Sequence[Level],
    layer_format: LayerFormat,
    described: Sequence[Tag],
    *,
    bigtiff_above: int = FOUR_GIGABYTES,
) -> bytes:
    """Everything that stands before the first tile.

    Parameters
    ----------
    levels : sequence of Level
        Full resolution first, then overviews in decreasing size.
    layer_format : LayerFormat
        Data type and compression.
    described : sequence of Tag
        Tags for place, "no data" and metadata. Overviews carry only the "no data" tag.
    bigtiff_above : int
        Size of the file from which on offsets have 64 bits. [byte]

    Returns
    -------
    bytes
    """
    data_size = sum(size + LEADER + TRAILER for level in levels for size in level.tile_sizes)
    classic = _header(levels, layer_format, described, big=False, offsets_known=False)
    big = len(classic) + data_size >= bigtiff_above
    return _header(levels, layer_format, described, big=big, offsets_known=True)


def _header(
    levels: Sequence[Level],
    layer_format: LayerFormat,
    described: Sequence[Tag],
    *,
    big: bool,
    offsets_known: bool,
) -> bytes:
    """The header in one of the two TIFF versions; with zeros for offsets where they are not known yet."""
    if offsets_known:
        start = len(_header(levels, layer_format, described, big=big, offsets_known=False))
        offsets = _tile_offsets(levels, start)
    else:
        offsets = [[0] * len(level.tile_sizes) for level in levels]
    prefix_size = 16 if big else 8
    first = prefix_size + len(_NOTE)
    first += first % 2
    prefix = struct.pack("<2sHHHQ", b"II", 43, 8, 0, first) if big else struct.pack("<2sHI", b"II", 42, first)
    header = bytearray(prefix + _NOTE)
    header += bytes(first - len(header))
    for index, level in enumerate(levels):
        tags = _level_tags(level, offsets[index], layer_format, overview=index > 0, big=big)
        tags += [one for one in described if index == 0 or one.number == GDAL_NODATA]
        last = index == len(levels) - 1
        header += _directory(sorted(tags, key=lambda one: one.number), len(header), big=big, last=last)
    return bytes(header)


def _tile_offsets(levels: Sequence[Level], start: int) -> list[list[int]]:
    """Where each tile begins, the smallest overview first in the file."""
    offsets: list[list[int]] = []
    position = start
    for level in reversed(levels):
        row: list[int] = []
        for size in level.tile_sizes:
            row.append(position + LEADER)
            position += LEADER + size + TRAILER
        offsets.append(row)
    return offsets[::-1]


def _level_tags(
    level: Level, offsets: Sequence[int], layer_format: LayerFormat, *, overview: bool, big: bool
) -> list[Tag]:
    """The tags of one level that say how its pixels are stored."""
    flags = layer_format.flags
    return [
        tag(NEW_SUBFILE_TYPE, LONG, int(overview)),
        tag(IMAGE_WIDTH, LONG, level.width),
        tag(IMAGE_LENGTH, LONG, level.height),
        tag(BITS_PER_SAMPLE, SHORT, 16 if flags else 32),
        tag(COMPRESSION, SHORT, _COMPRESSIONS[layer_format.compression]),
        tag(PHOTOMETRIC, SHORT, 1),  # black is zero
        tag(SAMPLES_PER_PIXEL, SHORT, 1),
        tag(PLANAR_CONFIGURATION, SHORT, 1),
        tag(PREDICTOR, SHORT, 2 if flags else 3),
        tag(TILE_WIDTH, SHORT, TILE),
        tag(TILE_LENGTH, SHORT, TILE),
        tag(TILE_OFFSETS, LONG8 if big else LONG, *offsets),
        tag(TILE_BYTE_COUNTS, LONG, *level.tile_sizes),
        tag(SAMPLE_FORMAT, SHORT, 1 if flags else 3),
    ]


def _directory(tags: Sequence[Tag], position: int, *, big: bool, last: bool) -> bytes:
    """One directory that begins at ``position``, followed by the values that do not fit into it."""
    inline = 8 if big else 4
    entry, offset = ("<HHQ", "<Q") if big else ("<HHI", "<I")
    count = struct.pack("<Q" if big else "<H", len(tags))
    entry_size = 4 + 2 * inline
    size = len(count) + entry_size * len(tags) + inline
    entries, values = bytearray(), bytearray()
    for one in tags:
        entries += struct.pack(entry, one.number, one.kind, one.count)
        if len(one.value) <= inline:
            entries += one.value.ljust(inline, b"\0")
        else:
            entries += struct.pack(offset, position + size + len(values))
            values += one.value + bytes(len(one.value) % 2)
    values += bytes((size + len(values)) % 2)
    end = 0 if last else position + size + len(values)
    return count + bytes(entries) + struct.pack(offset, end) + bytes(values)


def read_tags(data: bytes) -> list[Tag]:
    """All tags of the first directory of a little-endian classic TIFF held in memory."""
    (position,) = struct.unpack_from("<I", data, 4)
    (number_of_tags,) = struct.unpack_from("<H", data, position)
    tags = []
    for index in range(number_of_tags):
        at = position + 2 + 12 * index
        number, kind, count = struct.unpack_from("<HHI", data, at)
        size = TYPE_SIZES[kind] * count
        start = at + 8 if size <= 4 else struct.unpack_from("<I", data, at + 8)[0]
        tags.append(Tag(number, kind, count, data[start : start + size]))
    return tags
