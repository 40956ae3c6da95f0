"""How well each kind of source knows the air: standard uncertainties of water and temperature.

These are planning values, to be overridden where better is known. Radiosonde humidity is good to
about 5 % and temperature to 0.5 K in the lower troposphere; short-range analyses agree with
independent columns within about 10 %. A sounding grows old: its variances grow in proportion to
the hours and kilometres to the scene, as for a random walk.
"""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from groundglow.errors import DomainError


@dataclass(frozen=True)
class SourceUncertainty:
    """Standard uncertainties of a profile.

    Attributes
    ----------
    water_vapour : float
        Of all mole fractions of water together, relative. [1]
    air_temperature : float
        Of all temperatures below 500 hPa together. [K]
    """

    water_vapour: float
    air_temperature: float

    def __post_init__(self) -> None:
        if not 0.0 <= self.water_vapour <= 0.8:
            raise DomainError(
                f"the relative uncertainty of the water vapour must be 0 to 0.8, not {self.water_vapour}",
                remedy="5 % is 0.05.",
            )
        if not 0.0 <= self.air_temperature <= 20.0:
            raise DomainError(
                f"the uncertainty of the air temperature must be 0 to 20 K, not {self.air_temperature}"
            )


DEFAULT_UNCERTAINTY = MappingProxyType(
    {
        "sounding": SourceUncertainty(0.05, 0.5),
        "analysis": SourceUncertainty(0.10, 1.0),
        "surface_weather": SourceUncertainty(0.20, 2.0),
        "climatology": SourceUncertainty(0.30, 4.0),
    }
)
# Growth of a sounding's variances: at 6 h or 100 km the water is known to 7 or 11 %, the
# temperature to 1.3 or 1.1 K.
_WATER_PER_HOUR, _WATER_PER_KILOMETRE = 0.02**2, 0.01**2
_TEMPERATURE_PER_HOUR, _TEMPERATURE_PER_KILOMETRE = 0.5**2, 0.1**2


def source_uncertainty(source: str, *, hours: float = 0.0, kilometres: float = 0.0) -> SourceUncertainty:
    """The stated uncertainty of a kind of source; a sounding's grows with its distance.

    Parameters
    ----------
    source : str
        ``sounding``, ``analysis``, ``surface_weather`` or ``climatology``.
    hours, kilometres : float
        Between the sounding and the scene; of no effect on other sources. [h], [km]

    Raises
    ------
    DomainError
        If the source is unknown or a distance negative.
    """
    if source not in DEFAULT_UNCERTAINTY:
        raise DomainError(
            f"there is no kind of source {source!r}",
            remedy=f"Choose one of {', '.join(DEFAULT_UNCERTAINTY)}.",
        )
    if not (hours >= 0.0 and kilometres >= 0.0):
        raise DomainError(f"distances must not be negative: {hours} h, {kilometres} km")
    base = DEFAULT_UNCERTAINTY[source]
    if source != "sounding":
        return base
    water = base.water_vapour**2 + _WATER_PER_HOUR * hours + _WATER_PER_KILOMETRE * kilometres
    air = base.air_temperature**2 + _TEMPERATURE_PER_HOUR * hours + _TEMPERATURE_PER_KILOMETRE * kilometres
    return SourceUncertainty(min(float(np.sqrt(water)), 0.30), min(float(np.sqrt(air)), 4.0))
