"""The form in which the atmosphere reaches the chain: small tables over place, height and angle.

Whatever the source (a solved profile or typed-in numbers), the air between ground and sensor
arrives as one :class:`AtmosphereGrid` per band and is interpolated at each pixel: linearly in map
position and ground height, and linearly in the secant of the view zenith angle.

The inversion needs, per pixel,

    L = eps t(T) B(T) + (1 - eps) r + p,

with t the transmittance weighted by response times Planck radiance (it depends a little on the
surface temperature in wide bands), r the sky radiance reflected by a mirror and seen through the
air (transmittance times sky, integrated over the response), and p the path radiance.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import DomainError

Float = NDArray[np.float64]


@dataclass(frozen=True)
class AirTerms:
    """The air's terms at the nodes of a grid, or their change for one cause of uncertainty.

    Attributes
    ----------
    transmittance : array (temperatures, y, x, height, angle)
        Planck- and response-weighted transmittance at each of the grid's surface temperatures. [1]
    path_radiance : array (y, x, height, angle)
        [W m-2 sr-1 um-1]
    transmitted_sky_radiance : array (y, x, height, angle)
        Hemispheric sky radiance times transmittance, integrated over the response. [W m-2 sr-1 um-1]
    sky_radiance : array (y, x, height)
        Hemispheric sky radiance (irradiance / pi), response-weighted. [W m-2 sr-1 um-1]
    sky_flux : array (y, x, height)
        Broadband downwelling longwave flux; NaN where it is not known. [W m-2]
    """

    transmittance: Float
    path_radiance: Float
    transmitted_sky_radiance: Float
    sky_radiance: Float
    sky_flux: Float


@dataclass(frozen=True)
class AtmosphereGrid:
    """One band's air at nodes of map position, ground height and view zenith angle.

    Attributes
    ----------
    x, y : arrays (x,), (y,)
        Map coordinates of the nodes in the scene's CRS, increasing; one node means "everywhere".
    height : array (height,)
        Ground height above sea level, increasing. [m]
    view_zenith_angle : array (angle,)
        At the surface, increasing. [deg]
    surface_temperature : array (temperatures,)
        One or three, increasing: where the transmittance is weighted. [K]
    terms : AirTerms
        The best estimate.
    causes : mapping of str to AirTerms
        For each cause of uncertainty ("water_vapour", "air_temperature", "absorption_model", or
        the independent directions of typed-in values) the change of every term for a change of the
        cause by one standard uncertainty. Causes are independent of each other.
    validity : bool array (y, x, height, angle)
        False where the source says it is outside its validity.
    """

    x: Float
    y: Float
    height: Float
    view_zenith_angle: Float
    surface_temperature: Float
    terms: AirTerms
    causes: dict[str, AirTerms] = field(default_factory=dict)
    validity: NDArray[np.bool_] | None = None

    def __post_init__(self) -> None:
        nodes = (self.y.size, self.x.size, self.height.size, self.view_zenith_angle.size)
        for axis in (self.x, self.y, self.height, self.view_zenith_angle, self.surface_temperature):
            if axis.ndim != 1 or axis.size == 0 or (np.diff(axis) <= 0.0).any():
                raise DomainError("the axes of an atmosphere grid must be one-dimensional and increase")
        if self.surface_temperature.size not in (1, 3):
            raise DomainError("an atmosphere grid carries one or three surface temperatures")
        wanted = {
            "transmittance": (self.surface_temperature.size, *nodes),
            "path_radiance": nodes,
            "transmitted_sky_radiance": nodes,
            "sky_radiance": nodes[:3],
            "sky_flux": nodes[:3],
        }
        for terms in (self.terms, *self.causes.values()):
            for name, shape in wanted.items():
                found = getattr(terms, name).shape
                if found != shape:
                    raise DomainError(f"{name} of an atmosphere grid has shape {found}, needed {shape}")
        t = self.terms.transmittance
        if not ((t > 0.0) & (t <= 1.0 + 1e-9)).all():
            raise DomainError("a transmittance must be above 0 and at most 1")
