"""Colours in even steps to the eye, computed from a path through a perceptual colour space.

A ramp is a line in OKLab: lightness runs one way only, so that it reads the same in grey and for
readers who see fewer colours, and hue and chroma turn with it. The line is then walked in equal
distances.

References
----------
B. Ottosson, "A perceptual color space for image processing", 2020 (OKLab and its matrices).
IEC 61966-2-1:1999 (sRGB).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

Float = NDArray[np.float64]
Colour = tuple[int, int, int]

_TO_CONES = np.array(
    [
        [1.0, 0.3963377774, 0.2158037573],
        [1.0, -0.1055613458, -0.0638541728],
        [1.0, -0.0894841775, -1.2914855480],
    ]
)
_TO_LINEAR = np.array(
    [
        [4.0767416621, -3.3077115913, 0.2309699292],
        [-1.2684380046, 2.6097574011, -0.3413193965],
        [-0.0041960863, -0.7034186147, 1.7076147010],
    ]
)
_POINTS = 1001


@dataclass(frozen=True)
class Path:
    """A line through OKLab.

    Attributes
    ----------
    lightness : tuple of float
        At its start and end, 0 (black) to 1 (white).
    hue : tuple of float
        At its start and end; it turns evenly in between. [deg]
    chroma : tuple of float
        At its start, middle and end; a parabola in between, held inside what a screen shows.
    """

    lightness: tuple[float, float]
    hue: tuple[float, float]
    chroma: tuple[float, float, float]


RAMPS = MappingProxyType(
    {
        # From the blue of a cold night over plum and brick to the pale yellow of hot ground.
        "warmth": Path((0.22, 0.95), (252.0, 462.0), (0.06, 0.17, 0.07)),
        # The less certain, the darker.
        "doubt": Path((0.97, 0.30), (190.0, 285.0), (0.01, 0.11, 0.10)),
        # Shares between 0 and 1.
        "share": Path((0.25, 0.96), (170.0, 95.0), (0.05, 0.12, 0.06)),
    }
)


def srgb_of_oklab(oklab: Float) -> Float:
    """Screen colours of OKLab colours.

    Parameters
    ----------
    oklab : array (n, 3)
        Lightness, green-red and blue-yellow.

    Returns
    -------
    array (n, 3)
        Red, green, blue; outside 0 to 1 where no screen shows the colour.
    """
    linear = (oklab @ _TO_CONES.T) ** 3 @ _TO_LINEAR.T
    size = np.abs(linear)
    curved = np.where(size <= 0.0031308, 12.92 * size, 1.055 * size ** (1.0 / 2.4) - 0.055)
    return np.asarray(np.sign(linear) * curved)


def oklab_path(path: Path) -> Float:
    """Points of a ramp in equal perceptual distances, inside what a screen shows.

    Returns
    -------
    array (n, 3)
        OKLab.
    """
    along = np.linspace(0.0, 1.0, _POINTS)
    lightness = path.lightness[0] + along * (path.lightness[1] - path.lightness[0])
    hue = np.radians(path.hue[0] + along * (path.hue[1] - path.hue[0]))
    start, middle, end = path.chroma
    wanted = (
        start * (1 - along) * (1 - 2 * along)
        + 4 * middle * along * (1 - along)
        + end * along * (2 * along - 1)
    )
    chroma = np.minimum(wanted, 0.98 * _largest_chroma(lightness, hue))
    line = np.column_stack([lightness, chroma * np.cos(hue), chroma * np.sin(hue)])
    walked = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1))])
    even = np.linspace(0.0, walked[-1], _POINTS)
    return np.column_stack([np.interp(even, walked, line[:, axis]) for axis in range(3)])


def colours(name: str, shares: Float) -> list[Colour]:
    """Colours of a ramp.

    Parameters
    ----------
    name : str
        A key of ``RAMPS``.
    shares : array (n,)
        Places along it, 0 to 1; what lies outside is moved to the nearer end.

    Returns
    -------
    list of (int, int, int)
        Red, green, blue, 0 to 255.
    """
    line = _screen_line(name)
    places = np.round(np.clip(shares, 0.0, 1.0) * (_POINTS - 1)).astype(int)
    return [(int(red), int(green), int(blue)) for red, green, blue in line[places]]


def as_hex(colour: Colour) -> str:
    """A colour as style files write it."""
    return "#{:02x}{:02x}{:02x}".format(*colour)


@cache
def _screen_line(name: str) -> NDArray[np.uint8]:
    """A ramp's points as 8-bit screen colours."""
    screen = srgb_of_oklab(oklab_path(RAMPS[name]))
    return np.round(np.clip(screen, 0.0, 1.0) * 255.0).astype(np.uint8)


def _largest_chroma(lightness: Float, hue: Float) -> Float:
    """The strongest colour of a lightness and hue that a screen shows, by halving the interval."""
    low, high = np.zeros_like(lightness), np.full_like(lightness, 0.5)
    for _ in range(30):
        middle = (low + high) / 2
        screen = srgb_of_oklab(np.column_stack([lightness, middle * np.cos(hue), middle * np.sin(hue)]))
        shown = ((screen >= 0.0) & (screen <= 1.0)).all(axis=1)
        low, high = np.where(shown, middle, low), np.where(shown, high, middle)
    return low
