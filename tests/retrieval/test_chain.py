"""The compiled chain equals the readable statements of the same formulas."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.physics.band_table import table_from_response
from groundglow.physics.flux import emitted_flux, leaving_flux, net_longwave_flux
from groundglow.physics.spectral_response import top_hat
from groundglow.quantities import FLAG
from groundglow.retrieval.chain import (
    ChainSettings,
    EmissivityFields,
    brightness_temperature,
    mask_flagged,
    surface_maps,
)
from groundglow.retrieval.single_channel import Air, inverse_of_table, invert
from groundglow.retrieval.uncertainty import AirChange, Causes, propagate, propagate_flux

NARROW = top_hat(10.6, 11.2)
WIDE = top_hat(7.5, 13.5)
SHAPE = (37, 53)


def settings(response=NARROW, *, weighting=(300.0,), causes=2, **changes) -> ChainSettings:
    table = table_from_response(response)
    low, high = (float(response.band_radiance(t)) for t in (180.0, 1300.0))
    values = {
        "table": table,
        "lowest_radiance": low,
        "highest_radiance": high,
        "possible_range": (180.0, 1300.0),
        "calibrated_range": (240.0, 340.0),
        "saturation_temperature": 360.0,
        "weighting": np.array(weighting, np.float32),
        "causes": causes,
        "noise": 0.012,
        "calibration": 0.05,
    }
    return ChainSettings(**(values | changes))


def ground(seed: int = 3) -> tuple[EmissivityFields, np.ndarray]:
    """Emissivity fields and surface temperatures of an invented piece of ground."""
    random = np.random.default_rng(seed)
    band = random.uniform(0.8, 0.995, SHAPE).astype(np.float32)
    fields = EmissivityFields(
        band=band,
        band_uncertainty=random.uniform(0.005, 0.03, SHAPE).astype(np.float32),
        broadband=(band - np.float32(0.02)),
        broadband_shared=random.uniform(-0.01, 0.02, SHAPE).astype(np.float32),
        broadband_own=random.uniform(0.0, 0.02, SHAPE).astype(np.float32),
        flags=np.zeros(SHAPE, np.uint16),
    )
    return fields, random.uniform(250.0, 330.0, SHAPE)


def air_fields(temperatures: int, causes: int, seed: int = 5) -> np.ndarray:
    random = np.random.default_rng(seed)
    air = np.empty(((temperatures + 3) * (1 + causes), *SHAPE), np.float32)
    base = random.uniform(0.5, 0.9, SHAPE)
    for k in range(temperatures):
        air[k] = base + 0.01 * (k - temperatures // 2)
    air[temperatures] = random.uniform(0.8, 2.0, SHAPE)
    air[temperatures + 1] = random.uniform(1.0, 2.0, SHAPE)
    air[temperatures + 2] = random.uniform(280.0, 360.0, SHAPE)
    for cause in range(causes):
        start = (cause + 1) * (temperatures + 3)
        air[start : start + temperatures + 2] = random.normal(0.0, 0.02, (temperatures + 2, *SHAPE))
        air[start + temperatures + 2] = 5.0
    return air


def statement_of(air: np.ndarray, chosen: ChainSettings) -> tuple[Air, list[AirChange]]:
    count = chosen.weighting.size
    changes = []
    for cause in range(chosen.causes):
        start = (cause + 1) * (count + 3)
        parts = (air[start + count // 2], air[start + count], air[start + count + 1])
        changes.append(AirChange(*(part.astype(np.float64) for part in parts)))
    nodes = chosen.weighting.astype(np.float64)
    return Air(
        *(part.astype(np.float64) for part in (air[:count], air[count], air[count + 1])), nodes
    ), changes


@pytest.mark.parametrize(
    ("response", "weighting"), [(NARROW, (300.0,)), (WIDE, (250.0, 290.0, 340.0))], ids=["narrow", "wide"]
)
def test_kernels_equal_the_numpy_statements(response, weighting) -> None:
    chosen = settings(response, weighting=weighting)
    emissivity, temperature = ground()
    air = air_fields(len(weighting), chosen.causes)
    radiance = (
        emissivity.band * air[len(weighting) // 2] * response.band_radiance(temperature)
        + air[len(weighting)]
        + (1 - emissivity.band) * air[len(weighting) + 1]
    ).astype(np.float32)
    flags = np.zeros(SHAPE, np.uint16)
    maps = surface_maps(radiance, flags, emissivity, air, chosen, ("leaving_flux", "net_longwave_flux"))

    between, changes = statement_of(air, chosen)
    expected = invert(radiance.astype(np.float64), emissivity.band, between, inverse_of_table(chosen.table))
    np.testing.assert_allclose(maps["surface_temperature"], expected.temperature, atol=2e-3)
    causes = Causes(chosen.noise, chosen.calibration, emissivity.band_uncertainty, changes)
    parts = propagate(expected, emissivity.band, between, causes)
    np.testing.assert_allclose(maps["surface_temperature_uncertainty"], parts.total, rtol=2e-4)
    np.testing.assert_allclose(maps["surface_temperature_uncertainty_pixel"], parts.pixel, rtol=2e-4)
    np.testing.assert_allclose(maps["surface_temperature_uncertainty_scene"], parts.scene, rtol=2e-4)
    flux = propagate_flux(
        expected.temperature,
        parts,
        emissivity.broadband,
        shared=emissivity.broadband_shared,
        own=emissivity.broadband_own,
    )
    np.testing.assert_allclose(maps["emitted_flux_uncertainty"], flux.total, rtol=4e-4)
    emitted = emitted_flux(emissivity.broadband, expected.temperature)
    np.testing.assert_allclose(maps["emitted_flux"], emitted, rtol=4e-5)
    sky = air[len(weighting) + 2]
    np.testing.assert_allclose(
        maps["leaving_flux"], leaving_flux(emissivity.broadband, expected.temperature, sky), rtol=4e-5
    )
    np.testing.assert_allclose(
        maps["net_longwave_flux"],
        net_longwave_flux(emissivity.broadband, expected.temperature, sky),
        atol=0.02,
    )


def test_missing_radiance_stays_missing_in_every_map() -> None:
    chosen = settings()
    emissivity, _ = ground()
    radiance = np.full(SHAPE, 9.0, np.float32)
    radiance[3, 4] = np.nan
    flags = np.zeros(SHAPE, np.uint16)
    brightness_temperature(radiance, flags, chosen)
    maps = surface_maps(radiance, flags, emissivity, air_fields(1, 2), chosen, ("leaving_flux",))
    assert flags[3, 4] == FLAG["no_data"].mask
    for name in ("surface_temperature", "surface_temperature_uncertainty", "emitted_flux", "leaving_flux"):
        assert np.isnan(maps[name][3, 4]), name
        assert np.isfinite(np.delete(maps[name].ravel(), 3 * SHAPE[1] + 4)).all(), name


def test_more_radiance_never_maps_colder() -> None:
    chosen = settings(causes=0)
    levels = np.linspace(chosen.lowest_radiance, chosen.highest_radiance, 512 * 512, dtype=np.float32)
    radiance = levels.reshape(512, 512)
    one = np.ones((512, 512), np.float32)
    nothing = np.zeros((512, 512), np.float32)
    emissivity = EmissivityFields(one, nothing, one, nothing, nothing, np.zeros((512, 512), np.uint16))
    air = np.zeros((4, 512, 512), np.float32)
    air[0] = 1.0
    flags = np.zeros((512, 512), np.uint16)
    result = surface_maps(radiance, flags, emissivity, air, chosen, ())["surface_temperature"]
    steps = np.diff(result.ravel()[np.isfinite(result.ravel())])
    assert steps.min() >= 0.0
    assert result.ravel()[1] == pytest.approx(180.0, abs=0.1)
    assert result.ravel()[-2] == pytest.approx(1300.0, abs=0.1)


@pytest.mark.parametrize(
    ("level", "why"), [(0.5, "the air alone sends more"), (-1.0, "negative radiance"), (1e4, "hot")]
)
def test_radiance_no_ground_can_send_is_impossible_and_carries_no_number(level: float, why: str) -> None:
    chosen = settings()
    emissivity, _ = ground()
    radiance = np.full(SHAPE, level, np.float32)
    flags = np.zeros(SHAPE, np.uint16)
    result = surface_maps(radiance, flags, emissivity, air_fields(1, 2), chosen, ())["surface_temperature"]
    assert np.isnan(result).all(), why
    assert (flags & FLAG["impossible"].mask).all()


def test_range_and_saturation_are_flagged_and_keep_their_value() -> None:
    chosen = settings()
    temperatures = np.array([[230.0, 241.0, 300.0, 345.0, 361.0]])
    radiance = NARROW.band_radiance(temperatures).astype(np.float32)
    flags = np.zeros((1, 5), np.uint16)
    brightness = brightness_temperature(radiance, flags, chosen)
    np.testing.assert_allclose(brightness, temperatures, atol=1e-3)
    outside, saturated = FLAG["outside_calibrated_range"].mask, FLAG["saturated"].mask
    assert flags.tolist() == [[outside, 0, 0, outside, outside | saturated]]


def test_nearly_opaque_air_is_flagged() -> None:
    chosen = settings()
    emissivity, _ = ground()
    air = air_fields(1, 2)
    air[0, 0, 0] = 0.39
    flags = np.zeros(SHAPE, np.uint16)
    surface_maps(np.full(SHAPE, 9.0, np.float32), flags, emissivity, air, chosen, ())
    assert flags[0, 0] & FLAG["air_nearly_opaque"].mask
    assert not (flags.ravel()[1:] & FLAG["air_nearly_opaque"].mask).any()


def test_masked_flags_lose_their_numbers_and_no_others() -> None:
    values = np.ones((2, 2), np.float32)
    flags = np.array([[0, 4], [64, 68]], np.uint16)
    mask_flagged(values, flags, FLAG["cloud"].mask)
    np.testing.assert_array_equal(np.isnan(values), [[False, True], [False, True]])
