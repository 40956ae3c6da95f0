"""Units in which files give the quantities of the air, and what turns each into the unit used inside.

Spelling is forgiven: case, spaces and the signs ``_ ^ * .`` do not matter, so ``kg kg**-1``, ``kg kg-1``
and ``KG KG^-1`` are one unit. A unit that is not listed is refused, never guessed.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.physics.constants import STANDARD_GRAVITY, ZERO_CELSIUS

Float = NDArray[np.float64]

# Molar masses: dry air of the US Standard Atmosphere 1976, and ozone (three times 15.9994).
_DRY_AIR_TO_OZONE_MASS = 28.9644 / 47.9982
_FOOT = 0.3048  # m, exact (international yard and pound agreement, 1959)


@dataclass(frozen=True)
class Unit:
    """Turns values of a file into ours: ``factor * (value + offset)``.

    Attributes
    ----------
    factor, offset : float
    spellings : tuple of str
        The first is the one shown to the reader.
    """

    factor: float
    spellings: tuple[str, ...]
    offset: float = 0.0

    def converted(self, values: ArrayLike) -> Float:
        """The values in the unit used inside."""
        return self.factor * (np.asarray(values, dtype=np.float64) + self.offset)


_PRESSURE = (
    Unit(1.0, ("hPa", "mbar", "mb", "millibar", "millibars", "hectopascal")),
    Unit(0.01, ("Pa", "pascal", "pascals")),
    Unit(10.0, ("kPa", "kilopascal")),
)
_HEIGHT = (
    Unit(1.0, ("m", "metre", "metres", "meter", "meters", "m asl")),
    Unit(1000.0, ("km", "kilometre", "kilometer")),
    Unit(_FOOT, ("ft", "foot", "feet")),
)
_GEOPOTENTIAL_METRES = Unit(1.0, ("gpm", "geopotential metre", "geopotential meter", "geopotential meters"))
_TEMPERATURE = (
    Unit(1.0, ("K", "kelvin", "kelvins", "degK")),
    Unit(1.0, ("degC", "°C", "ºC", "C", "celsius", "deg C", "degrees C", "degrees celsius"), ZERO_CELSIUS),
    Unit(5.0 / 9.0, ("degF", "°F", "F", "fahrenheit"), 459.67),
)
_MASS_RATIO = (
    Unit(1.0, ("kg/kg", "kg kg-1", "kg_kg", "1", "g/g", "g g-1")),
    Unit(1e-3, ("g/kg", "g kg-1", "g_kg")),
)
_MOLE_FRACTION = (
    Unit(1.0, ("ppmv", "ppm", "1e-6", "umol/mol", "umol mol-1")),
    Unit(1e-3, ("ppbv", "ppb", "1e-9", "nmol/mol", "nmol mol-1")),
    Unit(1e6, ("mol/mol", "mol mol-1", "mol_mol")),
)
_OZONE_MASS = (
    Unit(1e6 * _DRY_AIR_TO_OZONE_MASS, ("kg/kg", "kg kg-1", "kg_kg")),
    Unit(_DRY_AIR_TO_OZONE_MASS, ("mg/kg", "mg kg-1", "mg_kg")),
)

# Units of each quantity; the first one is the unit used inside.
UNITS: Mapping[str, tuple[Unit, ...]] = MappingProxyType(
    {
        "pressure": _PRESSURE,
        "height": _HEIGHT,
        "geopotential_height": (*_HEIGHT, _GEOPOTENTIAL_METRES),
        "geopotential": (Unit(1.0 / STANDARD_GRAVITY, ("m2 s-2", "m2/s2", "J kg-1", "J/kg")),),
        "temperature": _TEMPERATURE,
        "dew_point": _TEMPERATURE,
        "relative_humidity": (
            Unit(1.0, ("%", "percent", "pct")),
            Unit(100.0, ("1", "fraction")),
        ),
        "mixing_ratio": _MASS_RATIO,
        "specific_humidity": _MASS_RATIO,
        "vapour_pressure": _PRESSURE,
        "water_vapour": _MOLE_FRACTION,
        "ozone": (*_MOLE_FRACTION, *_OZONE_MASS),
    }
)


def unit_of(quantity: str, text: str) -> Unit | None:
    """The unit of a quantity by its spelling; None if it is not known.

    Parameters
    ----------
    quantity : str
        A key of ``UNITS``.
    text : str
        As the file writes it.
    """
    wanted = _plain(text)
    for unit in UNITS[quantity]:
        if any(_plain(spelling) == wanted for spelling in unit.spellings):
            return unit
    return None


def known_units(quantity: str) -> str:
    """The units of a quantity for a message."""
    return ", ".join(unit.spellings[0] for unit in UNITS[quantity])


def _plain(text: str) -> str:
    return "".join(character for character in text.casefold() if character not in " _^*.\u00b7")
