"""Broadband emissivity for the flux, from what the bands show, with what its error shares with theirs.

The error of a broadband emissivity has two parts: one that moves with the error of the band in which the
temperature was found (signed, because in the flux it is set against the temperature's own error), and
one that the rule adds of its own.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from groundglow.errors import ConfigError

Float = NDArray[np.float64]

# A window band does not see the dip of sands at 8-9.5 um, nor anything beyond 14 um: taking its value for the
# whole spectrum is good to about this much.
BAND_RULE_UNCERTAINTY = 0.03


@dataclass(frozen=True)
class BroadbandEmissivity:
    """Broadband emissivity with its uncertainty in two parts; arrays of one shape.

    Attributes
    ----------
    value : array
        At most 1.
    shared : array
        Change of the value when the band's emissivity is too high by one standard uncertainty.
    own : array
        Standard uncertainty independent of the band.
    """

    value: Float
    shared: Float
    own: Float


@dataclass(frozen=True)
class Relation:
    """Broadband emissivity as a weighted sum of the emissivities of several bands.

    Attributes
    ----------
    bands : tuple of str
        The sensor's band numbers, in the order of the coefficients.
    coefficients : tuple of float
    constant : float
    uncertainty : float
        Standard uncertainty of the relation itself.
    source : str
    """

    bands: tuple[str, ...]
    coefficients: tuple[float, ...]
    constant: float
    uncertainty: float
    source: str


# Coefficients from memory of the papers. Their own uncertainty is a planning value: the papers report
# residuals of 0.005 to 0.02 for soils and rocks, the larger ones below 0.9, and their target is 8-13.5 um,
# from which the whole spectrum differs by about 0.01 to 0.02 over sand.
RELATIONS: Mapping[str, Relation] = MappingProxyType(
    {
        "aster-2003": Relation(
            ("10", "11", "12", "13", "14"),
            (0.014, 0.145, 0.241, 0.467, 0.004),
            0.128,
            0.02,
            "Ogawa et al. (2003), GRL 30:1067",
        ),
        "aster-2013": Relation(
            ("10", "11", "12", "13", "14"),
            (0.025, 0.057, 0.237, 0.333, 0.146),
            0.197,
            0.015,
            "Cheng et al. (2013), IEEE GRSL 10:401-405",
        ),
        "modis-2005": Relation(
            ("29", "31", "32"),
            (0.2122, 0.3859, 0.4029),
            0.0,
            0.015,
            "Wang et al. (2005), JGR 110:D11109",
        ),
    }
)


def relation(name: str) -> Relation:
    """A published relation by name.

    Parameters
    ----------
    name : str
        A key of :data:`RELATIONS`.

    Returns
    -------
    Relation

    Raises
    ------
    ConfigError
        If there is none; the message lists all.
    """
    try:
        return RELATIONS[name]
    except KeyError:
        raise ConfigError(
            f"there is no broadband relation {name!r}", remedy=f"Choose from: {', '.join(RELATIONS)}"
        ) from None


def broadband_from_bands(
    chosen: Relation,
    emissivities: Sequence[ArrayLike],
    uncertainties: Sequence[ArrayLike],
    *,
    used: str,
    correlation: float = 1.0,
) -> BroadbandEmissivity:
    """Broadband emissivity by a published relation.

    Parameters
    ----------
    chosen : Relation
        From :data:`RELATIONS`.
    emissivities, uncertainties : sequences of arrays (...)
        Of the relation's bands, in its order; NaN gives NaN.
    used : str
        Number of the band in which the temperature is found.
    correlation : float
        Of the errors of two bands' emissivities, 0 to 1.

    Returns
    -------
    BroadbandEmissivity

    Raises
    ------
    ConfigError
        If ``used`` is not one of the relation's bands or a band is missing.
    """
    count = len(chosen.bands)
    if len(emissivities) != count or len(uncertainties) != count:
        raise ConfigError(
            f"the broadband relation needs the emissivity of the bands {', '.join(chosen.bands)}, "
            f"{len(emissivities)} are given"
        )
    if used not in chosen.bands:
        raise ConfigError(
            f"the broadband relation does not hold band {used}",
            remedy=f"Its bands: {', '.join(chosen.bands)}",
        )
    value: Float = np.asarray(chosen.constant, dtype=np.float64)
    shared: Float = np.asarray(0.0)
    apart: Float = np.asarray(chosen.uncertainty**2)
    for number, weight, emissivity, uncertainty in zip(
        chosen.bands, chosen.coefficients, emissivities, uncertainties, strict=True
    ):
        part = weight * np.asarray(uncertainty, dtype=np.float64)
        value = value + weight * np.asarray(emissivity, dtype=np.float64)
        if number == used:
            shared = shared + part
        else:
            shared = shared + correlation * part
            apart = apart + (1.0 - correlation**2) * part**2
    unknown = np.isnan(value)
    return BroadbandEmissivity(
        np.minimum(value, 1.0), np.where(unknown, np.nan, shared), np.where(unknown, np.nan, np.sqrt(apart))
    )


def broadband_from_band(emissivity: ArrayLike, uncertainty: ArrayLike) -> BroadbandEmissivity:
    """The band's value for the whole spectrum, where nothing better is known.

    Parameters
    ----------
    emissivity, uncertainty : array (...)
        In the band.

    Returns
    -------
    BroadbandEmissivity
        The band's error is fully shared; the rule adds 0.03. Such pixels carry the flag "broadband
        emissivity assumed".
    """
    value = np.asarray(emissivity, dtype=np.float64)
    shared = np.asarray(uncertainty, dtype=np.float64) + 0.0 * value
    return BroadbandEmissivity(value, shared, BAND_RULE_UNCERTAINTY + 0.0 * value)
