"""The normalised difference vegetation index, and the plant cover that is read from it."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError

Float = NDArray[np.float64]

# Carlson, T. N., Ripley, D. A. (1997), RSE 62:241-252.
BARE_BELOW = 0.2
FULL_ABOVE = 0.5

# A cover read from the day's own index is good to 0.05; it changes by about a hundredth a day while crops
# grow or are cut, and after a season nothing is known of it but that it lies between 0 and 1 (planning
# values).
FRESH_COVER_UNCERTAINTY = 0.05
COVER_CHANGE_PER_DAY = 0.01
UNKNOWN_COVER_UNCERTAINTY = 1.0 / math.sqrt(12.0)


def cover_uncertainty(age_in_days: float = 0.0) -> float:
    """Standard uncertainty of the vegetation cover read from an index of another date.

    Parameters
    ----------
    age_in_days : float
        Days between the reflectance and the thermal scene; the sign does not matter.

    Returns
    -------
    float
        From 0.05 on the same day to 0.29, the standard deviation of a cover of which nothing is known.

    Raises
    ------
    DomainError
        If the age is not a number.
    """
    if not math.isfinite(age_in_days):
        raise DomainError(f"the age of the vegetation index must be a number of days, not {age_in_days}")
    grown = math.hypot(FRESH_COVER_UNCERTAINTY, COVER_CHANGE_PER_DAY * age_in_days)
    return min(grown, UNKNOWN_COVER_UNCERTAINTY)


def vegetation_index(red: ArrayLike, near_infrared: ArrayLike) -> Float:
    """Normalised difference vegetation index.

    Parameters
    ----------
    red, near_infrared : array (...)
        Reflectance, 0 to 1.

    Returns
    -------
    array (...)
        (near infrared - red) / (near infrared + red), held between -1 and 1; NaN where a reflectance is
        NaN or their sum is not above 0.

    References
    ----------
    Tucker, C. J. (1979), Remote Sensing of Environment 8, 127-150.
    """
    r = np.asarray(red, dtype=np.float64)
    n = np.asarray(near_infrared, dtype=np.float64)
    total = n + r
    index = (n - r) / np.where(total > 0.0, total, np.nan)
    return np.clip(index, -1.0, 1.0)


def vegetation_cover(index: ArrayLike) -> Float:
    """Share of a pixel that plants cover.

    Parameters
    ----------
    index : array (...)
        Vegetation index; NaN gives NaN.

    Returns
    -------
    array (...)
        ((index - 0.2) / 0.3) squared, held between 0 and 1.

    References
    ----------
    Carlson, T. N., Ripley, D. A. (1997), Remote Sensing of Environment 62, 241-252.
    """
    scaled = (np.asarray(index, dtype=np.float64) - BARE_BELOW) / (FULL_ABOVE - BARE_BELOW)
    return np.asarray(np.clip(scaled, 0.0, 1.0) ** 2)
