"""The preview shows the layer's values in the ramp's colours, with bar, date and caution."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from PIL import Image

from groundglow.errors import DomainError, OutputError
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.layer_format import format_of
from groundglow.layers.preview import _NO_VALUE, PreviewText, _drawable, drawn_pixels, write_preview
from groundglow.layers.ramps import colours
from groundglow.layers.scale import colour_scale
from layers.layer_cases import grid_of, quality, temperature, write_layer

TEXT = PreviewText("Ember valley", datetime(2026, 7, 14, 8, 32, tzinfo=UTC))


@pytest.fixture(scope="module")
def layer(tmp_path_factory: pytest.TempPathFactory) -> LayerSummary:
    return write_layer(tmp_path_factory.mktemp("layer") / "surface_temperature.tif", temperature(900, 1300))


def picture(path: Path) -> NDArray[Any]:
    with Image.open(path) as image:
        assert image.format == "PNG"
        return np.asarray(image.convert("RGB")).astype(int)


def test_values_take_the_colours_of_the_scale(layer: LayerSummary) -> None:
    scale = colour_scale(layer)
    pixels = np.array([[scale.low - 50, scale.low, scale.high, scale.high + 50, np.nan]], np.float32)
    first, last = colours(scale.ramp, np.array([0.0, 1.0]))
    assert [tuple(one) for one in drawn_pixels(pixels, scale)[0].tolist()] == [
        first,
        first,
        last,
        last,
        _NO_VALUE,
    ]
    middle = drawn_pixels(np.array([[(scale.low + scale.high) / 2]], np.float32), scale)[0, 0]
    assert np.abs(middle.astype(int) - colours(scale.ramp, np.array([0.5]))[0]).max() <= 3


def test_the_map_is_in_the_picture_with_its_gap(layer: LayerSummary, tmp_path: Path) -> None:
    pixels = picture(write_preview(tmp_path / "preview.png", layer, grid_of(900, 1300), TEXT))
    height, width = 820 * 900 // 1300, 820
    assert pixels.shape[0] > height + 100, "room for title, scale bar and caution"
    assert pixels.shape[1] > width + 100, "room for the colour bar"
    gap = (pixels == _NO_VALUE).all(axis=-1)
    # The upper left part of the layer is empty, a sixth of it, and a few single pixels.
    assert 0.14 < gap.sum() / (height * width) < 0.25
    assert gap[120:300, 60:260].all()


def test_the_colour_bar_holds_the_whole_ramp(layer: LayerSummary, tmp_path: Path) -> None:
    pixels = picture(write_preview(tmp_path / "preview.png", layer, grid_of(900, 1300), TEXT))
    column = pixels[:, 28 + 820 + 24 + 10]
    first, last = colours("warmth", np.array([0.0, 1.0]))
    rows = [int(np.argmin(np.abs(column - colour).sum(axis=1))) for colour in (first, last)]
    assert rows[1] < rows[0], "the hot end is at the top"
    assert all(
        np.abs(column[row] - colour).max() <= 2 for row, colour in zip(rows, (first, last), strict=True)
    )


def test_words_change_the_picture(layer: LayerSummary, tmp_path: Path) -> None:
    """Title, date, caution and unit are drawn, each in its own place."""
    grid = grid_of(900, 1300)
    base = picture(write_preview(tmp_path / "base.png", layer, grid, TEXT))
    variants = {
        "title": PreviewText("Another valley", TEXT.acquired),
        "date": PreviewText(TEXT.title, datetime(2026, 7, 15, 8, 32, tzinfo=UTC)),
        "caution": PreviewText(TEXT.title, TEXT.acquired, "Do not use this to cook."),
    }
    top_rows = {}
    for name, text in variants.items():
        other = picture(write_preview(tmp_path / f"{name}.png", layer, grid, text))
        rows = min(len(base), len(other))
        changed = np.flatnonzero((base[:rows] != other[:rows]).any(axis=(1, 2)))
        top_rows[name] = changed[0]
    assert top_rows["title"] < top_rows["date"] < 120
    assert top_rows["caution"] > 600
    kelvin = picture(write_preview(tmp_path / "kelvin.png", layer, grid, TEXT, "kelvin"))
    assert (kelvin != base).any()


@pytest.mark.parametrize("shape", [(1, 1), (3, 2000), (2000, 3), (50, 40)])
def test_any_shape_can_be_drawn(shape: tuple[int, int], tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "surface_temperature.tif", np.full(shape, 300, np.float32))
    pixels = picture(write_preview(tmp_path / "preview.png", layer, grid_of(*shape), TEXT))
    assert 300 < pixels.shape[0] < 1300
    assert 700 < pixels.shape[1] < 1300


def test_a_layer_without_values_can_be_drawn(tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "surface_temperature.tif", np.full((40, 60), np.nan, np.float32))
    pixels = picture(write_preview(tmp_path / "preview.png", layer, grid_of(40, 60), TEXT))
    assert (pixels[200, 100] == _NO_VALUE).all()


@pytest.mark.parametrize(
    "name", ["emitted_flux", "radiance", "emissivity", "surface_temperature_uncertainty"]
)
def test_every_kind_of_layer_can_be_drawn(name: str, tmp_path: Path) -> None:
    layer = write_layer(
        tmp_path / f"{name}.tif", np.linspace(0.9, 1, 400, dtype=np.float32).reshape(20, 20), format_of(name)
    )
    text = PreviewText("Żółta łąka ✓", TEXT.acquired)
    assert write_preview(tmp_path / "preview.png", layer, grid_of(20, 20), text).stat().st_size > 1000


def test_letters_that_the_font_lacks_are_replaced_by_their_like() -> None:
    assert _drawable("Żółta łąka, Größe −3 °C ✓") == "Zolta laka, Grosse -3 °C ?"


def test_flags_are_not_drawn_along_a_ramp(tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "quality.tif", quality(40, 60))
    with pytest.raises(DomainError, match="no scale"):
        write_preview(tmp_path / "preview.png", layer, grid_of(40, 60), TEXT)


def test_a_picture_that_cannot_be_written(layer: LayerSummary, tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="Create the folder first"):
        write_preview(tmp_path / "absent" / "preview.png", layer, grid_of(900, 1300), TEXT)


def test_the_same_layer_gives_the_same_picture(layer: LayerSummary, tmp_path: Path) -> None:
    paths = [write_preview(tmp_path / f"{name}.png", layer, grid_of(900, 1300), TEXT) for name in "ab"]
    assert paths[0].read_bytes() == paths[1].read_bytes()
