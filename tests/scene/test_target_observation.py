"""Known targets from the scene file to a corrected band."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from groundglow.errors import ConfigError, InputError
from groundglow.physics.band_table import radiance_table, table_from_response, temperature_of_band_radiance
from groundglow.scene.conversion import radiance_of_pixels
from groundglow.scene.model import KnownTarget
from groundglow.scene.open import open_scene
from groundglow.scene.target_observation import Observation, observe, target_radiance
from groundglow.scene.targets import fit_targets
from painted_rasters import grid, read_all, write

HERE = grid(40, 30)
LEFT, TOP = HERE.transform.c, HERE.transform.f

SCENE = f"""
[scene]
name = "drifted"
acquired = 2026-07-14T10:32:00Z
sensor = "microbolometer-camera"
[[thermal]]
band = "1"
path = "t.tif"
quantity = "brightness-temperature"
scale = 0.01
[[target]]
name = "lake"
band = "1"
at = [{LEFT + 315.0}, {TOP - 315.0}]
radius = 100.0
temperature = 291.0
emissivity = 0.98
[[target]]
name = "panel"
band = "1"
at = [{LEFT + 915.0}, {TOP - 615.0}]
radius = 60.0
temperature = 318.0
temperature_uncertainty = 0.2
emissivity = 0.95
emissivity_uncertainty = 0.005
"""


def drifted(folder: Path, text: str = SCENE) -> str:
    """A camera that shows everything 1.5 K too warm, without air in between."""
    kelvin = np.full(HERE.shape, 300.0)
    kelvin[5:16, 5:16], kelvin[17:24, 27:34] = 291.0, 318.0
    emissivity = np.where(kelvin == 291.0, 0.98, np.where(kelvin == 318.0, 0.95, 1.0))
    scene_file = folder / "scene.toml"
    scene_file.write_text(text)
    from groundglow.scene.sensor import load_sensor

    response = load_sensor("microbolometer-camera").band("1").response
    shown = temperature_of_band_radiance(
        emissivity * response.band_radiance(kelvin), table_from_response(response)
    )
    write(folder / "t.tif", np.round((shown + 1.5) * 100.0).astype(np.uint16), HERE)
    return str(scene_file)


def test_a_drifting_camera_is_brought_back(tmp_path: Path) -> None:
    scene = open_scene(drifted(tmp_path))
    band = scene.thermal[0]
    response = band.sensor_band.response
    convert = radiance_of_pixels(band, radiance_table(response.band_radiance))
    seen = [observe(band.source, target, convert) for target in scene.targets]
    assert [observation.pixels for observation in seen] == [37, 13]
    fit = fit_targets(
        [target_radiance(target, at, response) for target, at in zip(scene.targets, seen, strict=True)]
    )
    corrected = replace(band, adjustment=fit.adjustment())
    convert = radiance_of_pixels(corrected, radiance_table(response.band_radiance))
    radiance = read_all(corrected.source, HERE, convert=convert).values
    found = temperature_of_band_radiance(radiance, table_from_response(response))
    # The ground between the targets was 300 K with an emissivity of one.
    assert found[0, 0] == pytest.approx(300.0, abs=0.1)
    assert "lake" in fit.adjustment().source


def test_uncertainty_has_its_parts() -> None:
    target = KnownTarget("lake", "1", 0.0, 0.0, 0.0, 291.0, 0.5, 0.98, 0.01)
    from groundglow.scene.sensor import load_sensor

    response = load_sensor("microbolometer-camera").band("1").response
    slope, blackbody = float(response.band_radiance_slope(291.0)), float(response.band_radiance(291.0))
    found = target_radiance(target, Observation(7.0, 0.02, 9), response, transmittance=0.9, sky_radiance=2.0)
    wanted = np.sqrt((0.9 * 0.98 * slope * 0.5) ** 2 + (0.9 * (blackbody - 2.0) * 0.01) ** 2 + 0.02**2)
    assert found.uncertainty == pytest.approx(wanted)
    one = target_radiance(
        replace(target, emissivity_uncertainty=0.0), Observation(7.0, 0.0, 4), response, noise=0.1
    )
    assert one.uncertainty == pytest.approx(np.hypot(0.98 * slope * 0.5, 0.05))


def test_targets_that_cannot_be_used(tmp_path: Path) -> None:
    scene = open_scene(drifted(tmp_path))
    source, lake = scene.thermal[0].source, scene.targets[0]
    with pytest.raises(InputError, match=r"the target 'lake' at .* lies outside the raster"):
        observe(source, replace(lake, x=LEFT - 1.0), None)
    with pytest.raises(InputError, match="the target 'lake' cannot be used: there is no value there"):
        observe(replace(source, nodata=29100 + 30), lake, lambda values: values * np.float32(np.nan))
    with pytest.raises(InputError, match="the band is saturated there"):
        observe(replace(source, saturation=20000.0), lake, None)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('name = "panel"', 'name = "lake"', "target 'lake' is named twice for band '1'"),
        (
            'name = "lake"\nband = "1"',
            'name = "lake"\nband = "2"',
            "belongs to band '2', which is not in the scene",
        ),
        (
            "scale = 0.01",
            'scale = 0.01\nradiance_adjustment = { source = "x" }',
            "has both a radiance_adjustment and",
        ),
        ("emissivity = 0.98", "emissivity = 1.98", r"target\[1\].emissivity: .*less than or equal to 1"),
        (
            "temperature = 291.0",
            "temperature = 18.0",
            r"target\[1\].temperature: .*greater than or equal to 150",
        ),
    ],
)
def test_targets_described_wrongly(old: str, new: str, message: str, tmp_path: Path) -> None:
    assert old in SCENE
    with pytest.raises(ConfigError, match=message):
        open_scene(drifted(tmp_path, SCENE.replace(old, new, 1)))
