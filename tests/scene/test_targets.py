"""Corrections fitted to targets of known temperature."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.errors import DomainError
from groundglow.scene.sensor import load_sensor
from groundglow.scene.targets import TargetRadiance, expected_radiance, fit_targets

RESPONSE = load_sensor("microbolometer-camera").band("1").response


def targets(
    gain: float, offset: float, kelvin: tuple[float, ...], sigma: float = 0.02
) -> list[TargetRadiance]:
    """Targets that a camera with a wrong gain and offset has seen."""
    truth = [float(RESPONSE.band_radiance(t)) for t in kelvin]
    return [
        TargetRadiance(f"target {n}", (value - offset) / gain, value, sigma) for n, value in enumerate(truth)
    ]


def test_two_targets_give_gain_and_offset() -> None:
    fit = fit_targets(targets(1.04, -0.3, (285.0, 315.0)))
    assert (fit.gain, fit.offset) == (pytest.approx(1.04), pytest.approx(-0.3))
    assert fit.residuals == pytest.approx((0.0, 0.0), abs=1e-9)
    # Between two equally certain targets the correction is surer by the square root of two.
    middle = np.mean([target.observed for target in fit.targets])
    assert fit.uncertainty(float(middle)) == pytest.approx(0.02 / np.sqrt(2.0), rel=1e-6)


def test_one_target_gives_an_offset() -> None:
    fit = fit_targets(targets(1.0, 0.4, (290.0,)))
    assert (fit.gain, fit.offset) == (1.0, pytest.approx(0.4))
    assert fit.uncertainty(9.0) == pytest.approx(0.02)


def test_targets_too_close_together_give_an_offset_only() -> None:
    for kelvin in ((290.0, 291.0), (290.0, 290.0)):
        fit = fit_targets(targets(1.0, 0.4, kelvin, sigma=0.1))
        assert fit.gain == 1.0
        assert fit.offset == pytest.approx(0.4)
        assert fit.uncertainty(9.0) == pytest.approx(0.1 / np.sqrt(2.0))


def test_weights_follow_the_uncertainties() -> None:
    sure = TargetRadiance("lake", 9.0, 9.5, 0.01)
    vague = TargetRadiance("roof", 9.0, 8.0, 1.0)
    assert fit_targets([sure, vague]).offset == pytest.approx(0.5, abs=0.001)


def test_scatter_beyond_the_stated_uncertainty_widens_it() -> None:
    calm = targets(1.0, 0.2, (280.0, 290.0, 300.0, 310.0), sigma=0.01)
    moved = [TargetRadiance(t.name, t.observed, t.expected + d, t.uncertainty)
             for t, d in zip(calm, (0.1, -0.1, -0.1, 0.1), strict=True)]  # fmt: skip
    narrow, wide = fit_targets(calm), fit_targets(moved)
    assert wide.uncertainty(9.0) > 5.0 * narrow.uncertainty(9.0)
    assert np.std(wide.residuals) > 0.05


def test_the_record_names_targets_and_residuals() -> None:
    adjustment = fit_targets(targets(1.04, -0.3, (285.0, 300.0, 315.0))).adjustment()
    assert adjustment.gain == pytest.approx(1.04)
    assert adjustment.uncertainty is not None
    assert "target 0 (+0.0000), target 1" in adjustment.source.replace("-0.0000", "+0.0000")


def test_what_a_target_sends() -> None:
    # References: L = t (e B + (1 - e) sky) + path, with B 10, e 0.97, sky 2.6, t 0.8, path 1.6.
    found = expected_radiance(10.0, 0.97, transmittance=0.8, path_radiance=1.6, sky_radiance=2.6)
    assert found == pytest.approx(0.8 * (9.7 + 0.078) + 1.6)
    assert expected_radiance(10.0, 1.0) == 10.0
    for bad in ({"emissivity": 0.0}, {"emissivity": 1.3}, {"emissivity": 0.9, "transmittance": 0.0}):
        with pytest.raises(DomainError, match="of a target must lie in 0 to 1"):
            expected_radiance(10.0, **bad)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ([], "needs at least one target"),
        ([TargetRadiance("a", 9.0, 9.1, 0.1)] * 2, "a target is named twice: a"),
        ([TargetRadiance("a", np.nan, 9.1, 0.1)], "above 0"),
        ([TargetRadiance("a", 9.0, 9.1, 0.0)], "above 0"),
        ([TargetRadiance("a", 9.0, 12.0, 0.01), TargetRadiance("b", 12.0, 9.0, 0.01)], "a gain of -1"),
    ],
)
def test_targets_that_make_no_sense(given: list[TargetRadiance], message: str) -> None:
    with pytest.raises(DomainError, match=message):
        fit_targets(given)
