"""The job file's emissivity table: one class for each way in which emissivity is known."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from groundglow.documents import Document
from groundglow.run.config.measures import Fraction


class ConstantEmissivity(Document):
    """One value for the whole scene."""

    source: Literal["constant"]
    value: Fraction = Field(gt=0.0, le=1.0, description="Emissivity in the thermal band used.")
    uncertainty: Fraction = Field(0.02, ge=0.0, le=0.5, description="1 sigma.")
    broadband: Fraction | None = Field(
        None,
        gt=0.0,
        le=1.0,
        description="Broadband emissivity for the flux; default: the band's value, flagged.",
    )
    broadband_uncertainty: Fraction = Field(
        0.03, ge=0.0, le=0.5, description="1 sigma of the broadband rule."
    )


class ClassOfGround(Document):
    """One class of the class table for the whole scene, such as water or green_vegetation."""

    source: Literal["class"]
    name: str = Field(description="Name of a class of the table.")
    class_table: str | None = Field(
        None,
        description="Class table of your own (TOML or CSV), relative to this file; default: the shipped one.",
    )


class RasterEmissivity(Document):
    """The emissivity rasters that the scene names."""

    source: Literal["raster"]
    uncertainty: Fraction | None = Field(
        None, ge=0.0, le=0.5, description="1 sigma; default: what the scene file states, else 0.02."
    )
    broadband_uncertainty: Fraction = Field(
        0.03, ge=0.0, le=0.5, description="1 sigma of the broadband rule."
    )
    broadband_relation: Literal["aster-2003", "aster-2013", "modis-2005"] | None = Field(
        None,
        description="Published relation from several bands' emissivity to the broadband value; "
        "default: the band's value, flagged.",
    )


class LandCoverEmissivity(Document):
    """The scene's class raster with a class table."""

    source: Literal["land-cover"]
    class_table: str | None = Field(
        None,
        description="Class table of your own (TOML or CSV), relative to this file; default: the shipped one.",
    )
    classes: dict[str, str] | None = Field(
        None, description="Class name for each code of the raster; default: the codes of the class table."
    )
    smooth: bool = Field(True, description="Average emissivity over the sensor's native footprint.")


class IndexEmissivity(Document):
    """From red and near-infrared reflectance: thresholds of the vegetation index with a cavity term."""

    source: Literal["vegetation-index"]
    coefficients: str | None = Field(
        None,
        description="Published coefficients by name, such as landsat-8-10; default: from the class table.",
    )
    class_table: str | None = Field(
        None,
        description="Class table of your own (TOML or CSV), relative to this file; default: the shipped one.",
    )
    smooth: bool = Field(True, description="Average emissivity over the sensor's native footprint.")


class LogarithmicEmissivity(Document):
    """From red and near-infrared reflectance: the logarithmic form of the vegetation index."""

    source: Literal["logarithmic-index"]
    class_table: str | None = Field(
        None,
        description="Class table of your own (TOML or CSV), relative to this file; default: the shipped one.",
    )
    smooth: bool = Field(True, description="Average emissivity over the sensor's native footprint.")


Emissivity = Annotated[
    ConstantEmissivity
    | ClassOfGround
    | RasterEmissivity
    | LandCoverEmissivity
    | IndexEmissivity
    | LogarithmicEmissivity,
    Field(discriminator="source"),
]
