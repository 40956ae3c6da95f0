"""Reading the scene file: the checked document becomes a scene."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from groundglow.documents import checked, read_toml
from groundglow.errors import ConfigError, DomainError
from groundglow.raster.band import RasterSource
from groundglow.raster.open import is_local
from groundglow.scene.geometry import ZenithAtSurface, zenith_at_surface
from groundglow.scene.model import (
    CameraSettings,
    EmissivityRaster,
    KnownTarget,
    QualityRaster,
    RadianceAdjustment,
    Reflectance,
    Scene,
    ThermalBand,
)
from groundglow.scene.radiometer import Sensor, TwoConstants
from groundglow.scene.scene_document import (
    AcquisitionDocument,
    QualityDocument,
    RasterDocument,
    ReflectanceDocument,
    SceneDocument,
    TargetDocument,
    ThermalDocument,
)
from groundglow.scene.sensor import load_sensor

CELSIUS = 273.15


def read_scene_file(path: Path) -> Scene:
    """The scene that a TOML file describes.

    Parameters
    ----------
    path : Path
        The scene file; paths within it are relative to its folder.

    Returns
    -------
    Scene

    Raises
    ------
    ConfigError
        Naming each key at fault, what was found and what is needed.
    """
    document = checked(SceneDocument, read_toml(path), where=str(path))
    try:
        return _scene(document, path)
    except ConfigError as error:
        if error.where and error.where.endswith(".toml"):
            raise
        raise ConfigError(
            f"{error.where}: {error.what}" if error.where else error.what,
            where=str(path),
            remedy=error.remedy,
        ) from error


def _scene(document: SceneDocument, path: Path) -> Scene:
    """Put the parts together."""
    folder = path.parent
    head = document.scene
    sensor = load_sensor(head.sensor, folder=folder)
    reflectance = {
        name: _reflectance(band, document, folder) for name, band in document.reflective_bands().items()
    }
    emissivity = {
        sensor.band(item.band).number: EmissivityRaster(_source(item, folder), item.uncertainty)
        for item in document.emissivity
    }
    return Scene(
        name=head.name,
        acquired=head.acquired,
        sensor=sensor,
        thermal=tuple(_thermal(band, sensor, folder) for band in document.thermal),
        view_zenith_angle=_view(head, sensor, folder),
        sun_elevation=head.sun_elevation,
        elevation=_field(head.elevation, folder),
        land_cover=_source(head.land_cover, folder) if head.land_cover else None,
        water_vapour=_field(head.water_vapour, folder),
        quality=_quality(document.quality, sensor, folder) if document.quality else None,
        reflectance=reflectance,
        emissivity=emissivity,
        targets=tuple(_target(target) for target in document.target),
        origin=str(path),
    )


def resolved(path: str, folder: Path) -> str:
    """A raster's path, relative ones starting at a folder; addresses and virtual files as they are."""
    return str(folder / path) if is_local(path) else path


def _source(document: RasterDocument, folder: Path) -> RasterSource:
    """A raster as the scene knows it."""
    return RasterSource(
        path=resolved(document.path, folder),
        band=document.raster_band,
        nodata=document.nodata,
        scale=document.scale,
        offset=document.offset,
    )


def _field(document: RasterDocument | float | None, folder: Path) -> RasterSource | float | None:
    """A number or a raster."""
    return _source(document, folder) if isinstance(document, RasterDocument) else document


def _view(head: AcquisitionDocument, sensor: Sensor, folder: Path) -> RasterSource | float:
    """The view zenith angle at the surface, from whichever angle is given."""
    if head.off_nadir_angle is None:
        return _field(head.view_zenith_angle, folder) or 0.0
    height = head.flight_height or sensor.flight_height
    if height is None:
        raise ConfigError(
            "key 'scene.flight_height' is missing: it turns off_nadir_angle into an angle at the surface, and the "
            f"sensor {sensor.name} has no usual height"
        )
    if isinstance(head.off_nadir_angle, RasterDocument):
        return replace(_source(head.off_nadir_angle, folder), convert=ZenithAtSurface(height))
    try:
        return zenith_at_surface(head.off_nadir_angle, height)
    except DomainError as error:
        raise ConfigError(error.what, where="scene.off_nadir_angle") from error


def _thermal(document: ThermalDocument, sensor: Sensor, folder: Path) -> ThermalBand:
    """One thermal band; a sensor's standard scaling of counts fills what the scene leaves out."""
    band = sensor.band(document.band)
    scale, offset, nodata, saturation = document.scale, document.offset, document.nodata, document.saturation
    if document.quantity == "counts" and scale is None:
        if band.counts is None:
            raise ConfigError(
                "key 'scale' is missing: counts become radiance by scale and offset, and the sensor "
                f"{sensor.name} has no standard ones",
                where=f"thermal band {document.band!r}",
            )
        scale = band.counts.scale
        offset = band.counts.offset if offset is None else offset
        nodata = band.counts.nodata if nodata is None else nodata
        saturation = band.counts.saturation if saturation is None else saturation
    constants = TwoConstants(**document.two_constants.model_dump()) if document.two_constants else None
    camera, adjustment = document.camera, document.radiance_adjustment
    return ThermalBand(
        number=document.band,
        source=RasterSource(
            path=resolved(document.path, folder),
            band=document.raster_band,
            nodata=nodata,
            scale=scale,
            offset=offset,
            shift=CELSIUS if document.unit == "degC" else 0.0,
            saturation=saturation,
        ),
        quantity=document.quantity,
        sensor_band=band,
        two_constants=constants or band.two_constants,
        camera=CameraSettings(**camera.model_dump()) if camera else None,
        adjustment=RadianceAdjustment(**adjustment.model_dump()) if adjustment else None,
    )


def _reflectance(band: ReflectanceDocument, document: SceneDocument, folder: Path) -> Reflectance:
    """A red or near-infrared band."""
    own = band.sun_elevation
    return Reflectance(
        source=_source(band, folder),
        sun_corrected=band.sun_corrected,
        sun_elevation=own if own is not None else document.scene.sun_elevation,
        acquired=band.acquired or document.scene.acquired,
    )


def _target(document: TargetDocument) -> KnownTarget:
    """A place of known temperature."""
    x, y = document.at
    return KnownTarget(x=x, y=y, **document.model_dump(exclude={"at"}))


def _quality(document: QualityDocument, sensor: Sensor, folder: Path) -> QualityRaster:
    """The quality raster with the layout's rules and the scene's own."""
    rules = tuple(rule.rule() for rule in document.rule)
    if document.layout is not None:
        if document.layout not in sensor.quality_layouts:
            known = ", ".join(sensor.quality_layouts) or "none: write rules instead"
            raise ConfigError(
                f"the sensor {sensor.name} has no quality layout {document.layout!r}",
                where="quality.layout",
                remedy=f"Known layouts: {known}",
            )
        rules = sensor.quality_layouts[document.layout] + rules
    source = RasterSource(resolved(document.path, folder), document.raster_band, nodata=document.nodata)
    return QualityRaster(source, rules)
