"""The job file's atmosphere table: one class for each source of the air between ground and sensor."""

from __future__ import annotations

from datetime import datetime
from itertools import pairwise
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from groundglow.documents import Document
from groundglow.run.config.measures import (
    FluxDensity,
    Fraction,
    Hectopascal,
    Kelvin,
    KelvinDifference,
    Metres,
    PartsPerMillion,
    Percent,
    Radiance,
    WaterColumn,
)

ModelName = Literal[
    "tropical",
    "midlatitude_summer",
    "midlatitude_winter",
    "subarctic_summer",
    "subarctic_winter",
    "us_standard",
]


def _listed(value: object) -> object:
    return value if isinstance(value, list | tuple) else (value,)


class AirUncertainty(Document):
    """1-sigma uncertainties of typed-in values and their correlations."""

    transmittance: Fraction = Field(0.02, ge=0.0, le=0.5)
    path_radiance: Radiance = Field(0.1, ge=0.0, le=100.0)
    sky_radiance: Radiance = Field(0.15, ge=0.0, le=100.0)
    sky_flux: FluxDensity = Field(10.0, ge=0.0, le=200.0)
    transmittance_path_correlation: float | None = Field(
        None, gt=-1.0, lt=1.0, description="default: -0.9, assumed"
    )
    transmittance_sky_correlation: float | None = Field(
        None, gt=-1.0, lt=1.0, description="default: -0.9, assumed"
    )
    path_sky_correlation: float | None = Field(None, gt=-1.0, lt=1.0, description="default: +0.9, assumed")


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


class ProfileUncertainty(Document):
    """1-sigma uncertainties of a profile; each default depends on the source and is recorded."""

    water_vapour: Fraction | None = Field(
        None, ge=0.0, le=0.8, description="Relative, of all water together."
    )
    air_temperature: KelvinDifference | None = Field(
        None, ge=0.0, le=20.0, description="Of all temperatures below 500 hPa together."
    )


class SolvedAtmosphere(Document):
    """What all sources have in common that are solved by radiative transfer."""

    absorption: Literal["updated", "lowtran7"] = Field(
        "updated", description="Absorption set: the updated one, or that of the 1980s (AFGL-TR-88-0177)."
    )
    carbon_dioxide: PartsPerMillion | None = Field(
        None, gt=0.0, le=5000.0, description="Default: recent global mean."
    )
    nitrous_oxide: PartsPerMillion | None = Field(
        None, gt=0.0, le=50.0, description="Default: recent global mean."
    )
    methane: PartsPerMillion | None = Field(
        None, gt=0.0, le=100.0, description="Default: recent global mean."
    )
    minor_gases: bool = Field(
        True,
        description="CO, SO2, NO2, NH3, HNO3, O2, N2; without them transmittance is up to 0.004 too high.",
    )
    sensor_above: Literal["space", "ground", "sea"] = Field(
        "space", description="What the sensor's height is counted from; 'space' needs none."
    )
    sensor_height: Metres | None = Field(None, gt=0.0, le=100_000.0)
    uncertainty: ProfileUncertainty = Field(default_factory=ProfileUncertainty)

    @model_validator(mode="after")
    def _sensor(self) -> SolvedAtmosphere:
        if (self.sensor_above == "space") != (self.sensor_height is None):
            raise ValueError(
                "sensor_height belongs with sensor_above = 'ground' or 'sea', and only with them"
            )
        return self

    def gives_sky_flux(self) -> bool:
        """Always: the same solution gives it."""
        return True


class SoundingAtmosphere(SolvedAtmosphere):
    """A sounding in a CSV file: radiosonde, mast or drone flight."""

    source: Literal["sounding"]
    path: str = Field(
        description="CSV with columns such as pressure_hPa, height_m, temperature_degC, dew_point_degC."
    )
    columns: dict[str, str] | None = Field(
        None, description="Header of the file on the left, such a column name on the right."
    )
    time: datetime | None = Field(None, description="When it was taken; its age adds to the uncertainty.")
    distance: Metres = Field(0.0, ge=0.0, le=1.0e6, description="From the scene; adds to the uncertainty.")
    ground_height: Metres | None = Field(
        None, ge=-500.0, le=9000.0, description="Of the lowest level, if not given."
    )
    ground_pressure: Hectopascal | None = Field(
        None, ge=300.0, le=1100.0, description="Of the lowest level, for soundings without pressure."
    )
    climatology: ModelName | None = Field(
        None, description="Model atmosphere above the top; default: by latitude and date."
    )

    @field_validator("time")
    @classmethod
    def _aware(cls, value: datetime | None) -> datetime | None:
        if value is not None and value.tzinfo is None:
            raise ValueError("the time of a sounding needs its offset from UTC, such as 2026-07-14T12:00:00Z")
        return value


class AnalysisAtmosphere(SolvedAtmosphere):
    """A gridded analysis on pressure levels (NetCDF, or GRIB with the extra 'grib')."""

    source: Literal["analysis"]
    paths: Annotated[tuple[str, ...], Field(min_length=1)] = Field(description="One file or several.")
    climatology: ModelName | None = Field(
        None, description="Model atmosphere above the top; default: by latitude and date."
    )

    @field_validator("paths", mode="before")
    @classmethod
    def _one_or_many(cls, value: object) -> object:
        return _listed(value)


class ModelAtmosphere(SolvedAtmosphere):
    """A model atmosphere of AFGL-TR-86-0110, scaled if wanted."""

    source: Literal["model"]
    name: ModelName | None = Field(None, description="Default: by latitude and date.")
    column_water_vapour: WaterColumn | None = Field(
        None, ge=0.05, le=90.0, description="Above the lowest ground of the scene."
    )
    air_temperature: Kelvin | None = Field(
        None, ge=200.0, le=335.0, description="Near the lowest ground of the scene."
    )


class WeatherAtmosphere(SolvedAtmosphere):
    """Near-surface weather only: a published relation gives the column, a model atmosphere the shape."""

    source: Literal["weather"]
    air_temperature: Kelvin = Field(ge=200.0, le=335.0, description="At screen height.")
    relative_humidity: Percent | None = Field(None, gt=0.0, le=105.0, description="This or dew_point.")
    dew_point: Kelvin | None = Field(None, ge=180.0, le=310.0)
    pressure: Hectopascal = Field(ge=300.0, le=1100.0, description="At the station.")
    ground_height: Metres = Field(ge=-500.0, le=9000.0, description="Of the station above sea level.")
    scaling: Literal["prata", "gueymard"] = Field(
        "prata", description="Published relation for the water column."
    )
    climatology: ModelName | None = Field(
        None, description="Model atmosphere that gives the shape; default: by latitude and date."
    )

    @model_validator(mode="after")
    def _one_humidity(self) -> WeatherAtmosphere:
        if (self.relative_humidity is None) == (self.dew_point is None):
            raise ValueError("give either relative_humidity or dew_point")
        if self.relative_humidity is not None and self.relative_humidity <= 1.0:
            raise ValueError(
                f"relative_humidity is in percent: {self.relative_humidity} looks like a fraction"
            )
        return self


class ColumnAtmosphere(Document):
    """Column water vapour only, for temperature.method = "water-vapour"."""

    source: Literal["column"]
    column_water_vapour: WaterColumn | None = Field(
        None, ge=0.0, le=90.0, description="Default: the scene's water_vapour raster or number."
    )
    uncertainty: Fraction = Field(0.10, ge=0.0, le=0.8, description="1 sigma of the column, relative.")
    coefficients: Literal["landsat-5-2003", "landsat-5", "landsat-7", "landsat-8"] | None = Field(
        None, description="Published coefficients; default: those of the scene's sensor."
    )

    def gives_sky_flux(self) -> bool:
        """Never: the method knows no sky."""
        return False


class NoAtmosphere(Document):
    """Brightness temperature only: the air is left as it is."""

    source: Literal["none"]

    def gives_sky_flux(self) -> bool:
        """Never."""
        return False


Solved = SoundingAtmosphere | AnalysisAtmosphere | ModelAtmosphere | WeatherAtmosphere
Atmosphere = Annotated[
    ExplicitAtmosphere | Solved | ColumnAtmosphere | NoAtmosphere, Field(discriminator="source")
]
