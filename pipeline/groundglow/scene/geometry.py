"""Angles of view on a round Earth."""

from __future__ import annotations

import math

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
