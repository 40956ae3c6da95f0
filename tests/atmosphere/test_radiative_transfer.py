"""The solver against LOWTRAN 7 itself, and against what any solver must obey."""

from __future__ import annotations

import numpy as np
import pytest

from atmosphere.reference_air import (
    ALL,
    REFERENCE_LEVELS,
    VERTICAL,
    air,
    read_reference,
    reference_bands,
    response,
)
from groundglow.atmosphere.absorption import wavenumbers
from groundglow.atmosphere.composition import Composition
from groundglow.atmosphere.layering import solution_levels
from groundglow.atmosphere.perturbation import water_scaled
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.radiative_transfer import (
    column,
    hemisphere_points,
    hemispheric_sky,
    look_down,
    look_up,
    spectrum,
)
from groundglow.atmosphere.transfer_kernels import planck_per_wavenumber
from groundglow.physics.planck import spectral_radiance

EVERYWHERE = np.arange(wavenumbers().size)
TODAY = Composition()


def part(low: float, high: float) -> np.ndarray:
    return np.flatnonzero((wavenumbers() >= low) & (wavenumbers() <= high))


def changed(profile: Profile, **gases: float) -> Profile:
    """The profile with its gases multiplied; "others" names all that are not named."""
    others = gases.pop("others", 1.0)
    scaled = {name: values * gases.get(name, others) for name, values in profile.gases.items()}
    return Profile(profile.height, profile.pressure, profile.temperature, scaled)


class TestAgainstLowtran:
    """Four bands, six atmospheres, two angles; limits as the project sets itself."""

    LIMITS = {  # noqa: RUF012 (a constant of the test class)
        # transmittance, path radiance, sky radiance, temperature, temperature where nearly opaque
        "same levels": (0.001, 0.010, 0.02, 0.15, 0.15),
        "own levels": (0.002, 0.020, 0.03, 0.20, 0.50),
    }

    @pytest.mark.parametrize("layering", ["same levels", "own levels"])
    @pytest.mark.parametrize("name", ALL)
    def test_bands(self, name: str, layering: str) -> None:
        bands = reference_bands("lowtran7")
        levels = REFERENCE_LEVELS if layering == "same levels" else None
        whole = column(air(name), bands.spectrum, 0.0, levels=levels)
        sky = hemispheric_sky(whole).radiance
        rows = [row for row in read_reference("lowtran_bands.csv") if row["atmosphere"] == name]
        assert len(rows) == 8
        for row in rows:
            band = row["band"]
            weights = bands.weights[bands.names.index(band)]
            place = bands.places[bands.names.index(band)]
            secant = 1.0 / np.cos(np.radians(float(row["view_zenith_deg"])))
            seen, emitted = (values[0, place] for values in look_down(whole, np.array([secant])))
            found = np.array(
                [
                    weights.weight @ seen,
                    weights.radiance_weight @ emitted,
                    weights.radiance_weight @ sky[place],
                ]
            )
            keys = ("transmittance", "path_radiance_up", "downwelling_radiance")
            expected = np.array([float(row[key]) for key in keys])
            limits = self.LIMITS[layering]
            assert (np.abs(found - expected) <= limits[:3]).all(), (band, found - expected)
            error = _temperature_error(band, found, expected)
            assert abs(error) <= (limits[3] if expected[0] >= 0.4 else limits[4]), (band, error)

    @pytest.mark.parametrize("name", ALL)
    def test_sky_flux(self, name: str) -> None:
        row = next(row for row in read_reference("lowtran_flux.csv") if row["atmosphere"] == name)
        for levels in (REFERENCE_LEVELS, None):
            whole = column(air(name), spectrum(EVERYWHERE, "lowtran7"), 0.0, levels=levels)
            radiance = hemispheric_sky(whole).radiance
            for low, high in ((5, 3000), (100, 2500), (650, 1350)):
                inside = part(low, high)
                flux = np.pi * np.trapezoid(radiance[inside], wavenumbers()[inside])
                assert flux == pytest.approx(float(row[f"flux_{low}_{high}_cm1"]), abs=1.0)


def _temperature_error(band: str, found: np.ndarray, expected: np.ndarray) -> float:
    """Error of a surface of 300 K and emissivity 0.97 when the found air is taken for the expected."""
    blackbody = float(response(band).band_radiance(300.0))
    at_sensor = expected[0] * (0.97 * blackbody + 0.03 * expected[2]) + expected[1]
    source = ((at_sensor - found[1]) / found[0] - 0.03 * found[2]) / 0.97
    return float((source - blackbody) / response(band).band_radiance_slope(300.0))


def test_blackbody_radiance_agrees_with_the_wavelength_form() -> None:
    temperature = np.array([180.0, 250.0, 300.0, 340.0])
    found = np.empty((4, 600))
    planck_per_wavenumber(wavenumbers().copy(), temperature, found)
    expected = spectral_radiance(1e4 / wavenumbers(), temperature[:, np.newaxis])
    np.testing.assert_allclose(found * wavenumbers() ** 2 * 1e-4, expected, rtol=2e-8)


def test_hemisphere_points_are_those_of_the_literature() -> None:
    # Clough, Iacono and Moncet (1992), JGR 97, 15761: four-point secants 1.06, 1.38, 2.40, 7.15 and
    # weights 0.1355, 0.2035, 0.1298, 0.0312 of half the flux.
    cosine, weight = hemisphere_points()
    np.testing.assert_allclose(1.0 / cosine[::-1], [1.06056, 1.38283, 2.40148, 7.15513], rtol=1e-5)
    np.testing.assert_allclose(0.5 * weight[::-1], [0.135507, 0.203465, 0.129848, 0.031181], rtol=1e-5)
    assert weight.sum() == pytest.approx(1.0, abs=1e-14)


@pytest.mark.parametrize("absorption", ["updated", "lowtran7"])
def test_isothermal_air_emits_what_it_absorbs(absorption: str) -> None:
    base = air("tropical", TODAY)
    warm = Profile(base.height, base.pressure, np.full(base.height.size, 290.0), base.gases)
    whole = column(warm, spectrum(EVERYWHERE, absorption), 0.0)
    blackbody = whole.source[0]
    for seen, emitted in (look_down(whole, np.array([1.0, 1.5])), look_up(whole, np.array([1.0, 3.0]))):
        np.testing.assert_allclose(emitted, (1.0 - seen) * blackbody, rtol=1e-9, atol=1e-12)


def test_sky_of_opaque_wavenumbers_has_the_temperature_of_the_air() -> None:
    base = air("us_standard", TODAY)
    levels = np.unique(np.concatenate([base.height, [500.0]]))
    fine = base.at(levels)
    temperature = np.where(levels <= 500.0, 288.2, fine.temperature)
    whole = column(
        Profile(levels, fine.pressure, temperature, fine.gases), spectrum(part(655, 680), "updated"), 0.0
    )
    radiance = hemispheric_sky(whole).radiance
    slope = (whole.source[0] - _blackbody(whole.spectrum.wavenumber, 287.2)) / 1.0
    assert (np.abs(radiance - whole.source[0]) / slope < 0.05).all()


def _blackbody(wavenumber: np.ndarray, temperature: float) -> np.ndarray:
    result = np.empty((1, wavenumber.size))
    planck_per_wavenumber(wavenumber, np.array([temperature]), result)
    return result[0]


def test_no_air_no_radiance() -> None:
    nothing = changed(air("tropical", TODAY), others=0.0)
    whole = column(nothing, spectrum(EVERYWHERE, "updated"), 0.0)
    seen, emitted = look_down(whole, np.array([1.0, 2.0]))
    np.testing.assert_allclose(seen, 1.0, atol=1e-9)
    np.testing.assert_allclose(emitted, 0.0, atol=1e-9)


@pytest.mark.parametrize("absorption", ["updated", "lowtran7"])
def test_more_water_never_clears_the_window(absorption: str) -> None:
    window = spectrum(part(770, 1250), absorption)
    for name in ALL:
        before = look_down(column(air(name, TODAY), window, 0.0), VERTICAL)[0]
        for factor in (1.02, 1.2, 2.0):
            after = look_down(column(water_scaled(air(name, TODAY), factor), window, 0.0), VERTICAL)[0]
            assert (after <= before + 1e-12).all()
            before = after


@pytest.mark.parametrize("absorption", ["updated", "lowtran7"])
def test_carbon_dioxide_alone(absorption: str) -> None:
    lone = changed(air("us_standard", TODAY), carbon_dioxide=1.0, others=1e-12)
    band = look_down(column(lone, spectrum(part(655, 680), absorption), 0.0), VERTICAL)[0]
    assert (band < 0.01).all()
    # 11 to 12 um.
    window = look_down(column(lone, spectrum(part(833.3, 909.1), absorption), 0.0), VERTICAL)[0]
    assert (window > 0.9).all()


@pytest.mark.parametrize("sensor", [None, 100.0, 3000.0])
def test_finer_levels_change_little(sensor: float | None) -> None:
    bands = reference_bands("updated")
    coarse, fine = (
        column(air("tropical", TODAY), bands.spectrum, 0.0, sensor, refinement=parts) for parts in (1, 5)
    )
    for band, weights, place in zip(bands.names, bands.weights, bands.places, strict=True):
        found = []
        for whole in (coarse, fine):
            seen, emitted = (values[0, place] for values in look_down(whole, VERTICAL, sensor))
            sky = weights.radiance_weight @ hemispheric_sky(whole).radiance[place]
            found.append(np.array([weights.weight @ seen, weights.radiance_weight @ emitted, sky]))
        assert abs(_temperature_error(band, *found)) < 0.05


def test_an_airborne_sensor_sees_less_air_than_one_in_space() -> None:
    window = spectrum(part(800, 950), "updated")
    seen = []
    for sensor in (100.0, 1000.0, 3000.0, 6000.0, 20000.0, None):
        whole = column(air("midlatitude_summer", TODAY), window, 0.0, sensor)
        seen.append(look_down(whole, VERTICAL, sensor)[0][0])
    assert (np.diff(seen, axis=0) <= 0.0).all()
    assert seen[0].mean() > 0.94
    np.testing.assert_allclose(seen[-2], seen[-1], atol=0.02)


def test_path_to_a_sensor_is_that_of_the_air_below_it() -> None:
    window = spectrum(part(800, 1250), "updated")
    base = air("midlatitude_summer", TODAY)
    sensor = 2500.0
    below = base.at(np.append(base.height[base.height < sensor], sensor))
    cut = Profile(below.height, below.pressure, below.temperature, below.gases)
    levels = solution_levels(base.height, 0.0, sensor)
    inside = levels[levels <= sensor]
    alone = look_down(column(cut, window, 0.0, levels=inside), np.array([1.0, 1.3]))
    within = look_down(column(base, window, 0.0, sensor, levels=levels), np.array([1.0, 1.3]), sensor)
    np.testing.assert_allclose(within[0], alone[0], rtol=1e-9)
    np.testing.assert_allclose(within[1], alone[1], rtol=1e-9, atol=1e-12)


def test_layers_do_not_multiply() -> None:
    # The growth with a power below one: two halves let through less than the whole when multiplied.
    band = spectrum(part(1180, 1250), "updated")
    base = air("tropical", TODAY)
    seen_lower = look_down(column(base, band, 0.0, 1500.0), VERTICAL, 1500.0)[0]
    seen_upper = look_down(column(base, band, 1500.0), VERTICAL)[0]
    seen_whole = look_down(column(base, band, 0.0), VERTICAL)[0]
    assert (seen_lower * seen_upper < seen_whole).all()


def test_slant_paths_bend_over_the_curved_earth() -> None:
    # Ozone lies near 22 km, where a ray of 75 deg at the surface has the secant 3.68 instead of 3.86
    # (sin z' = R / (R + h) sin z).
    band = spectrum(part(1000, 1070), "updated")
    lone = changed(air("us_standard", TODAY), ozone=1.0, others=1e-12)
    whole = column(lone, band, 0.0)
    secant = 1.0 / np.cos(np.radians(75.0))
    bent = look_down(whole, np.array([secant]))[0][0]
    straight = look_up(whole, np.array([secant]))[0][0]
    local = 1.0 / np.sqrt(1.0 - (6356766.0 / 6378766.0 * np.sin(np.radians(75.0))) ** 2)
    near = look_up(whole, np.array([local]))[0][0]
    assert (bent > straight).all()
    np.testing.assert_allclose(bent, near, atol=0.004)


@pytest.mark.parametrize("absorption", ["updated", "lowtran7"])
def test_leaving_the_minor_gases_out_costs_little(absorption: str) -> None:
    # Stated: up to 0.004 in transmittance between 7 and 15 um, for bands.
    bands = reference_bands(absorption)
    for name in ALL:
        with_them, without = (
            look_down(column(air(name, Composition(minor_gases=minor)), bands.spectrum, 0.0), VERTICAL)[0][0]
            for minor in (True, False)
        )
        for weights, place in zip(bands.weights, bands.places, strict=True):
            cost = weights.weight @ (without - with_them)[place]
            assert -1e-9 <= cost <= 0.0045
