"""What a scene is, whatever description it came from: the one model that the chain reads."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from typing import Literal

from groundglow.raster.band import RasterSource
from groundglow.scene.quality import QualityRule
from groundglow.scene.radiometer import Sensor, SensorBand, TwoConstants

ThermalQuantity = Literal["counts", "radiance", "brightness-temperature", "object-temperature"]


@dataclass(frozen=True)
class QualityRaster:
    """The agency's quality raster and how it is read."""

    source: RasterSource
    rules: tuple[QualityRule, ...]


@dataclass(frozen=True)
class CameraSettings:
    """What a camera assumed when it turned radiance into object temperature.

    Attributes
    ----------
    emissivity : float
        In (0, 1].
    reflected_temperature : float
        [K]
    air_temperature : float
        [K]
    transmittance : float
        Of the air between camera and object, in (0, 1].
    """

    emissivity: float
    reflected_temperature: float
    air_temperature: float
    transmittance: float


@dataclass(frozen=True)
class RadianceAdjustment:
    """Linear correction of a band's radiance to known targets: gain * radiance + offset.

    Attributes
    ----------
    gain : float
        [1]
    offset : float
        [W m-2 sr-1 um-1]
    uncertainty : float or None
        Standard uncertainty of the corrected radiance, where it is known. [W m-2 sr-1 um-1]
    source : str
        Where the numbers come from.
    """

    gain: float = 1.0
    offset: float = 0.0
    uncertainty: float | None = None
    source: str = ""


@dataclass(frozen=True)
class KnownTarget:
    """A place whose temperature was measured while the scene was taken.

    Attributes
    ----------
    name : str
        For the record: "lake", "reference panel".
    band : str
        Number of the thermal band that it corrects.
    x, y : float
        Centre, in the reference system of the band's raster.
    radius : float
        Pixels whose centres lie this near are averaged. [unit of the reference system]
    temperature, temperature_uncertainty : float
        [K]
    emissivity, emissivity_uncertainty : float
        In the band.
    """

    name: str
    band: str
    x: float
    y: float
    radius: float
    temperature: float
    temperature_uncertainty: float
    emissivity: float
    emissivity_uncertainty: float


@dataclass(frozen=True, eq=False)
class ThermalBand:
    """One thermal band of a scene.

    Attributes
    ----------
    number : str
        Number of the sensor's band.
    source : RasterSource
        Its ``scale`` and ``offset`` lead to radiance [W m-2 sr-1 um-1] where ``quantity`` is
        "counts" or "radiance", and to kelvin otherwise.
    quantity : str
        "counts", "radiance", "brightness-temperature" or "object-temperature".
    sensor_band : SensorBand
        What the sensor table knows about the band.
    two_constants : TwoConstants or None
        Published calibration: of the scene's own metadata, else of the sensor table.
    camera : CameraSettings or None
        Needed for "object-temperature".
    adjustment : RadianceAdjustment or None
    """

    number: str
    source: RasterSource
    quantity: ThermalQuantity
    sensor_band: SensorBand
    two_constants: TwoConstants | None = None
    camera: CameraSettings | None = None
    adjustment: RadianceAdjustment | None = None


@dataclass(frozen=True)
class Reflectance:
    """A red or near-infrared band as reflectance.

    Attributes
    ----------
    source : RasterSource
        Its ``scale`` and ``offset`` lead to reflectance.
    sun_corrected : bool
        False where reflectance must still be divided by the sine of ``sun_elevation``.
    sun_elevation : float or None
        When this band was taken. [deg]
    acquired : datetime
        With its offset from UTC.
    """

    source: RasterSource
    sun_corrected: bool
    sun_elevation: float | None
    acquired: datetime


@dataclass(frozen=True)
class EmissivityRaster:
    """Emissivity of one thermal band as a raster, with its standard uncertainty."""

    source: RasterSource
    uncertainty: float | None = None


@dataclass(frozen=True, eq=False)
class Scene:
    """Everything a description says about one acquisition.

    Attributes
    ----------
    name : str
        Identifier; becomes the output folder's name.
    acquired : datetime
        With its offset from UTC.
    sensor : Sensor
    thermal : tuple of ThermalBand
        At least one, in the order of the description.
    view_zenith_angle : RasterSource or float
        At the surface. [deg]
    sun_elevation : float or None
        [deg]
    elevation : RasterSource, float or None
        Ground height above sea level. [m]
    land_cover : RasterSource or None
        Class codes.
    water_vapour : RasterSource, float or None
        Column water vapour. [kg m-2]
    quality : QualityRaster or None
    reflectance : mapping of str to Reflectance
        Keys "red" and "near_infrared".
    emissivity : mapping of str to EmissivityRaster
        By thermal band number.
    targets : tuple of KnownTarget
        Places of known temperature, to which radiance is corrected.
    origin : str
        The description it came from.
    notes : tuple of str
        What was assumed or taken from elsewhere, one sentence each, for provenance and log.
    """

    name: str
    acquired: datetime
    sensor: Sensor
    thermal: tuple[ThermalBand, ...]
    view_zenith_angle: RasterSource | float = 0.0
    sun_elevation: float | None = None
    elevation: RasterSource | float | None = None
    land_cover: RasterSource | None = None
    water_vapour: RasterSource | float | None = None
    quality: QualityRaster | None = None
    reflectance: Mapping[str, Reflectance] = field(default_factory=dict)
    emissivity: Mapping[str, EmissivityRaster] = field(default_factory=dict)
    targets: tuple[KnownTarget, ...] = ()
    origin: str = ""
    notes: tuple[str, ...] = ()

    def sources(self) -> tuple[RasterSource, ...]:
        """Every raster the scene names, without repetition, thermal bands first."""
        found: list[RasterSource] = [band.source for band in self.thermal]
        fields = (self.view_zenith_angle, self.elevation, self.land_cover, self.water_vapour)
        found += [item for item in fields if isinstance(item, RasterSource)]
        if self.quality is not None:
            found.append(self.quality.source)
        found += [band.source for band in self.reflectance.values()]
        found += [raster.source for raster in self.emissivity.values()]
        return tuple(dict.fromkeys(found))
