"""The absorption tables: what is in them, and what they add up to."""

from __future__ import annotations

import numpy as np
import pytest

from atmosphere.reference_air import ALL, PLAIN, REFERENCE_LEVELS, VERTICAL, air, read_reference
from groundglow.atmosphere.absorption import ABSORPTION_SETS, BAND_GASES, absorption_set, wavenumbers
from groundglow.atmosphere.composition import Composition
from groundglow.atmosphere.radiative_transfer import column, look_down, spectrum
from groundglow.errors import DomainError

CHECKED = Composition(None, None, None, 0.233e-3, 0.52e-3, 0.23e-3, minor_gases=False)


@pytest.mark.parametrize("name", ABSORPTION_SETS)
def test_tables_are_complete(name: str) -> None:
    tables = absorption_set(name)
    assert tables.wavenumber[0] == 5.0
    assert tables.wavenumber[-1] == 3000.0
    assert tables.log_coefficient.shape == (len(BAND_GASES), 600)
    assert ((tables.exponent > 0.4) & (tables.exponent <= 1.0)).all()
    # Every run lies inside the tables, and water has a band everywhere.
    assert (tables.run_stop > tables.run_start).all()
    water = tables.run_gas == 0
    assert (tables.run_stop - tables.run_start)[water].sum() == 600


def test_only_the_updated_set_knows_halocarbons() -> None:
    assert absorption_set("updated").halocarbon_cross_section.any()
    assert not absorption_set("lowtran7").halocarbon_cross_section.any()


def test_unknown_sets_are_refused() -> None:
    with pytest.raises(DomainError, match="Choose one of updated, lowtran7"):
        absorption_set("guessed")


@pytest.mark.parametrize(
    ("name", "composition", "column_name", "tolerance"),
    # The 1980s set at the printed digits of its tables; the updated set within its stated 0.003.
    [("updated", CHECKED, "tau_update_cfc", 0.003), ("lowtran7", PLAIN, "tau_lowtran7", 0.0005)],
)
def test_transmittances_at_single_wavenumbers(
    name: str, composition: Composition, column_name: str, tolerance: float
) -> None:
    rows = read_reference("atmosphere_absorption_check.csv")
    assert len(rows) == 54
    for model in ALL:
        wanted = [row for row in rows if row["atmosphere"] == model]
        numbers = np.array([float(row["wavenumber"]) for row in wanted])
        tables = spectrum(np.searchsorted(wavenumbers(), numbers), name)
        third = (
            REFERENCE_LEVELS[:-1, np.newaxis] + np.diff(REFERENCE_LEVELS)[:, np.newaxis] * np.arange(3) / 3.0
        )
        levels = np.append(third.ravel(), REFERENCE_LEVELS[-1])
        expected = [float(row[column_name]) for row in wanted]
        for chosen in (levels, None):
            found, _ = look_down(column(air(model, composition), tables, 0.0, levels=chosen), VERTICAL)
            np.testing.assert_allclose(found[0], expected, atol=tolerance, err_msg=model)
