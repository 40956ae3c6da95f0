"""Results on another grid or for an area: no shift, radiance averaged as radiance, noise averaged as it should be."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import rasterio
from affine import Affine
from rasterio.warp import transform as to_crs

from command_line import groundglow
from groundglow.quantities import FLAG
from invented_scene import (
    CORNER,
    CRS,
    PIXEL,
    InventedScene,
    band_radiance,
    paint_scene,
    scene_text,
    write_raster,
)

UNCERTAINTIES = '[layers]\nwrite = ["surface_temperature", "surface_temperature_uncertainty_pixel"]\n'


def run(scene: InventedScene) -> dict[str, object]:
    finished = groundglow("run", scene.job_file, "--json", "--quiet")
    assert finished.code == 0, finished.err
    return json.loads(finished.out)["scenes"][0]


def opened(
    scene: InventedScene, layer: str = "surface_temperature"
) -> tuple[np.ndarray, rasterio.Affine, str]:
    with rasterio.open(scene.folder / "maps" / "invented" / f"{layer}.tif") as raster:
        return raster.read(1), raster.transform, raster.crs.to_string()


def test_a_coarser_grid_averages_radiance_not_temperature(tmp_path: Path) -> None:
    # Two pixels of 280 K and 340 K: their mean radiance is that of a blackbody warmer than 310 K.
    scene = paint_scene(tmp_path)
    stripes = np.where(np.arange(110) % 2 == 0, 280.0, 340.0)[np.newaxis].repeat(90, axis=0)
    counts = np.rint((band_radiance(np.array([280.0, 340.0])) - 0.1) / 3.0e-4).astype(np.uint16)
    write_raster(
        tmp_path / "thermal.tif", np.where(stripes == 280.0, *counts).astype(np.uint16), scene.transform
    )
    air = '[atmosphere]\nsource = "none"\n'
    scene.write_job('[grid]\nresolution = 60.0\n[layers]\nwrite = ["brightness_temperature"]\n', air=air)
    run(scene)
    found, _, _ = opened(scene, "brightness_temperature")
    inner = found[2:-2, 2:-2]
    mean = band_radiance(np.array([280.0, 340.0])).mean()
    warm = np.interp(mean, band_radiance(np.arange(300.0, 330.0, 0.01)), np.arange(300.0, 330.0, 0.01))
    assert warm > 312.0
    # The coarser grid's corners meet (0, 0), so each of its pixels holds one cold and one warm column.
    seen = inner[np.isfinite(inner)]
    assert seen.size > 0.9 * inner.size
    np.testing.assert_allclose(seen, warm, atol=0.02)


def test_another_reference_system_keeps_every_place(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    scene.write_job('[grid]\ncrs = "EPSG:4326"\n')
    run(scene)
    found, transform, crs = opened(scene)
    assert crs == "EPSG:4326"
    rows, columns = np.nonzero(np.isfinite(found))
    lon, lat = transform.c + transform.a * (columns + 0.5), transform.f + transform.e * (rows + 0.5)
    x, y = (np.array(part) for part in to_crs("EPSG:4326", CRS, lon, lat))
    column, row = (x - CORNER[0]) / PIXEL - 0.5, (CORNER[1] - y) / PIXEL - 0.5
    inside = (column > 20) & (column < 58) & (row > 22) & (row < 85)
    at = (np.rint(row[inside]).astype(int), np.rint(column[inside]).astype(int))
    error = found[rows[inside], columns[inside]] - scene.temperature[at]
    assert abs(error.mean()) < 0.01
    assert np.abs(error).max() < 0.5  # half a pixel of a slope of at most 0.3 K a pixel, either way
    with rasterio.open(scene.folder / "maps" / "invented" / "quality.tif") as quality:
        assert (quality.read(1)[rows, columns] & FLAG["interpolated"].mask).all()


def test_another_rasters_grid_is_taken_whole(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    like = Affine(45.0, 0.0, CORNER[0] + 301.0, 0.0, -45.0, CORNER[1] - 299.0)
    write_raster(tmp_path / "like.tif", np.zeros((31, 41), np.uint8), like)
    scene.write_job('[grid]\nlike = "like.tif"\n')
    run(scene)
    found, transform, _ = opened(scene)
    assert found.shape == (31, 41)
    assert transform == like


def test_averaging_reduces_only_the_noise(tmp_path: Path) -> None:
    sizes = {}
    for resolution in (30.0, 90.0):
        scene = paint_scene(tmp_path / str(resolution))
        scene.write_job(
            f"[grid]\nresolution = {resolution}\norigin = [{CORNER[0]}, {CORNER[1]}]\n" + UNCERTAINTIES
        )
        run(scene)
        sizes[resolution] = float(np.nanmedian(opened(scene, "surface_temperature_uncertainty_pixel")[0]))
    # Nine independent native pixels of 30 m: a third.
    assert sizes[90.0] / sizes[30.0] == pytest.approx(1 / 3, rel=0.01)


def test_a_polygon_cuts_and_masks(tmp_path: Path) -> None:
    scene = paint_scene(tmp_path)
    corners = [(20.1, 30.1), (59.9, 30.1), (20.1, 79.9)]  # column, row
    x = [CORNER[0] + PIXEL * column for column, _ in corners]
    y = [CORNER[1] - PIXEL * row for _, row in corners]
    lon, lat = to_crs(CRS, "EPSG:4326", x, y)
    ring = [*zip(lon, lat, strict=True)]
    polygon = {"type": "Polygon", "coordinates": [[*ring, ring[0]]]}
    (tmp_path / "area.geojson").write_text(json.dumps(polygon))
    scene.write_job('[area]\npath = "area.geojson"\n')
    outcome = run(scene)
    found, transform, _ = opened(scene)
    assert found.shape == (50, 40)
    assert transform.c == pytest.approx(CORNER[0] + 20 * PIXEL)
    assert outcome["valid_percent"] == pytest.approx(50.0, abs=2.0)
    assert np.isfinite(found[2, 2])
    assert np.isnan(found[-2, -2])


@pytest.mark.parametrize(
    ("text", "code", "words"),
    [
        ('[grid]\ncrs = "EPSG:999999"\n', 2, ("EPSG:999999",)),
        ("[grid]\nresolution = -30\n", 2, ("resolution", "above 0")),
        ('[grid]\nlike = "like.tif"\nresolution = 30\n', 2, ("like", "leave the other keys out")),
        ("[grid]\nbounds = [0, 0, 100, 100]\n", 2, ("outside the scene",)),
        ('[area]\npath = "nowhere.geojson"\n', 3, ("nowhere.geojson",)),
        ("[area]\nbounds = [0, 0, 1, 1]\n", 3, ("area of interest", "outside the scene")),
        ("[area]\n", 2, ("path or bounds",)),
    ],
)
def test_grids_and_areas_that_cannot_be(tmp_path: Path, text: str, code: int, words: tuple[str, ...]) -> None:
    scene = paint_scene(tmp_path)
    scene.write_job(text)
    finished = groundglow("run", scene.job_file)
    assert finished.code in (code, 5 - code), finished.err
    for word in words:
        assert word in finished.err


def test_a_known_target_corrects_a_drifted_camera(tmp_path: Path) -> None:
    # The radiance is read 0.2 W m-2 sr-1 um-1 too high, about 1.4 K; a lake at a known temperature says so.
    scene = paint_scene(tmp_path)
    row, column = 60, 80
    target = f"""
[[target]]
name = "lake"
band = "1"
at = [{CORNER[0] + PIXEL * (column + 0.5)}, {CORNER[1] - PIXEL * (row + 0.5)}]
radius = 10.0
temperature = {scene.temperature[row, column]}
temperature_uncertainty = 0.1
emissivity = 0.97
emissivity_uncertainty = 0.005
"""
    scene.scene_file.write_text(scene_text(thermal={"offset": 0.3}, more=target))
    scene.write_job()
    run(scene)
    found, _, _ = opened(scene)
    clear = (scene.counts > 0) & (scene.counts < 65535) & (scene.words == 0)
    assert abs((found - scene.temperature)[clear].mean()) < 0.02
    item = json.loads((tmp_path / "maps" / "invented" / "invented.json").read_text())
    fitted = item["properties"]["groundglow:provenance"]["method"]["radiance_adjustment"]
    assert fitted["offset"] == pytest.approx(-0.2, abs=0.005)
    assert fitted["targets"][0]["name"] == "lake"
