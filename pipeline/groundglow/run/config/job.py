"""The job file: what to map, with which method, air and emissivity, into which layers.

Every table of the TOML file is one class here; the reference in the guide and the JSON Schema for
editors are generated from these classes, so a field's description is its documentation.
"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from groundglow.documents import Document, checked, read_toml
from groundglow.errors import ConfigError
from groundglow.quantities import DEFAULT_MASK, FLAG, QUANTITIES
from groundglow.run.config.atmosphere import Atmosphere
from groundglow.run.config.batch import Retry, Select
from groundglow.run.config.emissivity import Emissivity
from groundglow.run.config.grid import AreaOfInterest, TargetGrid
from groundglow.run.config.measures import Kelvin, Metres

# What `layers.write` may name; "quality" is always written, since every other layer needs it.
LAYER_NAMES = tuple(name for name in QUANTITIES if name not in ("radiance", "sky_radiance"))
DEFAULT_LAYERS = ("surface_temperature", "surface_temperature_uncertainty", "emitted_flux", "quality")
NEEDS_SKY_FLUX = ("sky_flux", "leaving_flux", "net_longwave_flux")


class Temperature(Document):
    """How surface temperature is found."""

    band: str | None = Field(
        None, description="Thermal band to use; default: the scene's first thermal band."
    )
    method: Literal["single-channel", "water-vapour"] = Field(
        "single-channel",
        description="single-channel inverts the radiative transfer equation with the job's air; water-vapour is "
        "the published generalised form that needs the column water vapour only.",
    )
    radiometry: Literal["spectral-response", "two-constants"] = Field(
        "spectral-response",
        description="How radiance becomes temperature: Planck's law integrated over the sensor's spectral response, "
        "or the published two-constant form.",
    )
    lowest: Kelvin = Field(180.0, ge=150.0, le=400.0, description="Colder results are flagged as impossible.")
    highest: Kelvin = Field(
        1300.0, ge=250.0, le=1500.0, description="Hotter results are flagged as impossible."
    )

    @model_validator(mode="after")
    def _range(self) -> Temperature:
        if self.lowest >= self.highest:
            raise ValueError(f"lowest ({self.lowest} K) must be below highest ({self.highest} K)")
        return self


class Quality(Document):
    """Which flagged pixels carry no number, and how wide clouds are avoided."""

    mask: tuple[str, ...] = Field(
        DEFAULT_MASK, description="Flags whose pixels become NaN in every layer but quality."
    )
    cloud_buffer: Metres = Field(
        0.0, ge=0.0, le=20000.0, description="Pixels closer to a cloud get 'near_cloud'."
    )

    @field_validator("mask")
    @classmethod
    def _known(cls, names: tuple[str, ...]) -> tuple[str, ...]:
        for name in names:
            if name not in FLAG:
                raise ValueError(f"there is no quality flag {name!r}; the flags are {', '.join(FLAG)}")
        return names


class Layers(Document):
    """Which maps are written, and how."""

    write: tuple[str, ...] = Field(DEFAULT_LAYERS, min_length=1, description="Names of the layers to write.")
    compression: Literal["zstd", "deflate"] = Field(
        "zstd", description="zstd is fast and small; deflate opens in programs older than GDAL 2.3."
    )
    level: int | None = Field(
        None, ge=1, le=19, description="Compression level; default 1 for zstd, 6 for deflate."
    )
    celsius: bool = Field(
        True, description="Styles and previews label temperature in Celsius; files stay in kelvin."
    )
    preview: bool = Field(True, description="Write a PNG preview.")

    @field_validator("write")
    @classmethod
    def _known(cls, names: tuple[str, ...]) -> tuple[str, ...]:
        for name in names:
            if name not in LAYER_NAMES:
                raise ValueError(f"there is no layer {name!r}; the layers are {', '.join(LAYER_NAMES)}")
        if len(set(names)) != len(names):
            raise ValueError("a layer is named twice")
        return names if "quality" in names else (*names, "quality")

    @model_validator(mode="after")
    def _level(self) -> Layers:
        if self.compression == "deflate" and self.level is not None and self.level > 9:
            raise ValueError(f"deflate knows levels 1 to 9, not {self.level}")
        return self


class Execution(Document):
    """How the work is cut and spread; never changes a byte of the layers."""

    block: int = Field(1024, ge=512, le=4096, multiple_of=512, description="Block edge in pixels.")
    workers: int | None = Field(
        None, ge=1, le=256, description="Threads; default: the cores this process may use."
    )
    durable: bool = Field(
        False, description="Flush files to disk before a scene counts as done (power loss)."
    )


class Job(Document):
    """One job: scenes in, maps out."""

    scenes: Annotated[tuple[str, ...], Field(min_length=1)] = Field(
        description="Scene files, folders, archives or catalogues; relative to this file; * and ** match many."
    )
    output: str = Field(min_length=1, description="Folder for the results; one folder a scene is made in it.")
    temperature: Temperature = Field(default_factory=Temperature)
    emissivity: Emissivity
    atmosphere: Atmosphere
    quality: Quality = Field(default_factory=Quality)
    layers: Layers = Field(default_factory=Layers)
    grid: TargetGrid | None = Field(None, description="Grid of the results; default: the thermal band's own.")
    area: AreaOfInterest | None = Field(
        None, description="Part of the scene that is wanted; default: all of it."
    )
    compare: dict[str, str] = Field(
        default_factory=dict,
        description="Rasters of known values by layer name; the run reports the map's error against them.",
    )
    select: Select = Field(default_factory=Select)
    retry: Retry = Field(default_factory=Retry)
    run: Execution = Field(default_factory=Execution)

    @field_validator("scenes", mode="before")
    @classmethod
    def _one_or_many(cls, value: object) -> object:
        return (value,) if isinstance(value, str) else value

    @model_validator(mode="after")
    def _consistent(self) -> Job:
        wanted = [name for name in self.layers.write if name in NEEDS_SKY_FLUX]
        if wanted and not self.atmosphere.gives_sky_flux():
            raise ValueError(
                f"the layers {', '.join(wanted)} need a sky flux, and this atmosphere gives none: "
                "add sky_flux to it or leave these layers out"
            )
        for name in self.compare:
            if name not in self.layers.write or name == "quality":
                raise ValueError(f"compare names {name!r}, which is not among the layers written")
        self._method_and_air()
        if self.atmosphere.source == "none":
            wanted = [name for name in self.layers.write if name not in ("brightness_temperature", "quality")]
            if wanted:
                raise ValueError(
                    f"without an atmosphere only brightness_temperature and quality can be written, not "
                    f"{', '.join(wanted)}: set layers.write, or name an atmosphere"
                )
        return self

    def _method_and_air(self) -> None:
        """The water-vapour method wants a column, and nothing else does."""
        if self.temperature.method == "water-vapour" and self.atmosphere.source not in ("column", "none"):
            raise ValueError(
                "temperature.method = 'water-vapour' uses the column water vapour only: "
                "set atmosphere.source = 'column'"
            )
        if self.atmosphere.source != "column":
            return
        if self.temperature.method != "water-vapour":
            raise ValueError(
                "atmosphere.source = 'column' serves temperature.method = 'water-vapour' only; "
                "the single-channel method needs transmittance and radiances (source 'model', 'weather', ...)"
            )
        unknown = [name for name in self.layers.write if name in ("transmittance", "path_radiance")]
        if unknown:
            raise ValueError(f"the water-vapour method does not know {' and '.join(unknown)}: leave them out")


def read_job(path: Path) -> Job:
    """A job file, read and checked.

    Raises
    ------
    ConfigError
        Naming the file, each key at fault, what was found and what is needed.
    """
    if path.suffix.lower() not in (".toml", ""):
        raise ConfigError(
            "a job file is TOML", where=str(path), remedy="Give a .toml file; configs/ holds ready examples"
        )
    return checked(Job, read_toml(path), where=str(path))
