"""How far the absorption model may be off: residual uncertainty of a band's transmittance.

The figures of the updated set combine, as one standard deviation, the misfit to a line-based
correlated-k model, the structure within a band, and the difference between continuum versions. Those
of the 1980s set are its differences from the same model. They hold for the vertical path through
the whole air and are carried to other paths as one relative error of the optical depth; path and
sky radiance move with the transmittance at the temperature at which the air emits.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError

Float = NDArray[np.float64]

# Columns: middle of the classes below 5, 5-15, 15-30 and above 30 kg m-2.
_WATER = np.array([2.5, 10.0, 22.0, 40.0])  # kg m-2
# Rows: bands 8.1-8.5, 8.9-9.3, 10.6-11.2 and 11.5-12.5 um, standard deviation of transmittance.
_WAVELENGTH = np.array([8.3, 9.1, 10.9, 12.0])  # um
_UPDATED = np.array(
    [
        [0.018, 0.020, 0.020, 0.022],
        [0.006, 0.008, 0.011, 0.022],
        [0.005, 0.009, 0.016, 0.027],
        [0.007, 0.011, 0.015, 0.018],
    ]
)
# The 1980s set: root-mean-square differences of band transmittance, 1180-1390, 1080-1180, 980-1080,
# 820-980 and 700-820 cm-1.
_LOWTRAN7_WAVELENGTH = np.array([7.8, 8.85, 9.7, 11.1, 13.2])  # um
_LOWTRAN7 = np.array([0.027, 0.019, 0.013, 0.022, 0.031])
# Clear-sky flux at the ground, root mean square against the same model. [W m-2]
FLUX_UNCERTAINTY = {"updated": 1.8, "lowtran7": 2.9}


def transmittance_uncertainty(absorption: str, wavelength: float, water: ArrayLike) -> Float:
    """Standard uncertainty of a band's transmittance, vertical and through the whole air.

    Parameters
    ----------
    absorption : str
        ``updated`` or ``lowtran7``.
    wavelength : float
        Effective wavelength of the band; beyond the outermost bands of the table theirs is taken. [um]
    water : array, any shape
        Column water vapour. [kg m-2]

    Returns
    -------
    array, same shape

    Raises
    ------
    DomainError
        If the absorption set has no such name.
    """
    if absorption not in FLUX_UNCERTAINTY:
        raise DomainError(f"there is no absorption set {absorption!r}")
    by_water = np.array([np.interp(wavelength, _WAVELENGTH, column) for column in _UPDATED.T])
    updated = np.interp(np.asarray(water, dtype=np.float64), _WATER, by_water)
    if absorption == "updated":
        return np.asarray(updated)
    return np.asarray(np.maximum(updated, np.interp(wavelength, _LOWTRAN7_WAVELENGTH, _LOWTRAN7)))


def relative_depth_uncertainty(transmittance: ArrayLike, uncertainty: ArrayLike) -> Float:
    """Relative error of the optical depth that makes up an error of the transmittance.

    Parameters
    ----------
    transmittance : array
        Vertical, through the whole air.
    uncertainty : array
        Its standard uncertainty.

    Returns
    -------
    array
        u / (t ln(1/t)), at most 1; 0 where there is nothing to absorb.
    """
    t = np.clip(np.asarray(transmittance, dtype=np.float64), 1e-6, 1.0)
    lever = -t * np.log(t)
    return np.minimum(np.asarray(uncertainty) / np.maximum(lever, 1e-9), 1.0)


def change_of_transmittance(transmittance: Float, relative_depth: Float) -> Float:
    """Change of a transmittance when its optical depth grows by a relative amount, t ln(t) e."""
    t = np.clip(transmittance, 1e-12, 1.0)
    return np.asarray(relative_depth * t * np.log(t))


def change_of_emission(radiance: Float, transmittance: Float, change: Float) -> Float:
    """Change of the radiance of air that becomes more opaque: less light passes, more is emitted.

    Parameters
    ----------
    radiance, transmittance : array
        Emitted by a path, and of it.
    change : array
        Of the transmittance.
    """
    return np.asarray(-change * radiance / np.maximum(1.0 - transmittance, 1e-9))
