"""How planning grows with the number of scenes: time and memory of ``groundglow plan`` over very many.

Three cases, each a whole process as a user starts it: scenes that are all up to date (known from the run folder),
scenes never made, and an ItemCollection narrowed by date and cloud cover. Files are links to one file, so that a
hundred thousand scenes fit on any disk; the plan asks the file system for each of them all the same.

    python benchmarks/plan_scale.py [--scenes 100000] [--files 8]

Bounds at 100,000 scenes: two minutes and 1 GB.
"""

from __future__ import annotations

import argparse
import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

from groundglow.run.batch.memory import Memory, Seen
from groundglow.run.config.job import read_job
from groundglow.run.placing.state import job_digest, stamps

ROOT = Path(__file__).parents[1]
# Long ago enough that a file's time is proof of its content.
SETTLED = 1_700_000_000
SECONDS, MEBIBYTES = 120.0, 1000.0

JOB = """
scenes = "{scenes}"
output = "maps"
{select}
[emissivity]
source = "constant"
value = 0.97
[atmosphere]
source = "none"
[layers]
write = ["brightness_temperature"]
"""


def write_job(folder: Path, scenes: str, select: str = "") -> Path:
    path = folder / "job.toml"
    path.write_text(JOB.format(scenes=scenes, select=select))
    return path


def demo_scenes(folder: Path, count: int) -> None:
    """Scene descriptions that name the demo's rasters, each under its own name."""
    text = (ROOT / "data_demo" / "scene.toml").read_text()
    for key in ("elevation", "land_cover", "thermal", "quality", "red", "near_infrared"):
        text = text.replace(f'"{key}.tif"', f'"{ROOT / "data_demo" / key}.tif"')
    for number in range(count):
        place = folder / "scenes" / f"{number // 1000:04d}" / f"{number:06d}"
        place.mkdir(parents=True)
        if number % 1000 == 0:
            original = settled_file(folder / f"scene{number}.toml", text)
        os.link(original, place / "scene.toml")


def settled_file(path: Path, text: str) -> Path:
    """A file to be linked to; file systems allow some ten thousand links of one file."""
    path.write_text(text)
    os.utime(path, (SETTLED, SETTLED))
    return path


def up_to_date(folder: Path, count: int, files: int) -> Path:
    """A season whose scenes are all made: descriptions, outputs, and what the run folder remembers of them."""
    demo_scenes(folder, count)
    job = write_job(folder, "scenes/*/*/scene.toml")
    digest = job_digest(read_job(job), folder)
    output = folder / "maps"
    (output / ".groundglow").mkdir(parents=True)
    memory = Memory(output / ".groundglow" / "seen.sqlite")
    for index, path in enumerate(sorted(folder.glob("scenes/*/*/scene.toml"))):
        if index % 1000 == 0:
            raster = settled_file(folder / f"raster{index}.tif", "stands for a raster")
        made = output / path.parent.name
        made.mkdir()
        for number in range(files):
            os.link(raster, made / f"{number}.tif")
        found = stamps(made / f"{number}.tif" for number in range(files))
        memory.keep(str(path), Seen(path.parent.name, digest, stamps([path, raster]), found, 360_000))
    memory.close()
    return job


def never_made(folder: Path, count: int, files: int) -> Path:
    demo_scenes(folder, count)
    return write_job(folder, "scenes/*/*/scene.toml")


def narrowed_list(folder: Path, count: int, files: int) -> Path:
    """One ItemCollection, of which a thousandth is wanted."""
    with (folder / "season.json").open("w") as stream:
        stream.write('{"type": "FeatureCollection", "features": [')
        for number in range(count):
            day = 1 + number % 28
            item = {
                "type": "Feature", "stac_version": "1.1.0", "id": f"item-{number}", "geometry": None, "links": [],
                "bbox": [14.0, 48.0, 15.0, 49.0],
                "properties": {"datetime": f"2026-07-{day:02d}T10:00:00Z", "eo:cloud_cover": number % 100 + 0.5},
                "assets": {
                    f"band{band}": {"href": f"https://example.com/{number}/{band}.tif", "title": "x" * 200}
                    for band in range(11)
                },
            }  # fmt: skip
            stream.write((", " if number else "") + json.dumps(item))
        stream.write("]}")
    return write_job(folder, "season.json", "[select]\nuntil = 2026-07-03\ncloud_cover_below = 1.0\n")


def measured(job: Path) -> tuple[float, float, dict[str, int]]:
    """Seconds, peak MiB and counts by state of one plan."""
    command = [sys.executable, "-m", "groundglow", "plan", str(job), "--json"]
    with tempfile.TemporaryFile() as answer:
        began = time.perf_counter()
        process = subprocess.Popen(command, stdout=answer)
        _, status, usage = os.wait4(process.pid, 0)
        seconds = time.perf_counter() - began
        process.returncode = os.waitstatus_to_exitcode(status)
        if process.returncode:
            raise SystemExit(f"the plan failed with exit code {process.returncode}")
        answer.seek(0)
        counts: dict[str, int] = json.load(answer)["counts"]
    return seconds, usage.ru_maxrss / 1024, counts


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--scenes", type=int, default=100_000)
    parser.add_argument("--files", type=int, default=8, help="files in the folder of a finished scene")
    options = parser.parse_args()
    cases: dict[str, Callable[[Path, int, int], Path]] = {
        "all up to date": up_to_date,
        "never made": never_made,
        "ItemCollection, narrowed": narrowed_list,
    }
    slow = False
    print(f"{options.scenes} scenes")
    for name, prepare in cases.items():
        with tempfile.TemporaryDirectory(prefix="plan-scale-") as folder:
            seconds, peak, counts = measured(prepare(Path(folder), options.scenes, options.files))
        print(f"{name:26s} {seconds:7.1f} s  {peak:6.0f} MiB  {counts}", flush=True)
        slow |= seconds > SECONDS or peak > MEBIBYTES
    if slow and options.scenes <= 100_000:
        raise SystemExit(f"above the bounds of {SECONDS:.0f} s and {MEBIBYTES:.0f} MiB")


if __name__ == "__main__":
    main()
