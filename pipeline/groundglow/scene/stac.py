"""Scenes from STAC Items of version 1.0 or 1.1."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from typing import Any

from groundglow.errors import ConfigError, DomainError, InputError
from groundglow.raster.band import RasterSource
from groundglow.raster.open import is_local
from groundglow.scene.geometry import zenith_at_surface
from groundglow.scene.model import QualityRaster, Reflectance, Scene, ThermalBand
from groundglow.scene.quality import QualityRule
from groundglow.scene.radiometer import Sensor
from groundglow.scene.scene_grid import check_on_grid, projected_grid
from groundglow.scene.sensor import load_sensor, sensor_names
from groundglow.scene.stac_assets import AssetBand, asset_bands
from groundglow.scene.stac_fetch import asset_path
from groundglow.scene.stac_quality import rules_of_classification
from groundglow.scene.stac_thermal import RADIANCE_UNITS, thermal_bands
from groundglow.scene.times import checked_time

_NEAR_INFRARED = ("nir08", "nir")


def is_item(document: Mapping[str, Any]) -> bool:
    """Whether a JSON object is a STAC Item."""
    return document.get("type") == "Feature" and "stac_version" in document


def read_item(document: Mapping[str, Any], where: str, *, sensor: str | None = None) -> Scene:
    """The scene that a STAC Item describes.

    Parameters
    ----------
    document : mapping
        The Item.
    where : str
        Path or address it came from; relative hrefs start there.
    sensor : str, optional
        Sensor name or file, where the Item does not say it.

    Returns
    -------
    Scene

    Raises
    ------
    InputError
        If the Item is out of shape, or lacks what is needed; each missing thing is named.
    """
    properties = _properties(document, where)
    instrument = _sensor(properties, sensor, where)
    bands = list(asset_bands(document, where))
    notes: list[str] = []
    acquired = _time(properties, where, notes)
    thermal = thermal_bands(bands, instrument, properties, where)
    grid = projected_grid(properties, _asset(document, bands, thermal[0]))
    if grid is not None and is_local(thermal[0].source.path):
        check_on_grid(thermal[0].source, grid, where)
    sun = _angle(properties, "view:sun_elevation", (-90.0, 90.0), where)
    quality = _quality(bands, instrument, where)
    if quality is None:
        notes.append("no quality asset: clouds are not flagged")
    return Scene(
        name=_name(document, where),
        acquired=acquired,
        sensor=instrument,
        thermal=thermal,
        view_zenith_angle=_view(properties, bands, instrument, where, notes),
        sun_elevation=sun,
        elevation=_by_key(bands, ("elevation", "dem"), where),
        quality=quality,
        reflectance=_reflectance(bands, properties, sun, acquired, where, notes=notes),
        origin=where,
        notes=tuple(notes),
    )


def _properties(document: Mapping[str, Any], where: str) -> Mapping[str, Any]:
    """The Item's properties, after a look at its kind and version."""
    if not is_item(document):
        raise InputError(
            f"is not a STAC Item (type {document.get('type')!r})",
            where=where,
            remedy="An Item has type 'Feature'",
        )
    version = document.get("stac_version")
    if not isinstance(version, str) or not version.startswith(("1.0", "1.1")):
        raise InputError(f"has stac_version {version!r}, and 1.0 or 1.1 is read", where=where)
    properties = document.get("properties")
    if not isinstance(properties, dict):
        raise InputError("the Item has no properties", where=where)
    return properties


def _name(document: Mapping[str, Any], where: str) -> str:
    """The Item's id, as a folder may be named."""
    identifier = document.get("id")
    if not isinstance(identifier, str) or not identifier.strip():
        raise InputError("the Item has no id", where=where)
    name = "".join(letter if letter.isalnum() or letter in "_.-" else "_" for letter in identifier)
    return name.lstrip(".-") or "scene"


def _sensor(properties: Mapping[str, Any], chosen: str | None, where: str) -> Sensor:
    """The sensor by the caller's word, or by the Item's platform and instruments."""
    if chosen is not None:
        return load_sensor(chosen)
    instruments = properties.get("instruments") or []
    words = [properties.get("platform"), *(instruments if isinstance(instruments, list) else [])]
    names = [word.strip().lower().replace("_", "-") for word in words if isinstance(word, str)]
    for name in names:
        if name in sensor_names():
            return load_sensor(name)
    raise InputError(
        f"does not say a sensor that is known (platform and instruments: {', '.join(names) or 'none'})",
        where=where,
        remedy=f"Name one of {', '.join(sensor_names())}, or a sensor file, as the scene's sensor",
    )


def _time(properties: Mapping[str, Any], where: str, notes: list[str]) -> datetime:
    """The time of acquisition, or the middle of the interval."""
    moment = properties.get("datetime")
    if moment is not None:
        return _parsed(moment, "datetime", where)
    start, end = properties.get("start_datetime"), properties.get("end_datetime")
    if start is None or end is None:
        raise InputError("has neither datetime nor start_datetime with end_datetime", where=where)
    first, last = _parsed(start, "start_datetime", where), _parsed(end, "end_datetime", where)
    if last < first:
        raise InputError(f"end_datetime {end!r} lies before start_datetime {start!r}", where=where)
    notes.append("the middle of start_datetime and end_datetime is taken as the time")
    return first + (last - first) / 2


def _parsed(value: object, key: str, where: str) -> datetime:
    try:
        return checked_time(datetime.fromisoformat(value) if isinstance(value, str) else value)
    except ValueError as error:
        raise InputError(f"{key} {value!r}: {error}", where=where) from error


def _view(
    properties: Mapping[str, Any], bands: list[AssetBand], sensor: Sensor, where: str, notes: list[str]
) -> RasterSource | float:
    """The view zenith angle: a raster, the incidence angle, or the angle off nadir converted."""
    raster = _by_key(bands, ("vza", "view_zenith_angle"), where)
    if raster is not None:
        return raster
    at_surface = _angle(properties, "view:incidence_angle", (0.0, 85.0), where)
    if at_surface is not None:
        return at_surface
    off_nadir = _angle(properties, "view:off_nadir", (0.0, 85.0), where)
    if off_nadir is None:
        notes.append("no view angle: 0 degrees is used")
        return 0.0
    if off_nadir == 0.0:
        return 0.0
    if sensor.flight_height is None:
        notes.append("the angle off nadir is taken as the zenith angle: the sensor's height is not known")
        return off_nadir
    try:
        return zenith_at_surface(off_nadir, sensor.flight_height)
    except DomainError as error:
        raise InputError(f"view:off_nadir: {error.what}", where=where) from error


def _angle(properties: Mapping[str, Any], key: str, limits: tuple[float, float], where: str) -> float | None:
    """An angle within limits, or None."""
    value = properties.get(key)
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, int | float) or not limits[0] <= value <= limits[1]:
        raise InputError(
            f"{key} must lie in {limits[0]:g} to {limits[1]:g} degrees, found {value!r}", where=where
        )
    return float(value)


def _by_key(bands: list[AssetBand], keys: tuple[str, ...], where: str) -> RasterSource | None:
    """A raster by its asset's key."""
    for band in bands:
        if band.key.lower() in keys:
            return RasterSource(
                asset_path(band.href, where), band.index, band.nodata, band.scale, band.offset, indirect=True
            )
    return None


def _quality(bands: list[AssetBand], sensor: Sensor, where: str) -> QualityRaster | None:
    """The quality asset: by its own classification, else by the sensor's layout of that name."""
    for band in bands:
        rules: tuple[QualityRule, ...] = rules_of_classification(band, where)
        if not rules and band.key.lower() in ("qa_pixel", "qa"):
            rules = sensor.quality_layouts.get("collection-2", ())
        if rules:
            source = RasterSource(asset_path(band.href, where), band.index, band.nodata, indirect=True)
            return QualityRaster(source, rules)
    return None


def _reflectance(
    bands: list[AssetBand],
    properties: Mapping[str, Any],
    sun: float | None,
    acquired: datetime,
    where: str,
    *,
    notes: list[str],
) -> dict[str, Reflectance]:
    """Red and near-infrared where the Item scales them to reflectance."""
    found: dict[str, Reflectance] = {}
    level_one = (
        str(properties.get("processing:level", properties.get("landsat:correction", ""))).upper()[:2] == "L1"
    )
    for name, names in (("red", ("red",)), ("near_infrared", _NEAR_INFRARED)):
        band = next((band for wanted in names for band in bands if band.common_name == wanted), None)
        if band is None:
            continue
        if band.scale is None or band.unit.strip().lower() in RADIANCE_UNITS:
            notes.append(f"asset {band.key!r} is not scaled to reflectance; it is left out")
            continue
        if level_one and (sun is None or sun <= 0.0):
            notes.append(
                f"the sun's elevation of asset {band.key!r} is not known or not above 0; it is left out"
            )
            continue
        source = RasterSource(
            asset_path(band.href, where), band.index, band.nodata, band.scale, band.offset, indirect=True
        )
        found[name] = Reflectance(source, sun_corrected=not level_one, sun_elevation=sun, acquired=acquired)
    return found


def _asset(document: Mapping[str, Any], bands: list[AssetBand], thermal: ThermalBand) -> Mapping[str, Any]:
    """The asset that a thermal band came from."""
    for band in bands:
        if band.index == thermal.source.band and thermal.source.path.endswith(band.href.rsplit("/", 1)[-1]):
            asset: Mapping[str, Any] = document["assets"][band.key]
            return asset
    raise ConfigError("a thermal band belongs to no asset", where=thermal.source.path)
