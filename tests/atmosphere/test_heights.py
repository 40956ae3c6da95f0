"""The solver against LOWTRAN 7 itself over raised ground and from aircraft, in six bands from 8.3 to 12 um."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cache

import numpy as np
import pytest

from atmosphere.reference_air import ALL, air, read_reference
from groundglow.atmosphere.node_solver import Bands
from groundglow.atmosphere.radiative_transfer import column, hemispheric_sky, look_down
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.scene.sensor import load_sensor

SENSOR_BANDS = {
    "L9_B10": ("landsat-9", "10"),
    "L9_B11": ("landsat-9", "11"),
    "ASTER_10": ("aster", "10"),
    "ASTER_11": ("aster", "11"),
    "ASTER_12": ("aster", "12"),
    "ASTER_13": ("aster", "13"),
}
QUANTITIES = ("transmittance", "path_radiance_up", "downwelling_radiance")
LIMITS = {
    # transmittance, path radiance, sky radiance, temperature, temperature where nearly opaque
    "same levels": (0.001, 0.010, 0.02, 0.15, 0.15),
    "own levels": (0.002, 0.020, 0.03, 0.20, 0.50),
}
# Levels of the reference runs that look through all of the air: near the ground, counted from it,
# and above those at fixed heights. [m]
ABOVE_GROUND = 1000.0 * np.array([0, 0.01, 0.04, 0.1, 0.2, 0.35, 0.5, 0.75, 1, 1.5, 2, 2.5, 3])
ABOVE_SEA = 1000.0 * np.array(
    [4, 5, 6, 7, 8, 9, 10, 12, 14, 16, 18, 20, 22, 25, 30, 35, 40, 45, 50, 70, 100]
)  # fmt: skip
STEPS_BELOW_SENSOR = 26


def levels_to_space(ground: float) -> np.ndarray:
    """Levels of a reference run from the ground to space."""
    low = ground + ABOVE_GROUND
    return np.concatenate([low, ABOVE_SEA[low[-1] < ABOVE_SEA]])


def levels_to_sensor(ground: float, sensor: float) -> np.ndarray:
    """Levels of a reference run up to an aircraft, dense at both ends; above it, whatever is not seen."""
    share = 0.5 - 0.5 * np.cos(np.pi * np.arange(STEPS_BELOW_SENSOR + 1) / STEPS_BELOW_SENSOR)
    kilometres = np.arange(ground, sensor, 1000.0)
    below = np.unique(np.concatenate([ground + (sensor - ground) * share, kilometres]).round(3))
    return np.concatenate([below, ABOVE_SEA[sensor < ABOVE_SEA]])


@cache
def response(band: str) -> SpectralResponse:
    sensor, number = SENSOR_BANDS[band]
    return load_sensor(sensor).bands[number].response


@cache
def six_bands() -> Bands:
    return Bands.of({band: response(band) for band in SENSOR_BANDS}, "lowtran7")


def path_of(row: dict[str, str]) -> tuple[float, float | None]:
    """Heights of the ground and of the sensor, None in space. [m]."""
    return float(row["ground_m"]), float(row["sensor_m"]) if row["sensor_m"] else None


def solved(
    name: str, path: tuple[float, float | None], angle: float, layering: str
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Spectral transmittance, path radiance and hemispheric sky radiance."""
    ground, sensor = path
    bands = six_bands()
    sky_levels = path_levels = None
    if layering == "same levels":
        sky_levels = levels_to_space(ground)
        path_levels = sky_levels if sensor is None else levels_to_sensor(ground, sensor)
    whole = column(air(name), bands.spectrum, ground, sensor, levels=path_levels)
    secant = np.array([1.0 / np.cos(np.radians(angle))])
    seen, emitted = look_down(whole, secant, sensor)
    above = column(air(name), bands.spectrum, ground, sensor, levels=sky_levels)
    return seen[0], emitted[0], hemispheric_sky(above).radiance


def compared(name: str, layering: str) -> Iterator[tuple[dict[str, str], np.ndarray, np.ndarray]]:
    """Rows of the reference table with what was found and what was expected (quantities,)."""
    bands = six_bands()
    spectra = cache(solved)
    for row in read_reference("lowtran_heights.csv"):
        if row["atmosphere"] == name:
            spectrum = spectra(name, path_of(row), float(row["view_zenith_deg"]), layering)
            which = bands.names.index(row["band"])
            weights, place = bands.weights[which], bands.places[which]
            seen, emitted, sky = (values[place] for values in spectrum)
            found = [
                weights.weight @ seen,
                weights.radiance_weight @ emitted,
                weights.radiance_weight @ sky,
            ]
            yield row, np.array(found), np.array([float(row[key]) for key in QUANTITIES])


def temperature_error(band: str, found: np.ndarray, expected: np.ndarray) -> float:
    """Error of a surface of 300 K and emissivity 0.97 when the found air is taken for the expected."""
    blackbody = float(response(band).band_radiance(300.0))
    at_sensor = expected[0] * (0.97 * blackbody + 0.03 * expected[2]) + expected[1]
    emitted = ((at_sensor - found[1]) / found[0] - 0.03 * found[2]) / 0.97
    return float((emitted - blackbody) / response(band).band_radiance_slope(300.0))


@pytest.mark.parametrize("layering", LIMITS)
@pytest.mark.parametrize("name", ALL)
def test_heights_of_ground_and_sensor(name: str, layering: str) -> None:
    *limits, clear, opaque = LIMITS[layering]
    seen = set()
    for row, found, expected in compared(name, layering):
        assert (np.abs(found - expected) <= limits).all(), (row, found - expected)
        error = temperature_error(row["band"], found, expected)
        assert abs(error) <= (clear if expected[0] >= 0.4 else opaque), (row, error)
        seen.add((*path_of(row), row["view_zenith_deg"], row["band"]))
    assert len(seen) == 22 * len(SENSOR_BANDS)
    assert {path[:2] for path in seen} == {
        (0.0, None), (500.0, None), (1000.0, None), (2000.0, None),
        (0.0, 1000.0), (0.0, 2000.0), (0.0, 4000.0), (0.0, 6000.0), (1000.0, 4000.0),
    }  # fmt: skip


def test_both_reference_tables_agree() -> None:
    # Two sets of LOWTRAN 7 runs, made apart: what they share differs by far less than the limits above.
    here = {
        (row["atmosphere"], row["view_zenith_deg"], row["band"]): row
        for row in read_reference("lowtran_heights.csv")
        if path_of(row) == (0.0, None)
    }
    rows = read_reference("lowtran_bands.csv")
    assert len(rows) == 48
    for row in rows:
        other = here[row["atmosphere"], row["view_zenith_deg"], row["band"]]
        for key, limit in zip(QUANTITIES, (0.0003, 0.0015, 0.001), strict=True):
            assert float(other[key]) == pytest.approx(float(row[key]), abs=limit)
