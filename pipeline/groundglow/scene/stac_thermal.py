"""The thermal bands of a STAC Item: which band of the sensor, and what its numbers are."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from groundglow.errors import InputError
from groundglow.raster.band import RasterSource
from groundglow.scene.model import ThermalBand
from groundglow.scene.radiometer import Sensor, SensorBand
from groundglow.scene.stac_assets import AssetBand
from groundglow.scene.stac_fetch import asset_path

RADIANCE_UNITS = {
    "w m-2 sr-1 um-1", "w/m2/sr/um", "w/(m2 sr um)", "w m-2 sr-1 μm-1", "w m-2 sr-1 µm-1",
    "watt/steradian/square_meter/micrometer", "w·m-2·sr-1·um-1",
}  # fmt: skip
_KELVIN_UNITS = {"k", "kelvin", "degree_kelvin"}
_CELSIUS_UNITS = {"degc", "celsius", "degree_celsius", "°c", "degrees celsius"}
_CELSIUS = 273.15

# The largest number that unsigned counts can store stands for "this or more".
_LARGEST_COUNT = {"uint8": 255.0, "uint16": 65535.0}

_THERMAL_NAMES = {"lwir": None, "lwir11": 10.9, "lwir12": 12.0}
_LONGWAVE = (7.0, 14.5)  # um
_FAR_FROM_BAND = 0.6  # um


def thermal_bands(
    bands: list[AssetBand], sensor: Sensor, properties: Mapping[str, Any], where: str
) -> tuple[ThermalBand, ...]:
    """Thermal bands of an Item, in the sensor's order.

    Parameters
    ----------
    bands : list of AssetBand
        All bands of its assets.
    sensor : Sensor
        What took the scene.
    properties : mapping
        Of the Item.
    where : str
        The Item, for messages.

    Raises
    ------
    InputError
        If there is none, two assets claim to be one, or it is not clear what the numbers are.
    """
    found: dict[str, ThermalBand] = {}
    for band in bands:
        number = _thermal_number(band, sensor)
        if number is None:
            continue
        if number in found:
            raise InputError(
                f"two assets are thermal band {number}: {found[number].source.path} and {band.href}",
                where=where,
            )
        found[number] = _thermal_band(band, sensor.band(number), properties, where)
    if not found:
        raise InputError(
            "has no thermal band: none of its assets carries the common name lwir, lwir11 or lwir12, a centre "
            f"wavelength of {_LONGWAVE[0]:g} to {_LONGWAVE[1]:g} um, or the name of a thermal band of {sensor.name}",
            where=where,
        )
    return tuple(found[number] for number in sensor.bands if number in found)


def _thermal_number(band: AssetBand, sensor: Sensor) -> str | None:
    """Number of the sensor's band that an asset's band is, or None."""
    wavelength = band.centre_wavelength
    if band.common_name in _THERMAL_NAMES:
        wavelength = wavelength or _THERMAL_NAMES[band.common_name]
        if wavelength is None:
            return _named_number(band, sensor) or (
                next(iter(sensor.bands)) if len(sensor.bands) == 1 else None
            )
    elif wavelength is None:
        return _named_number(band, sensor) if "data" in band.roles and not band.common_name else None
    elif not _LONGWAVE[0] <= wavelength <= _LONGWAVE[1]:
        return None
    named = _named_number(band, sensor)
    if named is not None:
        return named
    return min(
        (
            (abs(known.response.effective_wavelength - wavelength), number)
            for number, known in sensor.bands.items()
            if abs(known.response.effective_wavelength - wavelength) <= _FAR_FROM_BAND
        ),
        default=(0.0, None),
    )[1]


def _named_number(band: AssetBand, sensor: Sensor) -> str | None:
    """The band whose number stands in the band's name or the asset's key, as in B10 or band_10."""
    for word in (band.name, band.key.lower()):
        plain = word.removeprefix("band").removeprefix("b").lstrip("_-0 ") or word
        for number in sensor.bands:
            if number in (plain, word):
                return number
    return None


def _thermal_band(
    band: AssetBand, known: SensorBand, properties: Mapping[str, Any], where: str
) -> ThermalBand:
    """One thermal band with its quantity by its unit."""
    unit = band.unit.strip().lower()
    if unit in _KELVIN_UNITS | _CELSIUS_UNITS:
        _refuse_surface_temperature(band, properties, where)
    elif unit and unit not in RADIANCE_UNITS:
        raise InputError(
            f"unit {band.unit!r} of asset {band.key!r} is neither a spectral radiance nor a temperature",
            where=where,
            remedy="Needed is 'W m-2 sr-1 um-1', 'K' or 'degC' once scaled",
        )
    if band.scale == 0.0:
        raise InputError(
            f"scale of asset {band.key!r} is 0: every pixel would get the same value", where=where
        )
    is_temperature = unit in _KELVIN_UNITS | _CELSIUS_UNITS
    source = RasterSource(
        asset_path(band.href, where),
        band.index,
        nodata=band.nodata,
        scale=band.scale,
        offset=band.offset,
        shift=_CELSIUS if unit in _CELSIUS_UNITS else 0.0,
        saturation=None if is_temperature else _LARGEST_COUNT.get(band.data_type),
        indirect=True,
    )
    if not unit:
        source = _with_standard_counts(source, band, known, where)
    return ThermalBand(
        number=known.number,
        source=source,
        quantity="brightness-temperature" if is_temperature else "counts",
        sensor_band=known,
        two_constants=known.two_constants,
    )


def _with_standard_counts(
    source: RasterSource, band: AssetBand, known: SensorBand, where: str
) -> RasterSource:
    """The sensor's standard scaling for an asset that says nothing of its numbers."""
    if known.counts is None or band.scale is not None:
        told = (("unit", None), ("scale", band.scale), ("offset", band.offset))
        missing = [name for name, value in told if value is None]
        raise InputError(
            f"asset {band.key!r} does not say what its numbers are: {', '.join(missing)} missing",
            where=where,
            remedy="Add unit, raster:scale and raster:offset to the band, or name the scene's level-1 metadata instead",
        )
    counts = known.counts
    return replace(
        source,
        nodata=counts.nodata if source.nodata is None else source.nodata,
        scale=counts.scale,
        offset=counts.offset,
        saturation=counts.saturation,
    )


def _refuse_surface_temperature(band: AssetBand, properties: Mapping[str, Any], where: str) -> None:
    """A product that is surface temperature already must not go through the chain again."""
    levels = [str(properties.get(key, "")).upper() for key in ("processing:level", "landsat:correction")]
    if "surface temperature" in band.description or any(
        level.startswith(("L2", "L3", "L4")) for level in levels
    ):
        raise InputError(
            f"asset {band.key!r} holds surface temperature already, not what the sensor saw",
            where=where,
            remedy="Name the Item of the level-1 product",
        )
