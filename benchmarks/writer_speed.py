"""How fast one layer is written, beside GDAL's own drivers in the same run.

One float32 layer of smooth temperature with pixel noise, 15 mantissa bits kept, ZSTD level 1. The
GDAL drivers get the same rounded pixels, codec and predictor, and one thread. Every figure is the
best of several rounds; the ratio to GDAL, not the seconds, is what carries over to other machines.

    python benchmarks/writer_speed.py [side of the layer in pixels, default 6144]
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np
import rasterio
from affine import Affine
from numpy.typing import NDArray
from rasterio.crs import CRS

from groundglow.layers.encode import encode_block, format_of
from groundglow.layers.geotiff import LayerWriter
from groundglow.layers.tags import text_of
from groundglow.raster.grid import Grid

ROUNDS = 3
BLOCK = 1024


def invented_temperature(side: int) -> NDArray[np.float32]:
    """Hills and fields in kelvin with 0.1 K of noise, an oblique swath edge without values."""
    random = np.random.default_rng(20260714)
    rows, columns = np.mgrid[0:side, 0:side].astype(np.float32) / np.float32(side)
    smooth = 300 + 6 * np.sin(9 * rows) * np.cos(7 * columns)
    fields = random.normal(0, 2, (side // 64 + 1, side // 64 + 1)).astype(np.float32)
    smooth += np.kron(fields, np.ones((64, 64), np.float32))[:side, :side]
    pixels: NDArray[np.float32] = smooth + random.normal(0, 0.1, (side, side)).astype(np.float32)
    pixels[rows + 4 * columns < 0.3] = np.nan
    return pixels


def ours(pixels: NDArray[np.float32], grid: Grid, path: Path) -> None:
    layer_format = format_of("surface_temperature")
    with LayerWriter(path, grid, layer_format, text_of("surface_temperature")) as writer:
        for block in grid.blocks(BLOCK):
            rows = slice(block.row, block.row + block.height)
            columns = slice(block.column, block.column + block.width)
            writer.add(encode_block(pixels[rows, columns], block, grid, layer_format))
        writer.finish()


def gdal(driver: str, pixels: NDArray[np.float32], grid: Grid, path: Path) -> None:
    options: dict[str, object] = {"compress": "zstd", "bigtiff": "no", "num_threads": 1}
    if driver == "COG":
        options |= {"predictor": "yes", "level": 1, "overview_resampling": "average", "blocksize": 512}
    else:
        options |= {"predictor": 3, "zstd_level": 1, "tiled": True, "blockxsize": 512, "blockysize": 512}
    with rasterio.open(
        path, "w", driver=driver, width=grid.width, height=grid.height, count=1, dtype="float32",
        crs=grid.crs, transform=grid.transform, nodata=np.nan, **options,
    ) as target:  # fmt: skip
        target.write(pixels, 1)


def best(action: Callable[[], None]) -> float:
    seconds = []
    for _ in range(ROUNDS):
        start = time.perf_counter()
        action()
        seconds.append(time.perf_counter() - start)
    return min(seconds)


def main() -> None:
    side = int(sys.argv[1]) if len(sys.argv) > 1 else 6144
    pixels = invented_temperature(side)
    grid = Grid(CRS.from_epsg(32633), Affine(30, 0, 500_000, 0, -30, 5_000_000), side, side)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "layer.tif"
        mine = best(lambda: ours(pixels, grid, path))
        print(f"groundglow    {mine:6.2f} s  {path.stat().st_size / 1e6:7.1f} MB  1.00")
        with rasterio.open(path) as layer:
            rounded = layer.read(1)
        for driver, note in (("COG", "the same job"), ("GTiff", "no overviews, statistics or checksum")):
            seconds = best(partial(gdal, driver, rounded, grid, path))
            size = path.stat().st_size / 1e6
            print(f"GDAL {driver:8} {seconds:6.2f} s  {size:7.1f} MB  {seconds / mine:.2f}  ({note})")


if __name__ == "__main__":
    main()
