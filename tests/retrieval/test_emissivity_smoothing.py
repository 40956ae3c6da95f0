"""Emissivity averaged over the sensor's own footprint."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from groundglow.errors import DomainError
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity import raster_fields
from groundglow.retrieval.emissivity_smoothing import (
    footprint_weights,
    halo_width,
    smooth,
    smooth_fields,
    smooth_stack,
)

bounded = settings(max_examples=100, derandomize=True, deadline=None, database=None)
Pixels = NDArray[np.float32]


def raster(seed: int = 1, shape: tuple[int, int] = (83, 101), gaps: float = 0.05) -> Pixels:
    draw = np.random.default_rng(seed)
    values = draw.uniform(0.9, 1.0, shape).astype(np.float32)
    values[draw.uniform(size=shape) < gaps] = np.nan
    return values


def padded(values: Pixels, down: int, across: int) -> Pixels:
    """Beyond the raster's edge there is nothing."""
    return np.pad(values, ((down, down), (across, across)), constant_values=np.float32(np.nan))


@pytest.mark.parametrize(
    ("footprint", "pixel", "expected"),
    [
        (90.0, 90.0, [1.0]),
        (60.0, 90.0, [1.0]),
        (90.0, 30.0, [1.0, 1.0, 1.0]),
        (120.0, 60.0, [0.5, 1.0, 0.5]),
        (100.0, 30.0, [1.0 / 6.0, 1.0, 1.0, 1.0, 1.0 / 6.0]),
    ],
)
def test_weights_are_the_shares_of_the_pixels_inside_the_footprint(
    footprint: float, pixel: float, expected: list[float]
) -> None:
    assert footprint_weights(footprint, pixel) == pytest.approx(expected)
    assert halo_width(footprint, pixel) == len(expected) // 2


@bounded
@given(st.floats(1.0, 2000.0), st.floats(10.0, 100.0))
def test_the_weights_add_up_to_the_footprint(footprint: float, pixel: float) -> None:
    weights = footprint_weights(footprint, pixel)
    assert weights.sum() * pixel == pytest.approx(max(footprint, pixel), rel=1e-5)
    assert weights.size == 2 * halo_width(footprint, pixel) + 1
    assert (weights == weights[::-1]).all()


def test_a_plain_field_stays_as_it_is() -> None:
    weights = footprint_weights(100.0, 30.0)
    values = np.full((20, 20), 0.97, np.float32)
    assert np.unique(smooth_stack([padded(values, 2, 2)], weights, weights)[0]).tolist() == [np.float32(0.97)]


def test_the_average_is_the_area_average() -> None:
    # A single odd pixel spreads over the footprint with the shares of the weights.
    weights = footprint_weights(120.0, 60.0)
    values = np.ones((9, 9), np.float32)
    values[4, 4] = 0.0
    found = smooth(values, ~np.isnan(values), weights, weights)
    shares = np.outer([0.5, 1.0, 0.5], [0.5, 1.0, 0.5]) / 4.0
    np.testing.assert_allclose(found[2:5, 2:5], 1.0 - shares, atol=1e-7)
    assert found.shape == (7, 7)


def test_the_average_over_a_whole_raster_is_kept_away_from_its_edges() -> None:
    # A field whose rim is plain loses nothing: what one pixel gives, its neighbours get.
    weights = footprint_weights(100.0, 30.0)
    values = np.full((40, 50), 0.95, np.float32)
    values[10:30, 10:40] = raster(2, (20, 30), gaps=0.0)
    found = smooth_stack([padded(values, 2, 2)], weights, weights)[0]
    assert found.mean(dtype=np.float64) == pytest.approx(values.mean(dtype=np.float64), abs=1e-7)


def test_gaps_stay_gaps_and_do_not_eat_their_neighbours() -> None:
    values = raster()
    weights = footprint_weights(100.0, 30.0)
    found = smooth_stack([padded(values, 2, 2)], weights, weights)[0]
    np.testing.assert_array_equal(np.isnan(found), np.isnan(values))
    known = found[~np.isnan(found)]
    assert known.min() >= np.nanmin(values)
    assert known.max() <= np.nanmax(values)


@pytest.mark.parametrize(
    "sizes", [(100.0, 30.0, 30.0), (90.0, 30.0, 20.0), (60.0, 60.0, 10.0), (30.0, 30.0, 30.0)]
)
def test_the_compiled_form_equals_the_statement_bit_by_bit(sizes: tuple[float, float, float]) -> None:
    rows, columns = footprint_weights(sizes[0], sizes[1]), footprint_weights(sizes[0], sizes[2])
    values = padded(raster(), rows.size // 2, columns.size // 2)
    stated = smooth(values, ~np.isnan(values), rows, columns)
    other = np.where(np.isnan(values), np.nan, 1.0 - values).astype(np.float32)
    found = smooth_stack([values, other], rows, columns)
    np.testing.assert_array_equal(found[0], stated)
    np.testing.assert_array_equal(found[1], smooth(other, ~np.isnan(other), rows, columns))


@pytest.mark.parametrize("block", [7, 16, 64])
def test_blocks_with_their_halo_give_the_bytes_of_the_whole(block: int) -> None:
    values = raster()
    rows, columns = footprint_weights(100.0, 30.0), footprint_weights(70.0, 30.0)
    down, across = rows.size // 2, columns.size // 2
    wide = padded(values, down, across)
    whole = smooth_stack([wide], rows, columns)[0]
    pieced = np.empty_like(whole)
    for row in range(0, values.shape[0], block):
        for column in range(0, values.shape[1], block):
            part = wide[row : row + block + 2 * down, column : column + block + 2 * across]
            pieced[row : row + block, column : column + block] = smooth_stack([part], rows, columns)[0]
    assert pieced.tobytes() == whole.tobytes()


def test_all_five_arrays_are_averaged_and_flags_stay_with_their_pixel() -> None:
    rows, columns = footprint_weights(100.0, 30.0), footprint_weights(90.0, 30.0)
    sharp = raster_fields(padded(raster(), 2, 1), np.float32(0.01))
    found = smooth_fields(sharp, rows, columns)
    inner = (slice(2, -2), slice(1, -1))
    assert found.flags.tolist() == sharp.flags[inner].tolist()
    known = ~np.isnan(sharp.band)
    for name in EmissivityFields.__dataclass_fields__:
        result, before = getattr(found, name), getattr(sharp, name)
        assert result.shape == (83, 101)
        if name != "flags":
            np.testing.assert_array_equal(result, smooth(before, known, rows, columns))


def test_an_edge_of_the_ground_is_drawn_no_sharper_than_the_sensor_sees_it() -> None:
    # Water beside sand, delivered at 30 m from a 90 m footprint: radiance and emissivity blur alike, so the
    # ratio shows no false edge, whereas the sharp emissivity does.
    weights = footprint_weights(90.0, 30.0)
    emissivity = np.full((9, 30), 0.99, np.float32)
    emissivity[:, 15:] = 0.90
    seen = smooth(emissivity, ~np.isnan(emissivity), weights, weights)  # a scene at one temperature
    ratio = seen / smooth_stack([emissivity], weights, weights)[0]
    assert np.abs(ratio - 1.0).max() < 1e-6
    assert np.abs(seen / emissivity[1:-1, 1:-1] - 1.0).max() > 0.02


@pytest.mark.parametrize(
    ("footprint", "pixel", "complaint"),
    [
        (0.0, 30.0, "footprint"),
        (np.nan, 30.0, "footprint"),
        (90.0, -1.0, "pixel size"),
        (1e6, 10.0, "1,001 pixels"),
    ],
)
def test_sizes_that_are_none_are_refused(footprint: float, pixel: float, complaint: str) -> None:
    with pytest.raises(DomainError, match=complaint):
        footprint_weights(footprint, pixel)


def test_a_block_that_is_all_halo_is_refused() -> None:
    weights = footprint_weights(150.0, 30.0)
    with pytest.raises(DomainError, match="not larger than its halo"):
        smooth_fields(raster_fields(raster(shape=(4, 9)), np.float32(0.01)), weights, weights)
