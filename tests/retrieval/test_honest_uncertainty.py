"""Is the stated uncertainty what the errors really are? Thousands of draws of every cause.

Each kind of pixel is a class of ground at a temperature under an air. In every draw the calibration and the
air are off by one error each, the emissivity of each class by one, and the noise is new for each pixel. The
scene so made is inverted with the nominal values, and the error set against the uncertainty stated for it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from groundglow.physics.band_table import table_from_response
from groundglow.physics.constants import STEFAN_BOLTZMANN
from groundglow.physics.planck import spectral_radiance
from groundglow.physics.spectral_response import SpectralResponse, top_hat
from groundglow.quantities import FLAG
from groundglow.retrieval.emissivity import GroundValues, constant_fields, ground_of_class
from groundglow.retrieval.emissivity_broadband import broadband_from_band, broadband_from_bands, relation
from groundglow.retrieval.emissivity_class_table import shipped_class_table
from groundglow.retrieval.emissivity_index_kernels import index_fields
from groundglow.retrieval.emissivity_threshold import threshold_method
from groundglow.retrieval.single_channel import (
    Air,
    inverse_of_table,
    invert,
    narrow_air,
    radiance_at_sensor,
)
from groundglow.retrieval.uncertainty import (
    LEAST_EMISSIVITY,
    LEAST_TRANSMITTANCE,
    AirChange,
    Causes,
    noise_of_radiance,
    propagate,
    propagate_flux,
)
from responses import RESPONSES

Float = NDArray[np.float64]

DRAWS = 6000
BAND = top_hat(10.60, 11.19)
# A good satellite radiometer: 0.1 K noise, 0.3 K calibration, both at 300 K.
PER_KELVIN = float(BAND.band_radiance_slope(300.0))
NOISE = noise_of_radiance(0.1, PER_KELVIN)
CALIBRATION = 0.3 * PER_KELVIN
# Typed-in air: standard uncertainties of transmittance, path and sky radiance, with the correlations assumed
# for values that come from one profile.
AIR_SPREAD = np.array([0.02, 0.10, 0.20])
AIR_CORRELATION = np.array([[1.0, -0.9, -0.9], [-0.9, 1.0, 0.9], [-0.9, 0.9, 1.0]])
AIR_FACTOR = np.linalg.cholesky(AIR_CORRELATION) * AIR_SPREAD[:, np.newaxis]

KINDS = [
    ("water", 278.0, 0.90),
    ("water", 293.0, 0.70),
    ("water", 298.0, 0.50),
    ("snow_ice", 265.0, 0.85),
    ("green_vegetation", 290.0, 0.80),
    ("green_vegetation", 303.0, 0.60),
    ("dry_vegetation", 312.0, 0.75),
    ("soil", 285.0, 0.90),
    ("soil", 318.0, 0.65),
    ("soil", 305.0, 0.50),
    ("quartz_sand", 325.0, 0.80),
    ("asphalt", 320.0, 0.70),
    ("concrete", 310.0, 0.60),
    ("roof_tile", 330.0, 0.75),
]
# Kinds where the first order is not enough: they carry a flag instead of a promise. Bare metal, and air that
# lets little through and is known worse than above, by this factor, as moist air is.
OPAQUE_FACTOR = 3.0
BEYOND = [
    ("bare_metal", 310.0, 0.80),
    ("bare_metal", 300.0, 0.60),
    ("soil", 305.0, 0.25),
    ("soil", 305.0, 0.12),
    ("water", 295.0, 0.15),
]


@dataclass(frozen=True)
class Outcome:
    """Errors of all draws of one kind of pixel, and the uncertainties stated for them."""

    error: Float
    stated: Float
    flux_error: Float
    flux_stated: Float

    def within(self, sigmas: float) -> float:
        """Share of the draws, in percent."""
        return 100.0 * float(np.mean(np.abs(self.error) <= sigmas * self.stated))

    def flux_within(self, sigmas: float) -> float:
        """Share of the draws, in percent."""
        return 100.0 * float(np.mean(np.abs(self.flux_error) <= sigmas * self.flux_stated))

    def is_honest(self) -> bool:
        """Whether all that is asked of a kind holds."""
        return (
            bool(np.isfinite(self.error).all())
            and 64.0 <= self.within(1.0) <= 72.0
            and 94.0 <= self.within(2.0) <= 97.0
            and abs(self.error.std() / float(np.median(self.stated)) - 1.0) <= 0.05
        )


def drawn(kind: tuple[str, float, float], seed: int = 41) -> Outcome:
    """Draw, make the scene, invert it, compare."""
    name, truth, transmittance = kind
    factor = AIR_FACTOR * (OPAQUE_FACTOR if transmittance < LEAST_TRANSMITTANCE else 1.0)
    ground = ground_of_class(shipped_class_table().named(name), BAND)
    draw = np.random.default_rng([seed, round(truth), round(100 * transmittance)])
    noise, calibration, class_error, rule_error = draw.standard_normal((4, DRAWS))
    emissivity = ground.band + ground.band_uncertainty * class_error
    path = (1.0 - transmittance) * float(BAND.band_radiance(283.0))
    sky = (1.0 - transmittance**1.6) * float(BAND.band_radiance(281.0))
    nominal = np.array([transmittance, path, sky])
    real = nominal[:, np.newaxis] + factor @ draw.standard_normal((3, DRAWS))
    radiance = radiance_at_sensor(BAND.band_radiance(truth), emissivity, narrow_air(*real), truth)
    radiance = radiance + NOISE * noise + CALIBRATION * calibration

    known = narrow_air(*np.repeat(nominal[:, np.newaxis], DRAWS, axis=1))
    result = invert(radiance, ground.band, known, inverse_of_table(table_from_response(BAND)))
    causes = Causes(
        NOISE,
        CALIBRATION,
        ground.band_uncertainty,
        [AirChange(np.array(t), np.array(p), np.array(transmittance * s + sky * t)) for t, p, s in factor.T],
    )
    parts = propagate(result, ground.band, known, causes)
    flux = propagate_flux(
        result.temperature, parts, ground.broadband, shared=ground.broadband_shared, own=ground.broadband_own
    )
    wide = ground.broadband + ground.broadband_shared * class_error + ground.broadband_own * rule_error
    return Outcome(
        error=result.temperature - truth,
        stated=parts.total,
        flux_error=STEFAN_BOLTZMANN * (ground.broadband * result.temperature**4 - wide * truth**4),
        flux_stated=flux.total,
    )


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: f"{kind[0]}-{kind[1]:.0f}-{kind[2]:.2f}")
def test_the_stated_uncertainty_is_honest(kind: tuple[str, float, float]) -> None:
    # Source: coverage of a normal distribution, 68.3 % and 95.4 % (GUM, annex G).
    found = drawn(kind)
    assert found.is_honest()
    assert 64.0 <= found.within(1.0) <= 72.0
    assert 94.0 <= found.within(2.0) <= 97.0
    assert found.error.std() == pytest.approx(float(np.median(found.stated)), rel=0.05)
    assert abs(found.error.mean()) < 0.1 * found.error.std()


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: f"{kind[0]}-{kind[1]:.0f}-{kind[2]:.2f}")
def test_the_stated_uncertainty_of_the_flux_is_honest(kind: tuple[str, float, float]) -> None:
    found = drawn(kind, seed=43)
    assert 64.0 <= found.flux_within(1.0) <= 72.0
    assert 94.0 <= found.flux_within(2.0) <= 97.0
    assert found.flux_error.std() == pytest.approx(float(np.median(found.flux_stated)), rel=0.05)


@pytest.mark.parametrize("kind", BEYOND, ids=lambda kind: f"{kind[0]}-{kind[1]:.0f}-{kind[2]:.2f}")
def test_where_the_first_order_fails_a_flag_says_so(kind: tuple[str, float, float]) -> None:
    name, _, transmittance = kind
    assert not drawn(kind).is_honest()
    ground = ground_of_class(shipped_class_table().named(name), BAND)
    flags = int(constant_fields(ground, (1, 1)).flags[0, 0])
    assert flags & FLAG["bare_metal"].mask or transmittance < LEAST_TRANSMITTANCE
    assert (ground.band < LEAST_EMISSIVITY) == bool(flags & FLAG["bare_metal"].mask)


def structured_air(band: SpectralResponse, truth: Float, depth: Float, warmth: Float) -> tuple[Air, Float]:
    """An invented window solved wavelength by wavelength, and the blackbody part of what the sensor sees.

    ``depth`` scales the optical depth and ``warmth`` shifts the air's temperature, one number per draw.
    """
    wavelength = band.quadrature_wavelength
    water = 1.6 * np.exp(-(((wavelength - 7.3) / 0.6) ** 2)) + 0.20
    ozone = 0.6 * np.exp(-(((wavelength - 9.6) / 0.25) ** 2))
    transmittance = np.exp(-depth[:, np.newaxis] * water - ozone)
    path = (1.0 - transmittance) * spectral_radiance(wavelength, 280.0 + warmth[:, np.newaxis])
    sky = (1.0 - transmittance**1.6) * spectral_radiance(wavelength, 279.0 + warmth[:, np.newaxis])
    nodes = np.array([270.0, 300.0, 330.0])
    black = spectral_radiance(wavelength, nodes[:, np.newaxis])
    weighted = np.stack([band.average(transmittance * b) / band.average(b) for b in black])
    air = Air(weighted, band.average(path), band.average(transmittance * sky), nodes)
    return air, band.average(transmittance * spectral_radiance(wavelength, truth[:, np.newaxis]))


@pytest.mark.parametrize(
    "kind", [("water", 288.0), ("green_vegetation", 300.0), ("soil", 315.0), ("asphalt", 322.0)], ids=str
)
def test_in_a_wide_band_too(kind: tuple[str, float]) -> None:
    # An uncooled camera, 7.5-13.5 um: the air's two causes act on a transmittance that depends on the
    # surface.
    name, truth = kind
    band = RESPONSES["uncooled camera"]
    table = inverse_of_table(table_from_response(band))
    ground = ground_of_class(shipped_class_table().named(name), band)
    draw = np.random.default_rng([7, round(truth)])
    count = 4000
    noise, calibration, class_error, depth_error, warmth_error = draw.standard_normal((5, count))
    per_kelvin = float(band.band_radiance_slope(300.0))
    temperature = np.full(count, truth)
    real, through = structured_air(band, temperature, 1.0 + 0.08 * depth_error, 1.5 * warmth_error)
    emissivity = ground.band + ground.band_uncertainty * class_error
    radiance = emissivity * through + (1.0 - emissivity) * real.transmitted_sky_radiance + real.path_radiance
    radiance = radiance + per_kelvin * (0.05 * noise + 0.5 * calibration)

    one = np.ones(1)
    known, _ = structured_air(band, truth * one, one, 0.0 * one)
    changes = []
    for depth, warmth in ((1.08, 0.0), (1.0, 1.5)):
        moved, _ = structured_air(band, truth * one, depth * one, warmth * one)
        changes.append(
            AirChange(
                moved.transmittance[1] - known.transmittance[1],
                moved.path_radiance - known.path_radiance,
                moved.transmitted_sky_radiance - known.transmitted_sky_radiance,
            )
        )
    result = invert(radiance, ground.band, known, table)
    causes = Causes(0.05 * per_kelvin, 0.5 * per_kelvin, ground.band_uncertainty, changes)
    stated = propagate(result, ground.band, known, causes).total
    error = result.temperature - truth
    assert 64.0 <= 100.0 * np.mean(np.abs(error) <= stated) <= 72.0
    assert 94.0 <= 100.0 * np.mean(np.abs(error) <= 2.0 * stated) <= 97.0
    assert error.std() == pytest.approx(float(np.median(stated)), rel=0.05)


def test_the_groups_share_what_they_say() -> None:
    """The mean over a scene keeps its class and scene errors and loses its noise."""
    count, pixels, truth, transmittance = 1500, 40, 300.0, 0.75
    ground = ground_of_class(shipped_class_table().named("soil"), BAND)
    draw = np.random.default_rng(61)
    path = (1.0 - transmittance) * float(BAND.band_radiance(283.0))
    nominal = np.array([transmittance, path, 2.0])
    real = (nominal[:, np.newaxis] + AIR_FACTOR @ draw.standard_normal((3, count)))[:, :, np.newaxis]
    emissivity = ground.band + ground.band_uncertainty * draw.standard_normal((count, 1))
    radiance = radiance_at_sensor(BAND.band_radiance(truth), emissivity, narrow_air(*real), truth)
    large_noise = 10.0 * NOISE
    radiance = radiance + CALIBRATION * draw.standard_normal((count, 1))
    radiance = radiance + large_noise * draw.standard_normal((count, pixels))
    known = narrow_air(*nominal)
    table = inverse_of_table(table_from_response(BAND))
    error = invert(radiance, ground.band, known, table).temperature - truth
    result = invert(
        radiance_at_sensor(BAND.band_radiance(truth), ground.band, known, truth), ground.band, known, table
    )
    changes = [
        AirChange(np.array(t), np.array(p), np.array(transmittance * s + 2.0 * t)) for t, p, s in AIR_FACTOR.T
    ]
    causes = Causes(large_noise, CALIBRATION, ground.band_uncertainty, changes)
    parts = propagate(result, ground.band, known, causes)
    mean_error = error.mean(axis=1)
    shared = float(np.hypot(parts.surface_class, parts.scene))
    assert mean_error.std() == pytest.approx(np.hypot(shared, float(parts.pixel) / np.sqrt(pixels)), rel=0.05)
    assert (error - mean_error[:, np.newaxis]).std() == pytest.approx(float(parts.pixel), rel=0.05)


# Sand with the middle values of the class table in 8-9.5 and 10-12.5 um, its dips shaped as quartz has them:
# a double one at 8-9.5 um, a small one at 12.6 um and a broad one at 20 um. Drawn by hand after the shapes
# in Salisbury and D'Aria (1992), from memory.
SAND = np.array(
    [
        [3.0, 0.88], [7.3, 0.95], [8.0, 0.80], [8.2, 0.70], [8.5, 0.72], [8.65, 0.79], [8.85, 0.70],
        [9.2, 0.70], [9.5, 0.80], [10.0, 0.93], [11.0, 0.955], [12.3, 0.945], [12.6, 0.925], [12.9, 0.95],
        [14.0, 0.955], [17.5, 0.94], [19.5, 0.82], [21.0, 0.80], [23.0, 0.90], [30.0, 0.93], [300.0, 0.93],
    ]
)  # fmt: skip


def sand_in(low: float, high: float) -> float:
    """The sand's emissivity averaged over a band."""
    band = top_hat(low, high)
    return float(band.average(np.interp(band.quadrature_wavelength, *SAND.T)))


def sand_over_the_whole_spectrum(temperature: float) -> float:
    """Emitted flux of the sand over that of a blackbody, integrated from 3 to 300 um."""
    wavelength = np.exp(np.linspace(np.log(3.0), np.log(300.0), 20_001))
    emitted = np.pi * np.interp(wavelength, *SAND.T) * spectral_radiance(wavelength, temperature)
    return float(np.trapezoid(emitted, wavelength) / (STEFAN_BOLTZMANN * temperature**4))


@pytest.mark.parametrize("temperature", [280.0, 310.0, 330.0])
def test_over_sand_the_broadband_rules_err_no_more_than_they_say(temperature: float) -> None:
    truth = sand_over_the_whole_spectrum(temperature)
    table = shipped_class_table()
    assert sand_in(8.0, 9.5) == pytest.approx(0.75, abs=0.03)
    assert sand_in(10.0, 12.5) == pytest.approx(0.95, abs=0.01)

    def misses(ground: GroundValues) -> float:
        return abs(ground.broadband - truth) / float(np.hypot(ground.broadband_shared, ground.broadband_own))

    # Known as sand: within one standard uncertainty.
    assert misses(ground_of_class(table.named("quartz_sand"), BAND)) < 1.0
    # Known only as ground without plants, by its index: within one.
    red, near_infrared = np.array([[0.25]], np.float32), np.array([[0.30]], np.float32)
    bare = index_fields(red, near_infrared, np.zeros((1, 1), np.uint16), threshold_method(BAND, table))
    spread = float(np.hypot(bare.broadband_shared, bare.broadband_own)[0, 0])
    assert abs(float(bare.broadband[0, 0]) - truth) < 1.15 * spread
    # Nothing known but the window band, the rule of last resort: the dip is just what it cannot see. The
    # error lies within the expanded uncertainty (k = 2), and the pixel is flagged.
    seen = broadband_from_band(sand_in(10.60, 11.19), 0.0116)
    assert abs(float(seen.value) - truth) < 2.0 * float(np.hypot(seen.shared, seen.own))


@pytest.mark.parametrize(
    ("name", "bands"),
    [
        ("aster-2003", [(8.125, 8.475), (8.475, 8.825), (8.925, 9.275), (10.25, 10.95), (10.95, 11.65)]),
        ("aster-2013", [(8.125, 8.475), (8.475, 8.825), (8.925, 9.275), (10.25, 10.95), (10.95, 11.65)]),
        ("modis-2005", [(8.4, 8.7), (10.78, 11.28), (11.77, 12.27)]),
    ],
)
def test_over_sand_the_published_relations_see_the_dip(name: str, bands: list[tuple[float, float]]) -> None:
    chosen = relation(name)
    emissivities = [sand_in(*band) for band in bands]
    found = broadband_from_bands(chosen, emissivities, [0.015] * len(bands), used=chosen.bands[-1])
    stated = float(np.hypot(found.shared, found.own))
    truth = sand_over_the_whole_spectrum(310.0)
    assert abs(float(found.value) - truth) < 2.0 * stated
    # Better than the window band alone, which misses by about 0.05.
    assert abs(float(found.value) - truth) < abs(sand_in(10.60, 11.19) - truth)
