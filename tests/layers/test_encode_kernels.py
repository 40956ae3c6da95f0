"""Each compiled loop does what its plain NumPy statement says."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from groundglow.layers import encode_kernels as kernels
from layers.layer_cases import majority_overview, mean_overview, rounded

SHAPES = [(512, 512), (511, 512), (512, 3), (5, 7), (1, 1), (1, 512), (2, 1)]


def round_with_kernel(pixels: NDArray[np.float32], kept_bits: int) -> NDArray[np.float32]:
    tile = np.empty((512, 512), np.float32)
    bits = np.ascontiguousarray(pixels).view(np.uint32)
    kernels.round_tile(bits, (0, 0), pixels.shape, 23 - kept_bits, tile.view(np.uint32))
    return tile


@pytest.mark.parametrize("kept_bits", [1, 9, 12, 15, 22, 23])
def test_rounding_is_to_nearest_and_ties_go_to_even(kept_bits: int) -> None:
    random = np.random.default_rng(1)
    pixels = (random.normal(0, 1, (64, 512)) * 10.0 ** random.integers(-6, 6, (64, 512))).astype(np.float32)
    # Exact ties: an odd number of half steps.
    pixels[0] = np.arange(512, dtype=np.float32) * 0.5 + 2.0**kept_bits
    assert np.array_equal(round_with_kernel(pixels, kept_bits)[:64], rounded(pixels, kept_bits))


def test_rounding_ties_by_hand() -> None:
    # With one mantissa bit the numbers from 2 on are 2, 3, 4, 6, 8: 2.5 and 5 lie half-way.
    pixels = np.array([[2.5, 3.5, 5.0, 7.0, -2.5, 2.4999998, 2.5000002]], np.float32)
    assert round_with_kernel(pixels, 1)[0, :7].tolist() == [2.0, 4.0, 4.0, 8.0, -2.0, 2.0, 3.0]


def test_only_numbers_stay_numbers() -> None:
    odd_nan = np.array([0x7F800001, 0xFFFFFFFF], np.uint32).view(np.float32)
    largest = np.finfo(np.float32).max
    pixels = np.array(
        [[np.nan, np.inf, -np.inf, odd_nan[0], odd_nan[1], largest, -largest, -0.0]], np.float32
    )
    bits = round_with_kernel(pixels, 9).view(np.uint32)[0, :8]
    assert bits[:5].tolist() == [0x7FC00000] * 5, "every kind of nothing becomes the one quiet NaN"
    assert np.isfinite(bits[5:7].view(np.float32)).all(), "rounding never makes an infinity"
    assert bits[7] == 0, "minus zero is zero"


def test_a_window_is_copied_and_the_rest_of_the_tile_is_nan() -> None:
    pixels = np.arange(40 * 30, dtype=np.float32).reshape(40, 30)
    tile = np.zeros((512, 512), np.float32)
    kernels.round_tile(pixels.view(np.uint32), (10, 5), (20, 25), 0, tile.view(np.uint32))
    assert np.array_equal(tile[:20, :25], pixels[10:30, 5:30])
    assert np.isnan(tile[20:]).all()
    assert np.isnan(tile[:, 25:]).all()


@pytest.mark.parametrize("shape", SHAPES)
def test_summaries_are_of_the_numbers_in_the_window(shape: tuple[int, int]) -> None:
    random = np.random.default_rng(2)
    tile = random.normal(280, 20, (512, 512)).astype(np.float32)
    tile[random.random((512, 512)) < 0.1] = np.nan
    tile[0, 0] = 271.5
    summary = np.empty(5)
    kernels.summarise_tile(tile, shape, summary)
    inside = tile[: shape[0], : shape[1]].astype(np.float64)
    numbers = inside[np.isfinite(inside)]
    assert summary[:3].tolist() == [numbers.size, numbers.min(), numbers.max()]
    assert summary[3:] == pytest.approx([numbers.sum(), (numbers**2).sum()], rel=1e-13)


def test_a_window_without_numbers_sums_to_nothing() -> None:
    summary = np.empty(5)
    kernels.summarise_tile(np.full((512, 512), np.nan, np.float32), (512, 512), summary)
    assert summary.tolist() == [0.0, np.inf, -np.inf, 0.0, 0.0]


@pytest.mark.parametrize("shape", SHAPES)
def test_histogram_counts_leading_bits(shape: tuple[int, int]) -> None:
    random = np.random.default_rng(3)
    tile = (random.normal(0, 1, (512, 512)) * 300).astype(np.float32)
    bins = np.zeros((4, kernels.HISTOGRAM_BINS), np.int32)
    kernels.count_magnitudes(tile.view(np.uint32), shape, bins)
    keys = np.ascontiguousarray(tile[: shape[0], : shape[1]]).view(np.uint32) >> 12
    assert np.array_equal(bins.sum(axis=0), np.bincount(keys.ravel(), minlength=kernels.HISTOGRAM_BINS))


@pytest.mark.parametrize("shape", SHAPES)
def test_values_are_counted(shape: tuple[int, int]) -> None:
    tile = np.random.default_rng(4).choice(np.array([0, 1, 8, 65535], np.uint16), (512, 512))
    counts = np.zeros(65536, np.int64)
    kernels.count_values(tile, shape, counts)
    assert np.array_equal(counts, np.bincount(tile[: shape[0], : shape[1]].ravel(), minlength=65536))


@pytest.mark.parametrize("shape", SHAPES)
def test_mean_overview(shape: tuple[int, int]) -> None:
    random = np.random.default_rng(5)
    tile = random.normal(300, 9, (512, 512)).astype(np.float32)
    tile[random.random((512, 512)) < 0.4] = np.nan
    expected = mean_overview(tile[: shape[0], : shape[1]])
    target = np.full((512, 512), -1, np.float32)
    kernels.halve_by_mean(tile, shape, target, (256, 256))
    rows, columns = expected.shape
    assert np.array_equal(target[256 : 256 + rows, 256 : 256 + columns], expected, equal_nan=True)
    target[256 : 256 + rows, 256 : 256 + columns] = -1
    assert (target == -1).all(), "nothing else is touched"


@pytest.mark.parametrize("shape", SHAPES)
def test_majority_overview(shape: tuple[int, int]) -> None:
    tile = np.random.default_rng(6).integers(0, 3, (512, 512)).astype(np.uint16)
    expected = majority_overview(tile[: shape[0], : shape[1]])
    target = np.full((512, 512), 99, np.uint16)
    kernels.halve_by_majority(tile, shape, target, (0, 256))
    rows, columns = expected.shape
    assert np.array_equal(target[:rows, 256 : 256 + columns], expected)
    target[:rows, 256 : 256 + columns] = 99
    assert (target == 99).all(), "nothing else is touched"


@pytest.mark.parametrize(
    ("four", "winner"),
    [
        ((5, 5, 7, 7), 5),
        ((7, 5, 5, 7), 7),
        ((1, 2, 3, 3), 3),
        ((1, 2, 2, 3), 2),
        ((4, 3, 2, 1), 4),
        ((1, 9, 9, 9), 9),
    ],
)
def test_majority_by_hand(four: tuple[int, ...], winner: int) -> None:
    tile = np.array(four, np.uint16).reshape(2, 2)
    target = np.zeros((1, 1), np.uint16)
    kernels.halve_by_majority(tile, (2, 2), target, (0, 0))
    assert target[0, 0] == winner


def test_floating_point_predictor() -> None:
    # Adobe, TIFF Technical Note 3 (2005), "Floating point predictor": the bytes of a row are put
    # into planes, the most significant first, and the whole row of bytes is then differenced.
    tile = np.random.default_rng(7).normal(300, 5, (4, 512)).astype(np.float32)
    predicted = np.empty((4, 2048), np.uint8)
    kernels.predict_float32(tile.view(np.uint32), predicted)
    planes = tile.astype(">f4").view(np.uint8).reshape(4, 512, 4).transpose(0, 2, 1).reshape(4, 2048)
    assert np.array_equal(np.cumsum(predicted, axis=1, dtype=np.uint8), planes)


def test_horizontal_predictor() -> None:
    # TIFF 6.0, section 14: differences of neighbouring samples, modulo the sample's range.
    tile = np.random.default_rng(8).integers(0, 65536, (4, 512)).astype(np.uint16)
    predicted = np.empty_like(tile)
    kernels.predict_uint16(tile, predicted)
    assert np.array_equal(np.cumsum(predicted, axis=1, dtype=np.uint16), tile)
