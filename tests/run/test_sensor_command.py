"""The sensors command lists what is shipped and shows one in numbers."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from command_line import groundglow


def test_the_list_names_every_shipped_sensor() -> None:
    finished = groundglow("sensors")
    assert finished.code == 0
    for name in ("landsat-4", "landsat-9", "aster", "ember-two-band", "microbolometer-camera"):
        assert name in finished.out


@pytest.mark.parametrize(("sensor", "band"), [("landsat-8", "10"), ("landsat-9", "11"), ("aster", "13")])
def test_published_constants_agree_with_the_response(sensor: str, band: str) -> None:
    # USGS (Landsat) and the literature (ASTER, from memory): K1 and K2; within 0.15 K over 250-340 K.
    finished = groundglow("sensors", sensor, "--json")
    found = next(one for one in json.loads(finished.out)["bands"] if one["number"] == band)
    assert max(abs(edge) for edge in found["published_difference"]) <= 0.15


def test_one_sensor_is_shown_and_drawn(tmp_path: Path) -> None:
    picture = tmp_path / "responses.png"
    finished = groundglow("sensors", "landsat-8", "--plot", picture)
    assert finished.code == 0, finished.err
    assert "effective um" in finished.out
    assert picture.read_bytes()[:4] == b"\x89PNG"


def test_an_unknown_sensor_is_refused_with_the_known_ones() -> None:
    finished = groundglow("sensors", "landsat-99")
    assert finished.code == 2
    assert "landsat-9" in finished.err
