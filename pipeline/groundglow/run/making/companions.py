"""What stands beside the layers of a scene: last of all the STAC Item with the provenance."""

from __future__ import annotations

import platform
from collections.abc import Mapping
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

import rasterio

from groundglow import __version__
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.layer_format import codec_versions
from groundglow.layers.stac import SceneRecord, scene_item, write_item
from groundglow.layers.stac_assets import FileAsset, file_asset
from groundglow.layers.styles import write_styles
from groundglow.run.making.outcome import SceneOutcome
from groundglow.run.placing.catalogue import linked
from groundglow.run.planning.fingerprint import SceneFingerprint
from groundglow.run.planning.plan import ScenePlan

_QGIS_STYLE = "application/xml"
_SE_STYLE = "application/vnd.ogc.se+xml"
# What the preview shows: the first of these that is written.
_SHOWN = ("surface_temperature", "brightness_temperature", "emitted_flux", "net_longwave_flux")

_LINEAGE = (
    "Sensor counts to spectral radiance; Planck inversion through the band's spectral response; emissivity; "
    "inversion of the radiative transfer equation with the air's transmittance, path radiance and sky radiance; "
    "longwave flux from the broadband emissivity."
)


def item_name(scene: str) -> str:
    """File name of a scene's Item."""
    return f"{scene}.json"


def write_companions(
    plan: ScenePlan,
    folder: Path,
    summaries: Mapping[str, LayerSummary],
    outcome: SceneOutcome,
    fingerprint: SceneFingerprint,
    *,
    durable: bool = False,
) -> None:
    """Write what a reader sees besides the layers, and the Item last.

    Parameters
    ----------
    plan : ScenePlan
    folder : Path
        Where the layers are.
    summaries : mapping of str to LayerSummary
    outcome : SceneOutcome
    fingerprint : SceneFingerprint
        Of everything that decides the result.
    durable : bool
        Whether to wait until the Item has reached the disk.

    Raises
    ------
    OutputError
        If a file cannot be written.
    """
    files = _styles(plan, summaries) + _preview(plan, folder, summaries)
    item = scene_item(_record(plan, outcome, fingerprint), list(summaries.values()), files)
    write_item(folder / item_name(plan.name), linked(item), durable=durable)


def software() -> dict[str, str]:
    """Versions of everything that decides a result."""
    return {
        "groundglow": __version__,
        "python": platform.python_version(),
        "gdal": rasterio.__gdal_version__,
        **{name: version(name) for name in ("rasterio", "numpy", "numba")},
        **codec_versions(),
    }


def _styles(plan: ScenePlan, summaries: Mapping[str, LayerSummary]) -> list[FileAsset]:
    """The two style files of each layer."""
    found = []
    for name, summary in summaries.items():
        qgis, map_server = write_styles(summary, plan.temperature_unit)
        title = f"Style of {name}"
        found.append(file_asset(qgis, f"{name}_qgis_style", f"{title}, for QGIS", _QGIS_STYLE, ("style",)))
        found.append(
            file_asset(map_server, f"{name}_map_server_style", f"{title}, SE 1.1", _SE_STYLE, ("style",))
        )
    return found


def _preview(plan: ScenePlan, folder: Path, summaries: Mapping[str, LayerSummary]) -> list[FileAsset]:
    """A picture of the first layer that shows temperature or flux."""
    shown = next((summaries[name] for name in _SHOWN if name in summaries), None)
    if not plan.preview or shown is None:
        return []
    from groundglow.layers.preview import PreviewText, write_preview  # noqa: PLC0415  (loads Pillow)

    text = PreviewText(title=plan.name, acquired=plan.scene.acquired)
    picture = write_preview(folder / "preview.png", shown, plan.work.grid, text, plan.temperature_unit)
    return [
        file_asset(picture, "preview", f"Picture of {shown.name}", "image/png", ("overview", "thumbnail"))
    ]


def _record(plan: ScenePlan, outcome: SceneOutcome, fingerprint: SceneFingerprint) -> SceneRecord:
    scene = plan.scene
    angle = scene.view_zenith_angle
    return SceneRecord(
        name=scene.name,
        acquired=scene.acquired,
        processed=datetime.now(UTC).replace(microsecond=0),
        grid=plan.work.grid,
        title=f"Surface temperature and emitted flux, {scene.name}",
        description=f"Made by Groundglow from a scene of {scene.sensor.title}.",
        software=software(),
        lineage=_LINEAGE,
        provenance={
            "status": outcome.status,
            "valid_percent": outcome.valid_percent,
            "fingerprint": fingerprint.digest,
            "inputs": [one.as_json() for one in fingerprint.inputs],
            "configuration": fingerprint.configuration,
            "method": dict(plan.method),
            "uncertainty_budget": dict(outcome.uncertainty),
            "sensor": {"name": scene.sensor.name, "source": scene.sensor.source},
            "notes": list(outcome.notes),
        },
        sensor=scene.sensor.name,
        native_footprint=scene.sensor.native_footprint,
        view_zenith_angle=angle if isinstance(angle, float) else None,
        sun_elevation=scene.sun_elevation,
    )
