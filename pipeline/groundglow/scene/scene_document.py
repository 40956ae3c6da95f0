"""The scene file: what one acquisition consists of, in TOML."""

from __future__ import annotations

from datetime import datetime
from typing import Annotated, Literal

from pydantic import Discriminator, Field, Tag, field_validator, model_validator

from groundglow.documents import Document
from groundglow.scene.rule_document import RuleDocument
from groundglow.scene.sensor_document import TwoConstantsDocument
from groundglow.scene.times import checked_time

Angle = Annotated[float, Field(ge=0.0, le=85.0)]
SunElevation = Annotated[float, Field(ge=-90.0, le=90.0)]
Height = Annotated[float, Field(ge=-500.0, le=9000.0)]
Column = Annotated[float, Field(ge=0.0, le=100.0)]
Kelvin = Annotated[float, Field(ge=150.0, le=1500.0)]


class RasterDocument(Document):
    """One band of a raster and the meaning of its numbers."""

    path: str = Field(min_length=1, description="Raster file; relative to the scene file.")
    raster_band: int = Field(1, ge=1, description="Band within the raster.")
    scale: float | None = Field(
        None, description="Physical value = scale * stored + offset; default: the file's own."
    )
    offset: float | None = Field(None, description="See scale; default: the file's own.")
    nodata: float | None = Field(
        None, description="Stored value that means no data; default: the file's own."
    )

    @field_validator("scale")
    @classmethod
    def _not_zero(cls, scale: float | None) -> float | None:
        if scale == 0.0:
            raise ValueError("must not be 0: every pixel would get the same value")
        return scale


def _number_or_raster(value: object) -> str:
    """Which of the two forms a field takes, so that messages speak of that one only."""
    return "raster" if isinstance(value, dict | RasterDocument) else "number"


_Raster = Annotated[RasterDocument, Tag("raster")]
AngleField = Annotated[Annotated[Angle, Tag("number")] | _Raster, Discriminator(_number_or_raster)]
HeightField = Annotated[Annotated[Height, Tag("number")] | _Raster, Discriminator(_number_or_raster)]
ColumnField = Annotated[Annotated[Column, Tag("number")] | _Raster, Discriminator(_number_or_raster)]


class CameraDocument(Document):
    """What a camera assumed for its object temperatures; undone before anything else."""

    emissivity: float = Field(gt=0.0, le=1.0, description="Emissivity set in the camera.")
    reflected_temperature: Kelvin = Field(description="Reflected apparent temperature set in the camera. [K]")
    air_temperature: Kelvin = Field(description="Air temperature set in the camera. [K]")
    transmittance: float = Field(
        gt=0.0, le=1.0, description="Transmittance of the air that the camera assumed."
    )


class AdjustmentDocument(Document):
    """Linear correction of radiance to known targets."""

    gain: float = Field(1.0, gt=0.0, description="Corrected radiance = gain * radiance + offset.")
    offset: float = Field(0.0, description="[W m-2 sr-1 um-1]")
    uncertainty: float | None = Field(
        None, ge=0.0, description="Standard uncertainty of the corrected radiance. [W m-2 sr-1 um-1]"
    )
    source: str = Field(description="Where the numbers come from.")


class ThermalDocument(RasterDocument):
    """One thermal band."""

    band: str = Field(description="Number of the sensor's band, as text.")
    quantity: Literal["counts", "radiance", "brightness-temperature", "object-temperature"] = Field(
        description="What the stored numbers are once scaled; counts and radiance lead to W m-2 sr-1 um-1, "
        "the temperatures to the unit."
    )
    unit: Literal["K", "degC"] = Field("K", description="Unit of a temperature once scaled.")
    saturation: float | None = Field(None, description="Stored value from which on the band is saturated.")
    two_constants: TwoConstantsDocument | None = Field(
        None, description="This scene's published calibration; default: the sensor's."
    )
    camera: CameraDocument | None = Field(None, description="Needed for object-temperature.")
    radiance_adjustment: AdjustmentDocument | None = Field(None, description="Correction to known targets.")

    @model_validator(mode="after")
    def _fits_together(self) -> ThermalDocument:
        is_temperature = self.quantity in ("brightness-temperature", "object-temperature")
        if self.unit != "K" and not is_temperature:
            raise ValueError(f"unit is for temperatures, and quantity is {self.quantity}")
        if (self.camera is not None) != (self.quantity == "object-temperature"):
            raise ValueError(
                "object-temperature needs the camera's settings (emissivity, reflected_temperature, "
                "air_temperature, transmittance) so that they can be undone, and nothing else may have them"
            )
        return self


class ReflectanceDocument(RasterDocument):
    """Red or near-infrared reflectance."""

    sun_corrected: bool = Field(
        True, description="False where reflectance must still be divided by the sine of the sun's elevation."
    )
    sun_elevation: SunElevation | None = Field(
        None, description="When this band was taken; default: the scene's. [deg]"
    )
    acquired: datetime | None = Field(
        None, description="Where it was taken at another time, with offset from UTC."
    )

    @field_validator("acquired", mode="before")
    @classmethod
    def _time(cls, value: object) -> object:
        return value if value is None else checked_time(value)


class ReflectancePairDocument(Document):
    """The two bands of a vegetation index."""

    red: ReflectanceDocument | None = Field(None, description="Red band.")
    near_infrared: ReflectanceDocument | None = Field(None, description="Near-infrared band.")

    @model_validator(mode="after")
    def _different(self) -> ReflectancePairDocument:
        red, near = self.red, self.near_infrared
        if red and near and (red.path, red.raster_band) == (near.path, near.raster_band):
            raise ValueError("red and near_infrared are the same band of the same raster")
        return self


class EmissivityDocument(RasterDocument):
    """Emissivity of one thermal band."""

    band: str = Field(description="Number of the thermal band.")
    uncertainty: float | None = Field(None, ge=0.0, le=1.0, description="Standard uncertainty.")


class TargetDocument(Document):
    """A place of known temperature, to which a band's radiance is corrected."""

    name: str = Field(min_length=1, description="For the record, for example lake or reference panel.")
    band: str = Field(description="Number of the thermal band.")
    at: tuple[float, float] = Field(
        description="x and y of its centre in the thermal raster's reference system."
    )
    radius: float = Field(
        0.0, ge=0.0, description="Pixels this near are averaged; 0 takes the one pixel. [map unit]"
    )
    temperature: Kelvin = Field(description="Measured surface temperature. [K]")
    temperature_uncertainty: float = Field(0.5, gt=0.0, le=20.0, description="One standard uncertainty. [K]")
    emissivity: float = Field(gt=0.0, le=1.0, description="Emissivity in the band.")
    emissivity_uncertainty: float = Field(0.01, ge=0.0, le=0.5, description="One standard uncertainty.")


class QualityDocument(Document):
    """The agency's quality raster."""

    path: str = Field(min_length=1, description="Raster file; relative to the scene file.")
    raster_band: int = Field(1, ge=1, description="Band within the raster.")
    nodata: float | None = Field(None, description="Word that means no data; default: the file's own.")
    layout: str | None = Field(None, description="Name of one of the sensor's quality layouts.")
    rule: tuple[RuleDocument, ...] = Field((), description="Rules, in addition to the layout's.")

    @model_validator(mode="after")
    def _says_how(self) -> QualityDocument:
        if self.layout is None and not self.rule:
            raise ValueError("needs a layout or at least one rule: without them the raster says nothing")
        return self


class AcquisitionDocument(Document):
    """When, with what, and how it was looked at."""

    name: str = Field(
        pattern=r"^\w[\w.-]*$",
        max_length=200,
        description="Identifier, and name of the output folder: letters, digits, underscore, point, hyphen.",
    )
    acquired: datetime = Field(description="Date and time with offset from UTC.")
    sensor: str = Field(
        min_length=1, description="Name of a shipped sensor, or path of a sensor file (.toml)."
    )
    view_zenith_angle: AngleField = Field(
        0.0,
        description="Angle of the line of sight from the vertical, at the surface: number or raster. [deg]",
    )
    off_nadir_angle: AngleField | None = Field(
        None,
        description="In place of view_zenith_angle: angle from the vertical at the sensor, number or raster. [deg]",
    )
    flight_height: float | None = Field(
        None,
        gt=0.0,
        description="Height of the sensor above the ground, for off_nadir_angle; default: the sensor's. [m]",
    )
    sun_elevation: SunElevation | None = Field(None, description="[deg]")
    elevation: HeightField | None = Field(
        None, description="Ground height above sea level: number or raster. [m]"
    )
    land_cover: RasterDocument | None = Field(None, description="Raster of land-cover codes.")
    water_vapour: ColumnField | None = Field(
        None, description="Column water vapour: number or raster. [kg m-2]"
    )

    @field_validator("acquired", mode="before")
    @classmethod
    def _time(cls, value: object) -> object:
        return checked_time(value)

    @model_validator(mode="after")
    def _one_angle(self) -> AcquisitionDocument:
        if self.off_nadir_angle is not None and "view_zenith_angle" in self.model_fields_set:
            raise ValueError(
                "view_zenith_angle and off_nadir_angle say the same thing twice: keep one of them"
            )
        return self


class SceneDocument(Document):
    """One scene."""

    scene: AcquisitionDocument = Field(description="When, with what, and how it was looked at.")
    thermal: tuple[ThermalDocument, ...] = Field(min_length=1, description="Thermal bands.")
    quality: QualityDocument | None = Field(None, description="Quality raster.")
    reflectance: ReflectancePairDocument | None = Field(None, description="Bands of a vegetation index.")
    emissivity: tuple[EmissivityDocument, ...] = Field((), description="Emissivity rasters.")
    target: tuple[TargetDocument, ...] = Field(
        (), description="Places of known temperature, to which radiance is corrected: for cameras that drift."
    )

    @model_validator(mode="after")
    def _each_band_once(self) -> SceneDocument:
        for table, items in (("thermal", self.thermal), ("emissivity", self.emissivity)):
            numbers = [item.band for item in items]
            twice = sorted({number for number in numbers if numbers.count(number) > 1})
            if twice:
                raise ValueError(f"{table} band {', '.join(map(repr, twice))} is named twice")
        self._check_targets()
        for name, band in self.reflective_bands().items():
            if band.sun_corrected:
                continue
            elevation = band.sun_elevation if band.sun_elevation is not None else self.scene.sun_elevation
            if elevation is None or elevation <= 0.0:
                raise ValueError(
                    f"reflectance.{name} is not corrected for the sun and needs a sun_elevation above 0"
                )
        return self

    def _check_targets(self) -> None:
        """Targets belong to bands of the scene that carry no correction yet, each named once."""
        bands = {band.band: band for band in self.thermal}
        names = [(target.band, target.name) for target in self.target]
        for target in self.target:
            if target.band not in bands:
                raise ValueError(
                    f"target {target.name!r} belongs to band {target.band!r}, which is not in the scene"
                )
            if bands[target.band].radiance_adjustment is not None:
                raise ValueError(
                    f"thermal band {target.band!r} has both a radiance_adjustment and targets: keep one of them"
                )
            if names.count((target.band, target.name)) > 1:
                raise ValueError(f"target {target.name!r} is named twice for band {target.band!r}")

    def reflective_bands(self) -> dict[str, ReflectanceDocument]:
        """The bands of the vegetation index that are given, by name."""
        if self.reflectance is None:
            return {}
        pair = {"red": self.reflectance.red, "near_infrared": self.reflectance.near_infrared}
        return {name: band for name, band in pair.items() if band is not None}
