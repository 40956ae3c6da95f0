"""Style files have the structure that QGIS and map servers read."""

from __future__ import annotations

import xml.etree.ElementTree as ET
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.ramps import as_hex
from groundglow.layers.scale import colour_scale, flag_classes
from groundglow.layers.styles import map_server_style, qgis_style, write_styles
from layers.layer_cases import quality, temperature, write_layer

SLD = "{http://www.opengis.net/sld}"
SE = "{http://www.opengis.net/se}"
SHADER = "pipe/rasterrenderer/rastershader/colorrampshader"
PALETTE = "pipe/rasterrenderer[@type='paletted']/colorPalette"


@pytest.fixture(scope="module")
def numbers(tmp_path_factory: pytest.TempPathFactory) -> LayerSummary:
    return write_layer(tmp_path_factory.mktemp("numbers") / "surface_temperature.tif", temperature(300, 300))


@pytest.fixture(scope="module")
def flags(tmp_path_factory: pytest.TempPathFactory) -> LayerSummary:
    pixels = quality(300, 300) & 0x00FF
    return write_layer(tmp_path_factory.mktemp("flags") / "quality.tif", pixels.astype(np.uint16))


def found(text: str, path: str) -> Any:
    element = ET.fromstring(text).find(path)
    assert element is not None, path
    return element


def test_they_stand_beside_the_layer_under_its_stem(numbers: LayerSummary) -> None:
    qml, sld = write_styles(numbers)
    assert {path.name for path in numbers.path.parent.iterdir()} == {
        "surface_temperature.tif", "surface_temperature.qml", "surface_temperature.sld",
    }  # fmt: skip
    assert qml.read_text(encoding="utf-8") == qgis_style(numbers)
    assert sld.read_text(encoding="utf-8") == map_server_style(numbers)


def test_qgis_gets_a_clamped_ramp_with_units_in_its_labels(numbers: LayerSummary) -> None:
    text = qgis_style(numbers)
    assert text.startswith("<!DOCTYPE qgis")
    renderer = found(text, "pipe/rasterrenderer")
    assert renderer.get("type") == "singlebandpseudocolor"
    assert found(text, "pipe/rasterrenderer/minMaxOrigin/limits").text == "None", (
        "the range is not recomputed"
    )
    shader = found(text, "pipe/rasterrenderer/rastershader/colorrampshader")
    assert (shader.get("colorRampType"), shader.get("clip")) == ("INTERPOLATED", "0")
    items = shader.findall("item")
    scale = colour_scale(numbers)
    assert [float(item.get("value")) for item in items] == list(scale.ticks)
    assert [item.get("label") for item in items] == list(scale.labels)
    assert all(item.get("label").endswith(" °C") for item in items)
    assert 280 < float(items[0].get("value")) < 300, "the file holds kelvin"
    assert shader.find("rampLegendSettings").get("useContinuousLegend") == "0"


def test_kelvin_labels_on_request(numbers: LayerSummary) -> None:
    items = found(qgis_style(numbers, "kelvin"), "pipe/rasterrenderer/rastershader/colorrampshader").findall(
        "item"
    )
    assert all(item.get("label") == f"{float(item.get('value')):.0f} K" for item in items)


def test_qgis_lists_exactly_the_combinations_that_occur(flags: LayerSummary) -> None:
    entries = found(qgis_style(flags), "pipe/rasterrenderer[@type='paletted']/colorPalette").findall(
        "paletteEntry"
    )
    assert sorted(int(entry.get("value")) for entry in entries) == [
        value for value, _ in flags.statistics.values
    ]
    assert [entry.get("label") for entry in entries] == [one.label for one in flag_classes(flags)]


def categorize(text: str) -> Any:
    path = f"{SLD}NamedLayer/{SLD}UserStyle/{SE}FeatureTypeStyle/{SE}Rule/{SE}RasterSymbolizer/{SE}ColorMap"
    return found(text, f"{path}/{SE}Categorize")


def colour_at(function: Any, value: float) -> str:
    """Evaluate se:Categorize (OGC 05-077r4, 11.6.3): a threshold belongs to the class after it."""
    chosen = ""
    for element in function:
        if element.tag == f"{SE}Threshold" and value < float(element.text):
            break
        if element.tag == f"{SE}Value":
            chosen = element.text
    return chosen


def test_map_servers_get_narrow_classes_along_the_ramp(numbers: LayerSummary) -> None:
    function = categorize(map_server_style(numbers))
    assert [element.tag for element in function][:2] == [f"{SE}LookupValue", f"{SE}Value"]
    assert function.get("thresholdsBelongTo") == "succeeding"
    assert function.get("fallbackValue") is not None
    thresholds = [float(element.text) for element in function.findall(f"{SE}Threshold")]
    assert thresholds == sorted(thresholds)
    assert len(function.findall(f"{SE}Value")) == len(thresholds) + 1 == 64
    scale = colour_scale(numbers)
    for value in np.linspace(scale.low, scale.high, 50):
        shown = np.array([int(colour_at(function, value)[place : place + 2], 16) for place in (1, 3, 5)])
        assert np.abs(shown - scale.colours_of((float(value),))[0]).max() <= 12


def test_map_servers_draw_each_combination_in_its_colour(flags: LayerSummary) -> None:
    function = categorize(map_server_style(flags))
    for one in flag_classes(flags):
        assert colour_at(function, one.value) == as_hex(one.colour)


def test_one_combination_only_is_one_class(tmp_path: Path) -> None:
    layer = write_layer(tmp_path / "quality.tif", np.full((20, 20), 4, np.uint16))
    assert colour_at(categorize(map_server_style(layer)), 4) == as_hex(flag_classes(layer)[0].colour)


def test_the_title_for_map_servers_names_the_unit(numbers: LayerSummary) -> None:
    rule = f"{SLD}NamedLayer/{SLD}UserStyle/{SE}FeatureTypeStyle/{SE}Rule"
    title = found(map_server_style(numbers), f"{rule}/{SE}Description/{SE}Title")
    assert title.text == "radiometric surface (skin) temperature [°C]"


def test_styles_do_not_change_from_run_to_run(numbers: LayerSummary, flags: LayerSummary) -> None:
    for layer in (numbers, flags):
        assert qgis_style(layer) == qgis_style(layer)
        assert map_server_style(layer) == map_server_style(layer)
