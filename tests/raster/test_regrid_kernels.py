"""The compiled regridding equals its readable statement."""

from __future__ import annotations

import numpy as np
import pytest
from affine import Affine
from rasterio.crs import CRS
from rasterio.windows import Window

from groundglow.raster import mesh_kernels, reference
from groundglow.raster.axes import LEAST_SHARE, AxisWeights, area_weights, class_weights, continuous_weights
from groundglow.raster.footprint import Footprint
from groundglow.raster.grid import Block, Grid
from groundglow.raster.mesh import Mesh, mesh_of_block, mesh_plan
from groundglow.raster.relation import Axis, Otherwise, relation
from painted_rasters import grid

RNG = np.random.default_rng(12)
SHAPE = (53, 47)
VALUES = RNG.uniform(5.0, 12.0, SHAPE).astype(np.float32)
VALUES[RNG.uniform(size=SHAPE) < 0.25] = np.nan
CODES = RNG.integers(0, 6, SHAPE)


def footprint(rows: AxisWeights, columns: AxisWeights) -> Footprint:
    """A footprint over the whole source."""
    piece = Block(0, 0, rows.first.size, columns.first.size)
    return Footprint(piece, Window(0, 0, SHAPE[1], SHAPE[0]), rows, columns)


@pytest.mark.parametrize(
    ("start", "step", "length"), [(0.0, 3.0, 15), (-1.3, 2.7, 19), (2.2, 0.4, 60), (50.0, -2.5, 20)]
)
def test_means_along_axes(start: float, step: float, length: int) -> None:
    rows = continuous_weights(Axis(start, step, SHAPE[0]), 0, length)
    columns = continuous_weights(Axis(start, step, SHAPE[1]), 0, length)
    mean, mixed = footprint(rows, columns).mean(VALUES)
    wanted, wanted_mixed = reference.weighted_mean(VALUES, rows, columns)
    np.testing.assert_allclose(mean, wanted, rtol=2e-7)
    np.testing.assert_array_equal(mixed, wanted_mixed)
    assert np.isfinite(mean).any()
    assert mixed.any()


@pytest.mark.parametrize(("start", "step", "length"), [(0.0, 3.0, 15), (-1.3, 2.7, 19), (2.2, 0.4, 60)])
def test_majorities_along_axes(start: float, step: float, length: int) -> None:
    valid = CODES > 0
    rows = class_weights(Axis(start, step, SHAPE[0]), 0, length)
    columns = class_weights(Axis(start, step, SHAPE[1]), 0, length)
    chosen, found, _ = footprint(rows, columns).majority(CODES, valid)
    wanted, wanted_found = reference.majority(CODES, valid, rows, columns)
    np.testing.assert_array_equal(found, wanted_found)
    np.testing.assert_array_equal(chosen, wanted)


def test_any_within_a_footprint() -> None:
    marked = RNG.uniform(size=SHAPE) < 0.05
    rows = area_weights(Axis(-1.3, 2.7, SHAPE[0]), 0, 19)
    columns = area_weights(Axis(-1.3, 2.7, SHAPE[1]), 0, 17)
    wanted = (
        reference.dense(rows, SHAPE[0]) @ marked.astype(float) @ reference.dense(columns, SHAPE[1]).T > 0.0
    )
    np.testing.assert_array_equal(footprint(rows, columns).any(marked), wanted)


def meshes() -> list[tuple[Mesh, int, int]]:
    """Meshes between a small source and targets that lie otherwise, with their samples down and across."""
    source = grid(SHAPE[1], SHAPE[0], pixel=30.0)
    world = Grid(CRS.from_epsg(4326), Affine(360 / 47, 0, -180.0, 0, -180 / 53, 90.0), SHAPE[1], SHAPE[0])
    targets = [
        (source, grid(40, 45, pixel=31.0, left=600_100.0, rotation=11.0)),
        (source, Grid(CRS.from_epsg(4326), Affine(0.0004, 0, 10.33, 0, -0.0003, 47.853), 50, 40)),
        (source, grid(12, 11, pixel=130.0, left=599_900.0, rotation=-20.0)),
        (world, Grid(CRS.from_epsg(32601), Affine(90_000, 0, 0.0, 0, -90_000, 4e6), 12, 60)),
    ]
    found = []
    for origin, target in targets:
        related = relation(origin, target)
        assert isinstance(related, Otherwise)
        samples = mesh_plan(related).samples
        block = Block(3, 2, target.height - 3, target.width - 2)
        found.append((mesh_of_block(related, block, samples), block.height * samples, block.width * samples))
    return found


@pytest.mark.parametrize("number", range(4))
def test_sampling_at_positions(number: int) -> None:
    mesh, down, across = meshes()[number]
    x, y = reference.sample_positions(mesh, down, across)
    inside = (x >= 0.0) & (x <= SHAPE[1]) & (y >= 0.0) & (y <= SHAPE[0])
    row = np.minimum(np.where(inside, y, 0.0).astype(int), SHAPE[0] - 1)
    column = np.minimum(np.where(inside, x, 0.0).astype(int), SHAPE[1] - 1)
    gathered = np.empty((down, across), dtype=np.int64)
    mesh_kernels.gather(CODES, 0, 0, mesh.nodes, mesh.places, mesh.turn, np.int64(-1), gathered)
    # A sample within rounding of a pixel's edge may fall either side of it.
    near_edge = (np.abs(x - np.round(x)) < 1e-9) | (np.abs(y - np.round(y)) < 1e-9)
    np.testing.assert_array_equal(gathered[~near_edge], np.where(inside, CODES[row, column], -1)[~near_edge])
    assert (gathered >= 0).any()
    needed = np.empty(4, dtype=np.int64)
    mesh_kernels.extent(mesh.nodes, mesh.places, mesh.turn, down, across, needed)
    assert needed[0] <= row[inside].min() <= row[inside].max() <= needed[1] <= SHAPE[0] - 1
    assert needed[2] <= column[inside].min() <= column[inside].max() <= needed[3] <= SHAPE[1] - 1
    smooth, mixed = np.empty((down, across), dtype=np.float32), np.empty((down, across), dtype=np.bool_)
    mesh_kernels.interpolate(VALUES, 0, 0, mesh.nodes, mesh.places, mesh.turn, LEAST_SHARE, smooth, mixed)
    np.testing.assert_allclose(smooth, reference.interpolate(VALUES, mesh, down, across), rtol=1e-6)
    assert np.isfinite(smooth).any()
