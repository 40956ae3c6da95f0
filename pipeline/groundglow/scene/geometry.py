"""Angles of view on a round Earth."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import DomainError

EARTH_RADIUS = 6_371_000.0  # m, mean


def zenith_at_surface(off_nadir: float, height: float) -> float:
    """View zenith angle at the surface for an angle off nadir at the sensor.

    sin(zenith) = (R + h) / R sin(off-nadir), with the Earth's mean radius R.

    Parameters
    ----------
    off_nadir : float
        Angle between the line of sight and the vertical at the sensor, 0 or more. [deg]
    height : float
        Height of the sensor above the ground, 0 or more. [m]

    Returns
    -------
    float
        Never smaller than ``off_nadir``. [deg]

    Raises
    ------
    DomainError
        If the line of sight misses the Earth, or a number is negative or not finite.
    """
    if not (math.isfinite(off_nadir) and math.isfinite(height) and 0.0 <= off_nadir < 90.0 and height >= 0.0):
        raise DomainError(
            f"an angle off nadir of {off_nadir} degrees from a height of {height} m makes no sense",
            remedy="The angle must lie in 0 to 90 degrees, the height must not be negative",
        )
    sine = (1.0 + height / EARTH_RADIUS) * math.sin(math.radians(off_nadir))
    if sine >= 1.0:
        raise DomainError(
            f"from {height:g} m the line of sight at {off_nadir:g} degrees off nadir misses the Earth"
        )
    return math.degrees(math.asin(sine))


@dataclass(frozen=True)
class ZenithAtSurface:
    """Pixels of angles off nadir at the sensor become view zenith angles at the surface.

    Attributes
    ----------
    height : float
        Height of the sensor above the ground. [m]
    """

    height: float

    def __call__(self, off_nadir: NDArray[np.float32]) -> NDArray[np.float32]:
        """As :func:`zenith_at_surface`; the sign is dropped, NaN where the line of sight misses the Earth. [deg]"""
        angle = np.radians(np.abs(off_nadir).astype(np.float64))
        sine = (1.0 + self.height / EARTH_RADIUS) * np.sin(angle)
        with np.errstate(invalid="ignore"):
            zenith = np.degrees(np.arcsin(np.where(angle < 0.5 * np.pi, sine, np.nan)))
        return zenith.astype(np.float32)
