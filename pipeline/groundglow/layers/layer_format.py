"""How one layer is stored: data type, kept precision, codec."""

from __future__ import annotations

import zlib
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import zstandard

from groundglow.errors import ConfigError
from groundglow.quantities import quantity

Compression = Literal["zstd", "deflate"]

# The fastest level of each codec: on layers with pixel noise the higher ones take twice the time and
# more for less than a tenth in size.
DEFAULT_LEVELS: dict[str, int] = {"zstd": 1, "deflate": 1}
HIGHEST_LEVELS: dict[str, int] = {"zstd": 22, "deflate": 9}


@dataclass(frozen=True)
class LayerFormat:
    """How one layer is stored.

    Attributes
    ----------
    name : str
        Name of the layer.
    dtype : str
        "float32" for numbers (NaN where there is none), "uint16" for flags.
    kept_bits : int
        Mantissa bits kept of the 23 of a float32; no effect on flags.
    compression : str
        "zstd", or "deflate" for older readers.
    level : int
        Level of the codec: 1 to 22 for zstd, 1 to 9 for deflate.

    Raises
    ------
    ConfigError
        If one of them is out of range.
    """

    name: str
    dtype: Literal["float32", "uint16"]
    kept_bits: int = 23
    compression: Compression = "zstd"
    level: int = 1

    def __post_init__(self) -> None:
        if self.dtype not in ("float32", "uint16"):
            raise ConfigError(f"a layer is stored as float32 or uint16, not {self.dtype}", where=self.name)
        if not 1 <= self.kept_bits <= 23:
            raise ConfigError(f"a float32 keeps 1 to 23 mantissa bits, not {self.kept_bits}", where=self.name)
        highest = HIGHEST_LEVELS.get(self.compression)
        if highest is None:
            raise ConfigError(
                f"there is no compression {self.compression!r}",
                where=self.name,
                remedy="Choose zstd or deflate",
            )
        if not 1 <= self.level <= highest:
            raise ConfigError(
                f"level {self.level} of {self.compression} does not exist",
                where=self.name,
                remedy=f"Choose 1 to {highest}",
            )

    @property
    def flags(self) -> bool:
        """Whether the layer holds flags."""
        return self.dtype == "uint16"


def format_of(name: str, compression: Compression = "zstd", level: int | None = None) -> LayerFormat:
    """Format of the final layer of a quantity.

    Parameters
    ----------
    name : str
        Name of the quantity; "quality" is stored as flags, all others as float32.
    compression : str
        "zstd" or "deflate".
    level : int, optional
        Level of the codec; its lowest if not given.

    Raises
    ------
    ConfigError
        If there is no such quantity, compression or level.
    """
    described = quantity(name)
    chosen = DEFAULT_LEVELS.get(compression, 1) if level is None else level
    dtype: Literal["float32", "uint16"] = "uint16" if name == "quality" else "float32"
    return LayerFormat(name, dtype, described.kept_bits, compression, chosen)


def codec(layer_format: LayerFormat) -> Callable[[memoryview], bytes]:
    """The compressor of a format, for one thread."""
    if layer_format.compression == "zstd":
        return zstandard.ZstdCompressor(level=layer_format.level).compress
    return lambda data: zlib.compress(data, layer_format.level)


def codec_versions() -> dict[str, str]:
    """Versions of the codec libraries, for the provenance of what was written."""
    return {
        "zstd": ".".join(str(part) for part in zstandard.ZSTD_VERSION),
        "zlib": zlib.ZLIB_RUNTIME_VERSION,
    }
