"""Emissivity by the logarithm of a vegetation index: the readable statement.

One relation for the whole thermal window, measured over savanna. Water and snow have values of their own. The
compiled form is in ``emissivity_index_kernels``.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.physics.spectral_response import SpectralResponse
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity import GroundValues
from groundglow.retrieval.emissivity_class import ClassTable
from groundglow.retrieval.emissivity_special_ground import with_special_ground
from groundglow.retrieval.emissivity_threshold import threshold_method
from groundglow.retrieval.vegetation_index import vegetation_index

Float = NDArray[np.float64]

# Van de Griend, A. A., Owe, M. (1993), IJRS 14:1119-1131.
LOG_CONSTANT = 1.0094
LOG_SLOPE = 0.047
LOG_LOW = 0.157
LOG_HIGH = 0.727
LOG_WATER_BELOW = -0.185
LOG_WATER = 0.995
LOG_BARE = 0.970
LOG_FULL = 0.990
# The relation was measured over savanna at one place, over 8-14 um as a whole: planning values.
LOG_UNCERTAINTY = 0.015
LOG_BROADBAND_UNCERTAINTY = 0.015


@dataclass(frozen=True)
class LogarithmicMethod:
    """The logarithmic method made ready for one scene.

    Attributes
    ----------
    water, snow : GroundValues
        For pixels flagged so.
    unknown : GroundValues
        For pixels without an index.
    index_uncertainty : float
        Standard uncertainty of the index.
    """

    water: GroundValues
    snow: GroundValues
    unknown: GroundValues
    index_uncertainty: float

    def packed(self) -> Float:
        """All numbers in the order in which the compiled form reads them."""
        grounds = (self.water, self.snow, self.unknown)
        return np.array(
            [self.index_uncertainty, *(number for ground in grounds for number in ground.numbers())]
        )


def logarithmic_method(
    response: SpectralResponse, table: ClassTable, *, age_in_days: float = 0.0
) -> LogarithmicMethod:
    """Make the logarithmic method ready for one band and one scene.

    Parameters
    ----------
    response : SpectralResponse
        Of the band.
    table : ClassTable
        Holds "soil", "quartz_sand", "green_vegetation", "water" and "snow_ice".
    age_in_days : float
        Between reflectance and thermal scene.

    Returns
    -------
    LogarithmicMethod

    Raises
    ------
    ConfigError, DomainError
        If a class is missing or does not cover the band.
    """
    ready = threshold_method(response, table, age_in_days=age_in_days)
    span = LOG_HIGH - LOG_LOW
    return LogarithmicMethod(ready.water, ready.snow, ready.unknown, span * ready.cover_uncertainty)


def logarithmic_emissivity(
    red: ArrayLike, near_infrared: ArrayLike, flags: ArrayLike, method: LogarithmicMethod
) -> EmissivityFields:
    """Emissivity by the logarithm of the vegetation index.

    Parameters
    ----------
    red, near_infrared : array (rows, columns)
        Reflectance, 0 to 1; NaN where there is none.
    flags : uint16 array (rows, columns)
        Quality bits; water and snow are looked at.
    method : LogarithmicMethod
        Made ready for the band.

    Returns
    -------
    EmissivityFields
        Where there is no index, or a negative one without a flag, the values are assumed and flagged.

    Notes
    -----
    eps = 1.0094 + 0.047 ln(index) from 0.157 to 0.727; 0.970 below, 0.990 above, 0.995 below -0.185. The
    relation is for 8-14 um as a whole: the broadband emissivity is the same number.

    References
    ----------
    Van de Griend, A. A., Owe, M. (1993), International Journal of Remote Sensing 14, 1119-1131,
    doi:10.1080/01431169308904400.
    """
    index = vegetation_index(red, near_infrared)
    safe = np.clip(np.where(np.isnan(index), LOG_LOW, index), LOG_LOW, LOG_HIGH)
    rising = (index >= LOG_LOW) & (index <= LOG_HIGH)
    flat = np.where(index > LOG_HIGH, LOG_FULL, np.where(index < LOG_WATER_BELOW, LOG_WATER, LOG_BARE))
    value = np.where(rising, LOG_CONSTANT + LOG_SLOPE * np.log(safe), flat)
    by_index = LOG_SLOPE / safe * method.index_uncertainty
    spread = np.sqrt(LOG_UNCERTAINTY**2 + by_index**2)
    own = np.full_like(value, LOG_BROADBAND_UNCERTAINTY)
    unknown = np.isnan(index)
    return with_special_ground(
        (value, spread, value, spread, own),
        flags,
        ((unknown, method.unknown),),
        unknown | (index < LOG_WATER_BELOW),
        water=method.water,
        snow=method.snow,
    )
