"""A band's relative spectral response, and the blackbody radiance seen through it."""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError
from groundglow.physics.planck import radiance_slope, spectral_radiance

Float = NDArray[np.float64]

# Gauss-Legendre points per segment and the widest segment: the integral of a piecewise linear
# response times Planck's law is then exact to better than 1e-9.
_POINTS = 4
_WIDEST_SEGMENT = 0.1  # um


@dataclass(frozen=True)
class SpectralResponse:
    """Relative response over wavelength, linear between its nodes and zero outside them.

    Attributes
    ----------
    wavelength : array (n,)
        Nodes, strictly increasing, above 0. [um]
    response : array (n,)
        Relative response per unit of radiance, not negative, not all zero; its scale is free.
    """

    wavelength: Float
    response: Float
    quadrature_wavelength: Float = field(init=False, repr=False)
    quadrature_weight: Float = field(init=False, repr=False)

    def __post_init__(self) -> None:
        wavelength = np.asarray(self.wavelength, dtype=np.float64)
        response = np.asarray(self.response, dtype=np.float64)
        if wavelength.ndim != 1 or wavelength.shape != response.shape or wavelength.size < 2:
            raise DomainError("a spectral response needs at least two pairs of wavelength and response")
        if not (np.isfinite(wavelength).all() and np.isfinite(response).all()):
            raise DomainError("a spectral response must not hold NaN or infinite numbers")
        if wavelength[0] <= 0.0 or (np.diff(wavelength) <= 0.0).any():
            raise DomainError("the wavelengths of a spectral response must be positive and increase")
        if (response < 0.0).any() or not (response > 0.0).any():
            raise DomainError("a spectral response must not be negative, and not zero everywhere")
        object.__setattr__(self, "wavelength", wavelength)
        object.__setattr__(self, "response", response)
        points, weights = _quadrature(wavelength, response)
        object.__setattr__(self, "quadrature_wavelength", points)
        object.__setattr__(self, "quadrature_weight", weights)

    def average(self, spectrum: ArrayLike) -> Float:
        """Response-weighted mean of a spectrum given at ``quadrature_wavelength`` (last axis)."""
        return np.asarray(np.asarray(spectrum, dtype=np.float64) @ self.quadrature_weight)

    def band_radiance(self, temperature: ArrayLike) -> Float:
        """Blackbody radiance averaged over the band. [W m-2 sr-1 um-1]

        Parameters
        ----------
        temperature : array, any shape
            Above 0. [K]
        """
        t = np.asarray(temperature, dtype=np.float64)[..., np.newaxis]
        return self.average(spectral_radiance(self.quadrature_wavelength, t))

    def band_radiance_slope(self, temperature: ArrayLike) -> Float:
        """Derivative of :meth:`band_radiance` with temperature. [W m-2 sr-1 um-1 K-1]"""
        t = np.asarray(temperature, dtype=np.float64)[..., np.newaxis]
        return self.average(radiance_slope(self.quadrature_wavelength, t))

    @property
    def effective_wavelength(self) -> float:
        """Response-weighted mean wavelength. [um]"""
        return float(self.quadrature_wavelength @ self.quadrature_weight)

    @property
    def width(self) -> float:
        """Equivalent width: integral of the response over its maximum. [um]"""
        return float(np.trapezoid(self.response, self.wavelength) / self.response.max())

    @property
    def limits(self) -> tuple[float, float]:
        """Shortest and longest wavelength with any response. [um]"""
        inside = np.flatnonzero(self.response > 0.0)
        low, high = max(inside[0] - 1, 0), min(inside[-1] + 1, self.wavelength.size - 1)
        return float(self.wavelength[low]), float(self.wavelength[high])


def top_hat(low: float, high: float) -> SpectralResponse:
    """Uniform response between two wavelengths. [um]

    Raises
    ------
    DomainError
        If the limits are not positive and increasing.
    """
    return SpectralResponse(np.array([low, high]), np.ones(2))


def gaussian(centre: float, full_width_half_maximum: float) -> SpectralResponse:
    """Gaussian response, cut where it falls below 0.1 %. [um]

    Raises
    ------
    DomainError
        If the width is not positive or the curve would reach wavelength zero.
    """
    if not full_width_half_maximum > 0.0:
        raise DomainError(f"the width of a Gaussian response must be positive, not {full_width_half_maximum}")
    sigma = full_width_half_maximum / np.sqrt(8.0 * np.log(2.0))
    reach = sigma * np.sqrt(2.0 * np.log(1000.0))
    wavelength = np.linspace(centre - reach, centre + reach, 201)
    return SpectralResponse(wavelength, np.exp(-0.5 * ((wavelength - centre) / sigma) ** 2))


def _quadrature(wavelength: Float, response: Float) -> tuple[Float, Float]:
    """Gauss-Legendre points within the segments and weights that sum to one."""
    pieces = [
        np.linspace(a, b, max(2, int(np.ceil((b - a) / _WIDEST_SEGMENT)) + 1))[:-1]
        for a, b in pairwise(wavelength)
    ]
    edges = np.concatenate([*pieces, wavelength[-1:]])
    x, w = np.polynomial.legendre.leggauss(_POINTS)
    half = 0.5 * np.diff(edges)
    middle = 0.5 * (edges[:-1] + edges[1:])
    points = (middle[:, np.newaxis] + half[:, np.newaxis] * x).ravel()
    weights = (half[:, np.newaxis] * w).ravel() * np.interp(points, wavelength, response)
    return points, weights / weights.sum()
