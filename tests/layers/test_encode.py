"""A block becomes tiles, overviews and statistics that depend on its pixels alone."""

from __future__ import annotations

import pickle
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from groundglow.errors import ConfigError, DomainError
from groundglow.layers.encode import encode_block, format_of
from groundglow.layers.layer_format import LayerFormat, codec_versions
from groundglow.layers.pyramid import level_shapes
from groundglow.quantities import QUANTITIES
from groundglow.raster.grid import Block
from layers.layer_cases import cut, grid_of, quality, temperature, write_layer


@pytest.mark.parametrize(
    ("shape", "levels"),
    [
        ((1, 1), [(1, 1)]),
        ((512, 512), [(512, 512)]),
        ((513, 512), [(513, 512), (257, 256)]),
        ((2051, 3075), [(2051, 3075), (1026, 1538), (513, 769), (257, 385)]),
        ((1, 5000), [(1, 5000), (1, 2500), (1, 1250), (1, 625), (1, 313)]),
    ],
)
def test_overviews_halve_rounding_up_until_one_tile_suffices(
    shape: tuple[int, int], levels: list[tuple[int, int]]
) -> None:
    assert level_shapes(*shape) == levels


@pytest.mark.parametrize("pixels", [temperature(), quality()], ids=["numbers", "flags"])
def test_block_size_does_not_change_a_byte(pixels: Any, tmp_path: Path) -> None:
    sums = {
        write_layer(tmp_path / "layer.tif", pixels, size=size).sha256
        for size in (512, 1024, 1536, 2048, 4096)
    }
    assert len(sums) == 1


@pytest.mark.parametrize("pixels", [temperature(), quality()], ids=["numbers", "flags"])
def test_order_and_mixture_of_blocks_do_not_change_a_byte(pixels: Any, tmp_path: Path) -> None:
    grid = grid_of(*pixels.shape)
    expected = write_layer(tmp_path / "layer.tif", pixels).sha256
    shuffled = sorted(grid.blocks(512), key=lambda block: (block.column * 7 + block.row * 5) % 11)
    assert write_layer(tmp_path / "layer.tif", pixels, blocks=shuffled).sha256 == expected
    # Full-width bands, as striped inputs are read, the last one first.
    bands = [Block(row, 0, min(512, grid.height - row), grid.width) for row in range(0, grid.height, 512)]
    assert write_layer(tmp_path / "layer.tif", pixels, blocks=bands[::-1]).sha256 == expected


def test_views_and_copies_encode_alike() -> None:
    pixels = temperature(1024, 1024)
    grid, layer_format = grid_of(1024, 1024), format_of("surface_temperature")
    block = Block(512, 0, 512, 512)
    whole = encode_block(cut(pixels, block), block, grid, layer_format)
    assert whole.tiles == encode_block(cut(pixels, block).copy(), block, grid, layer_format).tiles


@pytest.mark.parametrize(("name", "make"), [("surface_temperature", temperature), ("quality", quality)])
@pytest.mark.parametrize("writeable", [True, False])
def test_encoding_leaves_the_pixels_alone(name: str, make: Any, writeable: bool) -> None:
    """Pixels need not even allow to be changed."""
    pixels = make(512, 512).copy()
    before = pixels.copy()
    pixels.flags.writeable = writeable
    encode_block(pixels, Block(0, 0, 512, 512), grid_of(512, 512), format_of(name))
    assert np.array_equal(pixels, before, equal_nan=name != "quality")


def test_a_block_holds_every_overview_tile_within_it() -> None:
    grid = grid_of(4096, 4096)
    block = Block(2048, 0, 2048, 2048)
    encoded = encode_block(np.zeros((2048, 2048), np.float32), block, grid, format_of("emitted_flux"))
    assert sum(tile.level == 0 for tile in encoded.tiles) == 16
    assert [(tile.level, tile.row, tile.column) for tile in encoded.tiles if tile.level > 1] == [(2, 1, 0)]
    assert [(part.level, part.row, part.column, part.pixels.shape) for part in encoded.parts] == [
        (3, 1, 0, (256, 256))
    ]


def test_what_leaves_a_task_survives_pickling() -> None:
    pixels = temperature(1024, 1024)
    grid, layer_format = grid_of(2048, 2048), format_of("surface_temperature")
    encoded = encode_block(pixels, Block(0, 1024, 1024, 1024), grid, layer_format)
    back = pickle.loads(pickle.dumps(encoded))
    assert back.tiles == encoded.tiles
    assert back.statistics.tiles == encoded.statistics.tiles
    assert len(back.parts) == 1
    assert np.array_equal(back.parts[0].pixels, encoded.parts[0].pixels, equal_nan=True)


@pytest.mark.parametrize(
    "block",
    [
        Block(100, 0, 512, 512),
        Block(0, 256, 512, 512),
        Block(0, 0, 500, 512),
        Block(0, 0, 512, 700),
        Block(1024, 0, 512, 512),
        Block(-512, 0, 512, 512),
    ],
)
def test_blocks_that_cut_tiles_are_refused(block: Block) -> None:
    pixels = np.zeros((block.height, block.width), np.float32)
    with pytest.raises(DomainError, match="whole 512-pixel tiles"):
        encode_block(pixels, block, grid_of(1200, 1200), format_of("emitted_flux"))


@pytest.mark.parametrize(
    "pixels", [np.zeros((512, 512)), np.zeros((512, 511), np.float32), np.zeros((512, 512), np.uint16)]
)
def test_pixels_of_another_kind_are_refused(pixels: Any) -> None:
    with pytest.raises(DomainError, match="float32 pixels of shape"):
        encode_block(pixels, Block(0, 0, 512, 512), grid_of(512, 512), format_of("emitted_flux"))


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"dtype": "int16"}, "float32 or uint16"),
        ({"kept_bits": 0}, "1 to 23 mantissa bits"),
        ({"kept_bits": 24}, "1 to 23 mantissa bits"),
        ({"compression": "lzw"}, "no compression 'lzw'. Choose zstd or deflate"),
        ({"level": 0}, "level 0 of zstd"),
        ({"compression": "deflate", "level": 10}, "Choose 1 to 9"),
    ],
)
def test_formats_that_cannot_be_written_are_refused(change: dict[str, Any], message: str) -> None:
    with pytest.raises(ConfigError, match=message):
        replace(LayerFormat("emitted_flux", "float32", 13), **change)


def test_every_quantity_has_a_format() -> None:
    for name, quantity in QUANTITIES.items():
        layer_format = format_of(name)
        assert layer_format.kept_bits == quantity.kept_bits
        assert layer_format.flags == (name == "quality")


def test_codec_versions_are_known() -> None:
    assert all(version.split(".")[0].isdigit() for version in codec_versions().values())
