"""Fewer levels for soundings that report every second: those that the air between cannot do without."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.nodes import thinned
from groundglow.atmosphere.profile import Profile

Float = NDArray[np.float64]

# Profiles of up to this many levels keep them all.
MOST_LEVELS = 150
# What interpolation between the kept levels may miss to begin with; doubled until few enough are left.
_TEMPERATURE_STEP = 0.05  # K
_WATER_STEP = 0.01  # of the natural logarithm


def condensed(profile: Profile, most: int = MOST_LEVELS) -> Profile:
    """The profile with at most so many levels, the first and the last among them.

    Parameters
    ----------
    profile : Profile
        Of any number of levels.
    most : int
        Largest number of levels, at least 2.

    Returns
    -------
    Profile
        Itself if it is short enough; else levels between which the temperature is linear and the
        water exponential within 0.05 K and 1 %, or a multiple of both, told in the notes.
    """
    if profile.height.size <= most:
        return profile
    water = np.log(np.maximum(profile.water_vapour, 1e-6))
    values = np.stack([profile.temperature / _TEMPERATURE_STEP, water / _WATER_STEP], axis=1)
    scale = np.ones_like(values)
    tolerance = 1.0
    kept = thinned(profile.height, values, scale, tolerance)
    while kept.size > most:
        tolerance *= 2.0
        kept = kept[thinned(profile.height[kept], values[kept], scale[kept], tolerance)]
    made = Profile(
        profile.height[kept],
        profile.pressure[kept],
        profile.temperature[kept],
        {gas: amounts[kept] for gas, amounts in profile.gases.items()},
        profile.notes,
    )
    missed = f"{tolerance * _TEMPERATURE_STEP:.2g} K and {100.0 * tolerance * _WATER_STEP:.2g} %"
    return made.with_note(f"{profile.height.size} levels condensed to {kept.size} (within {missed} of water)")
