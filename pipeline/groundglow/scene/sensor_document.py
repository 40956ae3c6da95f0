"""The sensor file: one radiometer's spectral responses, calibration, noise and footprint, in TOML."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import Annotated

import numpy as np
from pydantic import Field, model_validator

from groundglow.documents import Document
from groundglow.errors import ConfigError, DomainError, InputError
from groundglow.physics.spectral_response import SpectralResponse, gaussian, top_hat
from groundglow.scene.radiometer import Calibration, CountScaling, Noise, Sensor, SensorBand, TwoConstants
from groundglow.scene.rule_document import RuleDocument

Positive = Annotated[float, Field(gt=0.0)]
Temperature = Annotated[float, Field(ge=100.0, le=2000.0)]


class ResponseDocument(Document):
    """Relative spectral response: a table here, a table in a file, or a shape."""

    wavelength: tuple[Positive, ...] = Field((), description="Wavelengths of the table, increasing. [um]")
    response: tuple[float, ...] = Field((), description="Relative response at these wavelengths.")
    table: str | None = Field(
        None,
        description="CSV file beside this one: wavelength in um and response, one pair a line, # comments.",
    )
    top_hat: tuple[Positive, Positive] | None = Field(None, description="Lower and upper limit. [um]")
    gaussian: tuple[Positive, Positive] | None = Field(
        None, description="Centre and full width at half maximum. [um]"
    )

    @model_validator(mode="after")
    def _one_of_them(self) -> ResponseDocument:
        given = [name for name in ("table", "top_hat", "gaussian") if getattr(self, name) is not None]
        if self.wavelength or self.response:
            given.append("wavelength with response")
        if len(given) != 1:
            raise ValueError(
                "needs exactly one of wavelength with response, table, top_hat or gaussian, "
                f"found {', '.join(given) or 'none'}"
            )
        return self


class TwoConstantsDocument(Document):
    """Published calibration T = k2 / ln(k1 / L + 1)."""

    k1: Positive = Field(description="[W m-2 sr-1 um-1]")
    k2: Positive = Field(description="[K]")
    source: str = Field(description="Where the numbers are published.")


class NoiseDocument(Document):
    """Noise-equivalent temperature difference."""

    temperature_difference: Positive = Field(description="One standard deviation of one pixel. [K]")
    at: Temperature = Field(300.0, description="Blackbody temperature at which it is stated. [K]")
    source: str = Field(description="Where the number comes from.")


class CalibrationDocument(Document):
    """Absolute calibration uncertainty."""

    uncertainty: float = Field(ge=0.0, description="One standard deviation. [K]")
    at: Temperature = Field(300.0, description="Blackbody temperature at which it is stated. [K]")
    source: str = Field(description="Where the number comes from.")


class CountsDocument(Document):
    """The sensor's standard scaling of counts, used where a scene gives none."""

    scale: float = Field(description="Radiance = scale * counts + offset. [W m-2 sr-1 um-1]")
    offset: float = Field(0.0, description="[W m-2 sr-1 um-1]")
    nodata: float | None = Field(None, description="Counts that mean no data.")
    saturation: float | None = Field(None, description="Counts from which on the band is saturated.")
    source: str = Field(description="Where the numbers are published.")

    @model_validator(mode="after")
    def _scales(self) -> CountsDocument:
        if self.scale == 0.0:
            raise ValueError("scale must not be 0")
        return self


class BandDocument(Document):
    """One thermal band."""

    number: str = Field(min_length=1, description="The band's number or name, as text.")
    response: ResponseDocument = Field(description="Relative spectral response.")
    two_constants: TwoConstantsDocument | None = Field(
        None, description="Published two-constant calibration."
    )
    noise: NoiseDocument | None = Field(None, description="Noise of one pixel.")
    calibration: CalibrationDocument | None = Field(None, description="Absolute calibration uncertainty.")
    counts: CountsDocument | None = Field(None, description="Standard scaling of counts.")
    saturation_temperature: Temperature | None = Field(
        None, description="Brightness temperature above which the band saturates. [K]"
    )
    calibrated_range: tuple[Temperature, Temperature] | None = Field(
        None, description="Brightness temperatures within which the calibration holds. [K]"
    )

    @model_validator(mode="after")
    def _range_increases(self) -> BandDocument:
        if self.calibrated_range is not None and not self.calibrated_range[0] < self.calibrated_range[1]:
            raise ValueError(f"calibrated_range must increase, found {list(self.calibrated_range)}")
        return self


class ReflectiveDocument(Document):
    """Numbers of the bands from which a vegetation index is made."""

    red: str = Field(description="Number of the red band.")
    near_infrared: str = Field(description="Number of the near-infrared band.")


class SensorDocument(Document):
    """One radiometer."""

    name: str = Field(pattern=r"^[a-z0-9]+(-[a-z0-9]+)*$", description="Short name: a-z, 0-9 and hyphens.")
    title: str = Field(description="Full name, for readers.")
    source: str = Field(description="Where the numbers come from.")
    native_footprint: Positive | None = Field(
        None, description="Size of the sensor's own pixel on the ground. [m]"
    )
    flight_height: Positive | None = Field(
        None, description="Usual height above the ground; turns angles off nadir into zenith angles. [m]"
    )
    calibration_correlation: float = Field(
        0.0, ge=-1.0, le=1.0, description="Correlation between the bands' calibration errors within a scene."
    )
    band: tuple[BandDocument, ...] = Field(min_length=1, description="The thermal bands.")
    reflective: ReflectiveDocument | None = Field(None, description="Red and near-infrared bands.")
    quality_layouts: dict[str, tuple[RuleDocument, ...]] = Field(
        default_factory=dict, description="How to read the agency's quality rasters, by the layout's name."
    )

    @model_validator(mode="after")
    def _each_band_once(self) -> SensorDocument:
        numbers = [band.number for band in self.band]
        twice = sorted({number for number in numbers if numbers.count(number) > 1})
        if twice:
            raise ValueError(f"band {', '.join(map(repr, twice))} is described twice")
        return self

    def sensor(self, folder: Path) -> Sensor:
        """The sensor that this document describes.

        Parameters
        ----------
        folder : Path
            Where tables named in it lie.

        Raises
        ------
        ConfigError
            If a response makes no sense.
        InputError
            If a table cannot be read.
        """
        bands = {band.number: _band(band, folder) for band in self.band}
        layouts = {name: tuple(rule.rule() for rule in rules) for name, rules in self.quality_layouts.items()}
        return Sensor(
            name=self.name,
            title=self.title,
            source=self.source,
            native_footprint=self.native_footprint,
            calibration_correlation=self.calibration_correlation,
            bands=bands,
            flight_height=self.flight_height,
            reflective=self.reflective.model_dump() if self.reflective else {},
            quality_layouts=layouts,
        )


def _band(document: BandDocument, folder: Path) -> SensorBand:
    """One band of the sensor."""
    try:
        response, source = _response(document.response, folder)
    except DomainError as error:
        raise ConfigError(f"band {document.number!r}, response: {error.what}") from error
    constants, noise = document.two_constants, document.noise
    calibration, counts = document.calibration, document.counts
    return SensorBand(
        number=document.number,
        response=response,
        response_source=source,
        two_constants=TwoConstants(**constants.model_dump()) if constants else None,
        noise=Noise(**noise.model_dump()) if noise else None,
        calibration=Calibration(**calibration.model_dump()) if calibration else None,
        counts=CountScaling(**counts.model_dump()) if counts else None,
        saturation_temperature=document.saturation_temperature,
        calibrated_range=document.calibrated_range,
    )


def _response(document: ResponseDocument, folder: Path) -> tuple[SpectralResponse, str]:
    """The response and a word on where it comes from."""
    if document.top_hat is not None:
        low, high = document.top_hat
        return top_hat(low, high), f"top-hat, {low:g} to {high:g} um"
    if document.gaussian is not None:
        centre, width = document.gaussian
        return gaussian(centre, width), f"Gaussian at {centre:g} um, width {width:g} um"
    if document.table is not None:
        return _table(folder / document.table), document.table
    return SpectralResponse(
        np.array(document.wavelength), np.array(document.response)
    ), "table in the sensor file"


def _table(path: Path) -> SpectralResponse:
    """A response from a CSV file."""
    try:
        with path.open(encoding="utf-8", newline="") as stream:
            lines = [line for line in stream if line.strip() and not line.lstrip().startswith("#")]
    except FileNotFoundError:
        raise InputError("there is no such spectral response table", where=str(path)) from None
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"the spectral response table cannot be read ({error})", where=str(path)) from error
    rows = list(csv.reader(lines))
    if rows and not _is_number(rows[0][0]):
        rows = rows[1:]
    try:
        pairs = np.array([[float(row[0]), float(row[1])] for row in rows]).reshape(-1, 2)
    except (ValueError, IndexError) as error:
        raise InputError(
            "a spectral response table holds one pair of wavelength (um) and response a line",
            where=str(path),
            remedy=f"Correct the line at fault: {error}",
        ) from error
    return SpectralResponse(pairs[:, 0], pairs[:, 1])


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True
