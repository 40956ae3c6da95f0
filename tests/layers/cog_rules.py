"""Rules of a cloud-optimised GeoTIFF, checked on the bytes without GDAL.

Sources: OGC 21-026 "OGC Cloud Optimized GeoTIFF Standard" 1.0 (tiles, overviews, their order); the
GDAL documentation of its COG driver, "Header ghost area" (note on the structure, tile leaders and
trailers, order of the data).
"""

from __future__ import annotations

import zlib
from pathlib import Path
from typing import Any

import numpy as np
import tifffile
import zstandard
from numpy.typing import NDArray

GHOST = (
    b"GDAL_STRUCTURAL_METADATA_SIZE=000140 bytes\n"
    b"LAYOUT=IFDS_BEFORE_DATA\nBLOCK_ORDER=ROW_MAJOR\nBLOCK_LEADER=SIZE_AS_UINT4\n"
    b"BLOCK_TRAILER=LAST_4_BYTES_REPEATED\nKNOWN_INCOMPATIBLE_EDITION=NO\n "
)


def broken_rules(path: Path) -> list[str]:
    """What is not as a cloud-optimised GeoTIFF should be; empty if all is."""
    data = path.read_bytes()
    with tifffile.TiffFile(path) as tiff:
        pages: list[Any] = list(tiff.pages)
        big = tiff.is_bigtiff
        if tiff.byteorder != "<":
            return ["not little-endian"]
    header = 16 if big else 8
    found = []
    if data[header : header + len(GHOST)] != GHOST:
        found.append("no note on the structure")
    if pages[0].offset != (header + len(GHOST) + 1) // 2 * 2:
        found.append("the first directory does not follow the note")
    found += _rules_of_directories(pages)
    found += _rules_of_tiles(pages, data)
    return found


def _rules_of_directories(pages: list[Any]) -> list[str]:
    found = []
    offsets = [page.offset for page in pages]
    if offsets != sorted(offsets):
        found.append("directories out of order")
    if not all(page.is_tiled for page in pages):
        found.append("not tiled")
    if {(page.tilewidth, page.tilelength) for page in pages} != {(512, 512)}:
        found.append("tiles differ in size")
    if pages[0].subfiletype != 0 or any(page.subfiletype != 1 for page in pages[1:]):
        found.append("overviews are not marked as such")
    if any(tag in page.tags for page in pages[1:] for tag in (33550, 33922, 34264, 34735)):
        found.append("an overview has a place of its own")
    for above, below in zip(pages[1:], pages[:-1], strict=True):
        if above.shape != tuple(-(-side // 2) for side in below.shape):
            found.append(f"{above.shape} is not half of {below.shape}")
    if max(pages[-1].shape) > 512:
        found.append("the smallest overview is larger than a tile")
    return found


def _rules_of_tiles(pages: list[Any], data: bytes) -> list[str]:
    found = []
    position = max(page.offset for page in pages)
    for page in reversed(pages):
        for offset, size in zip(page.dataoffsets, page.databytecounts, strict=True):
            if size == 0 or offset <= position:
                found.append(f"tile at {offset} is empty or out of order")
            if int.from_bytes(data[offset - 4 : offset], "little") != size:
                found.append(f"leader of the tile at {offset} is wrong")
            if data[offset + size : offset + size + 4] != data[offset + size - 4 : offset + size]:
                found.append(f"trailer of the tile at {offset} is wrong")
            position = offset + size + 4
    if position != len(data):
        found.append("something follows the last tile")
    return found


def decoded_tiles(path: Path, level: int = 0) -> NDArray[Any]:
    """All pixels of a level with their padding, decoded without GDAL."""
    data = path.read_bytes()
    with tifffile.TiffFile(path) as tiff:
        page: Any = tiff.pages[level]
        rows, columns = (-(-side // 512) for side in page.shape)
        decode = zlib.decompress if page.compression == 8 else zstandard.ZstdDecompressor().decompress
        tiles = [
            _unpredicted(decode(data[offset : offset + size]), page.predictor)
            for offset, size in zip(page.dataoffsets, page.databytecounts, strict=True)
        ]
    return np.block([[tiles[row * columns + column] for column in range(columns)] for row in range(rows)])


def _unpredicted(data: bytes, predictor: int) -> NDArray[Any]:
    """One tile; TIFF 6.0 section 14 for predictor 2, Adobe's Technical Note 3 for predictor 3."""
    if predictor == 2:
        return np.cumsum(np.frombuffer(data, "<u2").reshape(512, 512), axis=1, dtype=np.uint16)
    planes = np.cumsum(np.frombuffer(data, np.uint8).reshape(512, 2048), axis=1, dtype=np.uint8)
    values = planes.reshape(512, 4, 512).transpose(0, 2, 1)
    return np.ascontiguousarray(values).view(">f4")[..., 0].astype(np.float32)
