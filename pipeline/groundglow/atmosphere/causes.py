"""Causes of uncertainty: how every term of the air changes for one standard uncertainty of each.

Errors of transmittance, path and sky radiance are not independent, they come from the same air. So
the air is solved again with more and less water and with warmer air; the absorption model's residual
is carried as one relative error of the optical depth.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.absorption_uncertainty import (
    FLUX_UNCERTAINTY,
    change_of_emission,
    change_of_transmittance,
    relative_depth_uncertainty,
    transmittance_uncertainty,
)
from groundglow.atmosphere.grid import AirTerms
from groundglow.atmosphere.node_solver import FluxPlan, NodeSolver, Solved
from groundglow.atmosphere.perturbation import temperature_shifted, water_scaled
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.source_uncertainty import SourceUncertainty

Float = NDArray[np.float64]

WATER_CAUSE, TEMPERATURE_CAUSE, ABSORPTION_CAUSE = "water_vapour", "air_temperature", "absorption_model"


def causes_of_uncertainty(
    solver: NodeSolver,
    airs: Sequence[Profile],
    base: Solved,
    uncertainty: SourceUncertainty,
    absorption: str,
    *,
    sky_flux: bool,
) -> dict[str, list[AirTerms]]:
    """Change of every term of every band for one standard uncertainty of each cause.

    Parameters
    ----------
    solver : NodeSolver
        The nodes.
    airs : sequence of Profile
        One for each place, with the gases that take part.
    base : Solved
        Their solution.
    uncertainty : SourceUncertainty
        Of the profiles.
    absorption : str
        Absorption set.
    sky_flux : bool
        Whether changes of the sky flux are wanted; NaN if not.

    Returns
    -------
    dict of str to list of AirTerms
        For each cause one AirTerms a band. Water is half the difference between more and less;
        temperature is warmer air; the absorption model is more absorption.
    """
    causes: dict[str, list[AirTerms]] = {}
    plan = FluxPlan.coarse(absorption, solver.height.size) if sky_flux else None
    if uncertainty.water_vapour > 0.0:
        share = uncertainty.water_vapour
        more = solver.solve([water_scaled(air, 1.0 + share) for air in airs], plan)
        less = solver.solve([water_scaled(air, 1.0 - share) for air in airs], plan)
        causes[WATER_CAUSE] = [_difference(a, b, 0.5) for a, b in zip(more.terms, less.terms, strict=True)]
    if uncertainty.air_temperature > 0.0:
        warm = solver.solve([temperature_shifted(air, uncertainty.air_temperature) for air in airs], plan)
        same = base if plan is None else solver.with_flux(base, airs, plan)
        causes[TEMPERATURE_CAUSE] = [
            _difference(a, b, 1.0) for a, b in zip(warm.terms, same.terms, strict=True)
        ]
    causes[ABSORPTION_CAUSE] = [
        _absorption_change(base, b, weights.effective_wavelength, absorption)
        for b, weights in enumerate(solver.bands.weights)
    ]
    return causes


def _difference(changed: AirTerms, base: AirTerms, factor: float) -> AirTerms:
    return AirTerms(
        transmittance=factor * (changed.transmittance - base.transmittance),
        path_radiance=factor * (changed.path_radiance - base.path_radiance),
        transmitted_sky_radiance=factor * (changed.transmitted_sky_radiance - base.transmitted_sky_radiance),
        sky_radiance=factor * (changed.sky_radiance - base.sky_radiance),
        sky_flux=factor * (changed.sky_flux - base.sky_flux),
    )


def _absorption_change(base: Solved, band: int, wavelength: float, absorption: str) -> AirTerms:
    """All terms of a band when the air absorbs one standard uncertainty more."""
    terms = base.terms[band]
    stated = transmittance_uncertainty(absorption, wavelength, base.water)
    depth = relative_depth_uncertainty(base.vertical[band], stated)
    middle = terms.transmittance[terms.transmittance.shape[0] // 2]
    change = change_of_transmittance(terms.transmittance, depth[..., np.newaxis])
    middle_change = change_of_transmittance(middle, depth[..., np.newaxis])
    sky_change = change_of_emission(
        terms.sky_radiance,
        base.sky_transmittance[band],
        change_of_transmittance(base.sky_transmittance[band], depth),
    )
    seen = terms.transmitted_sky_radiance
    relative_sky = (sky_change / np.maximum(terms.sky_radiance, 1e-12))[..., np.newaxis]
    flux = np.full_like(terms.sky_flux, FLUX_UNCERTAINTY[absorption])
    return AirTerms(
        transmittance=change,
        path_radiance=change_of_emission(terms.path_radiance, middle, middle_change),
        transmitted_sky_radiance=seen * (middle_change / middle + relative_sky),
        sky_radiance=sky_change,
        sky_flux=np.where(np.isnan(terms.sky_flux), np.nan, flux),
    )
