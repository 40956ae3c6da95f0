"""Numbers with units in job files: a bare number is in the documented unit, a text may name another."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Annotated, Any

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic_core import CoreSchema, core_schema

from groundglow.errors import ConfigError

_TEXT = re.compile(r"^\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*?)\s*$")

# To the documented unit: value * factor + offset.
_CONVERSIONS: Mapping[str, Mapping[str, tuple[float, float]]] = MappingProxyType(
    {
        "K": {"K": (1.0, 0.0), "degC": (1.0, 273.15)},
        "K difference": {"K": (1.0, 0.0)},
        "m": {"m": (1.0, 0.0), "km": (1000.0, 0.0)},
        "deg": {"deg": (1.0, 0.0)},
        "hPa": {"hPa": (1.0, 0.0), "Pa": (0.01, 0.0), "kPa": (10.0, 0.0)},
        "kg m-2": {"kg m-2": (1.0, 0.0), "g cm-2": (10.0, 0.0), "mm": (1.0, 0.0)},
        "W m-2": {"W m-2": (1.0, 0.0)},
        "W m-2 sr-1 um-1": {"W m-2 sr-1 um-1": (1.0, 0.0), "mW m-2 sr-1 um-1": (0.001, 0.0)},
        "ppm": {"ppm": (1.0, 0.0), "ppb": (0.001, 0.0)},
        "%": {"%": (1.0, 0.0)},
        "1": {"1": (1.0, 0.0), "%": (0.01, 0.0)},
        "days": {"days": (1.0, 0.0), "h": (1.0 / 24.0, 0.0)},
        "MiB": {"MiB": (1.0, 0.0), "GiB": (1024.0, 0.0)},
    }
)


@dataclass(frozen=True)
class Unit:
    """Marks a float of a job file with its documented unit: ``Annotated[float, Unit("K")]``."""

    name: str

    def parse(self, value: Any) -> Any:
        """The number in the documented unit.

        Raises
        ------
        ConfigError
            If a text names an unknown unit, or the number is not finite.
        """
        known = _CONVERSIONS[self.name]
        if isinstance(value, str):
            match = _TEXT.match(value)
            first = next(iter(known))
            if match is None:
                raise ConfigError(
                    f"{value!r} is not a number with a unit", remedy=f"Write for example '1 {first}'"
                )
            found = match[2] or first
            if found not in known:
                raise ConfigError(
                    f"the unit {found!r} does not fit here", remedy=f"Known units: {', '.join(known)}"
                )
            factor, offset = known[found]
            value = float(match[1]) * factor + offset
        if isinstance(value, float) and not math.isfinite(value):
            raise ConfigError(f"a finite number is needed, not {value}")
        return value

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        """Parse before the number itself is checked."""

        def before(value: Any) -> Any:
            try:
                return self.parse(value)
            except ConfigError as error:
                raise ValueError(str(error)) from error

        return core_schema.no_info_before_validator_function(before, handler(source))

    def __get_pydantic_json_schema__(
        self, schema: CoreSchema, handler: GetJsonSchemaHandler
    ) -> dict[str, Any]:
        """A number, or a text with a unit."""
        number = handler(schema)
        units = ", ".join(_CONVERSIONS[self.name])
        return {"anyOf": [number, {"type": "string"}], "description": f"unit: {units}"}


Kelvin = Annotated[float, Unit("K")]
KelvinDifference = Annotated[float, Unit("K difference")]
Metres = Annotated[float, Unit("m")]
Degrees = Annotated[float, Unit("deg")]
Hectopascal = Annotated[float, Unit("hPa")]
WaterColumn = Annotated[float, Unit("kg m-2")]
FluxDensity = Annotated[float, Unit("W m-2")]
Radiance = Annotated[float, Unit("W m-2 sr-1 um-1")]
PartsPerMillion = Annotated[float, Unit("ppm")]
Percent = Annotated[float, Unit("%")]
Fraction = Annotated[float, Unit("1")]
Days = Annotated[float, Unit("days")]
Mebibytes = Annotated[float, Unit("MiB")]
