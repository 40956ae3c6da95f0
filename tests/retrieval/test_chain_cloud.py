"""The cloud buffer is the exact distance to the nearest cloudy pixel."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.ndimage import distance_transform_edt

from groundglow.retrieval.chain_cloud import near_cloud

NO_HALO = (0, 0, 0, 0)


@pytest.mark.parametrize("pixel", [(30.0, 30.0), (30.0, 20.0)])
@pytest.mark.parametrize("buffer", [29.0, 30.0, 95.0, 400.0])
def test_buffer_equals_scipys_distance_transform(pixel: tuple[float, float], buffer: float) -> None:
    cloud = np.random.default_rng(1).random((60, 80)) > 0.995
    distance = distance_transform_edt(~cloud, sampling=pixel)
    np.testing.assert_array_equal(near_cloud(cloud, NO_HALO, pixel, buffer), (distance <= buffer) & ~cloud)


def test_no_cloud_has_no_surroundings() -> None:
    assert not near_cloud(np.zeros((5, 5), bool), NO_HALO, (30.0, 30.0), 1e4).any()


def test_a_block_with_its_halo_knows_the_clouds_outside() -> None:
    cloud = np.random.default_rng(2).random((90, 70)) > 0.99
    whole = near_cloud(cloud, NO_HALO, (30.0, 30.0), 150.0)
    part = near_cloud(cloud[20:60, 10:50], (5, 6, 5, 5), (30.0, 30.0), 150.0)
    np.testing.assert_array_equal(part, whole[25:54, 15:45])
