"""The model atmospheres as the LOWTRAN 7 reference runs had them, and readers of the reference tables."""

from __future__ import annotations

import csv
from functools import cache
from pathlib import Path

import numpy as np

from groundglow.atmosphere.composition import AS_TABULATED, Composition, composed
from groundglow.atmosphere.model_atmospheres import MODEL_ATMOSPHERES, model_atmosphere
from groundglow.atmosphere.node_solver import Bands
from groundglow.atmosphere.profile import Profile
from groundglow.physics.spectral_response import SpectralResponse
from groundglow.scene.sensor import load_sensor

REFERENCES = Path(__file__).resolve().parents[1] / "references"
# The levels of the reference runs. [m]
REFERENCE_LEVELS = 1000.0 * np.array(
    [0, 0.01, 0.04, 0.1, 0.2, 0.35, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 4, 5, 6, 7, 8, 9, 10,
     12, 14, 16, 18, 20, 22, 25, 30, 35, 40, 45, 50, 70, 100]
)  # fmt: skip
# Without the halocarbons and minor gases that line-based comparisons leave out.
PLAIN = Composition(None, None, None, 0.0, 0.0, 0.0, minor_gases=False)
SENSOR_BANDS = {
    "L9_B10": ("landsat-9", "10"),
    "L9_B11": ("landsat-9", "11"),
    "ASTER_10": ("aster", "10"),
    "ASTER_13": ("aster", "13"),
}
VERTICAL = np.ones(1)


def read_reference(name: str) -> list[dict[str, str]]:
    """Rows of a reference table, without its leading comment."""
    lines = (REFERENCES / name).read_text().splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


@cache
def air(name: str, composition: Composition = AS_TABULATED) -> Profile:
    """A model atmosphere with the gases that take part."""
    return composed(model_atmosphere(name), composition)


@cache
def response(band: str) -> SpectralResponse:
    """Measured response of a band of the reference table."""
    sensor, number = SENSOR_BANDS[band]
    return load_sensor(sensor).bands[number].response


@cache
def reference_bands(absorption: str) -> Bands:
    """The four bands of the reference table."""
    return Bands.of({band: response(band) for band in SENSOR_BANDS}, absorption)


ALL = MODEL_ATMOSPHERES
