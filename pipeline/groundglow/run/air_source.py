"""From the job's atmosphere table to the air grid that the chain interpolates."""

from __future__ import annotations

from dataclasses import dataclass

from groundglow.atmosphere.explicit import StatedUncertainty, explicit_grid
from groundglow.atmosphere.grid import AtmosphereGrid
from groundglow.errors import ConfigError
from groundglow.run.config_atmosphere import Atmosphere, ExplicitAtmosphere


@dataclass(frozen=True)
class Air:
    """One band's air and where it came from.

    Attributes
    ----------
    grid : AtmosphereGrid
    account : mapping
        For the provenance: source, reference, assumptions.
    """

    grid: AtmosphereGrid
    account: dict[str, object]


def air_of_job(atmosphere: Atmosphere, band: str) -> Air | None:
    """The air of a band; None where the job wants none.

    Raises
    ------
    ConfigError
        If the job's atmosphere does not name the band.
    """
    if not isinstance(atmosphere, ExplicitAtmosphere):
        return None
    return _explicit(atmosphere, band)


def _explicit(atmosphere: ExplicitAtmosphere, band: str) -> Air:
    chosen = next((air for air in atmosphere.air if air.band == band), None)
    if chosen is None:
        raise ConfigError(
            f"the atmosphere holds no values for band {band}",
            where="atmosphere.air",
            remedy=f"Add an [[atmosphere.air]] table with band = {band!r} "
            f"(there are: {', '.join(air.band for air in atmosphere.air)})",
        )
    given = chosen.uncertainty
    typed = {
        "transmittance_path": given.transmittance_path_correlation,
        "transmittance_sky": given.transmittance_sky_correlation,
        "path_sky": given.path_sky_correlation,
    }
    correlations = {name: value for name, value in typed.items() if value is not None}
    stated = StatedUncertainty(
        given.transmittance, given.path_radiance, given.sky_radiance, given.sky_flux, **correlations
    )
    flux = atmosphere.sky_flux
    grid = explicit_grid(
        _one_or_many(chosen.transmittance),
        _one_or_many(chosen.path_radiance),
        _one_or_many(chosen.sky_radiance),
        sky_flux=None if flux is None else _one_or_many(flux),
        height=0.0 if chosen.ground_height is None else list(chosen.ground_height),
        uncertainty=stated,
    )
    account: dict[str, object] = {
        "source": "explicit",
        "reference": atmosphere.reference,
        "uncertainty": {
            name: getattr(stated, name)
            for name in ("transmittance", "path_radiance", "sky_radiance", "sky_flux")
        },
        "correlations": {
            name: {"value": getattr(stated, name), "from": "job file" if name in correlations else "assumed"}
            for name in typed
        },
    }
    return Air(grid, account)


def _one_or_many(values: tuple[float, ...]) -> float | list[float]:
    return values[0] if len(values) == 1 else list(values)
