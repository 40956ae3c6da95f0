"""Emissivity by thresholds of a vegetation index: the readable statement.

The normalised difference of near-infrared and red reflectance tells how much of a pixel is plant and how much
bare ground; soil and vegetation are mixed in that proportion, with a term for the cavities between plants.
Water and snow have values of their own. The compiled form is in ``emissivity_index_kernels``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import ConfigError
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.retrieval.chain import EmissivityFields
from groundglow.retrieval.emissivity import GroundValues, ground_of_class
from groundglow.retrieval.emissivity_class import ClassTable
from groundglow.retrieval.emissivity_special_ground import either_ground, with_special_ground
from groundglow.retrieval.vegetation_index import (
    BARE_BELOW,
    cover_uncertainty,
    vegetation_cover,
    vegetation_index,
)

Float = NDArray[np.float64]

# Mean shape factor of rough vegetation, Sobrino et al. (1990, 2004).
CAVITY_FACTOR = 0.55


@dataclass(frozen=True)
class IndexCoefficients:
    """Band emissivities of the threshold method.

    Attributes
    ----------
    bare, bare_per_red : float
        Below the lower threshold: bare + bare_per_red x red reflectance.
    soil, vegetation : float
        Mixed in proportion between the thresholds; vegetation alone above.
    cavity : float
        Shape factor of the cavity term; 0 where the published values hold it already.
    source : str
    """

    bare: float
    bare_per_red: float
    soil: float
    vegetation: float
    cavity: float
    source: str


_SKOKOVIC = "Skokovic et al. (2014), Landsat 8 band set (from memory)"

INDEX_COEFFICIENTS: Mapping[str, IndexCoefficients] = MappingProxyType(
    {
        "landsat-8-10": IndexCoefficients(0.979, -0.046, 0.971, 0.987, 0.0, _SKOKOVIC),
        "landsat-8-11": IndexCoefficients(0.982, -0.027, 0.977, 0.989, 0.0, _SKOKOVIC),
        "landsat-5-6": IndexCoefficients(
            0.97,
            0.0,
            0.986,
            0.99,
            0.0,
            "Sobrino et al. (2004), RSE 90:434-440: 0.986 + 0.004 Pv (from memory)",
        ),
    }
)


@dataclass(frozen=True)
class ThresholdMethod:
    """The threshold method made ready for one band and one scene.

    Attributes
    ----------
    band : IndexCoefficients
        Emissivities in the band.
    soil, vegetation : GroundValues
        Their uncertainties, and the broadband emissivities with the parts of their errors.
    water, snow : GroundValues
        For pixels flagged so.
    negative : GroundValues
        For pixels with a negative index that carry no flag: water, snow, or neither seen as such.
    unknown : GroundValues
        For pixels without an index.
    cover_uncertainty : float
        Standard uncertainty of the vegetation cover, see :func:`cover_uncertainty`.
    """

    band: IndexCoefficients
    soil: GroundValues
    vegetation: GroundValues
    water: GroundValues
    snow: GroundValues
    negative: GroundValues
    unknown: GroundValues
    cover_uncertainty: float

    def packed(self) -> Float:
        """All numbers in the order in which the compiled form reads them."""
        b = self.band
        head = [b.bare, b.bare_per_red, b.soil, b.vegetation, b.cavity, self.cover_uncertainty]
        grounds = (self.soil, self.vegetation, self.water, self.snow, self.negative, self.unknown)
        return np.array([*head, *(number for ground in grounds for number in ground.numbers())])


def index_coefficients(name: str) -> IndexCoefficients:
    """Published band emissivities by name.

    Parameters
    ----------
    name : str
        A key of :data:`INDEX_COEFFICIENTS`.

    Returns
    -------
    IndexCoefficients

    Raises
    ------
    ConfigError
        If there are none; the message lists all names.
    """
    try:
        return INDEX_COEFFICIENTS[name]
    except KeyError:
        raise ConfigError(
            f"no index coefficients are published for {name!r}",
            remedy=f"Choose from: {', '.join(INDEX_COEFFICIENTS)}; without a name the class table is used",
        ) from None


def coefficients_from_classes(response: SpectralResponse, table: ClassTable) -> IndexCoefficients:
    """Band emissivities of any band: soil and green vegetation of a class table, with the cavity term.

    Parameters
    ----------
    response : SpectralResponse
        Of the band.
    table : ClassTable
        Holds the classes "soil" and "green_vegetation".

    Returns
    -------
    IndexCoefficients

    Raises
    ------
    ConfigError, DomainError
        If a class is missing or does not cover the band.
    """
    soil, _ = table.named("soil").in_band(response)
    vegetation, _ = table.named("green_vegetation").in_band(response)
    return IndexCoefficients(
        soil,
        0.0,
        soil,
        vegetation,
        CAVITY_FACTOR,
        "class table, with the cavity term of Sobrino et al. (2004)",
    )


def threshold_method(
    response: SpectralResponse,
    table: ClassTable,
    *,
    coefficients: IndexCoefficients | None = None,
    age_in_days: float = 0.0,
) -> ThresholdMethod:
    """Make the threshold method ready for one band and one scene.

    Parameters
    ----------
    response : SpectralResponse
        Of the band.
    table : ClassTable
        Holds "soil", "quartz_sand", "green_vegetation", "water" and "snow_ice".
    coefficients : IndexCoefficients, optional
        Published for the band; from the class table by default.
    age_in_days : float
        Between reflectance and thermal scene.

    Returns
    -------
    ThresholdMethod

    Raises
    ------
    ConfigError, DomainError
        If a class is missing or does not cover the band.
    """
    band = coefficients or coefficients_from_classes(response, table)
    soil, sand, vegetation, water, snow = (
        ground_of_class(table.named(name), response)
        for name in ("soil", "quartz_sand", "green_vegetation", "water", "snow_ice")
    )
    return ThresholdMethod(
        band=band,
        soil=replace(either_ground(soil, sand), band=band.soil),
        vegetation=replace(vegetation, band=band.vegetation),
        water=water,
        snow=snow,
        negative=either_ground(water, snow),
        unknown=either_ground(vegetation, either_ground(soil, sand)),
        cover_uncertainty=cover_uncertainty(age_in_days),
    )


@dataclass(frozen=True)
class _Mixture:
    """Emissivity of soil and vegetation in one pixel, and its derivatives with each and with the cover."""

    value: Float
    by_soil: Float
    by_plant: Float
    by_cover: Float


def _mixture(soil: ArrayLike, plant: float, cover: Float, cavity: Float) -> _Mixture:
    low = np.asarray(soil, dtype=np.float64)
    hollow = (1.0 - low) * (1.0 - cover) * cavity
    return _Mixture(
        value=plant * cover + low * (1.0 - cover) + hollow * plant,
        by_soil=(1.0 - cover) * (1.0 - cavity * plant),
        by_plant=cover + hollow,
        by_cover=plant - low - (1.0 - low) * cavity * plant,
    )


def threshold_emissivity(
    red: ArrayLike, near_infrared: ArrayLike, flags: ArrayLike, method: ThresholdMethod
) -> EmissivityFields:
    """Emissivity by thresholds of the vegetation index.

    Parameters
    ----------
    red, near_infrared : array (rows, columns)
        Reflectance, 0 to 1; NaN where there is none.
    flags : uint16 array (rows, columns)
        Quality bits; water and snow are looked at.
    method : ThresholdMethod
        Made ready for the band.

    Returns
    -------
    EmissivityFields
        Where there is no index, or a negative one without a flag, the values are assumed and flagged.

    Notes
    -----
    Between the thresholds eps = v P + s (1 - P) + (1 - s) (1 - P) F v, with P the cover, s the soil's and v
    the vegetation's emissivity and F the shape factor of the cavity. The uncertainty carries s, v and P.

    References
    ----------
    Sobrino, J. A., Jimenez-Munoz, J. C., Paolini, L. (2004), Remote Sensing of Environment 90, 434-440,
    doi:10.1016/j.rse.2004.02.003.
    """
    index = vegetation_index(red, near_infrared)
    cover = vegetation_cover(index)
    b, soil, plant = method.band, method.soil, method.vegetation
    is_bare = index < BARE_BELOW
    bare_ground = np.clip(b.bare + b.bare_per_red * np.asarray(red, dtype=np.float64), 0.5, 1.0)
    cavity = np.where(is_bare, 0.0, b.cavity)
    band = _mixture(np.where(is_bare, bare_ground, b.soil), b.vegetation, cover, cavity)
    wide = _mixture(soil.broadband, plant.broadband, cover, cavity)

    soil_error = band.by_soil * soil.band_uncertainty
    plant_error = band.by_plant * plant.band_uncertainty
    cover_error = band.by_cover * method.cover_uncertainty
    spread = np.sqrt(soil_error**2 + plant_error**2 + cover_error**2)
    wide_cover_error = wide.by_cover * method.cover_uncertainty
    together = (
        soil_error * wide.by_soil * soil.broadband_shared
        + plant_error * wide.by_plant * plant.broadband_shared
        + cover_error * wide_cover_error
    )
    wide_variance = (
        wide.by_soil**2 * (soil.broadband_shared**2 + soil.broadband_own**2)
        + wide.by_plant**2 * (plant.broadband_shared**2 + plant.broadband_own**2)
        + wide_cover_error**2
    )
    # The part of the broadband error that goes with the band's is their covariance over the band's own.
    shared = together / np.where(spread > 0.0, spread, np.inf)
    own = np.sqrt(np.maximum(wide_variance - shared**2, 0.0))
    computed = [np.minimum(band.value, 1.0), spread, np.minimum(wide.value, 1.0), shared, own]
    negative, unknown = index < 0.0, np.isnan(index)
    places = ((negative, method.negative), (unknown, method.unknown))
    return with_special_ground(
        computed, flags, places, negative | unknown, water=method.water, snow=method.snow
    )
