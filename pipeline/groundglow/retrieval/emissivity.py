"""Emissivity that is given: one value, a class of ground, or a raster.

Every method ends in :class:`EmissivityFields`: the band's emissivity with its uncertainty, the broadband
emissivity with its uncertainty in two parts, and the quality bits that follow.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import DomainError
from groundglow.kernels import kernel
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.quantities import FLAG
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity_broadband import BAND_RULE_UNCERTAINTY
from groundglow.retrieval.emissivity_class import SurfaceClass
from groundglow.retrieval.emissivity_hemispheric import hemispheric_step
from groundglow.retrieval.uncertainty import LEAST_EMISSIVITY

Pixels = NDArray[np.float32]
Flags = NDArray[np.uint16]

NO_DATA = np.uint16(FLAG["no_data"].mask)
IMPOSSIBLE = np.uint16(FLAG["impossible"].mask)
BARE_METAL = np.uint16(FLAG["bare_metal"].mask)
ASSUMED = np.uint16(FLAG["emissivity_assumed"].mask)
BROADBAND_ASSUMED = np.uint16(FLAG["broadband_emissivity_assumed"].mask)
# As the compiled screening reads them.
_MISSING, _WRONG, _METAL = NO_DATA, IMPOSSIBLE, BARE_METAL
_ZERO, _ONE, _METAL_BELOW = np.float32(0.0), np.float32(1.0), np.float32(LEAST_EMISSIVITY)
_CLASS_FLAGS = {"water": FLAG["water"].mask, "snow_ice": FLAG["snow"].mask}


@dataclass(frozen=True)
class GroundValues:
    """Emissivity of one kind of ground in one band, as five numbers.

    Attributes
    ----------
    band, band_uncertainty : float
        In the thermal band.
    broadband : float
        Hemispheric broadband emissivity.
    broadband_shared : float
        Change of it when the band's is too high by one standard uncertainty.
    broadband_own : float
        Standard uncertainty independent of the band.
    flags : int
        Quality bits.
    """

    band: float
    band_uncertainty: float
    broadband: float
    broadband_shared: float
    broadband_own: float
    flags: int

    def numbers(self) -> tuple[float, float, float, float, float]:
        """The five numbers in order."""
        return (
            self.band,
            self.band_uncertainty,
            self.broadband,
            self.broadband_shared,
            self.broadband_own,
        )


def given_ground(
    band: float,
    band_uncertainty: float,
    *,
    broadband: float | None = None,
    broadband_uncertainty: float = BAND_RULE_UNCERTAINTY,
) -> GroundValues:
    """Typed-in numbers as ground.

    Parameters
    ----------
    band, band_uncertainty : float
        In the thermal band; above 0, at most 1, and 0 to 0.5.
    broadband : float, optional
        Hemispheric broadband emissivity; the band's value, flagged, where it is not known.
    broadband_uncertainty : float
        Of the broadband value, or of the rule that takes the band's.

    Returns
    -------
    GroundValues

    Raises
    ------
    DomainError
        If a number is out of its range.
    """
    for name, value in (("emissivity", band), ("broadband emissivity", broadband)):
        if value is not None and not 0.0 < value <= 1.0:
            hint = "It looks like percent: give a fraction" if 1.3 < value <= 100.0 else None
            raise DomainError(f"the {name} must be above 0 and at most 1, not {value:g}", remedy=hint)
    for name, value in (("emissivity", band_uncertainty), ("broadband emissivity", broadband_uncertainty)):
        if not 0.0 <= value <= 0.5:
            raise DomainError(f"the uncertainty of the {name} must be from 0 to 0.5, not {value:g}")
    flags = int(BARE_METAL) if band < LEAST_EMISSIVITY else 0
    if broadband is None:
        return GroundValues(
            band,
            band_uncertainty,
            band,
            band_uncertainty,
            broadband_uncertainty,
            flags | int(BROADBAND_ASSUMED),
        )
    return GroundValues(band, band_uncertainty, broadband, 0.0, broadband_uncertainty, flags)


def ground_of_class(surface_class: SurfaceClass, response: SpectralResponse) -> GroundValues:
    """A class of a table as ground seen in one band.

    The broadband column is taken to the hemisphere; where the class has none, the band's value stands in
    and is flagged.

    Parameters
    ----------
    surface_class : SurfaceClass
        From a class table.
    response : SpectralResponse
        Of the band.

    Returns
    -------
    GroundValues

    Raises
    ------
    DomainError
        If the class does not cover the band.
    """
    band, uncertainty = surface_class.in_band(response)
    flags = _CLASS_FLAGS.get(surface_class.name, 0)
    if surface_class.broadband is None:
        plain = given_ground(band, uncertainty)
        return GroundValues(*plain.numbers(), plain.flags | flags)
    step = hemispheric_step(surface_class.name)
    value = surface_class.broadband.value * step.ratio
    spread = surface_class.broadband.uncertainty * step.ratio
    correlation = surface_class.broadband_correlation
    turned = surface_class.broadband.value * step.uncertainty
    if band < LEAST_EMISSIVITY:
        flags |= int(BARE_METAL)
    return GroundValues(
        band,
        uncertainty,
        value,
        correlation * spread,
        math.hypot(math.sqrt(1.0 - correlation**2) * spread, turned),
        flags,
    )


def constant_fields(ground: GroundValues, shape: tuple[int, int]) -> EmissivityFields:
    """One kind of ground everywhere; the pixels carry "emissivity assumed".

    Parameters
    ----------
    ground : GroundValues
        See :func:`given_ground`.
    shape : tuple of int
        Rows and columns.

    Returns
    -------
    EmissivityFields
    """
    band, spread, wide, shared, own = (
        np.broadcast_to(np.float32(number), shape) for number in ground.numbers()
    )
    flags = np.broadcast_to(np.uint16(ground.flags) | ASSUMED, shape)
    return EmissivityFields(band, spread, wide, shared, own, flags)


def raster_fields(
    emissivity: ArrayLike,
    uncertainty: ArrayLike,
    *,
    broadband: ArrayLike | None = None,
    broadband_uncertainty: float = BAND_RULE_UNCERTAINTY,
) -> EmissivityFields:
    """Emissivity pixel by pixel.

    Parameters
    ----------
    emissivity : array (rows, columns)
        In the band. NaN is no data; not above 0 or above 1 is impossible: both give NaN and their flag.
    uncertainty : float or array (rows, columns)
        Standard uncertainty.
    broadband : array (rows, columns), optional
        Hemispheric broadband emissivity; the band's value, flagged, where it is NaN or not given.
    broadband_uncertainty : float
        Of the broadband value, or of the rule that takes the band's.

    Returns
    -------
    EmissivityFields
        NaN in ``band`` decides; arrays that are one number everywhere may keep it there.
    """
    given = np.ascontiguousarray(emissivity, dtype=np.float32)
    band = np.empty_like(given)
    flags = np.empty(given.shape, dtype=np.uint16)
    _screen(given, BROADBAND_ASSUMED if broadband is None else np.uint16(0), band, flags)
    spread = np.broadcast_to(np.asarray(uncertainty, dtype=np.float32), given.shape)
    own = np.broadcast_to(np.float32(broadband_uncertainty), given.shape)
    if broadband is None:
        return EmissivityFields(band, spread, band, spread, own, flags)
    wide = np.asarray(broadband, dtype=np.float32)
    stated = ~np.isnan(band) & (wide > 0.0) & (wide <= 1.0)
    return EmissivityFields(
        band=band,
        band_uncertainty=spread,
        broadband=np.where(stated, wide, band),
        broadband_shared=np.where(stated, np.float32(0.0), spread),
        broadband_own=own,
        flags=np.where(stated | np.isnan(band), flags, flags | BROADBAND_ASSUMED),
    )


@kernel("void(float32[:, ::1], uint16, float32[:, ::1], uint16[:, ::1])")
def _screen(given: Pixels, usual: np.uint16, band: Pixels, flags: Flags) -> None:
    """Keep what an emissivity can be, with the usual flag; flag metal, the impossible and the missing."""
    for i in range(given.shape[0]):
        for j in range(given.shape[1]):
            value = given[i, j]
            if value > _ZERO and value <= _ONE:
                band[i, j] = value
                flags[i, j] = usual | _METAL if value < _METAL_BELOW else usual
            else:
                band[i, j] = np.float32(np.nan)
                flags[i, j] = _MISSING if np.isnan(value) else _WRONG
