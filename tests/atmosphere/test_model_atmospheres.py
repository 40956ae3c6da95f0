"""The six model atmospheres."""

from __future__ import annotations

import datetime

import numpy as np
import pytest

from groundglow.atmosphere.composition import Composition, composed
from groundglow.atmosphere.model_atmospheres import MODEL_ATMOSPHERES, model_atmosphere, model_for
from groundglow.errors import DomainError

# AFGL-TR-86-0110: surface temperature (K), pressure (hPa), and the column integrated from its printed
# profiles (g cm-2).
PRINTED = {
    "tropical": (299.7, 1013.0, 4.12),
    "midlatitude_summer": (294.2, 1013.0, 2.93),
    "midlatitude_winter": (272.2, 1018.0, 0.85),
    "subarctic_summer": (287.2, 1010.0, 2.11),
    "subarctic_winter": (257.2, 1013.0, 0.42),
    "us_standard": (288.2, 1013.0, 1.42),
}


@pytest.mark.parametrize("name", MODEL_ATMOSPHERES)
def test_surface_values_and_columns(name: str) -> None:
    temperature, pressure, column = PRINTED[name]
    found = model_atmosphere(name)
    assert found.temperature[0] == pytest.approx(temperature, abs=0.05)
    assert found.pressure[0] == pytest.approx(pressure, abs=0.5)
    assert found.column_water_vapour / 10.0 == pytest.approx(column, rel=0.03)


def test_ozone_columns_are_those_of_the_report() -> None:
    # AFGL-TR-86-0110 profiles hold 0.28 (tropical) to 0.38 (sub-arctic winter) atm cm of ozone, as
    # commonly quoted for them; from memory, to 5 %.
    expected = {
        "tropical": 0.277,
        "midlatitude_summer": 0.332,
        "subarctic_winter": 0.376,
        "us_standard": 0.344,
    }
    for name, amount in expected.items():
        air = model_atmosphere(name)
        number = 2.6868e19 * air.pressure / 1013.25 * 273.15 / air.temperature * air.gases["ozone"] / 1e6
        column = np.trapezoid(number, 100.0 * air.height) / 2.6868e19
        assert column == pytest.approx(amount, rel=0.06)


@pytest.mark.parametrize(
    ("latitude", "month", "expected"),
    [
        (0.0, 1, "tropical"),
        (-25.0, 7, "tropical"),
        (47.0, 7, "midlatitude_summer"),
        (47.0, 12, "midlatitude_winter"),
        (-40.0, 12, "midlatitude_summer"),
        (-40.0, 6, "midlatitude_winter"),
        (65.0, 8, "subarctic_summer"),
        (65.0, 2, "subarctic_winter"),
        (-70.0, 1, "subarctic_summer"),
    ],
)
def test_choice_by_latitude_and_date(latitude: float, month: int, expected: str) -> None:
    assert model_for(latitude, datetime.date(2026, month, 15)) == expected


def test_unknown_names_and_latitudes_are_refused() -> None:
    with pytest.raises(DomainError, match="Choose one of tropical"):
        model_atmosphere("desert")
    with pytest.raises(DomainError, match="latitude"):
        model_for(95.0, datetime.date(2026, 1, 1))


def test_well_mixed_gases_are_brought_to_today() -> None:
    base = model_atmosphere("us_standard")
    today = composed(base, Composition(carbon_dioxide=425.0))
    assert today.gases["carbon_dioxide"][0] == pytest.approx(425.0)
    # The shape over height stays: nitrous oxide falls above the tropopause.
    shape = base.gases["nitrous_oxide"] / base.gases["nitrous_oxide"][0]
    np.testing.assert_allclose(today.gases["nitrous_oxide"], 0.338 * shape)
    assert (today.gases["cfc_12"] == 0.49e-3).all()


def test_minor_gases_can_be_left_out() -> None:
    plain = composed(model_atmosphere("us_standard"), Composition(minor_gases=False))
    assert "nitric_acid" not in plain.gases
    assert "nitrogen" not in plain.gases
    assert "ozone" in plain.gases


def test_impossible_amounts_are_refused() -> None:
    with pytest.raises(DomainError, match="carbon_dioxide"):
        Composition(carbon_dioxide=-1.0)
