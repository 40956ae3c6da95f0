"""Where the sensor is: in space, a height above the ground, or a height above sea level."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from groundglow.errors import DomainError

# Above this there is no air that a thermal band would see.
TOP_OF_THE_AIR = 90e3  # m


@dataclass(frozen=True)
class SensorHeight:
    """Height of the sensor.

    Attributes
    ----------
    above : "space", "ground" or "sea"
        What the height is counted from; "space" needs none.
    height : float
        [m]
    """

    above: Literal["space", "ground", "sea"] = "space"
    height: float = np.inf

    def __post_init__(self) -> None:
        if self.above not in ("space", "ground", "sea"):
            raise DomainError(f"a sensor is in space or above ground or sea, not above {self.above!r}")
        if self.above == "ground" and not self.height > 0.0:
            raise DomainError(f"a sensor {self.height:g} m above the ground is not above it")
        if self.above != "space" and not np.isfinite(self.height):
            raise DomainError("the sensor's height must be a number")

    def above_sea(self, ground: float) -> float | None:
        """Height above sea level over ground of this height; None in space. [m].

        Raises
        ------
        DomainError
            If the sensor is not above the ground.
        """
        if self.above == "space":
            return None
        sensor = self.height + (ground if self.above == "ground" else 0.0)
        if not sensor > ground:
            raise DomainError(
                f"the sensor at {sensor:g} m above sea level is not above the ground at {ground:g} m",
                remedy="Give the flying height above the ground, or correct the elevation.",
            )
        return None if sensor >= TOP_OF_THE_AIR else sensor


SPACE = SensorHeight()
