"""Which gases take part, and how much of the well-mixed ones there is today.

The model atmospheres carry the gases of about 1980. Carbon dioxide, nitrous oxide and methane are
brought to a given near-surface mole fraction, keeping their shape over height; halocarbons are well
mixed. The minor gases of the climatology can be left out.
"""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.profile import WATER, Profile
from groundglow.errors import DomainError

Float = NDArray[np.float64]

# Global annual means near the surface in 2024, rounded (NOAA Global Monitoring Laboratory, trends in
# greenhouse gases; from memory).
DEFAULT_YEAR = 2024
DEFAULT_CARBON_DIOXIDE = 423.0  # ppmv
DEFAULT_NITROUS_OXIDE = 0.338  # ppmv
DEFAULT_METHANE = 1.93  # ppmv
# Present-day order of magnitude (NOAA Global Monitoring Laboratory, halocarbon network).
DEFAULT_CFC_11 = 0.22e-3  # ppmv
DEFAULT_CFC_12 = 0.49e-3  # ppmv
DEFAULT_HCFC_22 = 0.25e-3  # ppmv

MAIN_GASES = (WATER, "carbon_dioxide", "ozone", "nitrous_oxide", "methane")
MINOR_GASES = (
    "carbon_monoxide", "oxygen", "nitrogen", "nitric_oxide", "sulphur_dioxide", "nitrogen_dioxide",
    "ammonia", "nitric_acid",
)  # fmt: skip
HALOCARBONS = ("cfc_11", "cfc_12", "hcfc_22")
GASES = (*MAIN_GASES, *MINOR_GASES, *HALOCARBONS)
# What leaving the minor gases out costs at most, in transmittance between 7 and 15 um.
MINOR_GASES_COST = 0.004
NITROGEN = 0.781e6  # ppmv


@dataclass(frozen=True)
class Composition:
    """Amounts of the well-mixed gases.

    Attributes
    ----------
    carbon_dioxide, nitrous_oxide, methane : float
        Near the surface; the default is the global mean of 2024. None keeps those of the profile. [1e-6]
    cfc_11, cfc_12, hcfc_22 : float
        Throughout; only the ``updated`` absorption set knows them. [1e-6]
    minor_gases : bool
        Whether CO, O2, N2, NO, SO2, NO2, NH3 and HNO3 take part. Without them transmittance in
        7-15 um is up to 0.004 too high.
    """

    carbon_dioxide: float | None = DEFAULT_CARBON_DIOXIDE
    nitrous_oxide: float | None = DEFAULT_NITROUS_OXIDE
    methane: float | None = DEFAULT_METHANE
    cfc_11: float = DEFAULT_CFC_11
    cfc_12: float = DEFAULT_CFC_12
    hcfc_22: float = DEFAULT_HCFC_22
    minor_gases: bool = True

    def __post_init__(self) -> None:
        for name in ("carbon_dioxide", "nitrous_oxide", "methane", *HALOCARBONS):
            value = getattr(self, name)
            if value is not None and not (np.isfinite(value) and 0.0 <= value <= 1e5):
                raise DomainError(f"the amount of {name} must be 0 to 1e5 ppmv, not {value}")


# The gases as the model atmospheres have them, without halocarbons: what the 1980s model assumed.
AS_TABULATED = Composition(None, None, None, 0.0, 0.0, 0.0)


def composed(profile: Profile, composition: Composition) -> Profile:
    """The profile with the gases that take part and today's amounts of the well-mixed ones.

    Parameters
    ----------
    profile : Profile
        With all gases of the climatology (see ``completion.completed``); gases that it lacks stay absent.
    composition : Composition
        Amounts.

    Returns
    -------
    Profile
    """
    gases: dict[str, Float] = {}
    for name, values in profile.gases.items():
        if name in MINOR_GASES and not composition.minor_gases:
            continue
        wanted = getattr(composition, name, None)
        gases[name] = values * (wanted / values[0]) if isinstance(wanted, float) and values[0] > 0 else values
    one = np.ones_like(profile.height)
    if composition.minor_gases and "oxygen" in gases:
        gases["nitrogen"] = NITROGEN * one
    for name in HALOCARBONS:
        gases[name] = getattr(composition, name) * one
    return Profile(
        profile.height, profile.pressure, profile.temperature, MappingProxyType(gases), profile.notes
    )


CLIMATOLOGICAL_GASES = tuple(name for name in GASES if name not in (*HALOCARBONS, "nitrogen"))
