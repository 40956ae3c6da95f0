"""Filters by date, area and cloud cover."""

from __future__ import annotations

from groundglow.layers.footprint import footprint
from groundglow.raster.open import grid_of
from groundglow.run.batch.entry import Box, SceneEntry
from groundglow.run.config.batch import Select
from groundglow.scene.model import Scene


def left_out(select: Select, entry: SceneEntry) -> str | None:
    """Why a scene is not wanted; None where it is, or where it does not say.

    Parameters
    ----------
    select : Select
    entry : SceneEntry

    Returns
    -------
    str or None
    """
    first, after = select.span()
    if entry.acquired is not None:
        if first is not None and entry.acquired < first:
            return f"acquired {entry.acquired.isoformat()}, before select.since"
        if after is not None and entry.acquired >= after:
            return f"acquired {entry.acquired.isoformat()}, after select.until"
    if select.bbox is not None and entry.box is not None and not overlap(select.bbox, entry.box):
        return "outside select.bbox"
    limit = select.cloud_cover_below
    if limit is not None and entry.cloud_cover is not None and entry.cloud_cover >= limit:
        return f"cloud cover {entry.cloud_cover:g} %, not below {limit:g} %"
    return None


def overlap(first: Box, second: Box) -> bool:
    """Whether two boxes share an area; each may cross the antimeridian."""
    if first[1] >= second[3] or second[1] >= first[3]:
        return False
    return any(a[0] < b[1] and b[0] < a[1] for a in _spans(first) for b in _spans(second))


def _spans(box: Box) -> list[tuple[float, float]]:
    west, east = box[0], box[2]
    return [(west, east)] if west <= east else [(west, 180.0), (-180.0, east)]


def place_of_scene(scene: Scene) -> Box | None:
    """The area of a scene's first thermal band.

    Raises
    ------
    InputError
        If the raster cannot be opened.
    """
    source = scene.thermal[0].source
    _, box = footprint(grid_of(source.path, indirect=source.indirect))
    return None if box is None else (box[0], box[1], box[2], box[3])
