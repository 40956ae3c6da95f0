"""Air typed in as numbers."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.explicit import CAUSES, StatedUncertainty, explicit_grid, no_air_grid
from groundglow.errors import DomainError


def covariance(grid: object) -> np.ndarray:
    """Covariance of transmittance, path radiance and sky radiance that the causes add up to."""
    rows = [
        [
            float(c.transmittance.ravel()[0]),
            float(c.path_radiance.ravel()[0]),
            float(c.sky_radiance.ravel()[0]),
        ]
        for c in grid.causes.values()  # type: ignore[attr-defined]
    ]
    directions = np.array(rows)
    return directions.T @ directions


def test_numbers_come_back_as_terms() -> None:
    grid = explicit_grid(0.8, 1.6, 2.6, sky_flux=330.0)
    assert grid.terms.transmittance.shape == (1, 1, 1, 1, 1)
    assert grid.terms.transmittance.item() == 0.8
    assert grid.terms.path_radiance.item() == 1.6
    assert grid.terms.sky_radiance.item() == 2.6
    assert grid.terms.transmitted_sky_radiance.item() == pytest.approx(0.8 * 2.6)
    assert grid.terms.sky_flux.item() == 330.0
    assert grid.causes == {}


def test_causes_carry_the_stated_variances_and_correlations() -> None:
    # JCGM 100:2008, eq. 13: the covariance is what counts, whatever the directions.
    u = StatedUncertainty(transmittance=0.02, path_radiance=0.1, sky_radiance=0.2)
    found = covariance(explicit_grid(0.8, 1.6, 2.6, uncertainty=u))
    size = np.array([0.02, 0.1, 0.2])
    correlation = np.array([[1.0, -0.9, -0.9], [-0.9, 1.0, 0.9], [-0.9, 0.9, 1.0]])
    np.testing.assert_allclose(found, np.outer(size, size) * correlation, rtol=1e-12)


def test_transmitted_sky_follows_both_factors() -> None:
    u = StatedUncertainty(transmittance=0.02, path_radiance=0.1, sky_radiance=0.2)
    first = explicit_grid(0.8, 1.6, 2.6, uncertainty=u).causes[CAUSES[0]]
    assert first.transmitted_sky_radiance.item() == pytest.approx(0.8 * (-0.18) + 2.6 * 0.02)


def test_height_dependence() -> None:
    grid = explicit_grid([0.7, 0.8], [2.0, 1.2], [3.0, 2.0], height=[0.0, 1500.0])
    assert grid.terms.transmittance.shape == (1, 1, 1, 2, 1)
    assert list(grid.height) == [0.0, 1500.0]


def test_unknown_flux_stays_unknown_and_known_flux_has_its_own_cause() -> None:
    assert np.isnan(explicit_grid(0.8, 1.6, 2.6).terms.sky_flux).all()
    grid = explicit_grid(0.8, 1.6, 2.6, sky_flux=330.0, uncertainty=StatedUncertainty(sky_flux=12.0))
    assert list(grid.causes) == ["stated_sky_flux"]
    assert grid.causes["stated_sky_flux"].sky_flux.item() == 12.0


def test_no_air_lets_everything_through() -> None:
    grid = no_air_grid()
    assert grid.terms.transmittance.item() == 1.0
    assert grid.terms.path_radiance.item() == 0.0
    assert grid.terms.transmitted_sky_radiance.item() == 0.0


@pytest.mark.parametrize("bad", [0.0, -0.1, 1.01, 82.0])
def test_transmittance_outside_its_range_is_refused(bad: float) -> None:
    with pytest.raises(DomainError, match="transmittance"):
        explicit_grid(bad, 1.0, 1.0)


@pytest.mark.parametrize("values", [(np.nan, 1.0, 1.0), (0.8, np.nan, 1.0), (0.8, 1.0, np.inf)])
def test_missing_numbers_are_refused(values: tuple[float, float, float]) -> None:
    with pytest.raises(DomainError, match="no finite number"):
        explicit_grid(*values)


def test_negative_radiance_is_refused() -> None:
    with pytest.raises(DomainError, match="path radiance must not be negative"):
        explicit_grid(0.8, -0.1, 1.0)


def test_arrays_must_agree_with_the_heights() -> None:
    with pytest.raises(DomainError, match="2 values for 3 ground heights"):
        explicit_grid([0.7, 0.8], 1.0, 1.0, height=[0.0, 500.0, 900.0])


def test_impossible_correlations_are_refused() -> None:
    with pytest.raises(DomainError, match="not positive definite"):
        StatedUncertainty(transmittance_path=-0.9, transmittance_sky=-0.9, path_sky=-0.9)
    with pytest.raises(DomainError, match="between -1 and 1"):
        StatedUncertainty(path_sky=1.5)
    with pytest.raises(DomainError, match="0 or more"):
        StatedUncertainty(transmittance=-0.01)
