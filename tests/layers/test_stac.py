"""The Item of a scene is valid, complete, and says the same as the files it describes."""

from __future__ import annotations

import copy
import hashlib
import json
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path
from typing import Any

import numpy as np
import pystac
import pytest
from affine import Affine
from pystac.validation.stac_validator import JsonSchemaSTACValidator
from rasterio.crs import CRS

from groundglow.errors import DomainError, OutputError
from groundglow.layers.cautions import CAUTIONS
from groundglow.layers.geotiff import LayerSummary
from groundglow.layers.layer_format import format_of
from groundglow.layers.stac import CLASSIFICATION, SceneRecord, file_asset, scene_item, write_item
from groundglow.quantities import FLAGS
from groundglow.raster.grid import Grid
from layers.layer_cases import grid_of, quality, temperature, write_layer

SCHEMAS = Path(__file__).parent.parent / "references" / "stac_schemas"
CUSTOM = "+proj=aea +lat_1=29 +lat_2=45 +lon_0=-96"
PICTURE = ("thumbnail", "overview")


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("scene")


@pytest.fixture(scope="module")
def layers(folder: Path) -> list[LayerSummary]:
    pixels = temperature(600, 700)
    return [
        write_layer(folder / "surface_temperature.tif", pixels),
        write_layer(
            folder / "surface_temperature_uncertainty.tif",
            np.abs(pixels - 299),
            format_of("surface_temperature_uncertainty"),
        ),
        write_layer(folder / "quality.tif", quality(600, 700)),
    ]


@pytest.fixture
def record() -> SceneRecord:
    return SceneRecord(
        name="ember-20260714",
        acquired=datetime(2026, 7, 14, 10, 32, tzinfo=timezone(timedelta(hours=2))),
        processed=datetime(2026, 7, 15, 1, 2, 3, tzinfo=UTC),
        grid=grid_of(600, 700),
        title="Surface temperature, 14 July 2026",
        description="An invented district on a summer morning.",
        software={"Groundglow": "0.1.0", "zstd": "1.5.7"},
        lineage="Single-channel inversion with typed-in air.",
        provenance={"inputs": [{"href": "thermal.tif", "sha256": "00" * 32}], "config": {"emissivity": 0.97}},
        sensor="ember-two-band",
        native_footprint=90.0,
        view_zenith_angle=4.0,
        sun_elevation=-12.0,
    )


def validate(item: dict[str, Any]) -> None:
    """Against the core schemas and those of every extension, without a network."""
    validator = JsonSchemaSTACValidator()
    for path in SCHEMAS.glob("*.json"):
        schema = json.loads(path.read_text())
        validator.schema_cache[schema["$id"].removesuffix("#")] = schema
    # Refers to a schema for a field that our Items do not have.
    validator.schema_cache["https://proj.org/schemas/v0.7/projjson.schema.json"] = {
        "$schema": "http://json-schema.org/draft-07/schema#"
    }
    checked = copy.deepcopy(item)
    older = CLASSIFICATION.replace("v2.0.0", "v1.1.0")
    checked["stac_extensions"] = [
        older if uri == CLASSIFICATION else uri for uri in checked["stac_extensions"]
    ]
    kind = pystac.STACObjectType.ITEM
    validator.validate_core(checked, kind, "1.1.0")
    for uri in checked["stac_extensions"]:
        validator.validate_extension(checked, kind, "1.1.0", uri)


def test_it_is_valid_against_core_and_extensions(record: SceneRecord, layers: list[LayerSummary]) -> None:
    item = scene_item(record, layers)
    assert item["stac_version"] == "1.1.0"
    assert len(item["stac_extensions"]) == 6
    validate(item)


@pytest.mark.parametrize(
    ("place", "value"),
    [
        (("properties", "proj:shape"), [1]),
        (("properties", "view:sun_elevation"), 100),
        (("properties", "processing:datetime"), "yesterday"),
        (("properties", "datetime"), "2026-07-14"),
        (("assets", "quality", "classification:bitfields"), []),
        (("assets", "quality", "file:checksum"), "XYZ"),
        (("assets", "quality", "bands", 0, "raster:sampling"), "line"),
        (("assets", "surface_temperature", "bands", 0, "nodata"), "none"),
    ],
)
def test_the_validation_of_these_tests_can_fail(
    record: SceneRecord, layers: list[LayerSummary], place: tuple[Any, ...], value: Any
) -> None:
    item: Any = scene_item(record, layers)
    inner = item
    for key in place[:-1]:
        inner = inner[key]
    inner[place[-1]] = value
    with pytest.raises(pystac.errors.STACValidationError):
        validate(item)


@pytest.mark.parametrize(
    "change",
    [
        {"view_zenith_angle": None, "sun_elevation": None},
        {"native_footprint": None},
        {"platform": "drone 7"},
        {"more": {"groundglow:status": "nothing valid"}},
        {"grid": Grid(CRS.from_string(CUSTOM), Affine(30, 0, 0, 0, -30, 0), 9, 9)},
        {"grid": Grid(CRS.from_epsg(4326), Affine(0.001, 0, 179.99, 0, -0.001, -16), 100, 100)},
    ],
)
def test_variants_are_valid(record: SceneRecord, layers: list[LayerSummary], change: dict[str, Any]) -> None:
    item = scene_item(replace(record, **change), layers)
    validate(item)
    assert pystac.Item.from_dict(item).id == record.name


def test_an_item_without_anything_valid_is_valid(record: SceneRecord, tmp_path: Path) -> None:
    empty = write_layer(tmp_path / "surface_temperature.tif", np.full((20, 20), np.nan, np.float32))
    item = scene_item(record, [empty])
    validate(item)
    statistics = item["assets"]["surface_temperature"]["bands"][0]["statistics"]
    assert statistics == {"count": 400, "valid_percent": 0.0}


def test_times_are_in_utc(record: SceneRecord, layers: list[LayerSummary]) -> None:
    properties = scene_item(record, layers)["properties"]
    assert properties["datetime"] == "2026-07-14T08:32:00Z"
    assert properties["created"] == properties["processing:datetime"] == "2026-07-15T01:02:03Z"


def test_a_time_without_offset_is_refused(record: SceneRecord, layers: list[LayerSummary]) -> None:
    with pytest.raises(DomainError, match="no offset from UTC"):
        scene_item(replace(record, acquired=datetime(2026, 7, 14, 10, 32)), layers)


def test_place_is_that_of_the_grid(record: SceneRecord, layers: list[LayerSummary]) -> None:
    item = scene_item(record, layers)
    properties = item["properties"]
    assert properties["proj:code"] == "EPSG:32633"
    assert properties["proj:shape"] == [600, 700]
    assert properties["proj:transform"] == [30.0, 0.0, 512340.0, 0.0, -30.0, 5212350.0]
    assert properties["proj:bbox"] == [512340.0, 5194350.0, 533340.0, 5212350.0]
    assert item["geometry"]["type"] == "Polygon"


def test_layers_say_what_they_hold(record: SceneRecord, layers: list[LayerSummary], folder: Path) -> None:
    assets = scene_item(record, layers)["assets"]
    asset = assets["surface_temperature"]
    data = (folder / "surface_temperature.tif").read_bytes()
    assert asset["href"] == "./surface_temperature.tif"
    assert asset["type"] == "image/tiff; application=geotiff; profile=cloud-optimized"
    assert asset["file:size"] == len(data)
    # Multihash: function code 0x12 (SHA-256), length 0x20, then the digest.
    assert asset["file:checksum"] == "1220" + hashlib.sha256(data).hexdigest()
    (band,) = asset["bands"]
    found = layers[0].statistics
    assert band["unit"] == "K"
    assert band["nodata"] == "nan"
    assert band["data_type"] == "float32"
    assert band["raster:spatial_resolution"] == 30.0
    assert band["statistics"]["mean"] == found.mean
    assert band["statistics"]["valid_percent"] == found.valid_percent
    assert assets["surface_temperature_uncertainty"]["roles"] == ["data", "uncertainty"]
    assert assets["quality"]["roles"] == ["metadata", "data-mask"]
    assert "nodata" not in assets["quality"]["bands"][0]
    assert "statistics" not in assets["quality"]["bands"][0]


def test_every_flag_is_a_bit_field(record: SceneRecord, layers: list[LayerSummary]) -> None:
    fields = scene_item(record, layers)["assets"]["quality"]["classification:bitfields"]
    assert {(one["name"], 1 << one["offset"]) for one in fields} == {(flag.name, flag.mask) for flag in FLAGS}
    for one in fields:
        assert one["length"] == 1
        assert [entry["value"] for entry in one["classes"]] == [0, 1]
        # Version 2.0.0 of the extension requires a name of each class.
        assert all(entry["name"] for entry in one["classes"])


def test_cautions_and_provenance_are_in_it(record: SceneRecord, layers: list[LayerSummary]) -> None:
    properties = scene_item(record, layers)["properties"]
    assert properties["description"].startswith(record.description)
    assert all(caution in properties["description"] for caution in CAUTIONS)
    assert properties["groundglow:provenance"] == record.provenance
    assert properties["processing:software"]["Groundglow"] == "0.1.0"


def test_other_files_become_assets(record: SceneRecord, layers: list[LayerSummary], tmp_path: Path) -> None:
    (tmp_path / "preview.png").write_bytes(b"picture")
    picture = file_asset(
        tmp_path / "preview.png", "preview", "Preview", "image/png", ("thumbnail", "overview")
    )
    item = scene_item(record, layers, [picture])
    validate(item)
    assert item["assets"]["preview"] == {
        "href": "./preview.png",
        "type": "image/png",
        "title": "Preview",
        "roles": ["thumbnail", "overview"],
        "file:size": 7,
        "file:checksum": "1220" + hashlib.sha256(b"picture").hexdigest(),
    }


def test_two_items_differ_in_time_fields_only(record: SceneRecord, layers: list[LayerSummary]) -> None:
    first = scene_item(record, layers)
    second = scene_item(replace(record, processed=record.processed + timedelta(hours=1)), layers)
    assert first != second
    for item in (first, second):
        del item["properties"]["created"], item["properties"]["processing:datetime"]
    assert json.dumps(first) == json.dumps(second)


def test_writing_is_whole_or_not_at_all(
    record: SceneRecord, layers: list[LayerSummary], tmp_path: Path
) -> None:
    item = scene_item(record, layers)
    write_item(tmp_path / "item.json", item, durable=True)
    assert json.loads((tmp_path / "item.json").read_text(encoding="utf-8")) == item
    assert [path.name for path in tmp_path.iterdir()] == ["item.json"]
    with pytest.raises(OutputError, match="Create the folder first"):
        write_item(tmp_path / "absent" / "item.json", item)
    (tmp_path / "item.json").unlink()
    (tmp_path / "item.json").mkdir()
    with pytest.raises(OutputError, match="Is a directory"):
        write_item(tmp_path / "item.json", item)
    assert [path.name for path in tmp_path.iterdir()] == ["item.json"]
