"""Changes of a profile: more or less water, warmer or colder air, another column or surface air.

Water is scaled at constant shape and never beyond saturation (a level that the source itself has
supersaturated keeps its value at most). Temperature is changed at constant mole fraction, so that
warmer air is not moister in absolute terms; pressures and heights stay.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.profile import WATER, Profile, saturation_ppmv
from groundglow.atmosphere.structure import column_water_vapour
from groundglow.errors import DomainError

Float = NDArray[np.float64]

# Temperature errors of profiles and of forecasts are largest and matter most in the lower half of
# the air's mass.
SHIFTED_BELOW = 500.0  # hPa
_SMALLEST_COLUMN, _LARGEST_COLUMN = 0.05, 90.0  # kg m-2


def water_scaled(profile: Profile, factor: float) -> Profile:
    """The profile with its water vapour times a factor, capped at saturation.

    Parameters
    ----------
    profile : Profile
        To be changed.
    factor : float
        Above 0; 1.05 is 5 % more.

    Raises
    ------
    DomainError
        If the factor is not positive.
    """
    if not (np.isfinite(factor) and factor > 0.0):
        raise DomainError(f"the factor of the water vapour must be positive, not {factor}")
    return _with_water(profile, _capped(profile, factor))


def temperature_shifted(profile: Profile, shift: float) -> Profile:
    """The profile with the air below 500 hPa warmer by a shift, at constant mole fractions.

    Parameters
    ----------
    profile : Profile
        To be changed.
    shift : float
        Negative for colder. [K]
    """
    temperature = profile.temperature + np.where(profile.pressure > SHIFTED_BELOW, shift, 0.0)
    return Profile(profile.height, profile.pressure, temperature, profile.gases, profile.notes)


def scaled_to_column(profile: Profile, column: float) -> Profile:
    """The profile with its water vapour scaled to a column, capped at saturation.

    Parameters
    ----------
    profile : Profile
        Gives the shape.
    column : float
        Water above the lowest level. [kg m-2]

    Raises
    ------
    DomainError
        If the column is not between 0.05 and 90 kg m-2, or the air is too cold to hold it.
    """
    if not _SMALLEST_COLUMN <= column <= _LARGEST_COLUMN:
        raise DomainError(
            f"a column of {column:g} kg m-2 is not between {_SMALLEST_COLUMN} and {_LARGEST_COLUMN}",
            remedy="1 g cm-2 is 10 kg m-2.",
        )

    def reached(factor: float) -> float:
        water = _capped(profile, factor)
        return float(column_water_vapour(profile.height, profile.pressure, profile.temperature, water)[0])

    low, high = 1e-4, column / profile.column_water_vapour
    while reached(high) < column * (1.0 - 1e-9):
        low, high = high, 2.0 * high
        if high > 1e6:
            raise DomainError(
                f"saturated, this air holds {reached(high):.1f} kg m-2 of water, less than {column:g}",
                remedy="Give a warmer profile, or a smaller column.",
            )
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if reached(middle) < column else (low, middle)
    scaled = _with_water(profile, _capped(profile, high))
    before = profile.column_water_vapour
    return scaled.with_note(f"water vapour scaled from {before:.2f} to {column:.2f} kg m-2")


def scaled_to_surface_temperature(profile: Profile, temperature: float) -> Profile:
    """The profile with a given near-surface air temperature.

    The change is full at the lowest level and falls linearly in height to nothing where the
    pressure is 500 hPa: weather and time of day warm the lower air most. Where colder air would be
    supersaturated, its water is capped.

    Parameters
    ----------
    profile : Profile
        To be changed.
    temperature : float
        Wanted at the lowest level. [K]

    Raises
    ------
    DomainError
        If the change exceeds 40 K.
    """
    change = temperature - float(profile.temperature[0])
    if not abs(change) <= 40.0:
        raise DomainError(
            f"the profile's air at the ground is {profile.temperature[0]:.1f} K, too far from {temperature:g} K",
            remedy="Choose a model atmosphere of the season, and give kelvin.",
        )
    end = float(np.interp(-np.log(SHIFTED_BELOW), -np.log(profile.pressure), profile.height))
    share = np.clip((end - profile.height) / max(end - float(profile.height[0]), 1.0), 0.0, 1.0)
    warmed = Profile(
        profile.height, profile.pressure, profile.temperature + change * share, profile.gases, profile.notes
    )
    limit = np.maximum(saturation_ppmv(warmed.pressure, warmed.temperature), _excess(profile))
    capped = _with_water(warmed, np.minimum(warmed.water_vapour, limit))
    return capped.with_note(f"near-surface air changed by {change:+.1f} K to {temperature:.1f} K")


def _capped(profile: Profile, factor: float) -> Float:
    limit = np.maximum(saturation_ppmv(profile.pressure, profile.temperature), profile.water_vapour)
    return np.minimum(profile.water_vapour * factor, limit)


def _excess(profile: Profile) -> Float:
    """The water of levels that the source has supersaturated, 0 elsewhere (the stratosphere's fit)."""
    saturated = saturation_ppmv(profile.pressure, profile.temperature)
    return np.where(profile.water_vapour > saturated, profile.water_vapour, 0.0)


def _with_water(profile: Profile, water: Float) -> Profile:
    gases = {**profile.gases, WATER: water}
    return Profile(profile.height, profile.pressure, profile.temperature, gases, profile.notes)
