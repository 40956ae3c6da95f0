"""A spectral response on the wavenumbers of the tables."""

from __future__ import annotations

import pytest

from groundglow.atmosphere.absorption import wavenumbers
from groundglow.atmosphere.band_weights import band_weights
from groundglow.errors import DomainError
from groundglow.physics.planck import spectral_radiance
from groundglow.physics.spectral_response import top_hat
from responses import RESPONSES

THERMAL = [name for name in RESPONSES if name != "midwave camera"]


@pytest.mark.parametrize("name", RESPONSES)
def test_weights_add_up_and_find_the_middle(name: str) -> None:
    found = band_weights(RESPONSES[name])
    assert found.weight.sum() == pytest.approx(1.0, abs=1e-12)
    assert found.planck_weight(300.0).sum() == pytest.approx(1.0, abs=1e-12)
    wavelength = 1e4 / wavenumbers()[found.index]
    assert found.weight @ wavelength == pytest.approx(RESPONSES[name].effective_wavelength, rel=1e-4)


@pytest.mark.parametrize("name", RESPONSES)
def test_blackbody_radiance_through_the_weights(name: str) -> None:
    found = band_weights(RESPONSES[name])
    number = wavenumbers()[found.index]
    per_number = spectral_radiance(1e4 / number, 300.0) / (number**2 * 1e-4)
    expected = RESPONSES[name].band_radiance(300.0)
    # Linear between steps of 5 cm-1.
    assert found.radiance_weight @ per_number == pytest.approx(float(expected), rel=2e-5)


def test_bands_beyond_the_tables_are_refused() -> None:
    with pytest.raises(DomainError, match=r"the band reaches from 3 to 3\.4 um"):
        band_weights(top_hat(3.0, 3.4))
