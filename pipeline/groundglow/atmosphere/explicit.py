"""Air typed in as numbers, and no air at all.

Transmittance, path radiance and sky radiance that an analyst takes from elsewhere come with one
standard uncertainty each and with correlations, since one profile makes all three: less
transmittance goes with more path and more sky radiance. The correlated errors are turned into
independent causes, the columns of the Cholesky factor of their covariance.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.atmosphere.grid import AirTerms, AtmosphereGrid
from groundglow.errors import DomainError

Float = NDArray[np.float64]

CAUSES = ("stated_transmittance", "stated_path_radiance", "stated_sky_radiance")
FLUX_CAUSE = "stated_sky_flux"
# Any temperature: a typed-in transmittance does not depend on it.
_ANY_TEMPERATURE = 300.0  # K


@dataclass(frozen=True)
class StatedUncertainty:
    """Standard uncertainties of typed-in air, and their correlation coefficients.

    Attributes
    ----------
    transmittance : float [1]
    path_radiance, sky_radiance : float [W m-2 sr-1 um-1]
    sky_flux : float [W m-2]
        Independent of the others.
    transmittance_path, transmittance_sky, path_sky : float
        Correlation coefficients. The defaults, -0.9, -0.9 and 0.9, are planning values: one error of
        the water vapour moves all three.
    """

    transmittance: float = 0.0
    path_radiance: float = 0.0
    sky_radiance: float = 0.0
    sky_flux: float = 0.0
    transmittance_path: float = -0.9
    transmittance_sky: float = -0.9
    path_sky: float = 0.9

    def __post_init__(self) -> None:
        for name in ("transmittance", "path_radiance", "sky_radiance", "sky_flux"):
            value = getattr(self, name)
            if not (np.isfinite(value) and value >= 0.0):
                raise DomainError(f"the standard uncertainty of the {name} must be 0 or more, not {value}")
        for name in ("transmittance_path", "transmittance_sky", "path_sky"):
            value = getattr(self, name)
            if not -1.0 < value < 1.0:
                raise DomainError(f"the correlation {name} must lie between -1 and 1, not {value}")
        self.factor()

    def factor(self) -> Float:
        """Lower Cholesky factor of the correlation matrix of transmittance, path and sky radiance (3, 3).

        Raises
        ------
        DomainError
            If the three coefficients cannot hold together.
        """
        a, b, c = self.transmittance_path, self.transmittance_sky, self.path_sky
        try:
            return np.linalg.cholesky(np.array([[1.0, a, b], [a, 1.0, c], [b, c, 1.0]]))
        except np.linalg.LinAlgError as error:
            raise DomainError(
                f"the correlations {a} (transmittance, path), {b} (transmittance, sky) and {c} (path, sky) "
                "cannot hold together: their matrix is not positive definite",
                remedy="If two errors both go against a third, they go with each other.",
            ) from error


def explicit_grid(
    transmittance: ArrayLike,
    path_radiance: ArrayLike,
    sky_radiance: ArrayLike,
    *,
    sky_flux: ArrayLike | None = None,
    height: ArrayLike = 0.0,
    uncertainty: StatedUncertainty | None = None,
) -> AtmosphereGrid:
    """One band's air from typed-in numbers, the same everywhere or by ground height.

    Parameters
    ----------
    transmittance : number or array (height,)
        Of the whole path, above 0 and at most 1. [1]
    path_radiance, sky_radiance : number or array (height,)
        Radiance emitted towards the sensor; hemispheric sky radiance (irradiance / pi), not below 0.
        [W m-2 sr-1 um-1]
    sky_flux : number or array (height,), optional
        Broadband downwelling longwave flux; unknown (NaN) if absent. [W m-2]
    height : number or array (height,)
        Ground heights of the numbers, increasing. [m]
    uncertainty : StatedUncertainty, optional
        None is exact air.

    Returns
    -------
    AtmosphereGrid
        With one node of place and angle: the numbers are for the scene's own view. Causes of zero
        uncertainty are left out.

    Raises
    ------
    DomainError
        If a number is missing, out of range or the arrays do not agree.
    """
    heights = np.atleast_1d(np.asarray(height, dtype=np.float64))
    t = _checked(transmittance, "transmittance", heights)
    path = _checked(path_radiance, "path radiance", heights)
    sky = _checked(sky_radiance, "sky radiance", heights)
    flux = _checked(np.nan if sky_flux is None else sky_flux, "sky flux", heights, known=sky_flux is not None)
    if not ((t > 0.0) & (t <= 1.0)).all():
        raise DomainError(
            f"a transmittance must be above 0 and at most 1, not {_worst(t)}",
            remedy="Percent are not accepted: write 0.82, not 82.",
        )
    terms = _terms(t, path, t * sky, sky, flux)
    return AtmosphereGrid(
        x=np.zeros(1),
        y=np.zeros(1),
        height=heights,
        view_zenith_angle=np.zeros(1),
        surface_temperature=np.array([_ANY_TEMPERATURE]),
        terms=terms,
        causes=_causes(t, sky, flux, uncertainty or StatedUncertainty()),
    )


def no_air_grid() -> AtmosphereGrid:
    """No air between ground and sensor, and no sky: transmittance 1, no radiance, unknown sky flux."""
    return explicit_grid(1.0, 0.0, 0.0)


def _checked(value: ArrayLike, name: str, heights: Float, *, known: bool = True) -> Float:
    numbers = np.asarray(value, dtype=np.float64)
    if numbers.ndim > 1 or (numbers.ndim == 1 and numbers.shape != heights.shape):
        raise DomainError(
            f"the {name} has {numbers.size} values for {heights.size} ground heights",
            remedy="Give one number, or one for each ground height.",
        )
    full = np.broadcast_to(numbers, heights.shape).astype(np.float64)
    if known and not np.isfinite(full).all():
        raise DomainError(f"the {name} holds a value that is no finite number")
    if known and (full < 0.0).any():
        raise DomainError(f"the {name} must not be negative, as {full.min()} is")
    return full


def _worst(transmittance: Float) -> float:
    return float(transmittance[np.argmax(np.abs(transmittance - 0.5))])


def _terms(t: Float, path: Float, transmitted: Float, sky: Float, flux: Float) -> AirTerms:
    """Arrays over height as terms over (y, x, height, angle)."""
    place = (1, 1, t.size)
    node = (*place, 1)
    return AirTerms(
        transmittance=t.reshape(1, *node),
        path_radiance=path.reshape(node),
        transmitted_sky_radiance=transmitted.reshape(node),
        sky_radiance=sky.reshape(place),
        sky_flux=flux.reshape(place),
    )


def _causes(t: Float, sky: Float, flux: Float, uncertainty: StatedUncertainty) -> dict[str, AirTerms]:
    factor = uncertainty.factor()
    one = np.ones_like(t)
    # Where the flux is unknown, so is its change.
    still = 0.0 * flux
    causes = {}
    for i, name in enumerate(CAUSES):
        dt, dpath, dsky = (
            size * factor[row, i] * one
            for row, size in enumerate(
                (uncertainty.transmittance, uncertainty.path_radiance, uncertainty.sky_radiance)
            )
        )
        if dt.any() or dpath.any() or dsky.any():
            causes[name] = _terms(dt, dpath, t * dsky + sky * dt, dsky, still)
    if uncertainty.sky_flux > 0.0 and np.isfinite(flux).all():
        nothing = 0.0 * one
        causes[FLUX_CAUSE] = _terms(nothing, nothing, nothing, nothing, uncertainty.sky_flux * one)
    return causes
