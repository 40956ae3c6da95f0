"""From the job's atmosphere table to the water-vapour method: coefficients and the column."""

from __future__ import annotations

from groundglow.errors import ConfigError
from groundglow.retrieval.chain_water_vapour import WaterVapourSettings
from groundglow.retrieval.single_channel_water_vapour import (
    GREATEST_WATER_VAPOUR,
    LEAST_WATER_VAPOUR,
    REFUSED_WATER_VAPOUR,
    coefficients,
)
from groundglow.run.blocks.column import ColumnWork
from groundglow.run.config.atmosphere import Atmosphere, ColumnAtmosphere
from groundglow.scene.model import Scene


def column_of_job(atmosphere: Atmosphere, scene: Scene) -> ColumnWork | None:
    """What the water-vapour method needs; None where the job uses another one.

    Raises
    ------
    ConfigError
        If nobody states the column, or no coefficients are published for the sensor.
    """
    if not isinstance(atmosphere, ColumnAtmosphere):
        return None
    water = (
        atmosphere.column_water_vapour if atmosphere.column_water_vapour is not None else scene.water_vapour
    )
    if water is None:
        raise ConfigError(
            f"neither the job nor the scene {scene.name} states the column water vapour",
            where="atmosphere.column_water_vapour",
            remedy="Set it here (kg m-2), or add water_vapour to the scene file (a number or a raster)",
        )
    fit = coefficients(atmosphere.coefficients or scene.sensor.name)
    return ColumnWork(water, WaterVapourSettings(fit.packed(), atmosphere.uncertainty))


def column_account(atmosphere: Atmosphere, column: ColumnWork) -> dict[str, object]:
    """What was done, for the provenance."""
    assert isinstance(atmosphere, ColumnAtmosphere)  # only then is there a column
    stated = isinstance(column.water, float)
    return {
        "source": "column",
        "column_water_vapour": column.water if stated else "raster of the scene",
        "uncertainty": atmosphere.uncertainty,
        "flagged_outside": [LEAST_WATER_VAPOUR, GREATEST_WATER_VAPOUR],
        "refused_above": REFUSED_WATER_VAPOUR,
    }
