"""The solver against published functions of column water vapour and near-surface weather.

They were fitted to other radiative-transfer codes and other profiles, so agreement is loose; it
guards against errors that a comparison with our own ancestors would share.
"""

from __future__ import annotations

import numpy as np
import pytest

from atmosphere.reference_air import ALL, VERTICAL
from groundglow.atmosphere.absorption import wavenumbers
from groundglow.atmosphere.clear_sky import clear_sky_flux
from groundglow.atmosphere.composition import Composition, composed
from groundglow.atmosphere.model_atmospheres import model_atmosphere
from groundglow.atmosphere.node_solver import Bands, sky_flux
from groundglow.atmosphere.perturbation import scaled_to_column
from groundglow.atmosphere.radiative_transfer import column, look_down, spectrum
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.scene.sensor import load_sensor

# The columns of each profile are scaled to these; cold profiles cannot hold the larger ones.
COLUMNS = np.array([0.5, 1.0, 1.5, 2.0, 2.5, 3.0])  # g cm-2
HOLDS = {"tropical": 3.0, "midlatitude_summer": 3.0, "subarctic_summer": 2.5, "us_standard": 2.0,
         "midlatitude_winter": 1.0, "subarctic_winter": 0.5}  # fmt: skip
TODAY = Composition()


def landsat_8() -> dict[str, SpectralResponse]:
    return {number: band.response for number, band in load_sensor("landsat-8").bands.items()}


def transmittance(name: str, water: float) -> np.ndarray:
    """Response-weighted vertical transmittance of bands 10 and 11."""
    bands = Bands.of(landsat_8(), "updated")
    air = composed(scaled_to_column(model_atmosphere(name), 10.0 * water), TODAY)
    seen = look_down(column(air, bands.spectrum, 0.0), VERTICAL)[0][0]
    return np.array([w.weight @ seen[place] for w, place in zip(bands.weights, bands.places, strict=True)])


CASES = [(name, water) for name in ALL for water in COLUMNS if water <= HOLDS[name]]


def psi_1(water: float) -> float:
    """Jimenez-Munoz et al. (2014), IEEE GRSL 11, 1840: 1/t of Landsat 8 band 10, water in g cm-2."""
    return 0.04019 * water**2 + 0.02916 * water + 1.01523


@pytest.mark.parametrize("ground", [0.0, 1000.0, 2000.0])
@pytest.mark.parametrize("name", ALL)
def test_landsat_8_band_10_with_the_columns_of_the_models(name: str, ground: float) -> None:
    bands = Bands.of(landsat_8(), "updated")
    whole = column(composed(model_atmosphere(name), TODAY), bands.spectrum, ground)
    seen = look_down(whole, VERTICAL)[0][0]
    found = bands.weights[0].weight @ seen[bands.places[0]]
    assert found == pytest.approx(1.0 / psi_1(whole.water / 10.0), abs=0.012)


@pytest.mark.parametrize(("name", "water"), CASES)
def test_landsat_8_band_10_with_scaled_columns(name: str, water: float) -> None:
    # Warm air scaled to be dry is none that the function was fitted to.
    assert transmittance(name, water)[0] == pytest.approx(1.0 / psi_1(water), abs=0.02)


@pytest.mark.parametrize("water", [0.75, 1.0, 1.5, 2.0, 2.5, 3.0])
def test_split_window_transmittances(water: float) -> None:
    # Rozenstein et al. (2014), Sensors 14, 5768: straight lines for two model atmospheres. Below
    # 0.7 g cm-2 they rise above what dry air lets through (1.03 without water) and are not a test.
    published = {
        "us_standard": (1.0286 - 0.1146 * water, 1.0083 - 0.1568 * water),
        "midlatitude_summer": (1.0335 - 0.1134 * water, 1.0078 - 0.1546 * water),
    }
    for name, expected in published.items():
        if water <= HOLDS[name]:
            np.testing.assert_allclose(transmittance(name, water), expected, atol=0.02)


def test_sky_flux_is_near_the_clear_sky_formulas() -> None:
    # Brutsaert (1975), Prata (1996): a sanity check, 15 W m-2 rms over six atmospheres at 0-2 km.
    broadband = spectrum(np.arange(wavenumbers().size), "updated")
    differences: dict[str, list[float]] = {"brutsaert": [], "prata": []}
    for name in ALL:
        air = composed(model_atmosphere(name), TODAY)
        for ground in (0.0, 1000.0, 2000.0):
            near = air.at(np.array([ground, ground + 10.0]))
            vapour = near.water_vapour[0] * near.pressure[0] / 1e6
            solved = sky_flux(air, broadband, ground)
            for formula, found in differences.items():
                found.append(solved - float(clear_sky_flux(formula, near.temperature[0], vapour)))
    for found in differences.values():
        assert np.sqrt(np.mean(np.square(found))) < 15.0
