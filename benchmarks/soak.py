"""What is too long for the test suite: a batch killed at many moments, a long night, one very large raster.

    python benchmarks/soak.py [--kills 100] [--scenes 1000] [--edge 16384] [--workers 2]

1. A run is killed with SIGKILL at steps spread over all its file-system calls, the output folder carried on from
   one kill to the next. After each kill every folder that a reader sees must be whole; in the end a run completes
   and the bytes must equal those of an undisturbed run.
2. A night of many small scenes by threads, then with a cluster of processes: seconds a scene, what the scheduler
   costs, the peak memory of the process that holds the lock, and the same bytes.
3. One very large raster, by threads and spread by blocks over a cluster: seconds, peak memory, the same bytes.

Exits 1 where anything differs.
"""

from __future__ import annotations

import argparse
import os
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio.windows import Window

ROOT = Path(__file__).parents[1]
sys.path[:0] = [str(ROOT / "tests"), str(ROOT / "tests" / "run")]

from test_stops import KILLED_AT, every_scene_is_whole  # noqa: E402  (found only after the path is set)

from invented_scene import paint_scene, scene_text  # noqa: E402  (the tests' own scenes)
from night import layer_digests, leftovers, paint_night, write_job  # noqa: E402  (as above)


def measured(job: Path, *options: str) -> tuple[float, float]:
    """Seconds and peak MiB of one run as a whole process."""
    command = [sys.executable, "-m", "groundglow", "run", str(job), "--quiet", *options]
    began = time.perf_counter()
    process = subprocess.Popen(command)
    _, status, usage = os.wait4(process.pid, 0)
    process.returncode = os.waitstatus_to_exitcode(status)
    if process.returncode:
        raise SystemExit(f"the run ended with exit code {process.returncode}")
    return time.perf_counter() - began, usage.ru_maxrss / 1024


def kills(folder: Path, count: int) -> None:
    """Kill upon kill."""
    job = paint_night(folder, ("first", "second", "third"))
    measured(job)
    write_job(folder, "[quality]\ncloud_buffer = 90.0\n")
    measured(job, "--output", str(folder / "undisturbed"))
    wanted = layer_digests(folder / "undisturbed")
    output, made = folder / "maps", shutil.copytree(folder / "maps", folder / "before")
    program = [sys.executable, "-c", KILLED_AT]

    def run(step: int) -> subprocess.CompletedProcess[str]:
        command = [*program, str(step), str(output), "run", str(job), "--quiet"]
        return subprocess.run(command, capture_output=True, text=True, check=False)

    steps = int(run(0).stdout)
    died = 0
    for step in np.linspace(1, steps, count).astype(int):
        if layer_digests(output) == wanted:
            shutil.rmtree(output)
            shutil.copytree(made, output)
        died += run(int(step)).returncode < 0
        if not every_scene_is_whole(output):
            raise SystemExit(f"killed at step {step} of {steps}: a reader finds half a scene")
    measured(job)
    if layer_digests(output) != wanted or leftovers(output):
        raise SystemExit("after the kills the bytes differ, or something was left behind")
    print(
        f"kills: {died} of {count} runs died, at steps 1 to {steps}; every scene whole each time, same bytes in the end"
    )


def long_night(folder: Path, count: int, workers: int) -> None:
    """Many small scenes."""
    first = paint_scene(folder / "scenes" / "0000", 600, 500, noise=0.01)
    first.job_file.unlink()
    for number in range(count):
        place = folder / "scenes" / f"{number:04d}"
        if number:
            shutil.copytree(first.folder, place)
        (place / "scene.toml").write_text(scene_text(name=f"scene-{number:04d}"))
    job = write_job(folder)
    alone, peak = measured(job, "--workers", str(workers))
    many = f"{count} scenes of 600 x 500"
    print(f"{many} by {workers} threads: {alone:.1f} s, {1e3 * alone / count:.0f} ms each, {peak:.0f} MiB")
    again, peak = measured(job)
    print(f"the same again, all up to date: {again:.1f} s, {1e3 * again / count:.2f} ms each, {peak:.0f} MiB")
    spread, peak = measured(job, "--output", str(folder / "spread"), "--scheduler", f"processes:{workers}")
    print(
        f"{many} by {workers} processes: {spread:.1f} s, {1e3 * spread / count:.0f} ms each, {peak:.0f} MiB"
    )
    if layer_digests(folder / "maps") != layer_digests(folder / "spread"):
        raise SystemExit("the cluster's bytes differ")


def write_large(path: Path, pixels: NDArray[np.uint16], edge: int) -> None:
    """The same square again and again, written piece by piece; other numbers in each piece."""
    size = pixels.shape[0]
    with rasterio.open(path) as small:
        profile = (
            small.profile
            | {"width": edge, "height": edge, "tiled": True}
            | {"blockxsize": 512, "blockysize": 512, "bigtiff": "if_safer"}
        )
    with rasterio.open(path, "w", **profile) as large:
        for row in range(0, edge, size):
            for column in range(0, edge, size):
                height, width = min(size, edge - row), min(size, edge - column)
                turned = np.roll(pixels, (row // 7, column // 11), axis=(0, 1))
                large.write(turned[:height, :width], 1, window=Window(column, row, width, height))


def large_raster(folder: Path, edge: int, workers: int) -> None:
    """One scene larger than a worker should be given whole."""
    scene = paint_scene(folder, 1024, 1024, noise=0.01)
    for name, pixels in (("thermal", scene.counts), ("quality", scene.words)):
        write_large(folder / f"{name}.tif", pixels, edge)
    job = folder / "job.toml"
    for name, options in (
        ("threads", ("--workers", str(workers))),
        ("blocks", ("--output", str(folder / "blocks"), "--scheduler", f"processes:{workers}")),
    ):
        seconds, peak = measured(job, *options)
        what = f"one raster of {edge} x {edge} by {workers} {name}"
        print(f"{what}: {seconds:.1f} s, {peak:.0f} MiB in the run", flush=True)
    if layer_digests(folder / "maps") != layer_digests(folder / "blocks"):
        raise SystemExit("the cluster's bytes differ")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--kills", type=int, default=100)
    parser.add_argument("--scenes", type=int, default=1000)
    parser.add_argument("--edge", type=int, default=16384, help="edge of the large raster in pixels")
    parser.add_argument("--workers", type=int, default=2)
    options = parser.parse_args()
    for part, arguments in (
        (kills, (options.kills,)),
        (long_night, (options.scenes, options.workers)),
        (large_raster, (options.edge, options.workers)),
    ):
        if arguments[0]:
            with tempfile.TemporaryDirectory(prefix="soak-") as folder:
                part(Path(folder), *arguments)


if __name__ == "__main__":
    main()
