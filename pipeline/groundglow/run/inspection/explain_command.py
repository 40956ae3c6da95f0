"""The explain command: points and scenes in, tables or JSON out."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from groundglow.errors import ConfigError
from groundglow.raster.grid import Grid
from groundglow.run.batch.lists import wanted_scenes
from groundglow.run.batch.table import aligned
from groundglow.run.config.job import Job, read_job
from groundglow.run.inspection.explain import Story, explain_pixel
from groundglow.run.inspection.explain_points import Point, one_point, outside, pixel_of, read_points
from groundglow.run.planning.plan import plan_scene
from groundglow.scene.model import Scene
from groundglow.scene.open import open_scene
from groundglow.scene.stac import read_item
from groundglow.stages.variables import VARIABLES

_TITLES = {"sensor": "at the sensor", "emissivity": "ground", "atmosphere": "air", "surface": "surface"}


def explain_job(
    path: Path,
    x: float | None,
    y: float | None,
    *,
    lonlat: bool,
    points: Path | None,
    scene: str | None,
    as_json: bool,
) -> int:
    """Tell the story of each point in each scene of a job that holds it.

    Returns
    -------
    int
        The exit code.

    Raises
    ------
    GroundglowError
        If job, scene or points cannot be read, or a point lies in no scene.
    """
    if points is not None and (x is not None or y is not None):
        raise ConfigError("either X and Y or --points can be given, not both", where="explain")
    asked = read_points(points, lonlat=lonlat) if points is not None else [one_point(x, y, lonlat=lonlat)]
    job = read_job(path)
    stories, grids = [], []
    missing = dict.fromkeys(asked)
    for one in _scenes(job, path.parent, scene):
        found, grid = _stories(job, path.parent, one, asked)
        grids.append(grid)
        stories += [story for _, story in found]
        for point, _ in found:
            missing.pop(point, None)
    if missing:
        raise outside(list(missing), grids)
    if as_json:
        print(json.dumps([asdict(story) for story in stories], indent=2, default=str))
    else:
        print("\n\n".join(story_text(story) for story in stories))
    return 0


def story_text(story: Story) -> str:
    """A story as a reader follows it, from the counts to the map."""
    name = f"{story.name}, " if story.name else ""
    place = f"{name}pixel at row {story.row}, column {story.column}, centre ({story.x:.10g}, {story.y:.10g})"
    rows = [["step", "quantity", "value", "unit"]]
    for step, numbers in story.steps.items():
        rows += [
            [_TITLES.get(step, step), _words(key), _shown(value), _unit(key)]
            for key, value in numbers.items()
        ]
    parts = [f"{story.scene}: {place}", aligned(rows)]
    for title, origin in (("emissivity", story.emissivity_origin), ("air", story.atmosphere_origin)):
        if origin:
            parts.append(f"{title} from\n{_origin(origin)}")
    if story.temperature_uncertainty:
        parts.append(aligned(_uncertainty_rows(story)))
    parts.append(f"flags: {', '.join(story.flags) or 'none'}")
    if story.masked_by:
        parts.append(f"no number in the map, because of: {', '.join(story.masked_by)}")
    layers = [["layer of the map", "value", "unit"]]
    layers += [[_words(key), _shown(value), _unit(key)] for key, value in story.layers.items()]
    parts.append(aligned(layers))
    return "\n\n".join(parts)


def _scenes(job: Job, folder: Path, scene: str | None) -> Iterator[Scene]:
    if scene is not None:
        yield open_scene(scene)
        return
    for entry in wanted_scenes(job, folder):
        if entry.item is None:
            yield open_scene(entry.address)
        else:
            yield read_item(entry.item, entry.list_address)


def _stories(
    job: Job, folder: Path, scene: Scene, asked: list[Point]
) -> tuple[list[tuple[Point, Story]], tuple[str, Grid]]:
    plan = plan_scene(job, folder, scene)
    found = []
    for point in asked:
        pixel = pixel_of(point, plan.work.grid)
        if pixel is not None:
            found.append((point, explain_pixel(plan, *pixel, name=point.name)))
    return found, (plan.name, plan.work.grid)


def _uncertainty_rows(story: Story) -> list[list[str]]:
    rows = [["1 sigma from", "surface temperature K", "emitted flux W m-2"]]
    names = dict.fromkeys([*story.flux_uncertainty, *story.temperature_uncertainty])
    names.pop("total", None)
    for cause in (*names, "total"):
        both = (story.temperature_uncertainty.get(cause), story.flux_uncertainty.get(cause))
        rows.append([_words(cause), *(_shown(value) for value in both)])
    return rows


def _origin(origin: Mapping[str, Any]) -> str:
    told = {key: _flat(value) for key, value in origin.items() if value not in (None, "", [], {})}
    return "\n".join(f"  {_words(key)}: {value}" for key, value in told.items())


def _flat(value: Any) -> str:
    if isinstance(value, Mapping):
        return ", ".join(f"{_words(str(key))} {_flat(part)}" for key, part in value.items())
    if isinstance(value, list | tuple):
        return ", ".join(_flat(part) for part in value)
    return f"{value:.6g}" if isinstance(value, float) else str(value)


def _words(key: str) -> str:
    return key.replace("_", " ")


def _unit(key: str) -> str:
    if key == "ground_height":
        return "m"
    unit = VARIABLES[key].unit if key in VARIABLES else ""
    return "" if unit == "1" else unit


def _shown(value: float | None) -> str:
    return "-" if value is None else f"{value:.7g}"
