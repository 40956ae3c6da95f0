"""What a look at the air tells: as tables for a reader, as JSON, and its spectra as CSV."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import asdict
from datetime import UTC
from typing import Any

from groundglow.atmosphere.contributions import CONTRIBUTORS
from groundglow.physics.constants import ZERO_CELSIUS
from groundglow.run.batch.table import aligned
from groundglow.run.inspection.air_look import COMPARISONS, TEST_EMISSIVITY, TEST_EXCESS, AirLook

# 1 kg m-2 is a tenth of a gram on a square centimetre.
_GRAMS_PER_SQUARE_CENTIMETRE = 0.1
_OUTSIDE = "Aerosol, thin cirrus and gases that the tables do not hold are outside the model."


def air_text(look: AirLook) -> str:
    """The look as a reader follows it, from the profile to what is not known of it."""
    return "\n\n".join(
        [_facts(look), _band_table(look), _gas_table(look), _sky_flux(look), _cause_table(look)]
    )


def air_record(look: AirLook) -> dict[str, Any]:
    """The look as plain data, without the spectra; radiances in W m-2 sr-1 um-1."""
    bands = {
        name: {
            "transmittance": band.band_transmittance,
            "transmittance_response_weighted_only": band.plain_transmittance,
            "path_radiance": band.band_path_radiance,
            "sky_radiance": band.band_sky_radiance,
            "transmittance_of_each_gas": dict(band.band_gas_transmittance),
            "one_sigma": {cause: asdict(of_band[name]) for cause, of_band in look.causes.items()},
        }
        for name, band in look.air.bands.items()
    }
    return {
        "scene": look.scene.name,
        "acquired": look.scene.acquired.isoformat(),
        "atmosphere": look.placed.account,
        "ground_height": look.ground,
        "view_zenith_angle": look.angle,
        "sensor_above": look.sensor.above,
        "sensor_height": look.sensor.height if math.isfinite(look.sensor.height) else None,
        "column_water_vapour": look.air.column_water_vapour,
        "near_ground": asdict(look.near),
        "bands": bands,
        "sky_flux": look.air.sky_flux,
        "sky_flux_comparisons": dict(look.comparisons),
        "one_sigma_surface": {
            "emissivity": TEST_EMISSIVITY,
            "temperature": look.near.temperature + TEST_EXCESS,
        },
        "outside_the_model": _OUTSIDE,
    }


def spectrum_lines(look: AirLook) -> Iterator[str]:
    """Lines of a CSV file with the spectra of every band."""
    gases = ",".join(f"transmittance_of_{gas}" for gas in CONTRIBUTORS)
    yield f"# {look.scene.name}, ground {look.ground:g} m, view zenith angle {look.angle:g} degrees"
    yield "# radiances in W m-2 sr-1 um-1; sky_radiance is hemispheric, at the ground"
    yield f"band,wavenumber_cm-1,wavelength_um,transmittance,path_radiance,sky_radiance,{gases}"
    for name, band in look.air.bands.items():
        spectra = (
            band.transmittance,
            band.path_radiance,
            band.sky_radiance,
            *band.gas_transmittance.values(),
        )
        for i, wavenumber in enumerate(band.wavenumber):
            numbers = ",".join(f"{values[i]:.6g}" for values in spectra)
            yield f"{name},{wavenumber:g},{1e4 / wavenumber:.5f},{numbers}"


def _facts(look: AirLook) -> str:
    near, column = look.near, look.air.column_water_vapour
    account = look.placed.account
    places = f"; the middle of {len(look.placed.profiles)} places" if len(look.placed.profiles) > 1 else ""
    sensor = "in space"
    if look.sensor.above != "space":
        sensor = (
            f"{look.sensor.height:g} m above {'the ground' if look.sensor.above == 'ground' else 'sea level'}"
        )
    lines = [
        f"{look.scene.name}, {look.scene.acquired.astimezone(UTC):%Y-%m-%d %H:%M} UTC",
        f"air: {account['source']}{places}",
        *(f"  {note}" for note in look.profile.notes),
        f"ground: {look.ground:.0f} m above sea level ({look.ground_from})",
        f"view: {look.angle:.1f} degrees from the zenith ({look.angle_from}); sensor {sensor}",
        f"near the ground: {near.pressure:.1f} hPa, {_temperature(near.temperature)}, "
        f"dew point {_temperature(near.dew_point)}",
        f"column water vapour above the ground: {column:.2f} kg m-2 "
        f"({column * _GRAMS_PER_SQUARE_CENTIMETRE:.3f} g cm-2)",
    ]
    return "\n".join(lines)


def _temperature(kelvin: float) -> str:
    return f"{kelvin:.2f} K ({kelvin - ZERO_CELSIUS:.2f} degC)"


def _band_table(look: AirLook) -> str:
    unit = "W m-2 sr-1 um-1"
    rows = [["band", "transmittance", "response only", f"path radiance {unit}", f"sky radiance {unit}"]]
    rows += [
        [
            name,
            f"{band.band_transmittance:.4f}",
            f"{band.plain_transmittance:.4f}",
            f"{band.band_path_radiance:.4f}",
            f"{band.band_sky_radiance:.4f}",
        ]
        for name, band in look.air.bands.items()
    ]
    return aligned(rows)


def _gas_table(look: AirLook) -> str:
    rows = [["transmittance of each gas alone", *(f"band {name}" for name in look.air.bands)]]
    rows += [
        [
            gas.replace("_", " "),
            *(f"{band.band_gas_transmittance[gas]:.4f}" for band in look.air.bands.values()),
        ]
        for gas in CONTRIBUTORS
    ]
    return aligned(rows)


def _sky_flux(look: AirLook) -> str:
    others = ", ".join(f"{COMPARISONS[name]} {flux:.1f}" for name, flux in look.comparisons.items())
    return (
        f"sky flux at the ground: {look.air.sky_flux:.1f} W m-2 "
        f"(for comparison, from near-ground weather alone: {others})"
    )


def _cause_table(look: AirLook) -> str:
    stated = look.placed.uncertainty
    told = {
        "water_vapour": f"water vapour, {100.0 * stated.water_vapour:.1f} %",
        "air_temperature": f"air temperature, {stated.air_temperature:.2f} K",
        "absorption_model": "absorption model",
    }
    rows = [
        ["1 sigma of", "band", "transmittance", "path radiance", "sky radiance", "sky flux", "temperature K"]
    ]
    for name in look.air.bands:
        changes = {cause: of_band[name] for cause, of_band in look.causes.items()}
        for cause, change in changes.items():
            values = [change.path_radiance, change.sky_radiance]
            rows.append(
                [
                    told[cause],
                    name,
                    f"{change.transmittance:+.4f}",
                    *(f"{value:+.4f}" for value in values),
                    f"{change.sky_flux:+.1f}",
                    f"{change.surface_temperature:+.2f}",
                ]
            )
        total = math.sqrt(sum(change.surface_temperature**2 for change in changes.values()))
        rows.append(["all together", name, "", "", "", "", f"{total:.2f}"])
    surface = look.near.temperature + TEST_EXCESS
    return f"{aligned(rows)}\ntemperature: of a surface of emissivity {TEST_EMISSIVITY} at {surface:.1f} K. {_OUTSIDE}"
