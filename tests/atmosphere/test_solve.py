"""The atmosphere grid of a scene: nodes, causes, bands wide and narrow, and temperatures that come back."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest

from atmosphere.reference_air import ALL, SENSOR_BANDS, read_reference, response
from groundglow.atmosphere.completion import completed
from groundglow.atmosphere.composition import AS_TABULATED, Composition, composed
from groundglow.atmosphere.contributions import CONTRIBUTORS, air_of_profile
from groundglow.atmosphere.grid import AtmosphereGrid
from groundglow.atmosphere.interpolate import interpolate, pack
from groundglow.atmosphere.model_atmospheres import model_atmosphere
from groundglow.atmosphere.node_solver import Bands
from groundglow.atmosphere.perturbation import scaled_to_column, temperature_shifted, water_scaled
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.radiative_transfer import column, hemispheric_sky, look_down
from groundglow.atmosphere.sensor_height import SensorHeight
from groundglow.atmosphere.solve import AirSettings, PlacedProfile, View, solve_atmosphere
from groundglow.atmosphere.source_uncertainty import SourceUncertainty
from groundglow.errors import DomainError
from groundglow.physics.band_table import table_from_response
from groundglow.physics.planck import spectral_radiance
from groundglow.physics.spectral_response import SpectralResponse, top_hat
from groundglow.retrieval.single_channel import Air, Inverse, inverse_of_table, invert
from groundglow.scene.sensor import load_sensor, sensor_names

TWO_BANDS = {"10": top_hat(10.6, 11.19), "11": top_hat(11.5, 12.51)}
FLAT = View((0.0, 0.0), (0.0, 0.0))
NO_FLUX = AirSettings(sky_flux=False)
SUMMER = model_atmosphere("midlatitude_summer")


def one(profile: Profile) -> list[PlacedProfile]:
    return [PlacedProfile(profile)]


def air_at(grid: AtmosphereGrid, height: float, secant: float) -> Air:
    """Interpolated air of one pixel."""
    fields = interpolate(pack(grid), np.zeros(1), np.zeros(1), height, secant)[:, 0, 0].astype(np.float64)
    count = grid.surface_temperature.size
    return Air(fields[:count], fields[count], fields[count + 1], grid.surface_temperature)


def radiance_by_full_integral(
    profile: Profile, band: SpectralResponse, temperature: float, emissivity: float, *,
    ground: float = 0.0, secant: float = 1.0, sensor: float | None = None,
    settings: AirSettings = NO_FLUX,
) -> float:  # fmt: skip
    """Radiance at the sensor, all products integrated over the spectrum."""
    bands = Bands.of({"band": band}, settings.absorption)
    weights = bands.weights[0]
    whole = column(composed(profile, settings.composition), bands.spectrum, ground, sensor)
    seen, emitted = (values[0] for values in look_down(whole, np.array([secant]), sensor))
    number = bands.spectrum.wavenumber
    blackbody = spectral_radiance(1e4 / number, temperature)
    sky = hemispheric_sky(whole).radiance * number**2 * 1e-4
    at_sensor = seen * (emissivity * blackbody + (1.0 - emissivity) * sky) + emitted * number**2 * 1e-4
    return float(weights.weight @ at_sensor)


def inverse(band: SpectralResponse) -> Inverse:
    return inverse_of_nodes(tuple(band.wavelength), tuple(band.response))


@cache
def inverse_of_nodes(wavelength: tuple[float, ...], relative: tuple[float, ...]) -> Inverse:
    band = SpectralResponse(np.array(wavelength), np.array(relative))
    return inverse_of_table(table_from_response(band))


def retrieved(
    grid: AtmosphereGrid, band: SpectralResponse, radiance: float, emissivity: float, *,
    height: float = 0.0, secant: float = 1.0,
) -> float:  # fmt: skip
    air = air_at(grid, height, secant)
    return float(invert(np.array(radiance), np.array(emissivity), air, inverse(band)).temperature)


class TestTemperaturesComeBack:
    @pytest.mark.parametrize("sensor", sensor_names())
    @pytest.mark.parametrize("name", ["tropical", "subarctic_winter"])
    def test_every_shipped_sensor(self, sensor: str, name: str) -> None:
        # Against the full spectral integral: within 0.05 K, whatever the width of the band.
        bands = {number: band.response for number, band in load_sensor(sensor).bands.items()}
        profile = model_atmosphere(name)
        grids = solve_atmosphere(one(profile), bands, FLAT, NO_FLUX)
        near = float(profile.temperature[0])
        for number, band in bands.items():
            for temperature in (near - 15.0, near, near + 12.0, near + 35.0):
                radiance = radiance_by_full_integral(profile, band, temperature, 0.95)
                assert retrieved(grids[number], band, radiance, 0.95) == pytest.approx(temperature, abs=0.05)

    @pytest.mark.parametrize("height", [100.0, 3000.0])
    @pytest.mark.parametrize("name", ["tropical", "midlatitude_summer", "subarctic_winter"])
    def test_a_wide_camera_in_the_air(self, height: float, name: str) -> None:
        camera = top_hat(7.5, 13.5)
        profile = model_atmosphere(name)
        view = View((0.0, 0.0), (0.0, 20.0), SensorHeight("ground", height))
        grid = solve_atmosphere(one(profile), {"camera": camera}, view, NO_FLUX)["camera"]
        assert grid.surface_temperature.size == 3
        near = float(profile.temperature[0])
        secant = 1.0 / np.cos(np.radians(14.0))
        for temperature in (near - 20.0, near, near + 25.0, near + 45.0):
            radiance = radiance_by_full_integral(
                profile, camera, temperature, 0.96, secant=float(secant), sensor=height
            )
            found = retrieved(grid, camera, radiance, 0.96, secant=float(secant))
            assert found == pytest.approx(temperature, abs=0.05)

    def test_one_transmittance_would_not_do_for_a_wide_band(self) -> None:
        # The reason for three temperatures: plain response weighting is off by 1 to 2 K in moist air.
        camera = top_hat(7.5, 13.5)
        profile = model_atmosphere("tropical")
        found = air_of_profile(profile, {"camera": camera}, NO_FLUX, ground=0.0).bands["camera"]
        grid = solve_atmosphere(one(profile), {"camera": camera}, FLAT, NO_FLUX)["camera"]
        radiance = radiance_by_full_integral(profile, camera, 310.0, 1.0)
        air = air_at(grid, 0.0, 1.0)
        plain = replace(
            air, transmittance=np.array([found.plain_transmittance]), surface_temperature=np.array([300.0])
        )
        wrong = float(invert(np.array(radiance), np.array(1.0), plain, inverse(camera)).temperature)
        assert abs(wrong - 310.0) > 0.5

    def test_radiances_of_lowtran(self) -> None:
        # End to end from LOWTRAN 7's own radiances: bias within 0.1 K up to 3 g cm-2. Its band
        # transmittances are weighted by the response only, so they make radiances of narrow bands.
        errors = [error for name in ALL for error in self.errors_of_lowtran_radiances(name)]
        assert len(errors) == 5 * 6 * 3
        assert abs(np.mean(errors)) <= 0.1
        assert np.max(np.abs(errors)) <= 0.2

    def errors_of_lowtran_radiances(self, name: str) -> list[float]:
        bands = {band: response(band) for band in SENSOR_BANDS}
        settings = AirSettings("lowtran7", AS_TABULATED, sky_flux=False)
        view = View((0.0, 0.0), (0.0, 50.0))
        grids = solve_atmosphere(one(model_atmosphere(name)), bands, view, settings)
        errors = []
        for row in read_reference("lowtran_bands.csv"):
            narrow = row["band"] != "L9_B11"
            if row["atmosphere"] != name or float(row["cwv_g_cm2"]) > 3.0 or not narrow:
                continue
            band = bands[row["band"]]
            t, path, sky = (
                float(row[key]) for key in ("transmittance", "path_radiance_up", "downwelling_radiance")
            )
            secant = float(1.0 / np.cos(np.radians(float(row["view_zenith_deg"]))))
            for temperature in (285.0, 300.0, 315.0):
                radiance = t * (0.97 * float(band.band_radiance(temperature)) + 0.03 * sky) + path
                found = retrieved(grids[row["band"]], band, radiance, 0.97, secant=secant)
                errors.append(found - temperature)
        return errors


class TestNodes:
    @pytest.mark.parametrize("name", ["tropical", "midlatitude_winter"])
    @pytest.mark.parametrize(
        "sensor", [SensorHeight(), SensorHeight("sea", 4000.0), SensorHeight("ground", 500.0)], ids=str
    )
    def test_interpolation_costs_less_than_two_hundredths_of_a_kelvin(
        self, name: str, sensor: SensorHeight
    ) -> None:
        profile = model_atmosphere(name)
        view = View((50.0, 1800.0), (0.0, 40.0), sensor)
        grids = solve_atmosphere(one(profile), TWO_BANDS, view, NO_FLUX)
        random = np.random.default_rng(11)
        for height, angle in zip(
            random.uniform(50.0, 1800.0, 12), random.uniform(0.0, 40.0, 12), strict=True
        ):
            secant = float(1.0 / np.cos(np.radians(angle)))
            near = float(np.interp(height, profile.height, profile.temperature))
            for number, band in TWO_BANDS.items():
                for temperature in (near - 10.0, near + 10.0):
                    radiance = radiance_by_full_integral(
                        profile, band, temperature, 0.97, ground=float(height), secant=secant,
                        sensor=sensor.above_sea(float(height)),
                    )  # fmt: skip
                    found = retrieved(
                        grids[number], band, radiance, 0.97, height=float(height), secant=secant
                    )
                    # 0.02 K of interpolation, and what one transmittance for the band costs.
                    assert found == pytest.approx(temperature, abs=0.03)

    def test_places_are_kept_in_order(self) -> None:
        profiles = [
            PlacedProfile(scaled_to_column(SUMMER, 10.0 + 10.0 * i + 3.0 * j), 500.0 * i, 900.0 * j)
            for j in (1, 0)
            for i in (0, 1)
        ]
        grid = solve_atmosphere(profiles, TWO_BANDS, FLAT, NO_FLUX)["10"]
        np.testing.assert_array_equal(grid.x, [0.0, 500.0])
        np.testing.assert_array_equal(grid.y, [0.0, 900.0])
        t = grid.terms.transmittance[0, :, :, 0, 0]
        assert t[0, 0] > t[1, 0] > t[0, 1] > t[1, 1]

    def test_places_must_form_a_grid(self) -> None:
        profiles = [PlacedProfile(SUMMER, 0.0, 0.0), PlacedProfile(SUMMER, 1.0, 1.0)]
        with pytest.raises(DomainError, match="do not fill a grid of 2 map x by 2 map y"):
            solve_atmosphere(profiles, TWO_BANDS, FLAT, NO_FLUX)
        with pytest.raises(DomainError, match="do not fill a grid"):
            solve_atmosphere([], TWO_BANDS, FLAT, NO_FLUX)

    @pytest.mark.parametrize(
        ("view", "message"),
        [
            (((500.0, 100.0), (0.0, 0.0)), "not in order"),
            (((0.0, 100.0), (0.0, 85.0)), "do not lie within 0 to 80"),
            (((0.0, np.nan), (0.0, 5.0)), "none of the Earth's"),
        ],
    )
    def test_bad_views_are_refused(
        self, view: tuple[tuple[float, float], tuple[float, float]], message: str
    ) -> None:
        with pytest.raises(DomainError, match=message):
            View(*view)

    def test_terrain_above_the_aircraft_is_refused(self) -> None:
        with pytest.raises(DomainError, match="not above the ground at 1500 m"):
            View((0.0, 1500.0), (0.0, 0.0), SensorHeight("sea", 1200.0))

    def test_a_profile_far_above_the_ground_is_refused(self) -> None:
        kept = SUMMER.height >= 2000.0
        high = Profile(
            SUMMER.height[kept], SUMMER.pressure[kept], SUMMER.temperature[kept],
            {gas: values[kept] for gas, values in SUMMER.gases.items()},
        )  # fmt: skip
        with pytest.raises(DomainError, match="2000 m above the ground"):
            solve_atmosphere(one(high), TWO_BANDS, FLAT, NO_FLUX)

    def test_a_drone_flight_is_enough_once_completed(self) -> None:
        flight = Profile(
            np.array([10.0, 60.0, 130.0]), np.array([1009.0, 1003.0, 995.0]), np.array([297.0, 296.5, 295.8]),
            {"water_vapour": np.array([15e3, 14.8e3, 14.5e3])},
        )  # fmt: skip
        view = View((0.0, 40.0), (0.0, 30.0), SensorHeight("ground", 100.0))
        grid = solve_atmosphere(one(completed(flight, SUMMER)), TWO_BANDS, view, NO_FLUX)["10"]
        assert (grid.terms.transmittance > 0.95).all()


@cache
def with_causes(name: str, water: float, temperature: float) -> dict[str, AtmosphereGrid]:
    settings = AirSettings(uncertainty=SourceUncertainty(water, temperature))
    return solve_atmosphere(
        one(model_atmosphere(name)), TWO_BANDS, View((0.0, 1000.0), (0.0, 30.0)), settings
    )


class TestCauses:
    def test_water_is_half_the_difference_between_more_and_less(self) -> None:
        profile = model_atmosphere("midlatitude_summer")
        change = with_causes("midlatitude_summer", 0.10, 1.0)["10"].causes["water_vapour"]
        more, less = (
            solve_atmosphere(one(water_scaled(profile, factor)), TWO_BANDS, FLAT, AirSettings())["10"].terms
            for factor in (1.1, 0.9)
        )
        for term in (
            "transmittance",
            "path_radiance",
            "transmitted_sky_radiance",
            "sky_radiance",
            "sky_flux",
        ):
            expected = 0.5 * (getattr(more, term) - getattr(less, term)).ravel()[0]
            # The flux of the causes is solved at every fourth wavenumber.
            assert getattr(change, term).ravel()[0] == pytest.approx(expected, rel=0.02)

    def test_temperature_is_the_change_of_warmer_air(self) -> None:
        profile = model_atmosphere("midlatitude_summer")
        change = with_causes("midlatitude_summer", 0.10, 1.0)["10"].causes["air_temperature"]
        warm, base = (
            solve_atmosphere(one(p), TWO_BANDS, FLAT, AirSettings())["10"].terms
            for p in (temperature_shifted(profile, 1.0), profile)
        )
        for term in ("path_radiance", "sky_radiance", "sky_flux"):
            expected = (getattr(warm, term) - getattr(base, term)).ravel()[0]
            assert getattr(change, term).ravel()[0] == pytest.approx(expected, rel=0.02)

    def test_absorption_model_carries_the_residual_table(self) -> None:
        # 10.6-11.2 um at 42 kg m-2: standard uncertainty of transmittance 0.027.
        grid = with_causes("tropical", 0.05, 0.5)["10"]
        change = grid.causes["absorption_model"]
        assert change.transmittance[0, 0, 0, 0, 0] == pytest.approx(-0.027, abs=1e-3)
        # A longer path suffers more of the same error, and more absorption means more emission.
        assert change.transmittance[0, 0, 0, 0, -1] < change.transmittance[0, 0, 0, 0, 0]
        assert (change.path_radiance > 0.0).all()
        assert (change.sky_radiance > 0.0).all()
        assert (change.sky_flux > 0.0).all()

    def test_signs_of_more_water(self) -> None:
        change = with_causes("midlatitude_summer", 0.10, 1.0)["11"].causes["water_vapour"]
        assert (change.transmittance < 0.0).all()
        assert (change.path_radiance > 0.0).all()
        assert (change.sky_flux > 0.0).all()

    def test_without_a_stated_uncertainty_there_are_no_causes(self) -> None:
        assert solve_atmosphere(one(SUMMER), TWO_BANDS, FLAT, NO_FLUX)["10"].causes == {}

    def test_a_certain_source_leaves_the_absorption_model(self) -> None:
        settings = AirSettings(sky_flux=False, uncertainty=SourceUncertainty(0.0, 0.0))
        grid = solve_atmosphere(one(SUMMER), TWO_BANDS, FLAT, settings)["10"]
        assert list(grid.causes) == ["absorption_model"]
        assert np.isnan(grid.causes["absorption_model"].sky_flux).all()

    @pytest.mark.parametrize(
        ("name", "share", "shift"), [("midlatitude_summer", 0.10, 1.0), ("tropical", 0.05, 0.5)]
    )
    def test_stated_uncertainty_is_honest(self, name: str, share: float, shift: float) -> None:
        # Water and temperature of the true air are drawn from what is stated; the retrieved
        # temperature must scatter as the causes say (GUM, JCGM 100:2008, eq. 10).
        profile = model_atmosphere(name)
        grids = with_causes(name, share, shift)
        random = np.random.default_rng(3)
        errors, stated = [], []
        for water, warm in random.normal(0.0, 1.0, (60, 2)):
            truth = temperature_shifted(water_scaled(profile, 1.0 + share * water), shift * warm)
            temperature = float(profile.temperature[0]) + 8.0
            for number, band in TWO_BANDS.items():
                radiance = radiance_by_full_integral(truth, band, temperature, 0.97)
                errors.append(retrieved(grids[number], band, radiance, 0.97) - temperature)
                stated.append(stated_uncertainty(grids[number], band, temperature))
        ratio = np.array(errors) / np.array(stated)
        assert np.sqrt(np.mean(ratio**2)) == pytest.approx(1.0, abs=0.25)
        assert 0.58 <= np.mean(np.abs(ratio) < 1.0) <= 0.80


def stated_uncertainty(grid: AtmosphereGrid, band: SpectralResponse, temperature: float) -> float:
    """Standard uncertainty of the temperature from water and temperature of the air, at the first node."""
    blackbody, slope = float(band.band_radiance(temperature)), float(band.band_radiance_slope(temperature))
    t = grid.terms.transmittance[0, 0, 0, 0, 0]
    total = 0.0
    for cause in ("water_vapour", "air_temperature"):
        change = grid.causes[cause]
        at_sensor = (
            0.97 * change.transmittance[0, 0, 0, 0, 0] * blackbody
            + 0.03 * change.transmitted_sky_radiance[0, 0, 0, 0]
            + change.path_radiance[0, 0, 0, 0]
        )
        total += (at_sensor / (0.97 * t * slope)) ** 2
    return float(np.sqrt(total))


class TestFluxAndContributions:
    def test_sky_flux_falls_with_height_and_is_the_same_for_every_band(self) -> None:
        grids = with_causes("midlatitude_summer", 0.10, 1.0)
        flux = grids["10"].terms.sky_flux[0, 0]
        assert (np.diff(flux) < 0.0).all()
        np.testing.assert_array_equal(flux, grids["11"].terms.sky_flux[0, 0])
        # Wild et al. (2013), Climate Dynamics 40, 3107: clear-sky global mean about 314; warmer here.
        assert 320.0 < flux[0] < 370.0

    def test_unasked_flux_is_unknown(self) -> None:
        assert np.isnan(solve_atmosphere(one(SUMMER), TWO_BANDS, FLAT, NO_FLUX)["10"].terms.sky_flux).all()

    def test_what_each_gas_contributes(self) -> None:
        found = air_of_profile(SUMMER, TWO_BANDS, AirSettings(), ground=0.0)
        band = found.bands["11"]
        assert set(band.band_gas_transmittance) == set(CONTRIBUTORS)
        # In the window water vapour takes most, carbon dioxide next (common knowledge of the trade).
        assert (
            min(band.band_gas_transmittance, key=lambda gas: band.band_gas_transmittance[gas])
            == "water_vapour"
        )
        product = np.prod(list(band.gas_transmittance.values()), axis=0)
        # The band model multiplies the gases' transmittances.
        np.testing.assert_allclose(product, band.transmittance, rtol=2e-3)
        assert found.column_water_vapour == pytest.approx(SUMMER.column_water_vapour, rel=0.01)
        grid = with_causes("midlatitude_summer", 0.10, 1.0)["10"]
        # The grid's flux is solved at every second wavenumber.
        assert found.sky_flux == pytest.approx(grid.terms.sky_flux[0, 0, 0], abs=0.03)

    def test_spectra_add_up_to_the_grid(self) -> None:
        found = air_of_profile(SUMMER, TWO_BANDS, NO_FLUX, ground=0.0).bands["10"]
        terms = solve_atmosphere(one(SUMMER), TWO_BANDS, FLAT, NO_FLUX)["10"].terms
        assert found.band_path_radiance == pytest.approx(terms.path_radiance.item())
        assert found.band_sky_radiance == pytest.approx(terms.sky_radiance.item())
        assert found.band_transmittance == pytest.approx(terms.transmittance.item(), abs=1e-3)

    def test_halocarbons_cost_what_is_known_of_them(self) -> None:
        # 0.004 to 0.007 in transmittance in 800-950 cm-1 (notes of the updated set).
        band = {"window": top_hat(1e4 / 950.0, 1e4 / 800.0)}
        found = air_of_profile(SUMMER, band, NO_FLUX, ground=0.0).bands["window"]
        assert 0.003 < 1.0 - found.band_gas_transmittance["halocarbons"] < 0.012

    def test_today_has_more_carbon_dioxide_than_the_tables(self) -> None:
        old = AirSettings(composition=Composition(carbon_dioxide=330.0), sky_flux=False)
        before, today = (
            solve_atmosphere(one(SUMMER), TWO_BANDS, FLAT, s)["10"].terms.transmittance.item()
            for s in (old, NO_FLUX)
        )
        assert 0.001 < before - today < 0.02
