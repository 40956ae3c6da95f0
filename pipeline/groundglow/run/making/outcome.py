"""What came out of one scene, in numbers for the table, the JSON report and the log."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field
from typing import Any, Literal

from groundglow.layers.geotiff import LayerSummary
from groundglow.raster.grid import Grid
from groundglow.run.blocks.worker import ErrorSums

Status = Literal["done", "nothing valid", "up to date", "left out", "failed"]


@dataclass(frozen=True)
class KnownError:
    """Map minus reference over the pixels that carry both."""

    count: int
    bias: float
    standard_deviation: float
    root_mean_square: float


@dataclass(frozen=True)
class SceneOutcome:
    """The result of one scene.

    Attributes
    ----------
    name, status : str
    reason : str
        Why, where the status is not "done".
    folder : str
        Where the layers are.
    grid : str
        Size, pixel and CRS in words.
    valid_percent : float or None
        Share of pixels that carry a surface (or else brightness) temperature.
    temperature : mapping
        Minimum, quantiles 0.05, 0.5, 0.95 and maximum. [K]
    mean_emitted_flux : float or None
        [W m-2]
    reference : mapping
        By layer name, errors against known values.
    uncertainty : mapping of str to float
        By cause: root mean square of its 1-sigma effect on surface temperature over a sample. [K]
    seconds : float
    notes : tuple of str
        What was assumed.
    address : str
        The description the scene came from.
    attempts : int
        How often it was tried.
    pixels : int
        Of its grid.
    """

    name: str
    status: Status
    reason: str = ""
    folder: str = ""
    grid: str = ""
    valid_percent: float | None = None
    temperature: Mapping[str, float | None] = field(default_factory=dict)
    mean_emitted_flux: float | None = None
    reference: Mapping[str, KnownError] = field(default_factory=dict)
    uncertainty: Mapping[str, float] = field(default_factory=dict)
    seconds: float = 0.0
    notes: tuple[str, ...] = ()
    address: str = ""
    attempts: int = 1
    pixels: int = 0

    def as_json(self) -> dict[str, Any]:
        """Plain values for a JSON report."""
        return asdict(self)


def describe_grid(grid: Grid) -> str:
    """Size, pixel size and CRS of a grid in words."""
    across = math.hypot(grid.transform.a, grid.transform.d)
    down = math.hypot(grid.transform.b, grid.transform.e)
    unit = "deg" if grid.crs.is_geographic else "m"
    pixel = f"{across:g} {unit}" if math.isclose(across, down) else f"{across:g} x {down:g} {unit}"
    code = grid.crs.to_epsg()
    return f"{grid.width} x {grid.height} at {pixel}, {f'EPSG:{code}' if code else 'custom CRS'}"


def outcome_of(
    name: str,
    grid: Grid,
    summaries: Mapping[str, LayerSummary],
    errors: Sequence[ErrorSums],
    *,
    folder: str,
    seconds: float,
    notes: tuple[str, ...],
) -> SceneOutcome:
    """Read the outcome off the finished layers."""
    chosen = summaries.get("surface_temperature") or summaries.get("brightness_temperature")
    temperature: dict[str, float | None] = {}
    valid: float | None = None
    if chosen is not None:
        found = chosen.statistics
        valid = found.valid_percent
        temperature = {
            key: finite(value)
            for key, value in (
                ("minimum", found.minimum),
                ("lower", found.lower),
                ("median", found.median),
                ("upper", found.upper),
                ("maximum", found.maximum),
            )
        }
    flux = summaries.get("emitted_flux")
    empty = chosen is not None and chosen.statistics.count == 0
    return SceneOutcome(
        name=name,
        status="nothing valid" if empty else "done",
        reason="no pixel carries a number: all are masked (see the quality layer)" if empty else "",
        folder=folder,
        grid=describe_grid(grid),
        valid_percent=valid,
        temperature=temperature,
        mean_emitted_flux=finite(flux.statistics.mean) if flux is not None else None,
        reference=_joined(errors),
        seconds=seconds,
        notes=notes,
        pixels=grid.height * grid.width,
    )


def finite(value: float) -> float | None:
    """NaN as None, for JSON."""
    return value if math.isfinite(value) else None


def _joined(errors: Sequence[ErrorSums]) -> dict[str, KnownError]:
    found = {}
    for layer in dict.fromkeys(part.layer for part in sorted(errors)):
        parts = sorted(part for part in errors if part.layer == layer)
        count = sum(part.pixels for part in parts)
        if count == 0:
            continue
        bias = math.fsum(part.total for part in parts) / count
        square = math.fsum(part.total_of_squares for part in parts) / count
        found[layer] = KnownError(count, bias, math.sqrt(max(square - bias * bias, 0.0)), math.sqrt(square))
    return found
