"""The job file's grid and area tables: where results are wanted."""

from __future__ import annotations

from pydantic import Field, field_validator, model_validator

from groundglow.documents import Document


class TargetGrid(Document):
    """The grid of the results; what is left out comes from the thermal band's own."""

    crs: str | None = Field(None, description='Such as "EPSG:32632".')
    resolution: tuple[float, ...] | None = Field(
        None, description="Pixel size, or width and height. [unit of the reference system]"
    )
    bounds: tuple[float, float, float, float] | None = Field(
        None, description="Left, bottom, right, top. [unit of the reference system]"
    )
    origin: tuple[float, float] | None = Field(
        None, description="A point that pixel corners must meet; default (0, 0)."
    )
    like: str | None = Field(None, description="A raster whose grid is taken, instead of all the others.")

    @field_validator("resolution", mode="before")
    @classmethod
    def _one_or_two(cls, value: object) -> object:
        return (value,) if isinstance(value, int | float) and not isinstance(value, bool) else value

    @model_validator(mode="after")
    def _possible(self) -> TargetGrid:
        others = ("crs", "resolution", "bounds", "origin")
        if self.like is not None and any(getattr(self, name) is not None for name in others):
            raise ValueError("'like' takes the whole grid of another raster: leave the other keys out")
        if self.resolution is not None and (
            len(self.resolution) not in (1, 2) or not all(size > 0.0 for size in self.resolution)
        ):
            raise ValueError(f"resolution is one number or two, above 0, found {list(self.resolution)}")
        return self


class AreaOfInterest(Document):
    """The part of the scene that is wanted; pixels outside carry no number."""

    path: str | None = Field(None, description="Polygons: GeoJSON or GeoPackage, relative to this file.")
    layer: str | None = Field(None, description="Layer of a GeoPackage that holds several.")
    bounds: tuple[float, float, float, float] | None = Field(
        None, description="West, south, east, north, instead of a file. [deg]"
    )

    @model_validator(mode="after")
    def _one_of_both(self) -> AreaOfInterest:
        if (self.path is None) == (self.bounds is None):
            raise ValueError("give either a path or bounds")
        if self.layer is not None and self.path is None:
            raise ValueError("layer belongs with path")
        return self
