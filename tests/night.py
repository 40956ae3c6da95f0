"""A night's scenes for tests: small, invented, each in its own folder, with one job over all of them."""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Sequence
from pathlib import Path

from invented_scene import AIR, GROUND, paint_scene, scene_text

NAMES = ("first", "second", "third")
# Long ago enough that the files' times are proof of what is in them.
_SETTLED = 1_700_000_000


def paint_night(folder: Path, names: Sequence[str] = NAMES, *, height: int = 90, width: int = 110) -> Path:
    """Paint scenes and write a job over them.

    Returns
    -------
    Path
        The job file; results go to ``maps`` beside it.
    """
    for seed, name in enumerate(names):
        scene = paint_scene(folder / "scenes" / name, height, width, noise=0.01, seed=seed)
        scene.job_file.unlink()
        scene.scene_file.write_text(scene_text(name=name), encoding="utf-8")
    settle(folder)
    return write_job(folder)


def write_job(
    folder: Path, more: str = "", *, scenes: str | tuple[str, ...] = "scenes/*/scene.toml", head: str = ""
) -> Path:
    """The job over all scenes, which tries failing ones again without waiting."""
    job = folder / "job.toml"
    named = json.dumps(scenes)
    text = f'scenes = {named}\noutput = "maps"\n{head}\n{GROUND}\n{AIR}\n{more}\n'
    job.write_text(text if "[retry]" in text else f"{text}[retry]\ndelay = 0.01\n", encoding="utf-8")
    return job


def settle(folder: Path) -> None:
    """Set the times of all files back."""
    for path in folder.rglob("*"):
        if path.is_file():
            os.utime(path, (_SETTLED, _SETTLED))


def layer_digests(output: Path) -> dict[str, str]:
    """SHA-256 of every layer, by its path within the output folder."""
    return {
        str(path.relative_to(output)): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(output.glob("*/*.tif"))
    }


def leftovers(output: Path) -> list[str]:
    """Hidden things beside the scenes that are not the run folder, and half-written files within them."""
    found = [
        path.name for path in output.iterdir() if path.name.startswith(".") and path.name != ".groundglow"
    ]
    return found + [str(path) for path in output.glob("*/.*") if path.parent.name != ".groundglow"]
