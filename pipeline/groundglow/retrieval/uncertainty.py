"""How good a surface temperature and its flux are: first-order propagation by what errors share.

Following the GUM (JCGM 100:2008), each cause of error changes the temperature by its sensitivity
times its standard uncertainty; independent changes add as squares. They are kept in three groups:

- *pixel*: noise, independent from one native footprint to the next;
- *class*: emissivity, one error for all pixels of one kind of ground;
- *scene*: calibration and the air, one error each for the whole scene.

Averaging over an area reduces the first group only.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError
from groundglow.physics.constants import STEFAN_BOLTZMANN
from groundglow.retrieval.single_channel import Air, Inversion
from groundglow.retrieval.single_channel_water_vapour import METHOD_UNCERTAINTY, WaterVapourInversion

Float = NDArray[np.float64]

# Below this transmittance, and below this emissivity, the first order no longer describes the errors;
# such pixels carry a flag.
LEAST_TRANSMITTANCE = 0.4
LEAST_EMISSIVITY = 0.7


@dataclass(frozen=True)
class AirChange:
    """Change of the air's terms for one independent cause moved by one standard uncertainty.

    Attributes
    ----------
    transmittance : array (...)
        At the middle one of the air's surface temperatures. [1]
    path_radiance, transmitted_sky_radiance : array (...)
        [W m-2 sr-1 um-1]
    """

    transmittance: Float
    path_radiance: Float
    transmitted_sky_radiance: Float


@dataclass(frozen=True)
class Causes:
    """Standard uncertainties of everything a surface temperature is made from.

    Attributes
    ----------
    noise : float or array (...)
        Of one pixel's radiance, quantisation included. [W m-2 sr-1 um-1]
    calibration : float
        Of the band's radiance, one error per scene. [W m-2 sr-1 um-1]
    emissivity : float or array (...)
        Of the emissivity in the band.
    air : sequence of AirChange
        The independent causes in the atmosphere.
    """

    noise: ArrayLike
    calibration: float
    emissivity: ArrayLike
    air: Sequence[AirChange] = ()


@dataclass(frozen=True)
class TemperatureUncertainty:
    """Parts of the standard uncertainty of the surface temperature in K; arrays of one shape.

    Attributes
    ----------
    pixel, scene : array
        Standard uncertainties of their groups.
    surface_class : array
        Change of the temperature for an emissivity too high by one standard uncertainty, with its
        sign: the flux needs it for the covariance.
    """

    pixel: Float
    surface_class: Float
    scene: Float

    @property
    def total(self) -> Float:
        """Combined standard uncertainty in K."""
        return np.asarray(np.sqrt(self.pixel**2 + self.surface_class**2 + self.scene**2))


@dataclass(frozen=True)
class FluxUncertainty:
    """Parts of the standard uncertainty of the emitted flux in W m-2; arrays of one shape.

    Attributes
    ----------
    pixel, scene : array
        Standard uncertainties of their groups.
    surface_class : array
        Signed effect of the band emissivity's error, on the temperature and on the broadband
        emissivity together.
    broadband_rule : array
        What the rule that gives the broadband emissivity adds of its own; shared within a class.
    """

    pixel: Float
    surface_class: Float
    broadband_rule: Float
    scene: Float

    @property
    def total(self) -> Float:
        """Combined standard uncertainty in W m-2."""
        parts = (self.pixel, self.surface_class, self.broadband_rule, self.scene)
        return np.asarray(np.sqrt(sum(part**2 for part in parts)))


def noise_of_radiance(
    temperature_difference: float, radiance_per_kelvin: float, *, quantisation_step: float = 0.0
) -> float:
    """Noise of one pixel's radiance, which hardly depends on the scene.

    Parameters
    ----------
    temperature_difference : float
        Noise-equivalent temperature difference, 1 sigma. [K]
    radiance_per_kelvin : float
        Slope dB/dT of the band at the temperature where that is stated. [W m-2 sr-1 um-1 K-1]
    quantisation_step : float
        Radiance of one count; its uniform error is added in quadrature. [W m-2 sr-1 um-1]

    Returns
    -------
    float
        [W m-2 sr-1 um-1]

    Raises
    ------
    DomainError
        If a number is negative or not finite.

    References
    ----------
    JCGM 100:2008, F.2.2.1 (uniform distribution of a step: step / sqrt(12)).
    """
    for name, value in (
        ("noise-equivalent temperature difference", temperature_difference),
        ("radiance per kelvin", radiance_per_kelvin),
        ("quantisation step", quantisation_step),
    ):
        if not (np.isfinite(value) and value >= 0.0):
            raise DomainError(f"the {name} must be a number of at least 0, not {value}")
    return float(np.hypot(temperature_difference * radiance_per_kelvin, quantisation_step / np.sqrt(12.0)))


def propagate(result: Inversion, emissivity: ArrayLike, air: Air, causes: Causes) -> TemperatureUncertainty:
    """Standard uncertainty of the surface temperature, to first order.

    Parameters
    ----------
    result : Inversion
        What :func:`~groundglow.retrieval.single_channel.invert` gave.
    emissivity : array (...)
        In the band.
    air : Air
        At the same pixels.
    causes : Causes
        Standard uncertainties.

    Returns
    -------
    TemperatureUncertainty
        NaN where there is no temperature.

    Notes
    -----
    With M = dL/dT: noise and calibration give u(L) / M, the emissivity -(t B - r) / M u(eps), and a
    cause in the air -(eps B dt + dp + (1 - eps) dr) / M.

    References
    ----------
    JCGM 100:2008, equation 10; the sensitivities are those of the inverted equation.
    """
    eps = np.asarray(emissivity, dtype=np.float64)
    through = result.transmitted_blackbody
    middle = np.asarray(air.transmittance, dtype=np.float64)[air.surface_temperature.size // 2]
    scene = (causes.calibration / result.response) ** 2
    for cause in causes.air:
        change = eps * through * cause.transmittance / middle + cause.path_radiance
        change = change + (1.0 - eps) * cause.transmitted_sky_radiance
        scene = scene + (change / result.response) ** 2
    return TemperatureUncertainty(
        pixel=np.asarray(np.asarray(causes.noise, dtype=np.float64) / result.response),
        surface_class=np.asarray(
            -(through - air.transmitted_sky_radiance) / result.response * np.asarray(causes.emissivity)
        ),
        scene=np.sqrt(scene),
    )


def propagate_with_water_vapour(
    result: WaterVapourInversion,
    *,
    noise: ArrayLike,
    calibration: float,
    emissivity: ArrayLike,
    column_water_vapour: ArrayLike,
    method: float = METHOD_UNCERTAINTY,
) -> TemperatureUncertainty:
    """Standard uncertainty of a surface temperature found with the column water vapour alone.

    Parameters
    ----------
    result : WaterVapourInversion
        The temperature and its derivatives.
    noise : float or array (...)
        Of one pixel's radiance, quantisation included. [W m-2 sr-1 um-1]
    calibration : float
        Of the band's radiance, one error per scene. [W m-2 sr-1 um-1]
    emissivity : float or array (...)
        Standard uncertainty of the emissivity in the band.
    column_water_vapour : float or array (...)
        Standard uncertainty of the column, one error per scene. [kg m-2]
    method : float
        Standard uncertainty of the form itself, one error per scene. [K]

    Returns
    -------
    TemperatureUncertainty
        NaN where there is no temperature.
    """
    water = result.per_water_vapour * np.asarray(column_water_vapour, dtype=np.float64)
    return TemperatureUncertainty(
        pixel=np.abs(result.per_radiance) * np.asarray(noise, dtype=np.float64),
        surface_class=result.per_emissivity * np.asarray(emissivity, dtype=np.float64),
        scene=np.sqrt((result.per_radiance * calibration) ** 2 + water**2 + method**2),
    )


def propagate_flux(
    temperature: ArrayLike,
    parts: TemperatureUncertainty,
    broadband_emissivity: ArrayLike,
    *,
    shared: ArrayLike,
    own: ArrayLike,
) -> FluxUncertainty:
    """Standard uncertainty of the emitted flux eps sigma T^4, with the covariance of eps and T.

    Parameters
    ----------
    temperature : array (...)
        Surface temperature. [K]
    parts : TemperatureUncertainty
        Its uncertainty.
    broadband_emissivity : array (...)
        0 to 1.
    shared : array (...)
        Change of the broadband emissivity when the band's emissivity is too high by one standard
        uncertainty (signed).
    own : array (...)
        Standard uncertainty that the broadband rule adds, independent of the band.

    Returns
    -------
    FluxUncertainty
        NaN where an input is NaN.

    Notes
    -----
    An emissivity taken too high lowers the temperature and raises the factor in front of T^4: the
    two effects largely cancel, which is why they are added before they are squared.

    References
    ----------
    JCGM 100:2008, equation 13.
    """
    t = np.asarray(temperature, dtype=np.float64)
    black = STEFAN_BOLTZMANN * t**4
    per_kelvin = 4.0 * np.asarray(broadband_emissivity, dtype=np.float64) * STEFAN_BOLTZMANN * t**3
    return FluxUncertainty(
        pixel=per_kelvin * parts.pixel,
        surface_class=per_kelvin * parts.surface_class + black * np.asarray(shared, dtype=np.float64),
        broadband_rule=black * np.asarray(own, dtype=np.float64),
        scene=per_kelvin * parts.scene,
    )


def independent_footprints(
    pixels: ArrayLike, *, pixel_size: float, native_footprint: float | None = None
) -> Float:
    """Effective number of independent measurements among pixels that are averaged.

    Noise is one number per native footprint of the sensor; a raster delivered on finer pixels repeats
    it, and averaging those repeats gains nothing. The pixel group of an average is the pixel group of
    one pixel over the square root of this number; class and scene groups stay.

    Parameters
    ----------
    pixels : array (...)
        Valid pixels in each average, with fractions where pixels count in part; NaN or 0 gives NaN.
    pixel_size : float
        Edge of a delivered pixel. [m]
    native_footprint : float, optional
        Edge of the sensor's own pixel; the delivered pixel where it is not known. [m]

    Returns
    -------
    array (...)
        At least 1.

    Raises
    ------
    DomainError
        If a size is not a positive number.
    """
    native = pixel_size if native_footprint is None else native_footprint
    for name, value in (("pixel size", pixel_size), ("native footprint", native)):
        if not (np.isfinite(value) and value > 0.0):
            raise DomainError(f"the {name} must be a positive number of metres, not {value}")
    count = np.asarray(pixels, dtype=np.float64)
    area = np.where(count > 0.0, count, np.nan) * pixel_size**2
    return np.asarray(np.maximum(area / max(native, pixel_size) ** 2, 1.0))
