"""The job file's atmosphere table: one class for each source of the air between ground and sensor."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from groundglow.documents import Document
from groundglow.run.measures import FluxDensity, Fraction, Metres, Radiance


def _listed(value: object) -> object:
    return value if isinstance(value, list | tuple) else (value,)


class AirUncertainty(Document):
    """1-sigma uncertainties of typed-in values and their correlations."""

    transmittance: Fraction = Field(0.02, ge=0.0, le=0.5)
    path_radiance: Radiance = Field(0.1, ge=0.0, le=100.0)
    sky_radiance: Radiance = Field(0.15, ge=0.0, le=100.0)
    sky_flux: FluxDensity = Field(10.0, ge=0.0, le=200.0)
    transmittance_path_correlation: float | None = Field(
        None, ge=-1.0, le=1.0, description="default: -0.9, assumed"
    )
    transmittance_sky_correlation: float | None = Field(
        None, ge=-1.0, le=1.0, description="default: -0.9, assumed"
    )
    path_sky_correlation: float | None = Field(None, ge=-1.0, le=1.0, description="default: +0.9, assumed")


class BandAir(Document):
    """The air in one band: numbers, or values over ground heights."""

    band: str
    transmittance: tuple[Fraction, ...] = Field(
        description="From the surface to the sensor, above 0 and at most 1."
    )
    path_radiance: tuple[Radiance, ...] = Field(description="Emitted towards the sensor by the air.")
    sky_radiance: tuple[Radiance, ...] = Field(description="Hemispheric: downward irradiance divided by pi.")
    ground_height: tuple[Metres, ...] | None = Field(
        None, description="Heights above sea level at which the values hold, increasing."
    )
    uncertainty: AirUncertainty = Field(default_factory=AirUncertainty)

    @field_validator("transmittance", "path_radiance", "sky_radiance", "ground_height", mode="before")
    @classmethod
    def _one_or_many(cls, value: object) -> object:
        return value if value is None else _listed(value)

    @model_validator(mode="after")
    def _matching(self) -> BandAir:
        count = 1 if self.ground_height is None else len(self.ground_height)
        for name in ("transmittance", "path_radiance", "sky_radiance"):
            found = getattr(self, name)
            if len(found) != count:
                raise ValueError(f"{name} holds {len(found)} values for {count} ground height(s)")
        for value in self.transmittance:
            if not 0.0 < value <= 1.0:
                raise ValueError(f"a transmittance must be above 0 and at most 1, found {value}")
        for name in ("path_radiance", "sky_radiance"):
            if min(getattr(self, name)) < 0.0:
                raise ValueError(f"{name} must not be negative")
        heights = self.ground_height or ()
        if any(b <= a for a, b in pairwise(heights)):
            raise ValueError("ground_height must increase")
        return self


class ExplicitAtmosphere(Document):
    """Transmittance and radiances typed in, from a source that the job names."""

    source: Literal["explicit"]
    reference: str = Field(min_length=3, description="Where the numbers are from; written into the output.")
    air: Annotated[tuple[BandAir, ...], Field(min_length=1)]
    sky_flux: tuple[FluxDensity, ...] | None = Field(
        None,
        description="Broadband downwelling longwave flux, clear sky; a number, or one for each ground height.",
    )

    @field_validator("sky_flux", mode="before")
    @classmethod
    def _one_or_many(cls, value: object) -> object:
        return value if value is None else _listed(value)

    @model_validator(mode="after")
    def _bands(self) -> ExplicitAtmosphere:
        bands = [air.band for air in self.air]
        if len(set(bands)) != len(bands):
            raise ValueError("a band is named twice in atmosphere.air")
        for air in self.air:
            count = len(air.transmittance)
            if self.sky_flux is not None and len(self.sky_flux) not in (1, count):
                raise ValueError(f"sky_flux holds {len(self.sky_flux)} values for {count} ground height(s)")
        if self.sky_flux is not None and not all(0.0 < flux < 1000.0 for flux in self.sky_flux):
            raise ValueError("sky_flux must lie between 0 and 1000 W m-2")
        return self

    def gives_sky_flux(self) -> bool:
        """Whether flux layers that need the sky can be written."""
        return self.sky_flux is not None


class NoAtmosphere(Document):
    """Brightness temperature only: the air is left as it is."""

    source: Literal["none"]

    def gives_sky_flux(self) -> bool:
        """Never."""
        return False


Atmosphere = Annotated[ExplicitAtmosphere | NoAtmosphere, Field(discriminator="source")]
