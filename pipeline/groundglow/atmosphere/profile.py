"""A profile of the air: height, pressure, temperature and gases at levels from the ground up.

A :class:`Profile` cannot be changed and cannot be nonsense: what it accepts is checked when it is
made. Changes (completing, scaling, perturbing) are functions that give back a new one; each adds a
line to its ``notes``, which travel into the output.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.humidity import saturation_vapour_pressure
from groundglow.atmosphere.structure import column_water_vapour
from groundglow.errors import DomainError
from groundglow.physics.constants import DRY_AIR_GAS_CONSTANT, STANDARD_GRAVITY

Float = NDArray[np.float64]

WATER = "water_vapour"
LOWEST_TEMPERATURE, HIGHEST_TEMPERATURE = 150.0, 340.0  # K, of air anywhere below 120 km
HIGHEST_PRESSURE = 1100.0  # hPa
# Ground may lie this far below the lowest level; the air there is then extrapolated.
LARGEST_EXTRAPOLATION = 500.0  # m
# Lapse rate and constant mixing ratios of that extrapolation.
_LAPSE_RATE = 0.0065  # K m-1
# Widest step between levels: in the lowest 10 km, and up to 30 km.
_WIDEST_STEPS = ((10e3, 4e3), (30e3, 8e3))  # m
# Stands for none of a gas, so that its logarithm exists.
_NOTHING = 1e-30


@dataclass(frozen=True)
class Profile:
    """Air at levels, from the lowest up.

    Attributes
    ----------
    height : array (levels,)
        Geometric, above sea level, increasing. [m]
    pressure : array (levels,)
        Decreasing. [hPa]
    temperature : array (levels,)
        Above 150 and below 340. [K]
    gases : mapping of str to array (levels,)
        Mole fractions in moist air, ``water_vapour`` at least; see ``composition.GASES``. [1e-6]
    notes : tuple of str
        What was done to the profile, in order.
    """

    height: Float
    pressure: Float
    temperature: Float
    gases: Mapping[str, Float]
    notes: tuple[str, ...] = field(default=())

    def __post_init__(self) -> None:
        arrays = {name: _frozen(getattr(self, name)) for name in ("height", "pressure", "temperature")}
        gases = {name: _frozen(values) for name, values in self.gases.items()}
        _check_shapes(arrays | gases)
        _check_values(arrays["height"], arrays["pressure"], arrays["temperature"], gases)
        for name, values in arrays.items():
            object.__setattr__(self, name, values)
        object.__setattr__(self, "gases", MappingProxyType(gases))

    @property
    def water_vapour(self) -> Float:
        """Mole fraction of water. [1e-6]."""
        return self.gases[WATER]

    @property
    def column_water_vapour(self) -> float:
        """Water above the lowest level. [kg m-2]."""
        return float(column_water_vapour(self.height, self.pressure, self.temperature, self.water_vapour)[0])

    def with_note(self, note: str) -> Profile:
        """The same profile, with a line more in its notes."""
        return replace(self, notes=(*self.notes, note))

    def at(self, height: Float) -> Profile:
        """The profile at other levels within its own.

        Temperature is linear in height, pressure and gases are exponential. The levels asked for
        may reach 500 m below the lowest one: there the temperature follows 6.5 K km-1 and the mole
        fractions stay.

        Parameters
        ----------
        height : array (n,)
            Increasing. [m]

        Raises
        ------
        DomainError
            If a level lies above the top, or too far below the lowest level.
        """
        if height[0] < self.height[0]:
            return extended_down(self, float(height[0])).at(height)
        if height[-1] > self.height[-1] + 1e-6:
            raise DomainError(
                f"the profile ends at {self.height[-1]:.0f} m, below the {height[-1]:.0f} m asked for",
                remedy="Complete its top with a climatology.",
            )
        cell = np.clip(np.searchsorted(self.height, height, side="right") - 1, 0, self.height.size - 2)
        share = (height - self.height[cell]) / (self.height[cell + 1] - self.height[cell])
        share = np.clip(share, 0.0, 1.0)
        logarithms = self._logarithms
        values = np.exp(logarithms[:, cell] + share * (logarithms[:, cell + 1] - logarithms[:, cell]))
        temperature = self.temperature[cell] + share * (self.temperature[cell + 1] - self.temperature[cell])
        gases = dict(zip(self.gases, values[1:], strict=True))
        return unchecked(np.asarray(height, dtype=np.float64), values[0], temperature, gases, self.notes)

    @cached_property
    def _logarithms(self) -> Float:
        """Of the pressure and of every gas (1 + gases, levels)."""
        return np.asarray(np.log(np.maximum([self.pressure, *self.gases.values()], _NOTHING)))


def unchecked(
    height: Float, pressure: Float, temperature: Float, gases: dict[str, Float], notes: tuple[str, ...]
) -> Profile:
    """A profile from arrays that are known to be good: made from a checked one inside a loop."""
    made = object.__new__(Profile)
    for name, value in (
        ("height", height),
        ("pressure", pressure),
        ("temperature", temperature),
        ("gases", gases),
        ("notes", notes),
    ):
        object.__setattr__(made, name, value)
    return made


def extended_down(profile: Profile, ground: float) -> Profile:
    """The profile with one more level, below its lowest one.

    Parameters
    ----------
    profile : Profile
        That begins above the ground.
    ground : float
        Height of the new lowest level. [m]

    Raises
    ------
    DomainError
        If that is more than 500 m down.
    """
    gap = float(profile.height[0]) - ground
    if gap > LARGEST_EXTRAPOLATION:
        raise DomainError(
            f"the profile begins {gap:.0f} m above the ground at {ground:.0f} m",
            remedy=f"At most {LARGEST_EXTRAPOLATION:.0f} m are extrapolated: give levels nearer the ground.",
        )
    temperature = float(profile.temperature[0]) + _LAPSE_RATE * gap
    mean = 0.5 * (temperature + float(profile.temperature[0]))
    pressure = float(profile.pressure[0]) * np.exp(STANDARD_GRAVITY * gap / (DRY_AIR_GAS_CONSTANT * mean))
    return Profile(
        height=np.append(ground, profile.height),
        pressure=np.append(pressure, profile.pressure),
        temperature=np.append(temperature, profile.temperature),
        gases={name: np.append(values[0], values) for name, values in profile.gases.items()},
        notes=(*profile.notes, f"extrapolated {gap:.0f} m down to the ground"),
    )


def saturation_ppmv(pressure: Float, temperature: Float) -> Float:
    """Mole fraction of water in saturated air, over water; at most all of it. [1e-6]."""
    return np.minimum(1e6 * saturation_vapour_pressure(temperature) / pressure, 1e6)


def _frozen(values: Float) -> Float:
    array = np.array(values, dtype=np.float64)
    array.flags.writeable = False
    return array


def _check_shapes(arrays: dict[str, Float]) -> None:
    size = arrays["height"].size
    for name, values in arrays.items():
        if values.ndim != 1 or values.size != size:
            raise DomainError(f"the {name} of a profile has shape {values.shape}, its height {size} levels")
    if size < 2:
        raise DomainError("a profile needs at least two levels")
    if WATER not in arrays:
        raise DomainError("a profile needs the water vapour at its levels")
    for name, values in arrays.items():
        if not np.isfinite(values).all():
            level = int(np.flatnonzero(~np.isfinite(values))[0])
            raise DomainError(
                f"the {name} of a profile is missing or not finite at level {level + 1} of {size}",
                remedy="Leave levels without a value out.",
            )


def _check_values(height: Float, pressure: Float, temperature: Float, gases: dict[str, Float]) -> None:
    _refuse_repeated(height)
    if (np.diff(pressure) >= 0.0).any():
        level = int(np.flatnonzero(np.diff(pressure) >= 0.0)[0])
        raise DomainError(
            f"the pressure does not fall from {height[level]:.0f} m ({pressure[level]:.2f} hPa) "
            f"to {height[level + 1]:.0f} m ({pressure[level + 1]:.2f} hPa)"
        )
    if pressure[-1] <= 0.0 or pressure[0] > HIGHEST_PRESSURE:
        raise DomainError(
            f"pressures of {pressure[0]:g} to {pressure[-1]:g} are not within 0 to {HIGHEST_PRESSURE:g} hPa",
            remedy="Pressures in Pa must be divided by 100." if pressure[0] > 5e3 else None,
        )
    check_temperature(temperature)
    for name, values in gases.items():
        if (values < 0.0).any() or (values > 1e6).any():
            raise DomainError(f"the {name} of a profile does not lie between 0 and 1e6 ppmv")
    for below, widest in _WIDEST_STEPS:
        wide = (np.diff(height) > widest) & (height[:-1] < below)
        if wide.any():
            level = int(np.flatnonzero(wide)[0])
            raise DomainError(
                f"the profile has a gap from {height[level]:.0f} to {height[level + 1]:.0f} m; "
                f"at most {widest:.0f} m are bridged there"
            )


def _refuse_repeated(height: Float) -> None:
    steps = np.diff(height)
    if (steps <= 0.0).any():
        level = int(np.flatnonzero(steps <= 0.0)[0])
        what = "twice" if steps[level] == 0.0 else "out of order"
        raise DomainError(
            f"the level at {height[level + 1]:.1f} m comes {what}", remedy="Each level may stand once."
        )


def check_temperature(temperature: Float) -> None:
    """Refuse what is no air temperature in kelvin, with a hint where it looks like degrees Celsius.

    Raises
    ------
    DomainError
        If a value lies outside 150 to 340 K.
    """
    low, high = float(np.min(temperature)), float(np.max(temperature))
    if low >= LOWEST_TEMPERATURE and high <= HIGHEST_TEMPERATURE:
        return
    celsius = low >= -125.0 and high <= 65.0
    raise DomainError(
        f"air temperatures of {low:.1f} to {high:.1f} do not lie between "
        f"{LOWEST_TEMPERATURE:.0f} and {HIGHEST_TEMPERATURE:.0f} K",
        remedy="They look like degrees Celsius: say so, or add 273.15." if celsius else None,
    )
