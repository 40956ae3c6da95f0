"""The command that solves the day's air for one height and angle, and shows it."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

from groundglow.errors import ConfigError, OutputError
from groundglow.run.batch.lists import wanted_scenes
from groundglow.run.config.atmosphere import SolvedAtmosphere
from groundglow.run.config.job import Job, read_job
from groundglow.run.inspection.air_account import air_record, air_text, spectrum_lines
from groundglow.run.inspection.air_look import AirLook, look_at_air
from groundglow.run.inspection.air_plot import draw_air
from groundglow.scene.model import Scene, ThermalBand
from groundglow.scene.open import open_scene
from groundglow.scene.stac import read_item


def show_air(
    path: Path,
    *,
    band: str | None,
    height: float | None,
    angle: float | None,
    as_json: bool,
    plot: Path | None,
    spectrum: Path | None,
) -> None:
    """Solve the air of a job's first scene and print it.

    Parameters
    ----------
    path : Path
        The job file.
    band : str or None
        Of the scene; None for all its thermal bands.
    height, angle : float or None
        Ground above sea level and view zenith angle; None for the scene's own. [m], [deg]
    as_json : bool
        JSON instead of tables.
    plot, spectrum : Path or None
        Picture and CSV file to write.

    Raises
    ------
    GroundglowError
        If the job or the scene cannot be followed, the profile is impossible, or nothing can be written.
    """
    job = read_job(path)
    chosen = job.atmosphere
    if not isinstance(chosen, SolvedAtmosphere):
        raise ConfigError(
            f"there is no profile to solve: the job's air is {chosen.source!r}",
            where="atmosphere.source",
            remedy="A sounding, an analysis, a model atmosphere or near-surface weather can be looked at",
        )
    scene = _first_scene(job, path.parent)
    look = look_at_air(chosen, scene, _bands(scene, band), path.parent, height=height, angle=angle)
    if plot is not None:
        draw_air(look, plot)
    if spectrum is not None:
        _write_spectrum(look, spectrum)
    print(json.dumps(air_record(look), indent=2) if as_json else air_text(look))


def _first_scene(job: Job, folder: Path) -> Scene:
    for entry in wanted_scenes(job, folder):
        return open_scene(entry.address) if entry.item is None else read_item(entry.item, entry.list_address)
    raise ConfigError("no scene is wanted", where="select", remedy="Widen the job's selection")


def _bands(scene: Scene, wanted: str | None) -> Sequence[ThermalBand]:
    chosen = [band for band in scene.thermal if wanted in (None, band.number)]
    if not chosen:
        raise ConfigError(
            f"the scene {scene.name} has no thermal band {wanted!r}",
            where="--band",
            remedy=f"Choose from: {', '.join(band.number for band in scene.thermal)}",
        )
    return chosen


def _write_spectrum(look: AirLook, path: Path) -> None:
    try:
        path.write_text("\n".join(spectrum_lines(look)) + "\n", encoding="utf-8")
    except OSError as error:
        raise OutputError(f"cannot be written ({error.strerror})", where=str(path)) from error
