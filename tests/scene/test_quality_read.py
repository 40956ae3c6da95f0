"""Flags come to the target grid without losing a cloud."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from groundglow.quantities import FLAG
from groundglow.raster.band import RasterSource
from groundglow.raster.grid import Grid
from groundglow.scene.model import QualityRaster
from groundglow.scene.quality import QualityRule
from groundglow.scene.quality_read import read_flags
from painted_rasters import grid, whole, write

RULES = (QualityRule("cloud", bits=(3,)), QualityRule("water", bits=(7,)), QualityRule("snow", values=(68,)))
CLOUD, WATER, NEAR = (FLAG[name].mask for name in ("cloud", "water", "near_cloud"))


def quality(folder: Path, words: np.ndarray, where: Grid, nodata: float | None = None) -> QualityRaster:
    return QualityRaster(RasterSource(write(folder / "q.tif", words, where), nodata=nodata), RULES)


def test_on_the_same_grid_words_become_flags(tmp_path: Path) -> None:
    words = np.array([[8, 128, 136], [68, 0, 1]], dtype=np.uint16)
    found = read_flags(quality(tmp_path, words, grid(3, 2), nodata=1), grid(3, 2), whole(grid(3, 2)))
    assert found.tolist() == [[CLOUD, WATER, CLOUD | WATER], [FLAG["snow"].mask, 0, 0]]
    assert found.dtype == np.uint16


def test_each_flag_counts_by_its_own_share_of_a_coarser_pixel(tmp_path: Path) -> None:
    # Two pixels of 2 x 2: cloud over half and water over all; cloud in one corner only.
    words = np.array([[136, 128, 8, 0], [136, 128, 0, 0]], dtype=np.uint16)
    coarse = grid(2, 1, pixel=60.0)
    found = read_flags(quality(tmp_path, words, grid(4, 2)), coarse, whole(coarse))
    assert found.tolist() == [[CLOUD | WATER, NEAR]]


def test_words_that_differ_may_share_a_flag(tmp_path: Path) -> None:
    # No word covers half of the pixel, but cloud covers three quarters.
    words = np.array([[8, 9], [24, 0]], dtype=np.uint16)
    coarse = grid(1, 1, pixel=60.0)
    assert read_flags(quality(tmp_path, words, grid(2, 2)), coarse, whole(coarse)).tolist() == [[CLOUD]]


def test_pixels_without_a_word_do_not_count(tmp_path: Path) -> None:
    words = np.array([[8, 255], [0, 8]], dtype=np.uint16)
    coarse = grid(1, 1, pixel=60.0)
    found = read_flags(quality(tmp_path, words, grid(2, 2), nodata=255), coarse, whole(coarse))
    assert found.tolist() == [[CLOUD]]


def test_a_coarser_raster_keeps_its_edges(tmp_path: Path) -> None:
    words = np.array([[8, 0], [0, 128]], dtype=np.uint8)
    found = read_flags(quality(tmp_path, words, grid(2, 2, pixel=90.0)), grid(6, 6), whole(grid(6, 6)))
    wanted = np.kron(np.array([[CLOUD, 0], [0, WATER]]), np.ones((3, 3), dtype=int))
    np.testing.assert_array_equal(found, wanted)


@pytest.mark.parametrize("rotation", [0.0, 20.0])
def test_flags_do_not_depend_on_the_block(rotation: float, tmp_path: Path) -> None:
    fine = grid(90, 80, pixel=11.0, rotation=rotation)
    words = np.random.default_rng(1).choice(np.array([0, 8, 128, 68], dtype=np.uint16), fine.shape)
    source = quality(tmp_path, words, fine)
    target = grid(30, 25)
    at_once = read_flags(source, target, whole(target))
    assert (at_once & CLOUD).any()
    for block in target.blocks(8):
        at = np.s_[block.row : block.row + block.height, block.column : block.column + block.width]
        np.testing.assert_array_equal(read_flags(source, target, block), at_once[at])
