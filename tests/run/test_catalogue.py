"""The outputs are a static STAC collection that any client can browse, whole at every moment."""

from __future__ import annotations

import json
import shutil
from pathlib import Path
from typing import Any

import pystac
import pytest
from pystac.validation.stac_validator import JsonSchemaSTACValidator

from command_line import groundglow
from groundglow.run.placing.catalogue import Catalogue, union
from groundglow.run.placing.place import LocalPlace
from night import NAMES, paint_night

SCHEMAS = Path(__file__).parent.parent / "references" / "stac_schemas"


@pytest.fixture(scope="module")
def made_once(tmp_path_factory: pytest.TempPathFactory) -> Path:
    job = paint_night(tmp_path_factory.mktemp("night"))
    assert groundglow("run", job, "--quiet").code == 0
    return job.parent / "maps"


@pytest.fixture
def maps(made_once: Path, tmp_path: Path) -> Path:
    return Path(shutil.copytree(made_once, tmp_path / "maps"))


def validator() -> JsonSchemaSTACValidator:
    """With the schemas of every extension, so that no network is needed."""
    found = JsonSchemaSTACValidator()
    for path in SCHEMAS.glob("*.json"):
        schema = json.loads(path.read_text())
        found.schema_cache[schema["$id"].removesuffix("#")] = schema
    found.schema_cache["https://proj.org/schemas/v0.7/projjson.schema.json"] = {
        "$schema": "http://json-schema.org/draft-07/schema#"
    }
    return found


def validate_item(item: dict[str, Any]) -> None:
    """As an Item and by its extensions; of classification the schema of the version before is at hand."""
    found, kind = validator(), pystac.STACObjectType.ITEM
    found.validate_core(item, kind, "1.1.0")
    uris = [uri.replace("classification/v2.0.0", "classification/v1.1.0") for uri in item["stac_extensions"]]
    for uri in uris:
        found.validate_extension(item | {"stac_extensions": uris}, kind, "1.1.0", uri)


def listed(maps: Path) -> list[str]:
    collection = json.loads((maps / "collection.json").read_text())
    return [link["title"] for link in collection["links"] if link["rel"] == "item"]


def test_a_client_reads_the_season(maps: Path) -> None:
    # pystac is the reference implementation of the STAC specification in Python.
    collection = pystac.Collection.from_file(str(maps / "collection.json"))
    assert sorted(item.id for item in collection.get_items()) == sorted(NAMES)
    collection.validate(validator=validator())
    for item in collection.get_items():
        assert item.get_collection() is collection
        validate_item(item.to_dict())
        for asset in item.assets.values():
            assert Path(asset.get_absolute_href() or "").is_file()
    boxes = [item.bbox for item in collection.get_items() if item.bbox is not None]
    assert collection.extent.spatial.bboxes == [boxes[0]]
    assert "surface_temperature" in collection.item_assets


def test_it_grows_with_each_scene(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    job = paint_night(tmp_path)
    seen: list[int] = []
    sound = Catalogue.add

    def add(self: Catalogue, name: str) -> None:
        sound(self, name)
        # However long writing took on this machine, the next line is about its content.
        self.write(always=True)
        seen.append(len(listed(tmp_path / "maps")))

    monkeypatch.setattr(Catalogue, "add", add)
    assert groundglow("run", job, "--quiet").code == 0
    assert seen == [1, 2, 3]


def test_it_is_made_anew_from_the_folders(maps: Path) -> None:
    before = (maps / "collection.json").read_bytes()
    (maps / "collection.json").write_bytes(before[:100])
    finished = groundglow("catalogue", maps)
    assert finished.code == 0
    assert "3 scenes" in finished.out
    assert (maps / "collection.json").read_bytes() == before


def test_folders_that_went_away_are_noticed(maps: Path) -> None:
    shutil.rmtree(maps / "second")
    Catalogue(LocalPlace(maps)).refresh()
    assert listed(maps) == ["first", "third"]


def test_a_folder_that_is_no_output(tmp_path: Path) -> None:
    finished = groundglow("catalogue", tmp_path / "nowhere")
    assert finished.code == 3
    assert "no such folder" in finished.err
    assert not (tmp_path / "nowhere").exists()


@pytest.mark.parametrize(
    ("first", "second", "around"),
    [
        ([10, 40, 12, 42], [11, 41, 14, 43], [10, 40, 14, 43]),
        ([170, 0, 175, 1], [-178, 0, -170, 1], [170, 0, -170, 1]),
        ([175, -5, -175, 5], [-176, -9, -160, 0], [175, -9, -160, 5]),
        ([-180, -90, 180, 90], [5, 5, 6, 6], [-180, -90, 180, 90]),
        ([5, 5, 6, 6], [5, 5, 6, 6], [5, 5, 6, 6]),
    ],
)
def test_the_box_around_boxes_is_the_smallest(first: list[Any], second: list[Any], around: list[Any]) -> None:
    # RFC 7946 section 5.2: west is the larger number where a box spans the antimeridian.
    assert union(first, second) == around
    assert union(second, first) == around
