"""A picture of a layer for people: map, colour bar, scale bar, date, caution."""

from __future__ import annotations

import io
import math
import unicodedata
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from groundglow.layers.cautions import SHORT_CAUTION
from groundglow.layers.files import write_whole
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.north_up import SmallMap, small_map
from groundglow.layers.ramps import colours
from groundglow.layers.scale import ColourScale, TemperatureUnit, colour_scale
from groundglow.quantities import quantity
from groundglow.raster.grid import Grid

if TYPE_CHECKING:
    from PIL.ImageDraw import ImageDraw

_PAPER = (252, 252, 249)
_INK = (34, 36, 40)
_GREY = (104, 108, 114)
_NO_VALUE = (222, 222, 214)
_MARGIN = 28
_BOX = 820
_NARROWEST = 640  # so that title and caution find room beside a tall, narrow map
_BAR = 22
_TITLE, _TEXT, _SMALL = 24, 16, 14
_LINE = 20
_COMPRESSION = 3  # the next levels take twice as long for a tenth less
_RAISED_SIZE = 11
# Letters and signs that do not fall apart into an ASCII letter and an accent.
_LOOKALIKES = str.maketrans(
    {
        "\u2212": "-",
        "\u2013": "-",
        "\u2014": "-",
        "\u2019": "'",
        "µ": "u",
        "ł": "l",
        "Ł": "L",
        "ø": "o",
        "Ø": "O",
    }
    | {"đ": "d", "Đ": "D", "ß": "ss", "æ": "ae", "Æ": "Ae", "œ": "oe", "Œ": "Oe"}
)
_RAISED = dict(zip("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789", strict=True))


@dataclass(frozen=True)
class PreviewText:
    """What is written on a preview.

    Attributes
    ----------
    title : str
        Such as the name of the scene.
    acquired : datetime
        With its offset from UTC.
    caution : str
        What a reader must know.
    """

    title: str
    acquired: datetime
    caution: str = SHORT_CAUTION


def write_preview(
    path: Path,
    layer: LayerSummary,
    grid: Grid,
    text: PreviewText,
    temperature_unit: TemperatureUnit = "celsius",
) -> Path:
    """Draw a layer as a PNG picture.

    Parameters
    ----------
    path : Path
        The picture.
    layer : LayerSummary
        A finished layer of numbers. It is read from the smallest overview that suffices.
    grid : Grid
        Its grid.
    text : PreviewText
        Title, date and caution.
    temperature_unit : str
        "celsius" or "kelvin", for the colour bar.

    Returns
    -------
    Path
        ``path``.

    Raises
    ------
    DomainError
        If the layer holds flags.
    OutputError
        If the layer cannot be read back or the picture not written.
    """
    from PIL import Image, ImageDraw  # noqa: PLC0415 (the run does not wait for it at its start)

    scale = colour_scale(layer, temperature_unit)
    page_map = small_map(layer.path, grid, _BOX)
    height, width = page_map.pixels.shape
    page_width = max(width, _NARROWEST) + 2 * _MARGIN + 130
    caution = _wrapped(_drawable(text.caution), page_width - 2 * _MARGIN)
    top = _MARGIN + _TITLE + 2 * _LINE + 8
    bottom = top + max(height, 300) + 20
    page_height = bottom + 40 + _LINE * len(caution) + _MARGIN // 2
    page = Image.new("RGB", (page_width, page_height), _PAPER)
    page.paste(Image.fromarray(drawn_pixels(page_map.pixels, scale)), (_MARGIN, top))
    pen = ImageDraw.Draw(page)
    pen.rectangle((_MARGIN - 1, top - 1, _MARGIN + width, top + height), outline=_GREY)
    _headings(pen, layer, text)
    _colour_bar(pen, scale, (_MARGIN + width + 24, top + 30), max(height, 300) - 60)
    _scale_bar(pen, page_map, (_MARGIN, bottom))
    _north_arrow(pen, page_map, (_MARGIN + max(width, _NARROWEST) - 20, bottom + 12))
    for index, line in enumerate(caution):
        pen.text((_MARGIN, bottom + 44 + _LINE * index), line, fill=_GREY, font=_font(_SMALL))
    picture = io.BytesIO()
    page.save(picture, "PNG", compress_level=_COMPRESSION)
    write_whole(path, picture.getvalue())
    return path


def drawn_pixels(pixels: NDArray[np.float32], scale: ColourScale) -> NDArray[np.uint8]:
    """Pixels as screen colours.

    Parameters
    ----------
    pixels : float32 array (height, width)
        In the unit of the file; NaN becomes the grey of "no value".
    scale : ColourScale
        Range and ramp.

    Returns
    -------
    uint8 array (height, width, 3)
    """
    table = np.array([*colours(scale.ramp, np.linspace(0.0, 1.0, 256)), _NO_VALUE], np.uint8)
    share = np.clip((pixels - scale.low) / (scale.high - scale.low), 0.0, 1.0)
    entry = np.where(np.isnan(share), 256, np.round(np.nan_to_num(share) * 255.0)).astype(np.int64)
    return table[entry]


def _headings(pen: ImageDraw, layer: LayerSummary, text: PreviewText) -> None:
    """Title, what is shown, and when it was taken."""
    name = quantity(layer.name).long_name
    moment = text.acquired.astimezone(UTC)
    pen.text((_MARGIN, _MARGIN - 8), _drawable(text.title), fill=_INK, font=_font(_TITLE))
    line = _MARGIN + _TITLE + 2
    pen.text((_MARGIN, line), name[0].upper() + name[1:], fill=_INK, font=_font(_TEXT))
    shown = f"{moment.day} {moment:%B %Y, %H:%M} UTC"
    pen.text((_MARGIN, line + _LINE), shown, fill=_GREY, font=_font(_TEXT))


def _colour_bar(pen: ImageDraw, scale: ColourScale, corner: tuple[int, int], height: int) -> None:
    """Colours from low (bottom) to high (top) with labelled ticks, and the grey for no value."""
    left, top = corner
    shares = 1.0 - (np.arange(height) + 0.5) / height
    for offset, colour in enumerate(colours(scale.ramp, shares)):
        pen.line((left, top + offset, left + _BAR, top + offset), fill=colour)
    pen.rectangle((left - 1, top - 1, left + _BAR + 1, top + height), outline=_GREY)
    for tick, number in zip(scale.ticks, scale.numbers, strict=True):
        at = top + round(height * (scale.high - tick) / (scale.high - scale.low))
        pen.line((left + _BAR + 1, at, left + _BAR + 7, at), fill=_INK)
        pen.text((left + _BAR + 12, at), _drawable(number), fill=_INK, font=_font(_TEXT), anchor="lm")
    if scale.unit:
        _write_unit(pen, (left - 1, top - 12), scale.unit)
    below = top + height + 12
    pen.rectangle((left - 1, below, left + _BAR + 1, below + 14), fill=_NO_VALUE, outline=_GREY)
    pen.text((left + _BAR + 12, below + 7), "no value", fill=_INK, font=_font(_SMALL), anchor="lm")


def _scale_bar(pen: ImageDraw, page_map: SmallMap, corner: tuple[int, int]) -> None:
    """A bar of a round length, true at the middle of the map."""
    if page_map.metres is None:
        return
    left, top = corner
    longest = page_map.metres * max(page_map.pixels.shape[1] / 3.0, 60.0)
    power = 10.0 ** math.floor(math.log10(longest))
    length = max(factor * power for factor in (1.0, 2.0, 5.0) if factor * power <= longest)
    end = left + round(length / page_map.metres)
    pen.line((left, top + 12, end, top + 12), fill=_INK, width=3)
    for x in (left, end):
        pen.line((x, top + 6, x, top + 18), fill=_INK, width=2)
    label = f"{length / 1000:g} km" if length >= 1000 else f"{length:g} m"
    pen.text((end + 12, top + 12), label, fill=_INK, font=_font(_TEXT), anchor="lm")


def _north_arrow(pen: ImageDraw, page_map: SmallMap, middle: tuple[int, int]) -> None:
    """An arrow to the north at the middle of the map, which is up but for the CRS's own turn."""
    if page_map.north is None:
        return
    angle = math.radians(page_map.north)
    along, aside = (math.sin(angle), -math.cos(angle)), (math.cos(angle), math.sin(angle))

    def point(forward: float, sideways: float) -> tuple[float, float]:
        return tuple(middle[axis] + forward * along[axis] + sideways * aside[axis] for axis in (0, 1))  # type: ignore[return-value]  # two axes

    pen.line((*point(-12, 0), *point(8, 0)), fill=_INK, width=2)
    pen.polygon((point(14, 0), point(4, 5), point(4, -5)), fill=_INK)
    pen.text((middle[0] + 16, middle[1]), "N", fill=_INK, font=_font(_TEXT), anchor="lm")


def _wrapped(text: str, width: int) -> list[str]:
    """Text broken into lines that fit."""
    lines = [""]
    for word in text.split():
        longer = f"{lines[-1]} {word}".strip()
        if _font(_SMALL).getlength(longer) <= width:
            lines[-1] = longer
        else:
            lines.append(word)
    return lines


def _write_unit(pen: ImageDraw, corner: tuple[int, int], unit: str) -> None:
    """A unit from its lower left corner on, exponents raised: the built-in font has no raised digits."""
    left, base = float(corner[0]), corner[1]
    for sign in unit:
        raised = sign in _RAISED
        text, size = (_RAISED[sign], _RAISED_SIZE) if raised else (_drawable(sign), _TEXT)
        pen.text((left, base - 6 * raised), text, fill=_INK, font=_font(size), anchor="ls")
        left += _font(size).getlength(text)


def _drawable(text: str) -> str:
    """Text in the letters that the built-in font has: those of ASCII and the degree sign."""
    plain = unicodedata.normalize("NFKD", text.translate(_LOOKALIKES))
    kept = (sign for sign in plain if not unicodedata.combining(sign))
    return "".join(sign if sign.isascii() or sign == "°" else "?" for sign in kept)


def _font(size: int) -> Any:
    """Pillow's own scalable font: the same everywhere, nothing to install."""
    from PIL import ImageFont  # noqa: PLC0415 (see write_preview)

    return ImageFont.load_default(size=size)
