"""The view from the ground: secants of zenith angles, and angles at the sensor turned into them.

A view zenith angle is meant at the surface. An angle measured at the sensor (off nadir) is smaller,
since the Earth curves away: sin(zenith) = (R + H) / (R + h) sin(off nadir), with H the sensor's and
h the ground's height above sea level.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError
from groundglow.kernels import kernel
from groundglow.physics.constants import EARTH_RADIUS

Float = NDArray[np.float64]
Float32 = NDArray[np.float32]

# Beyond this the horizon is near, refraction matters and the air is no longer plane.
LARGEST_ZENITH_ANGLE = 80.0  # deg

_RADIAN = float(np.pi / 180.0)
_LARGEST_SINE = float(np.sin(np.radians(LARGEST_ZENITH_ANGLE))) * (1.0 + 1e-9)


def sine_ratio(sensor_height: float | None, ground_height: float = 0.0) -> float:
    """(R + H) / (R + h): turns the sine of an angle at the sensor into the sine at the surface.

    Parameters
    ----------
    sensor_height : float or None
        Sensor above sea level; None where the angle already is the one at the surface. [m]
    ground_height : float
        Mean ground above sea level. [m]

    Raises
    ------
    DomainError
        If the sensor is below the ground.
    """
    if sensor_height is None:
        return 1.0
    if not sensor_height > ground_height:
        raise DomainError(f"a sensor at {sensor_height:g} m is not above the ground at {ground_height:g} m")
    return (EARTH_RADIUS + sensor_height) / (EARTH_RADIUS + ground_height)


def surface_zenith_angle(off_nadir: ArrayLike, sensor_height: float, ground_height: float = 0.0) -> Float:
    """View zenith angle at the surface of an angle measured at the sensor, in degrees.

    Parameters
    ----------
    off_nadir : array, any shape
        Angle from the vertical at the sensor. [deg]
    sensor_height, ground_height : float
        Above sea level. [m]

    Returns
    -------
    array, same shape
        NaN where the line of sight misses the Earth.
    """
    sine = sine_ratio(sensor_height, ground_height) * np.sin(np.radians(np.asarray(off_nadir, dtype=float)))
    return np.asarray(np.degrees(np.arcsin(np.where(np.abs(sine) <= 1.0, sine, np.nan))))


def secant(angle: Float32, ratio: float = 1.0, out: Float32 | None = None) -> Float32:
    """Secant of the view zenith angle of each pixel, by IEEE arithmetic only.

    Parameters
    ----------
    angle : float32 array (rows, cols)
        View zenith angle, or angle at the sensor with its ``ratio``; the sign does not matter. [deg]
    ratio : float
        From :func:`sine_ratio`.
    out : float32 array (rows, cols), optional
        Filled and given back.

    Returns
    -------
    float32 array (rows, cols)
        1 / cos(zenith angle at the surface), within 1e-6 of it; NaN where the angle is NaN or
        beyond 80 degrees.
    """
    angle = np.ascontiguousarray(angle, dtype=np.float32)
    if out is None:
        out = np.empty(angle.shape, dtype=np.float32)
    _secant(angle, ratio, out)
    return out


@kernel("void(float32[:, ::1], float64, float32[:, ::1])")
def _secant(angle: Float32, ratio: float, out: Float32) -> None:
    for i in range(angle.shape[0]):
        for j in range(angle.shape[1]):
            x = np.float64(angle[i, j]) * _RADIAN
            x2 = x * x
            # Taylor series of the sine to x^17: 1e-13 at a right angle.
            term = 1.0 - x2 / 272.0
            term = 1.0 - x2 / 210.0 * term
            term = 1.0 - x2 / 156.0 * term
            term = 1.0 - x2 / 110.0 * term
            term = 1.0 - x2 / 72.0 * term
            term = 1.0 - x2 / 42.0 * term
            term = 1.0 - x2 / 20.0 * term
            term = 1.0 - x2 / 6.0 * term
            sine = ratio * x * term
            if x2 <= 2.47 and abs(sine) <= _LARGEST_SINE:
                out[i, j] = np.float32(1.0 / np.sqrt(1.0 - sine * sine))
            else:
                out[i, j] = np.float32(np.nan)
