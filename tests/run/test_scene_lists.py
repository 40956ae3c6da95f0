"""The scenes a job names: patterns, Items, ItemCollections, static catalogues; by date, area and cloud cover."""

from __future__ import annotations

import functools
import http.server
import io
import json
import threading
import tracemalloc
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from command_line import groundglow
from groundglow.documents import checked
from groundglow.errors import ConfigError, InputError
from groundglow.run.batch_entry import SceneEntry
from groundglow.run.batch_json import top_members
from groundglow.run.batch_lists import linked_address, wanted_scenes
from groundglow.run.batch_select import left_out, overlap
from groundglow.run.config import Job
from groundglow.run.config_batch import Select
from night import paint_night, write_job

MINIMAL = {
    "output": "maps",
    "emissivity": {"source": "constant", "value": 0.97},
    "atmosphere": {"source": "none"},
    "layers": {"write": ["brightness_temperature"]},
}


def addresses(folder: Path, *scenes: str, **select: Any) -> list[str]:
    job = checked(Job, MINIMAL | {"scenes": list(scenes), "select": select}, where="job.toml")
    return [entry.address.removeprefix(f"{folder}/") for entry in wanted_scenes(job, folder)]


def item(name: str, day: int = 1, cover: float | None = 10.0, west: float = 14.0) -> dict[str, Any]:
    properties: dict[str, Any] = {"datetime": f"2026-07-{day:02d}T10:00:00Z"}
    if cover is not None:
        properties["eo:cloud_cover"] = cover
    return {
        "type": "Feature", "stac_version": "1.1.0", "id": name, "properties": properties, "links": [],
        "bbox": [west, 48.0, west + 1.0, 49.0], "geometry": None, "assets": {},
    }  # fmt: skip


def write(path: Path, document: object) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(json.dumps(document), encoding="utf-8")


@pytest.fixture
def catalogue(tmp_path: Path) -> Path:
    """A static catalogue: a collection with one Item of its own and a child with two."""
    links = [
        {"rel": "self", "href": "https://example.com/elsewhere.json"},
        {"rel": "child", "href": "./july/catalog.json"},
        {"rel": "item", "href": "alone/alone.json"},
    ]
    inner = [{"rel": "item", "href": f"{name}.json"} for name in ("one", "two")]
    inner.append({"rel": "parent", "href": "../collection.json"})
    write(
        tmp_path / "collection.json",
        {"type": "Collection", "stac_version": "1.1.0", "id": "a", "links": links},
    )
    write(
        tmp_path / "july" / "catalog.json",
        {"type": "Catalog", "stac_version": "1.1.0", "id": "b", "links": inner},
    )
    write(tmp_path / "alone" / "alone.json", item("alone", day=3))
    write(tmp_path / "july" / "one.json", item("one", day=10, cover=80.0))
    write(tmp_path / "july" / "two.json", item("two", day=20, cover=None, west=30.0))
    return tmp_path


@pytest.fixture
def server(catalogue: Path) -> Iterator[str]:
    class Handler(http.server.SimpleHTTPRequestHandler):
        def log_message(self, format: str, *args: object) -> None:
            """Say nothing."""

    handler = functools.partial(Handler, directory=str(catalogue))
    with http.server.ThreadingHTTPServer(("127.0.0.1", 0), handler) as served:
        thread = threading.Thread(target=served.serve_forever)
        thread.start()
        yield f"http://127.0.0.1:{served.server_port}"
        served.shutdown()
        thread.join()


class TestLists:
    def test_patterns_are_sorted_and_each_scene_comes_once(self, tmp_path: Path) -> None:
        for name in ("b", "a", "c"):
            (tmp_path / name).mkdir()
            (tmp_path / name / "scene.toml").touch()
        found = addresses(tmp_path, "c/scene.toml", "*/scene.toml", "a/scene.toml")
        assert found == ["c/scene.toml", "a/scene.toml", "b/scene.toml"]

    def test_a_name_that_meets_nothing(self, tmp_path: Path) -> None:
        with pytest.raises(ConfigError, match="night"):
            addresses(tmp_path, "night-*.toml")

    def test_folders_and_archives_pass_as_they_are(self, tmp_path: Path) -> None:
        (tmp_path / "LC08_x").mkdir()
        (tmp_path / "LC08_y.tar").touch()
        assert addresses(tmp_path, "LC08_*") == ["LC08_x", "LC08_y.tar"]

    def test_an_item_collection(self, tmp_path: Path) -> None:
        write(tmp_path / "found.json", {"type": "FeatureCollection", "features": [item("one"), item("two")]})
        assert addresses(tmp_path, "found.json") == ["found.json#one", "found.json#two"]

    def test_a_static_catalogue(self, catalogue: Path) -> None:
        found = addresses(catalogue, "collection.json")
        assert found == ["alone/alone.json", "july/one.json", "july/two.json"]

    def test_a_static_catalogue_over_http(self, server: str, tmp_path: Path) -> None:
        found = addresses(tmp_path, f"{server}/collection.json")
        assert found == [f"{server}/{path}.json" for path in ("alone/alone", "july/one", "july/two")]

    def test_an_item_collection_over_http(self, server: str, catalogue: Path) -> None:
        write(catalogue / "found.json", {"type": "FeatureCollection", "features": [item("one")]})
        assert addresses(catalogue, f"{server}/found.json") == [f"{server}/found.json#one"]

    def test_catalogues_that_lead_in_circles_end(self, tmp_path: Path) -> None:
        links = [{"rel": "child", "href": "collection.json"}]
        write(tmp_path / "collection.json", {"type": "Catalog", "links": links})
        with pytest.raises(InputError, match="catalogues deep"):
            addresses(tmp_path, "collection.json")

    @pytest.mark.parametrize(
        "href",
        [
            "file:///etc/passwd",
            "ftp://example.com/item.json",
            "gopher://example.com/",
            "s3://bucket/item.json",
        ],
    )
    def test_links_from_the_network_stay_in_it(self, href: str) -> None:
        with pytest.raises(InputError, match="not followed"):
            linked_address(href, "https://example.com/collection.json")

    @pytest.mark.parametrize(
        ("text", "fault"),
        [
            ('{"type": "FeatureCollection", "features": [', "not valid JSON"),
            ('{"type": "FeatureCollection", "features": [1, 2]}', "no Items"),
            ('{"type": "Catalog"}', "without links"),
            ('{"type": "FeatureCollection", "features": [{]}', "not valid JSON"),
        ],
    )
    def test_lists_out_of_shape(self, tmp_path: Path, text: str, fault: str) -> None:
        (tmp_path / "list.json").write_text(text)
        with pytest.raises(InputError, match=fault):
            addresses(tmp_path, "list.json")

    def test_a_long_list_is_never_in_memory_as_a_whole(self, tmp_path: Path) -> None:
        path = tmp_path / "long.json"
        with path.open("w") as stream:
            stream.write('{"type": "FeatureCollection", "features": [')
            stream.write(",".join(json.dumps(item(f"item-{number}")) for number in range(20_000)))
            stream.write('], "numberMatched": 20000}')
        assert path.stat().st_size > 4_000_000
        job = checked(Job, MINIMAL | {"scenes": ["long.json"]}, where="job.toml")
        tracemalloc.start()
        count = sum(1 for _ in wanted_scenes(job, tmp_path))
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        assert count == 20_000
        # 20,000 addresses seen, 0.1 kB each, and a window of some hundred kilobytes.
        assert peak < 6_000_000


@pytest.mark.parametrize("piece", [1, 7, 1 << 18])
def test_members_are_those_of_the_whole_document(piece: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("groundglow.run.batch_json._PIECE", piece)
    document = {
        "a": 123456,
        "features": [1.5e10, {"x": ["]", '"', "é"]}, [], "t"],
        "z": {"features": [1]},
        "e": [],
    }
    text = json.dumps(document, indent=1)
    found: dict[str, Any] = {"features": []}
    for key, value in top_members(io.StringIO(text), spread="features"):
        if key == "features":
            found[key].append(value)
        else:
            found[key] = value
    assert found == document
    assert list(top_members(io.StringIO(" {} "), spread="features")) == []


class TestSelect:
    @pytest.mark.parametrize(
        ("select", "left"),
        [
            ({"since": "2026-07-03"}, {"alone", "one", "two"}),
            ({"since": "2026-07-04"}, {"one", "two"}),
            ({"until": "2026-07-10"}, {"alone", "one"}),
            ({"until": "2026-07-10T09:59:59Z"}, {"alone"}),
            ({"since": "2026-07-10T12:00:00+02:00", "until": "2026-07-10T12:00:00+02:00"}, {"one"}),
            ({"cloud_cover_below": 50.0}, {"alone", "two"}),
            ({"bbox": [29.0, 40.0, 31.0, 50.0]}, {"two"}),
            ({"bbox": [170.0, 40.0, 14.5, 50.0]}, {"alone", "one"}),
            ({"bbox": [0.0, 0.0, 1.0, 1.0]}, set()),
        ],
    )
    def test_scenes_by_date_area_and_cloud_cover(
        self, catalogue: Path, select: dict[str, Any], left: set[str]
    ) -> None:
        found = addresses(catalogue, "collection.json", **select)
        assert {Path(address).stem for address in found} == left

    def test_what_a_scene_does_not_say_leaves_it_in(self) -> None:
        select = Select(
            cloud_cover_below=5.0, bbox=(0.0, 0.0, 1.0, 1.0), since=datetime(2026, 1, 1, tzinfo=UTC)
        )
        assert left_out(select, SceneEntry("scene.toml")) is None

    def test_scene_files_say_date_and_place_when_opened(self, tmp_path: Path) -> None:
        job = paint_night(tmp_path, ("first",))
        # Painted on 14 July 2026 near 13.8 degrees east, 48.2 degrees north.
        for select, status in (
            ("since = 2026-07-15", "left out"),
            ("until = 2026-07-13", "left out"),
            ("bbox = [20, 40, 21, 50]", "left out"),
            ("since = 2026-07-14\nuntil = 2026-07-14\nbbox = [13, 48, 15, 49]", "done"),
        ):
            write_job(tmp_path, f"[select]\n{select}\n")
            finished = groundglow("run", job, "--json", "--quiet")
            assert finished.code == 0
            assert [scene["status"] for scene in json.loads(finished.out)["scenes"]] == [status]

    @pytest.mark.parametrize(
        ("select", "fault"),
        [
            ("since = 2026-07-14T10:00:00", "UTC"),
            ("since = 2026-07-14\nuntil = 2026-07-13", "before"),
            ("bbox = [13, 49, 15, 48]", "south"),
            ("bbox = [13, 49, 15]", "bbox"),
            ("bbox = [13, 49, 15, 95]", "90"),
            ("cloud_cover_below = 120", "100"),
            ("clouds = 20", "cloud_cover_below"),
        ],
    )
    def test_selections_that_make_no_sense(self, tmp_path: Path, select: str, fault: str) -> None:
        (tmp_path / "scene.toml").touch()
        job = write_job(tmp_path, f"[select]\n{select}\n", scenes="scene.toml")
        finished = groundglow("run", job)
        assert finished.code == 2
        assert "select" in finished.err
        assert fault in finished.err

    def test_boxes_overlap_by_area(self) -> None:
        assert overlap((0, 0, 2, 2), (1, 1, 3, 3))
        assert not overlap((0, 0, 1, 1), (1, 0, 2, 1))
        assert overlap((170, 0, -170, 1), (-175, 0, -172, 1))
        assert not overlap((170, 0, -170, 1), (-169, 0, 169, 1))
