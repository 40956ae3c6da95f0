"""A profile when only the weather at the ground is known.

The column water vapour follows from temperature and vapour pressure at screen height by a published
scaling (Prata 1996, or Gueymard 1994); a model atmosphere gives the shape, moved to the station's
temperature and pressure. Its uncertainty is large: inversions and moist layers aloft leave no trace
at the ground.

References
----------
Prata, A. J. (1996), Quarterly Journal of the Royal Meteorological Society 122, 1127-1151.
Gueymard, C. (1994), Solar Energy 53, 57-71.
"""

from __future__ import annotations

import numpy as np

from groundglow.atmosphere.clear_sky import gueymard_column, prata_column
from groundglow.atmosphere.humidity import vapour_pressure
from groundglow.atmosphere.perturbation import scaled_to_column, scaled_to_surface_temperature
from groundglow.atmosphere.profile import Profile, check_temperature, saturation_ppmv
from groundglow.errors import DomainError

COLUMN_SCALINGS = {"prata": prata_column, "gueymard": gueymard_column}


def profile_of_surface_weather(
    climatology: Profile,
    *,
    temperature: float,
    humidity: float,
    humidity_measure: str,
    pressure: float,
    ground_height: float,
    scaling: str = "prata",
) -> Profile:
    """A model atmosphere moved to the weather at one station.

    Parameters
    ----------
    climatology : Profile
        A model atmosphere of the place and season.
    temperature : float
        Air at screen height. [K]
    humidity : float
        There; of the measure named next.
    humidity_measure : str
        As for ``sounding.profile_of_sounding``.
    pressure : float
        There. [hPa]
    ground_height : float
        Of the station. [m]
    scaling : str
        ``prata`` or ``gueymard``.

    Returns
    -------
    Profile
        From the station's height to the top of the climatology.

    Raises
    ------
    DomainError
        If a number is impossible.
    """
    if scaling not in COLUMN_SCALINGS:
        raise DomainError(f"there is no scaling {scaling!r}", remedy="Choose prata or gueymard.")
    check_temperature(np.array([temperature]))
    if not 300.0 <= pressure <= 1100.0:
        raise DomainError(
            f"a surface pressure of {pressure:g} hPa is not between 300 and 1100", remedy="Give it in hPa."
        )
    vapour = float(vapour_pressure(humidity_measure, humidity, temperature, pressure))
    saturated = float(saturation_ppmv(np.array([pressure]), np.array([temperature]))[0]) / 1e6 * pressure
    if not 0.0 < vapour <= 1.05 * saturated:
        raise DomainError(
            f"a vapour pressure of {vapour:.3g} hPa is not between 0 and {saturated:.3g} hPa, "
            f"saturation at {temperature:.1f} K",
            remedy="A dew point is at most the temperature; relative humidity is in percent.",
        )
    base = _standing_on(climatology, ground_height, pressure)
    warmed = scaled_to_surface_temperature(base, temperature)
    column = float(COLUMN_SCALINGS[scaling](temperature, vapour))
    return scaled_to_column(warmed, column).with_note(
        f"column water vapour from near-surface weather ({scaling} scaling)"
    )


def _standing_on(climatology: Profile, ground: float, pressure: float) -> Profile:
    """The climatology above a station, with the station's pressure."""
    levels = np.append(ground, climatology.height[climatology.height > ground + 1.0])
    air = climatology.at(levels)
    factor = pressure / float(air.pressure[0])
    return Profile(levels, air.pressure * factor, air.temperature, dict(air.gases), climatology.notes)
