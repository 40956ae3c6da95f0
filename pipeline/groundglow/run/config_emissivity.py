"""The job file's emissivity table: one class for each way in which emissivity is known."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from groundglow.documents import Document
from groundglow.run.measures import Fraction


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


class RasterEmissivity(Document):
    """The emissivity rasters that the scene names."""

    source: Literal["raster"]
    uncertainty: Fraction | None = Field(
        None, ge=0.0, le=0.5, description="1 sigma; default: what the scene file states, else 0.02."
    )
    broadband_uncertainty: Fraction = Field(
        0.03, ge=0.0, le=0.5, description="1 sigma of the broadband rule."
    )


Emissivity = Annotated[ConstantEmissivity | RasterEmissivity, Field(discriminator="source")]
