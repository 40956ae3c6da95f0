"""Weights along one axis: nothing is lost, nothing is counted twice, nothing is moved."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from groundglow.raster.axes import (
    area_weights,
    class_weights,
    continuous_weights,
    linear_weights,
    nearest_weights,
)
from groundglow.raster.relation import Axis

STARTS = st.floats(-5.0, 5.0)
SIZES = st.integers(1, 60)


@settings(max_examples=200, deadline=None)
@given(start=STARTS, step=st.floats(1.01, 9.0), size=SIZES, length=st.integers(1, 40), flipped=st.booleans())
def test_area_weights_share_every_source_pixel_out_once(
    start: float, step: float, size: int, length: int, flipped: bool
) -> None:
    axis = Axis(start + step * length, -step, size) if flipped else Axis(start, step, size)
    found = area_weights(axis, 0, length)
    given_out = np.zeros(size)
    for first, count, weight in zip(found.first, found.count, found.weight, strict=True):
        given_out[first : first + count] += weight[:count]
    low, high = min(axis.edge(0), axis.edge(length)), max(axis.edge(0), axis.edge(length))
    index = np.arange(size)
    covered = np.clip(np.minimum(index + 1, high) - np.maximum(index, low), 0.0, 1.0)
    np.testing.assert_allclose(given_out, covered, atol=1e-9)
    np.testing.assert_allclose(found.total.sum(), high - low, rtol=1e-12)
    assert (found.weight >= 0.0).all()


@settings(max_examples=200, deadline=None)
@given(start=STARTS, step=st.floats(0.05, 1.0), size=st.integers(2, 60), length=st.integers(1, 40))
def test_linear_weights_give_back_the_position(start: float, step: float, size: int, length: int) -> None:
    axis = Axis(start, step, size)
    found = linear_weights(axis, 0, length)
    for i in range(length):
        middle = 0.5 * (axis.edge(i) + axis.edge(i + 1))
        if not 0.0 <= middle <= size:
            assert found.count[i] == 0
            continue
        count = found.count[i]
        centres = found.first[i] + np.arange(count) + 0.5
        assert found.weight[i, :count].sum() == 1.0
        assert 0 <= found.first[i] <= found.first[i] + count <= size
        position = found.weight[i, :count] @ centres
        np.testing.assert_allclose(position, np.clip(middle, 0.5, size - 0.5), atol=1e-12)


@settings(max_examples=200, deadline=None)
@given(
    start=STARTS, step=st.floats(0.05, 9.0), size=SIZES, first=st.integers(0, 30), length=st.integers(1, 20)
)
def test_weights_are_the_same_from_any_start(
    start: float, step: float, size: int, first: int, length: int
) -> None:
    axis = Axis(start, step, size)
    for weights in (continuous_weights, class_weights, nearest_weights):
        whole, part = weights(axis, 0, first + length), weights(axis, first, length)
        np.testing.assert_array_equal(part.first, whole.first[first:])
        np.testing.assert_array_equal(part.count, whole.count[first:])
        np.testing.assert_array_equal(part.total, whole.total[first:])
        for i, count in enumerate(part.count):
            assert part.weight[i, :count].tobytes() == whole.weight[first + i, :count].tobytes()
