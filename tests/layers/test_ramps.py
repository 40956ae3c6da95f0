"""Ramps run evenly and one way, for readers of every colour vision and in grey."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from groundglow.layers.ramps import RAMPS, as_hex, colours, oklab_path, srgb_of_oklab

# G. M. Machado, M. M. Oliveira, L. A. F. Fernandes, "A Physiologically-based Model for Simulation of
# Color Vision Deficiency", IEEE Trans. Vis. Comput. Graph. 15 (2009), table of full severity, for
# linear RGB (values from memory).
DEFICIENCIES = {
    "protanopia": [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ],
    "deuteranopia": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
}


def linear(name: str) -> NDArray[np.float64]:
    """Linear light of a ramp's 8-bit colours (IEC 61966-2-1)."""
    screen = np.array(colours(name, np.linspace(0, 1, 65))) / 255
    return np.where(screen <= 0.04045, screen / 12.92, ((screen + 0.055) / 1.055) ** 2.4)


@pytest.mark.parametrize(
    ("oklab", "screen"),
    [
        # B. Ottosson's table of XYZ pairs, and the primaries as commonly listed (from memory).
        ((1.0, 0.0, 0.0), (255, 255, 255)),
        ((0.0, 0.0, 0.0), (0, 0, 0)),
        ((0.6280, 0.2249, 0.1258), (255, 0, 0)),
        ((0.8664, -0.2339, 0.1795), (0, 255, 0)),
        ((0.4520, -0.0325, -0.3115), (0, 0, 255)),
    ],
)
def test_oklab_of_known_colours(oklab: tuple[float, ...], screen: tuple[int, ...]) -> None:
    found = srgb_of_oklab(np.array([oklab]))[0] * 255
    assert found == pytest.approx(screen, abs=1.0)


@pytest.mark.parametrize("name", RAMPS)
def test_steps_are_even_and_lightness_runs_one_way(name: str) -> None:
    line = oklab_path(RAMPS[name])
    steps = np.linalg.norm(np.diff(line, axis=0), axis=1)
    assert steps.std() / steps.mean() < 0.01
    direction = np.sign(line[-1, 0] - line[0, 0])
    assert (direction * np.diff(line[:, 0]) > 0).all()
    assert abs(line[-1, 0] - line[0, 0]) > 0.6, "enough contrast from end to end"


@pytest.mark.parametrize("name", RAMPS)
def test_every_colour_can_be_shown(name: str) -> None:
    screen = srgb_of_oklab(oklab_path(RAMPS[name]))
    assert screen.min() > -0.002
    assert screen.max() < 1.002


@pytest.mark.parametrize("name", RAMPS)
@pytest.mark.parametrize("deficiency", ["none", *DEFICIENCIES])
def test_luminance_runs_one_way_in_every_colour_vision(name: str, deficiency: str) -> None:
    light = linear(name)
    if deficiency in DEFICIENCIES:
        light = light @ np.array(DEFICIENCIES[deficiency]).T
    luminance = light @ np.array([0.2126, 0.7152, 0.0722])  # ITU-R BT.709
    steps = np.diff(luminance)
    assert (steps > 0).all() or (steps < 0).all()


def test_places_beyond_the_ends_take_the_end_colours() -> None:
    first, last = colours("warmth", np.array([0.0, 1.0]))
    assert colours("warmth", np.array([-3.0, 7.0])) == [first, last]


def test_hexadecimal() -> None:
    assert as_hex((1, 171, 255)) == "#01abff"
