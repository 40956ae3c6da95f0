"""Scenes from the level-1 metadata that comes with Landsat data, of three generations."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import PurePosixPath

from groundglow.errors import InputError
from groundglow.raster.band import RasterSource
from groundglow.scene.files import SceneFiles
from groundglow.scene.geometry import zenith_at_surface
from groundglow.scene.level1_groups import Metadata, read_groups
from groundglow.scene.model import QualityRaster, Reflectance, Scene, ThermalBand
from groundglow.scene.radiometer import Sensor, TwoConstants
from groundglow.scene.scene_grid import check_on_grid, level1_grid
from groundglow.scene.sensor import load_sensor
from groundglow.scene.times import checked_time

_SENSORS = {f"LANDSAT_{number}": f"landsat-{number}" for number in (4, 5, 7, 8, 9)}

# What the metadata calls the sensor table's bands: two-gain bands end in the channel's number, the
# first of low and the second of high gain.
_NAMES_IN_METADATA = {"6-low": ("6_VCID_1",), "6": ("6_VCID_2", "6")}

# A printed factor of so few digits is replaced by the one that the radiance limits give.
_FEW_DIGITS = 3


def is_level1_name(name: str) -> bool:
    """Whether a file name is that of level-1 metadata."""
    return PurePosixPath(name).name.lower().endswith(("_mtl.txt", "_mtl.json"))


def read_level1(files: SceneFiles, inner: str) -> Scene:
    """The scene that a level-1 metadata file describes.

    Parameters
    ----------
    files : SceneFiles
        The folder or archive.
    inner : str
        Path of the metadata file within it.

    Returns
    -------
    Scene
        Bands whose rasters are there; ``notes`` tells what was missing and what stood in.

    Raises
    ------
    InputError
        If the metadata is damaged or of another product, no thermal raster is there, or the rasters
        are not on the scene's grid.
    """
    where = f"{files.root}, {inner}" if files.kind != "folder" else str(files.root / inner)
    metadata = read_groups(files.text(inner), where)
    sensor = _sensor(metadata)
    reader = _Reader(files, inner, metadata, sensor)
    thermal = reader.thermal()
    quality = reader.quality()
    grid = level1_grid(metadata)
    if grid is not None:
        for source in [*(band.source for band in thermal), *([quality.source] if quality else [])]:
            check_on_grid(source, grid, where)
    acquired = _time(metadata)
    return Scene(
        name=_name(metadata, inner),
        acquired=acquired,
        sensor=sensor,
        thermal=thermal,
        view_zenith_angle=reader.view_zenith_angle(),
        sun_elevation=metadata.number("sun", "SUN_ELEVATION"),
        quality=quality,
        reflectance=reader.reflectance(acquired),
        origin=where,
        notes=tuple(reader.notes),
    )


def _sensor(metadata: Metadata) -> Sensor:
    """The sensor table of the spacecraft."""
    level = metadata.text("identity", "PROCESSING_LEVEL")
    if level is not None and not level.startswith("L1"):
        raise InputError(
            f"describes a product of level {level}, and level-1 counts are needed",
            where=metadata.where,
            remedy="Fetch the level-1 product of the same scene",
        )
    spacecraft = metadata.needed("platform", "SPACECRAFT_ID")
    name = _SENSORS.get(spacecraft.upper())
    if name is None:
        raise InputError(
            f"SPACECRAFT_ID {spacecraft!r} is not one whose sensor is known ({', '.join(_SENSORS)})",
            where=metadata.where,
            remedy="Describe the scene in a scene file, with a sensor file of your own",
        )
    return load_sensor(name)


def _time(metadata: Metadata) -> datetime:
    """The scene's centre time; its seconds carry more digits than a clock here keeps."""
    day = metadata.needed("platform", "DATE_ACQUIRED")
    clock = metadata.needed("platform", "SCENE_CENTER_TIME").removesuffix("Z")
    whole, _, fraction = clock.partition(".")
    try:
        moment = datetime.fromisoformat(f"{day}T{whole}.{(fraction + '000000')[:6]}")
        return checked_time(moment.replace(tzinfo=UTC))
    except ValueError as error:
        raise InputError(
            f"DATE_ACQUIRED and SCENE_CENTER_TIME do not make a time: {day!r}, {clock!r} ({error})",
            where=metadata.where,
        ) from error


def _name(metadata: Metadata, inner: str) -> str:
    """The product's own identifier."""
    for key in ("LANDSAT_PRODUCT_ID", "LANDSAT_SCENE_ID"):
        value = metadata.text("identity", key)
        if value and value.replace("_", "").replace("-", "").isalnum():
            return value
    stem = PurePosixPath(inner).stem
    return stem[: -len("_MTL")] or stem


class _Reader:
    """Parts of one scene, with notes on what was missing."""

    def __init__(self, files: SceneFiles, inner: str, metadata: Metadata, sensor: Sensor) -> None:
        self.files, self.inner, self.metadata, self.sensor = files, inner, metadata, sensor
        self.notes: list[str] = []

    def raster(self, key: str) -> str | None:
        """GDAL's path of a file that the metadata names and that is there."""
        name = self.metadata.text("files", key)
        found = None if name is None else self.files.find(name, beside=self.inner)
        return None if found is None else self.files.raster_path(found)

    def thermal(self) -> tuple[ThermalBand, ...]:
        """All thermal bands whose rasters are there, the default one first."""
        bands, wanted = [], []
        for number in self.sensor.bands:
            for suffix in _NAMES_IN_METADATA.get(number, (number,)):
                name = self.metadata.text("files", f"FILE_NAME_BAND_{suffix}")
                if name is None:
                    continue
                wanted.append(name)
                path = self.raster(f"FILE_NAME_BAND_{suffix}")
                if path is None:
                    self.notes.append(f"the raster of thermal band {number}, {name}, is not there")
                else:
                    bands.append(self._thermal_band(number, suffix, path))
                break
        if not bands:
            missing = (
                f"{' or '.join(wanted)} must lie beside the metadata"
                if wanted
                else "it names no thermal band"
            )
            raise InputError(f"no thermal raster: {missing}", where=self.metadata.where)
        return tuple(bands)

    def _thermal_band(self, number: str, suffix: str, path: str) -> ThermalBand:
        scale, offset = self._rescaling("RADIANCE", suffix)
        band = self.sensor.band(number)
        return ThermalBand(
            number=number,
            source=RasterSource(
                path,
                nodata=0.0,
                scale=scale,
                offset=offset,
                saturation=self.metadata.number("pixel values", f"QUANTIZE_CAL_MAX_BAND_{suffix}"),
                indirect=True,
            ),
            quantity="counts",
            sensor_band=band,
            two_constants=self._two_constants(number, suffix) or band.two_constants,
        )

    def _rescaling(self, quantity: str, suffix: str) -> tuple[float, float]:
        """Scale and offset; a factor printed with few digits is taken from the radiance limits."""
        keys = (f"{quantity}_MULT_BAND_{suffix}", f"{quantity}_ADD_BAND_{suffix}")
        printed = self.metadata.needed("rescaling", keys[0])
        self.metadata.needed("rescaling", keys[1])
        scale, offset = (self.metadata.number("rescaling", key) or 0.0 for key in keys)
        if scale == 0.0:
            raise InputError(
                f"{keys[0]} is 0: every pixel would get the same value", where=self.metadata.where
            )
        exact = self._scale_of_limits(suffix) if quantity == "RADIANCE" else None
        if exact is None or _significant_digits(printed) > _FEW_DIGITS:
            return scale, offset
        if abs(exact[0] - scale) > 0.02 * abs(scale):
            return scale, offset
        self.notes.append(
            f"{keys[0]} is printed as {printed} only; {exact[0]:.6g} follows from the radiance limits and is used"
        )
        return exact

    def _scale_of_limits(self, suffix: str) -> tuple[float, float] | None:
        """Scale and offset from the radiances of the least and the greatest count."""
        values = [
            self.metadata.number(place, f"{key}_BAND_{suffix}")
            for place, key in (
                ("radiances", "RADIANCE_MINIMUM"),
                ("radiances", "RADIANCE_MAXIMUM"),
                ("pixel values", "QUANTIZE_CAL_MIN"),
                ("pixel values", "QUANTIZE_CAL_MAX"),
            )
        ]
        low, high, least, greatest = values
        if low is None or high is None or least is None or greatest is None or greatest <= least:
            return None
        scale = (high - low) / (greatest - least)
        return scale, low - scale * least

    def _two_constants(self, number: str, suffix: str) -> TwoConstants | None:
        """The scene's own calibration constants, or None with a note."""
        k1, k2 = (self.metadata.number("thermal constants", f"K{n}_CONSTANT_BAND_{suffix}") for n in (1, 2))
        if k1 is None or k2 is None:
            self.notes.append(
                f"the metadata holds no thermal constants of band {number}; those of the sensor table are used"
            )
            return None
        if k1 <= 0.0 or k2 <= 0.0:
            raise InputError(
                f"the thermal constants of band {number} must be above 0", where=self.metadata.where
            )
        return TwoConstants(k1, k2, "the scene's level-1 metadata")

    def view_zenith_angle(self) -> RasterSource | float:
        """The angle raster where it is there; else from the roll, else nadir."""
        path = self.raster("FILE_NAME_ANGLE_SENSOR_ZENITH_BAND_4")
        if path is not None:
            return RasterSource(path, scale=0.01, offset=0.0, indirect=True)
        roll = abs(self.metadata.number("sun", "ROLL_ANGLE") or 0.0)
        height = self.sensor.flight_height
        if roll > 1.0 and height is not None:
            self.notes.append(
                f"no view angle raster: the angle of the roll of {roll:g} degrees is used everywhere"
            )
            return zenith_at_surface(roll, height)
        self.notes.append(
            "no view angle raster: 0 degrees is used; it reaches 8 degrees at the swath's edges"
        )
        return 0.0

    def quality(self) -> QualityRaster | None:
        """The quality raster with the layout of its generation."""
        for key, layout in self._quality_candidates():
            path = self.raster(key)
            rules = self.sensor.quality_layouts.get(layout)
            if path is not None and rules is not None:
                return QualityRaster(RasterSource(path, indirect=True), rules)
        self.notes.append("no quality raster: clouds are not flagged")
        return None

    def _quality_candidates(self) -> tuple[tuple[str, str], ...]:
        older = (
            "before-collections"
            if self.metadata.text("identity", "COLLECTION_NUMBER") is None
            else "collection-1"
        )
        return (("FILE_NAME_QUALITY_L1_PIXEL", "collection-2"), ("FILE_NAME_BAND_QUALITY", older))

    def reflectance(self, acquired: datetime) -> dict[str, Reflectance]:
        """Red and near-infrared where raster, scaling and a sun above the horizon are there."""
        found = {}
        sun = self.metadata.number("sun", "SUN_ELEVATION")
        for name, number in self.sensor.reflective.items():
            path = self.raster(f"FILE_NAME_BAND_{number}")
            if path is None:
                continue
            if self.metadata.text("rescaling", f"REFLECTANCE_MULT_BAND_{number}") is None:
                self.notes.append(
                    f"the metadata holds no reflectance scaling of band {number}; it is left out"
                )
                continue
            if sun is None or sun <= 0.0:
                self.notes.append(f"the sun was not up; band {number} is left out")
                continue
            scale, offset = self._rescaling("REFLECTANCE", number)
            source = RasterSource(path, nodata=0.0, scale=scale, offset=offset, indirect=True)
            found[name] = Reflectance(source, sun_corrected=False, sun_elevation=sun, acquired=acquired)
        return found


def _significant_digits(printed: str) -> int:
    """Digits of a printed number that carry information."""
    mantissa = printed.lower().partition("e")[0].lstrip("+-0.")
    return len(mantissa.replace(".", ""))
