"""How a layer's numbers are shown to a reader: unit, range, round steps, colours.

Temperatures are stored in kelvin. Degrees Celsius exist only here, in labels.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np

from groundglow.errors import DomainError
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.ramps import Colour, colours
from groundglow.quantities import FLAGS, Flag, gravest, quantity

TemperatureUnit = Literal["celsius", "kelvin"]

_FREEZING = 273.15  # K
_STEPS = 8
_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_FALLBACK_TEMPERATURES = (263.15, 323.15)  # K, for a layer without a single number

NOTHING_FLAGGED: Colour = (236, 236, 228)
# One colour a flag; the graver, the stronger. Water, snow, cloud and shadow as a map reader expects.
_FLAG_COLOURS: dict[str, Colour] = {
    "no_data": (64, 64, 64),
    "saturated": (214, 39, 90),
    "impossible": (158, 0, 66),
    "cloud": (150, 158, 170),
    "thin_cloud": (190, 198, 210),
    "bare_metal": (140, 86, 160),
    "near_cloud": (214, 218, 226),
    "shadow": (92, 88, 120),
    "air_nearly_opaque": (196, 120, 40),
    "atmosphere_outside_validity": (226, 160, 76),
    "outside_calibrated_range": (232, 110, 84),
    "interpolated": (208, 214, 178),
    "emissivity_assumed": (222, 206, 152),
    "broadband_emissivity_assumed": (234, 222, 184),
    "snow": (176, 216, 232),
    "water": (72, 134, 190),
}


@dataclass(frozen=True)
class ColourScale:
    """How a layer of numbers is drawn.

    Attributes
    ----------
    ramp : str
        Name of the ramp.
    low, high : float
        Range of the colours, in the unit of the file; values beyond take the end colours.
    ticks : tuple of float
        Round steps in the unit shown, from ``low`` to ``high``, in the unit of the file.
    numbers : tuple of str
        The ticks in the unit shown, without it.
    unit : str
        The unit shown; empty for a pure number.
    """

    ramp: str
    low: float
    high: float
    ticks: tuple[float, ...]
    numbers: tuple[str, ...]
    unit: str

    @property
    def labels(self) -> tuple[str, ...]:
        """The ticks with the unit."""
        return tuple(f"{number} {self.unit}".strip() for number in self.numbers)

    def colours_of(self, values: tuple[float, ...]) -> list[Colour]:
        """Colours of values in the unit of the file."""
        return colours(self.ramp, (np.array(values) - self.low) / (self.high - self.low))


@dataclass(frozen=True)
class FlagClass:
    """One combination of flags that occurs in a quality layer.

    Attributes
    ----------
    value : int
        As stored.
    label : str
        The gravest flag, and the others behind it.
    colour : tuple of int
        Of the gravest flag.
    count : int
        Pixels.
    """

    value: int
    label: str
    colour: Colour
    count: int


def readable_unit(unit: str) -> str:
    """A unit in CF notation as a reader would print it: "W m-2" becomes "W m⁻²"."""
    if unit == "1":
        return ""
    words = []
    for word in unit.split():
        base = word.rstrip("-0123456789")
        words.append(base.replace("um", "µm") + word[len(base) :].translate(_SUPERSCRIPTS))
    return " ".join(words)


def colour_scale(layer: LayerSummary, temperature_unit: TemperatureUnit = "celsius") -> ColourScale:
    """The scale that suits the values of a layer.

    Parameters
    ----------
    layer : LayerSummary
        A layer of numbers.
    temperature_unit : str
        "celsius" or "kelvin": for labels of temperatures; differences of temperature stay in K.

    Returns
    -------
    ColourScale
        From a little below the quantile 0.05 to a little above 0.95, ended at round numbers.

    Raises
    ------
    DomainError
        If the layer holds flags.
    """
    if layer.layer_format.flags:
        raise DomainError("a layer of flags has no scale", where=layer.name)
    doubt = "uncertainty" in layer.name
    temperature = layer.text.unit == "K" and not doubt
    shift = _FREEZING if temperature and temperature_unit == "celsius" else 0.0
    unit = "°C" if shift else readable_unit(layer.text.unit)
    low, high = _range(layer, temperature=temperature)
    ticks, numbers = _round_steps(low - shift, high - shift)
    stored = tuple(round(tick + shift, 9) for tick in ticks)
    ramp = "doubt" if doubt else "share" if layer.text.unit == "1" else "warmth"
    return ColourScale(ramp, stored[0], stored[-1], stored, numbers, unit)


def title_of(layer: LayerSummary, temperature_unit: TemperatureUnit = "celsius") -> str:
    """Name of a layer with the unit shown, for legends."""
    name = quantity(layer.name).long_name
    if layer.layer_format.flags:
        return name
    unit = colour_scale(layer, temperature_unit).unit
    return f"{name} [{unit}]" if unit else name


def flag_classes(layer: LayerSummary) -> tuple[FlagClass, ...]:
    """The combinations of flags that occur in a quality layer, the gravest first.

    Raises
    ------
    DomainError
        If the layer holds numbers.
    """
    if not layer.layer_format.flags:
        raise DomainError("a layer of numbers has no flags", where=layer.name)
    classes = [(gravest(value), value, count) for value, count in layer.statistics.values]
    classes.sort(key=lambda one: (-one[0].severity if one[0] else 0, one[1]))
    return tuple(
        FlagClass(
            value, _flag_label(flag, value), _FLAG_COLOURS[flag.name] if flag else NOTHING_FLAGGED, count
        )
        for flag, value, count in classes
    )


def _flag_label(worst: Flag | None, value: int) -> str:
    """The gravest flag of a combination, and the others in brackets."""
    if worst is None:
        return "nothing flagged"
    others = sorted(
        (flag for flag in FLAGS if value & flag.mask and flag is not worst), key=lambda flag: -flag.severity
    )
    return f"{worst.title} (also: {'; '.join(flag.title for flag in others)})" if others else worst.title


def _range(layer: LayerSummary, *, temperature: bool) -> tuple[float, float]:
    """The stretch of values worth telling apart."""
    found = layer.statistics
    if not found.count:
        return _FALLBACK_TEMPERATURES if temperature else (0.0, 1.0)
    margin = 0.1 * (found.upper - found.lower)
    low, high = max(found.minimum, found.lower - margin), min(found.maximum, found.upper + margin)
    # A layer with one value only still gets a scale around it.
    least = max(1e-3 * abs(high), 1e-6)
    return (low, high) if high - low >= least else (low - least, high + least)


def _round_steps(low: float, high: float) -> tuple[tuple[float, ...], tuple[str, ...]]:
    """Multiples of 1, 2 or 5 times a power of ten that enclose a range in about eight steps."""
    rough = (high - low) / _STEPS
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(factor * power for factor in (1.0, 2.0, 5.0, 10.0) if factor * power >= rough * (1 - 1e-9))
    first, last = math.floor(low / step + 1e-9), math.ceil(high / step - 1e-9)
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    ticks = tuple(round(index * step, decimals) for index in range(first, last + 1))
    # Adding zero turns minus zero into zero; labels use the true minus sign.
    numbers = tuple(f"{tick + 0.0:.{decimals}f}".replace("-", "−") for tick in ticks)
    return ticks, numbers
