"""The main job as a whole process, beside GDAL merely encoding its layers and beside plain NumPy.

Three programs run one after another on the same invented scene, each in a process of its own:

* the job: ``groundglow run``;
* (a) GDAL: decode the job's inputs and encode the finished layers with GDAL's own cloud-optimised
  GeoTIFF driver, the codec and level of the job, as many threads as there are cores; nothing computed;
* (b) NumPy: the usual whole-array script (Planck inversion by the two-constant form, one constant
  emissivity, one set of air values, emitted flux) that writes the same layers with GDAL.

What counts are the ratios within one run; the floor is 0.8 of (a) and a peak memory below 1 GiB.

Usage: ``python benchmarks/main_job.py [--size 6144] [--repeat 3]``
"""

from __future__ import annotations

import argparse
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import rasterio
from affine import Affine

LAYERS = ("surface_temperature", "surface_temperature_uncertainty", "emitted_flux", "quality")
GAIN, OFFSET, K1, K2 = 3.342e-4, 0.1, 774.8853, 1321.0789
EMISSIVITY, TRANSMITTANCE, PATH, SKY = 0.97, 0.82, 1.4, 2.3

SCENE = """
[scene]
name = "bench"
acquired = 2026-07-14T10:30:00+02:00
sensor = "landsat-8"
[[thermal]]
band = "10"
path = "thermal.tif"
quantity = "counts"
scale = 3.342e-4
offset = 0.1
nodata = 0
saturation = 65535
[quality]
path = "quality.tif"
[[quality.rule]]
flag = "cloud"
bits = [3]
[[quality.rule]]
flag = "water"
bits = [7]
"""
JOB = """
scenes = "scene.toml"
output = "out"
[emissivity]
source = "constant"
value = 0.97
[atmosphere]
source = "explicit"
reference = "invented for the benchmark"
[[atmosphere.air]]
band = "10"
transmittance = 0.82
path_radiance = 1.4
sky_radiance = 2.3
"""


def paint_inputs(folder: Path, size: int) -> None:
    """Counts of a smooth, noisy landscape with clouds and water, as agencies deliver them."""
    random = np.random.default_rng(7)
    y, x = np.mgrid[0:size, 0:size].astype(np.float32) / size
    hills = 300.0 + 12.0 * np.sin(9.0 * x) * np.cos(7.0 * y) + 6.0 * np.sin(61.0 * x * y)
    coarse = random.normal(0.0, 3.0, (size // 24 + 1, size // 24 + 1)).astype(np.float32)
    hills += np.kron(coarse, np.ones((24, 24), np.float32))[:size, :size]
    radiance = K1 / np.expm1(K2 / hills) + random.normal(0.0, 0.007, hills.shape)
    counts = np.clip((radiance - OFFSET) / GAIN, 1, 65535).astype(np.uint16)
    counts[: size // 9, : size // 7] = 0
    words = np.zeros((size, size), np.uint16)
    words[np.sin(13.0 * x) * np.sin(11.0 * y) > 0.9] |= 1 << 3
    words[np.sin(5.0 * x + 3.0 * y) > 0.97] |= 1 << 7
    profile = {
        "driver": "GTiff", "width": size, "height": size, "count": 1, "dtype": "uint16", "crs": "EPSG:32633",
        "transform": Affine(30, 0, 400000, 0, -30, 5400000), "tiled": True, "blockxsize": 256, "blockysize": 256,
        "compress": "deflate", "predictor": 2,
    }  # fmt: skip
    for name, pixels in (("thermal", counts), ("quality", words)):
        with rasterio.open(folder / f"{name}.tif", "w", **profile) as raster:
            raster.write(pixels, 1)


DECODE_SCRIPT = """
import sys, numpy as np, rasterio
with rasterio.open(f"{sys.argv[1]}/out/bench/{sys.argv[2]}.tif") as raster:
    np.save(f"{sys.argv[1]}/{sys.argv[2]}.npy", raster.read(1))
"""

GDAL_SCRIPT = """
import sys, numpy as np, rasterio
from pathlib import Path
folder = Path(sys.argv[1])
for name in ("thermal", "quality"):
    with rasterio.open(folder / f"{name}.tif", num_threads="all_cpus") as raster:
        raster.read(1)
        profile = raster.profile
for name in sys.argv[2:]:
    pixels = np.load(folder / f"{name}.npy", mmap_mode="r")
    flags = pixels.dtype == np.uint16
    with rasterio.open(folder / f"{name}_gdal.tif", "w", driver="COG", width=pixels.shape[1], height=pixels.shape[0],
                       count=1, dtype=pixels.dtype, crs=profile["crs"], transform=profile["transform"],
                       compress="zstd", level=1, predictor="yes", blocksize=512, num_threads="all_cpus",
                       overview_resampling="mode" if flags else "average",
                       **({} if flags else {"nodata": np.nan})) as raster:
        raster.write(pixels, 1)
"""

NUMPY_SCRIPT = """
import sys, numpy as np, rasterio
from pathlib import Path
folder = Path(sys.argv[1])
with rasterio.open(folder / "thermal.tif") as raster:
    counts = raster.read(1)
    profile = raster.profile
with rasterio.open(folder / "quality.tif") as raster:
    words = raster.read(1)
radiance = counts.astype(np.float32) * np.float32(3.342e-4) + np.float32(0.1)
eps, t, path, sky = (np.float32(v) for v in (0.97, 0.82, 1.4, 2.3))
black = (radiance - path) / (t * eps) - (1 - eps) / eps * sky
temperature = np.float32(1321.0789) / np.log(np.float32(774.8853) / black + 1)
slope = black * np.float32(1321.0789) / temperature**2 * (1 + black / np.float32(774.8853))
uncertainty = np.sqrt((0.05 * 0.14 / (t * eps * slope)) ** 2 + ((black - sky) / (eps * slope) * 0.02) ** 2
                      + (black / (t * slope) * 0.02) ** 2, dtype=np.float32)
flux = eps * np.float32(5.670374419e-8) * temperature**4
quality = ((counts == 0) * 1 + ((words >> 3) & 1) * 4 + ((words >> 7) & 1) * 64).astype(np.uint16)
bad = (quality & 5) != 0
for pixels in (temperature, uncertainty, flux):
    pixels[bad] = np.nan
for name, pixels in (("surface_temperature", temperature), ("surface_temperature_uncertainty", uncertainty),
                     ("emitted_flux", flux), ("quality", quality)):
    flags = pixels.dtype == np.uint16
    with rasterio.open(folder / f"{name}_numpy.tif", "w", driver="COG", width=pixels.shape[1],
                       height=pixels.shape[0], count=1, dtype=pixels.dtype, crs=profile["crs"],
                       transform=profile["transform"], compress="zstd", level=1, predictor="yes", blocksize=512,
                       num_threads="all_cpus", overview_resampling="mode" if flags else "average",
                       **({} if flags else {"nodata": np.nan})) as raster:
        raster.write(pixels, 1)
"""


def timed(command: list[str]) -> tuple[float, float]:
    """Wall seconds and peak resident memory [MiB] of one process."""
    began = time.perf_counter()
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL)
    _, status, usage = os.wait4(process.pid, 0)
    if os.waitstatus_to_exitcode(status):
        sys.exit(f"failed: {' '.join(command[:4])}")
    return time.perf_counter() - began, usage.ru_maxrss / 1024


def main() -> None:
    """Run the three programs and print times, memory and ratios."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--size", type=int, default=6144, help="edge of the square scene in pixels")
    parser.add_argument("--paint", type=Path, help=argparse.SUPPRESS)
    parser.add_argument("--repeat", type=int, default=3, help="rounds; the medians are compared")
    options = parser.parse_args()
    if options.paint:
        paint_inputs(options.paint, options.size)
        return
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        # In a process of its own: a child's peak memory begins with that of the process that starts it.
        subprocess.run([sys.executable, __file__, "--size", str(options.size), "--paint", name], check=True)
        (folder / "scene.toml").write_text(SCENE)
        (folder / "job.toml").write_text(JOB)
        job = [sys.executable, "-m", "groundglow", "run", str(folder / "job.toml"), "--quiet", "--force"]
        timed(job)  # compiles the kernels, once per installation
        for layer in LAYERS:
            subprocess.run([sys.executable, "-c", DECODE_SCRIPT, str(folder), layer], check=True)
        programs = {
            "the job": job,
            "(a) GDAL": [sys.executable, "-c", GDAL_SCRIPT, str(folder), *LAYERS],
            "(b) NumPy": [sys.executable, "-W", "ignore", "-c", NUMPY_SCRIPT, str(folder)],
        }
        seconds: dict[str, list[float]] = {key: [] for key in programs}
        memory: dict[str, float] = {}
        for _ in range(options.repeat):
            for key, command in programs.items():
                spent, peak = timed(command)
                seconds[key].append(spent)
                memory[key] = max(memory.get(key, 0.0), peak)
    middle = {key: statistics.median(values) for key, values in seconds.items()}
    print(f"{options.size} x {options.size} pixels, {os.cpu_count()} cores, median of {options.repeat}")
    for key, value in middle.items():
        print(
            f"{key:10s} {value:6.2f} s  peak {memory[key]:5.0f} MiB  the job is {middle['the job'] / value:.2f} of it"
        )


if __name__ == "__main__":
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    main()
