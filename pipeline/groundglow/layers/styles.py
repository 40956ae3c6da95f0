"""Style files beside the layers: for QGIS, which loads them by itself, and for map servers.

QGIS takes a ``.qml`` under the stem of the raster. Map servers take Symbology Encoding 1.1 inside a
Styled Layer Descriptor 1.1 (``.sld``), where ``se:Categorize`` is what they draw exactly: numbers
become many narrow classes.

References
----------
OGC 05-077r4, Symbology Encoding Implementation Specification 1.1.0, section 11.
OGC 05-078r4, Styled Layer Descriptor profile 1.1.0.
"""

from __future__ import annotations

import itertools
import xml.etree.ElementTree as ET
from pathlib import Path

import numpy as np

from groundglow.layers.files import write_whole
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.ramps import as_hex, colours
from groundglow.layers.scale import (
    ColourScale,
    TemperatureUnit,
    colour_scale,
    flag_classes,
    title_of,
)

QML_TYPE = "application/xml"
SLD_TYPE = "application/vnd.ogc.sld+xml"

_SLD = "http://www.opengis.net/sld"
_SE = "http://www.opengis.net/se"
_CLASSES = 64
_QML_VERSION = "3.22"


def write_styles(layer: LayerSummary, temperature_unit: TemperatureUnit = "celsius") -> tuple[Path, Path]:
    """Write both style files beside a layer.

    Parameters
    ----------
    layer : LayerSummary
        A finished layer.
    temperature_unit : str
        "celsius" or "kelvin", for labels.

    Returns
    -------
    (Path, Path)
        The ``.qml`` and the ``.sld``.

    Raises
    ------
    OutputError
        If they cannot be written.
    """
    qml, sld = layer.path.with_suffix(".qml"), layer.path.with_suffix(".sld")
    write_whole(qml, qgis_style(layer, temperature_unit).encode())
    write_whole(sld, map_server_style(layer, temperature_unit).encode())
    return qml, sld


def qgis_style(layer: LayerSummary, temperature_unit: TemperatureUnit = "celsius") -> str:
    """A layer's style for QGIS.

    Parameters
    ----------
    layer : LayerSummary
        Numbers are drawn along a ramp with labels at round steps; flags by a list of exactly the
        combinations that occur.
    temperature_unit : str
        "celsius" or "kelvin", for labels; the values stay those of the file.

    Returns
    -------
    str
        XML.
    """
    root = ET.Element("qgis", version=_QML_VERSION, styleCategories="Symbology")
    pipe = ET.SubElement(root, "pipe")
    if layer.layer_format.flags:
        _paletted(pipe, layer)
    else:
        _pseudocolour(pipe, colour_scale(layer, temperature_unit))
    ET.SubElement(pipe, "brightnesscontrast", brightness="0", contrast="0", gamma="1")
    ET.SubElement(pipe, "rasterresampler", maxOversampling="2")
    ET.SubElement(root, "blendMode").text = "0"
    return "<!DOCTYPE qgis PUBLIC 'http://mrcc.com/qgis.dtd' 'SYSTEM'>\n" + _text(root)


def map_server_style(layer: LayerSummary, temperature_unit: TemperatureUnit = "celsius") -> str:
    """A layer's style for map servers.

    Parameters
    ----------
    layer : LayerSummary
        Numbers are drawn in 64 classes along the ramp; flags in one class a value.
    temperature_unit : str
        "celsius" or "kelvin", for the title.

    Returns
    -------
    str
        XML.
    """
    ET.register_namespace("", _SLD)
    ET.register_namespace("se", _SE)
    root = ET.Element(f"{{{_SLD}}}StyledLayerDescriptor", version="1.1.0")
    named = ET.SubElement(root, f"{{{_SLD}}}NamedLayer")
    _se(named, "Name").text = layer.name
    user_style = ET.SubElement(named, f"{{{_SLD}}}UserStyle")
    _se(user_style, "Name").text = layer.name
    type_style = _se(user_style, "FeatureTypeStyle")
    rule = _se(type_style, "Rule")
    _se(rule, "Name").text = layer.name
    _se(_se(rule, "Description"), "Title").text = title_of(layer, temperature_unit)
    symbolizer = _se(rule, "RasterSymbolizer")
    _se(symbolizer, "Opacity").text = "1.0"
    colour_map = _se(symbolizer, "ColorMap")
    thresholds, classes = _flag_steps(layer) if layer.layer_format.flags else _even_steps(colour_scale(layer))
    _categorize(colour_map, thresholds, classes)
    return '<?xml version="1.0" encoding="UTF-8"?>\n' + _text(root)


def _pseudocolour(pipe: ET.Element, scale: ColourScale) -> None:
    """A ramp between labelled round steps."""
    low, high = f"{scale.low:.10g}", f"{scale.high:.10g}"
    renderer = ET.SubElement(
        pipe, "rasterrenderer", type="singlebandpseudocolor", band="1", opacity="1", alphaBand="-1",
        nodataColor="", classificationMin=low, classificationMax=high,
    )  # fmt: skip
    ET.SubElement(renderer, "rasterTransparency")
    origin = ET.SubElement(renderer, "minMaxOrigin")
    # The range is ours, not to be computed again from the part of the raster in view.
    for name, value in (("limits", "None"), ("extent", "WholeRaster"), ("statAccuracy", "Estimated")):
        ET.SubElement(origin, name).text = value
    shader = ET.SubElement(
        ET.SubElement(renderer, "rastershader"), "colorrampshader", colorRampType="INTERPOLATED",
        classificationMode="1", clip="0", minimumValue=low, maximumValue=high, labelPrecision="6",
    )  # fmt: skip
    for tick, label, colour in zip(scale.ticks, scale.labels, scale.colours_of(scale.ticks), strict=True):
        ET.SubElement(shader, "item", value=f"{tick:.10g}", label=label, color=as_hex(colour), alpha="255")
    # A continuous bar would be labelled in the unit of the file, whatever the items say.
    ET.SubElement(shader, "rampLegendSettings", useContinuousLegend="0")


def _paletted(pipe: ET.Element, layer: LayerSummary) -> None:
    """One colour and label for each combination of flags."""
    renderer = ET.SubElement(
        pipe, "rasterrenderer", type="paletted", band="1", opacity="1", alphaBand="-1", nodataColor=""
    )
    ET.SubElement(renderer, "rasterTransparency")
    palette = ET.SubElement(renderer, "colorPalette")
    for one in flag_classes(layer):
        ET.SubElement(
            palette, "paletteEntry",
            value=str(one.value), label=one.label, color=as_hex(one.colour), alpha="255",
        )  # fmt: skip


def _even_steps(scale: ColourScale) -> tuple[list[float], list[str]]:
    """Thresholds between equal classes, and the colours of the classes in between and beyond."""
    thresholds = np.linspace(scale.low, scale.high, _CLASSES + 1)[1:-1]
    shares = (np.arange(_CLASSES) + 0.5) / _CLASSES
    return thresholds.tolist(), [as_hex(colour) for colour in colours(scale.ramp, shares)]


def _flag_steps(layer: LayerSummary) -> tuple[list[float], list[str]]:
    """Thresholds half-way between the values that occur, and their colours."""
    classes = sorted(flag_classes(layer), key=lambda one: one.value)
    values = [one.value for one in classes]
    between = [(low + high) / 2 for low, high in itertools.pairwise(values)]
    return between, [as_hex(one.colour) for one in classes]


def _categorize(parent: ET.Element, thresholds: list[float], classes: list[str]) -> None:
    """Symbology Encoding's function for classes: a value, then threshold and value in turn."""
    function = _se(parent, "Categorize", fallbackValue="#ffffff", thresholdsBelongTo="succeeding")
    _se(function, "LookupValue").text = "Rasterdata"
    _se(function, "Value").text = classes[0]
    for threshold, colour in zip(thresholds, classes[1:], strict=True):
        _se(function, "Threshold").text = f"{threshold:.10g}"
        _se(function, "Value").text = colour


def _se(parent: ET.Element, name: str, **attributes: str) -> ET.Element:
    """A child in the namespace of Symbology Encoding."""
    return ET.SubElement(parent, f"{{{_SE}}}{name}", attributes)


def _text(root: ET.Element) -> str:
    """Indented XML."""
    ET.indent(root)
    return ET.tostring(root, encoding="unicode") + "\n"
