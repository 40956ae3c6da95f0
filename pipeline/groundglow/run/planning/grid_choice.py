"""From the job's grid and area tables to the grid of the results and the mask of the area."""

from __future__ import annotations

from pathlib import Path

from rasterio.crs import CRS

from groundglow.raster.grid import Grid
from groundglow.raster.open import describe_raster
from groundglow.run.blocks.worker import PlacedArea
from groundglow.run.config.grid import AreaOfInterest, TargetGrid
from groundglow.run.config.job import Job


def grid_of_job(job: Job, folder: Path, source: Grid) -> tuple[Grid, PlacedArea | None]:
    """The grid of the results, cut to the area of interest, and that area on it.

    Parameters
    ----------
    job : Job
    folder : Path
        Folder of the job file.
    source : Grid
        Of the thermal band.

    Returns
    -------
    grid : Grid
    area : PlacedArea or None

    Raises
    ------
    ConfigError, InputError
        If the choice cannot be followed, or the area lies outside the scene.
    """
    grid = source if job.grid is None else _chosen(job.grid, folder, source)
    if job.area is None:
        return grid, None
    from groundglow.raster.area import area_of_bounds, clip_to_area, place_area  # noqa: PLC0415  (on request)
    from groundglow.raster.area_files import read_area  # noqa: PLC0415  (on request)

    wanted: AreaOfInterest = job.area
    if wanted.bounds is not None:
        area = area_of_bounds(*wanted.bounds, CRS.from_epsg(4326))
    else:
        area = read_area(str(folder / str(wanted.path)), layer=wanted.layer)
    cut = clip_to_area(grid, area)
    return cut, place_area(area, cut)


def _chosen(choice: TargetGrid, folder: Path, source: Grid) -> Grid:
    if choice.like is not None:
        return describe_raster(str(folder / choice.like)).grid
    from groundglow.raster.target import TargetChoice, target_grid  # noqa: PLC0415  (on request)

    size = choice.resolution
    resolution = None if size is None else size[0] if len(size) == 1 else (size[0], size[1])
    return target_grid(source, TargetChoice(choice.crs, resolution, choice.bounds, choice.origin))
