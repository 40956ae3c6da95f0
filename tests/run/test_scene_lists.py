"""The scenes a job names: patterns, Items, ItemCollections, static catalogues; by date, area and cloud cover."""

from __future__ import annotations

import io
import json
import shutil
import subprocess
import sys
import tracemalloc
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from command_line import groundglow
from groundglow.documents import checked
from groundglow.errors import ConfigError, InputError
from groundglow.run.batch.entry import SceneEntry
from groundglow.run.batch.json_lists import top_members
from groundglow.run.batch.lists import linked_address, wanted_scenes
from groundglow.run.batch.select import left_out, overlap
from groundglow.run.config.batch import Select
from groundglow.run.config.job import Job
from invented_scene import paint_scene
from night import layer_digests, paint_night, settle, write_job

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


# A server in a process of its own (GDAL may wait for it while it holds this process), which gives parts of files.
SERVER = """
import functools, http.server, pathlib, re, sys

class Handler(http.server.SimpleHTTPRequestHandler):
    def do_GET(self):
        path, wanted = pathlib.Path(self.translate_path(self.path)), self.headers.get("Range")
        if wanted is None or not path.is_file():
            return super().do_GET()
        data = path.read_bytes()
        first, last = (int(part) for part in re.fullmatch(r"bytes=([0-9]+)-([0-9]+)", wanted).groups())
        part = data[first : last + 1]
        self.send_response(206 if part else 416)
        self.send_header("Content-Range", f"bytes {first}-{first + len(part) - 1}/{len(data)}")
        self.send_header("Content-Length", str(len(part)))
        self.end_headers()
        self.wfile.write(part)

    def log_message(self, *arguments):
        pass

handler = functools.partial(Handler, directory=sys.argv[1])
with http.server.ThreadingHTTPServer(("127.0.0.1", 0), handler) as served:
    print(served.server_port, flush=True)
    served.serve_forever()
"""


@pytest.fixture
def server(catalogue: Path) -> Iterator[str]:
    command = [sys.executable, "-c", SERVER, str(catalogue)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as process:
        assert process.stdout is not None
        yield f"http://127.0.0.1:{int(process.stdout.readline())}"
        process.kill()


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
    monkeypatch.setattr("groundglow.run.batch.json_lists._PIECE", piece)
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


BRIGHTNESS = """
scenes = "{scenes}"
output = "{output}"
[emissivity]
source = "constant"
value = 0.97
[atmosphere]
source = "none"
[layers]
write = ["brightness_temperature"]
[retry]
delay = 0.01
"""


class TestLandsatItems:
    """Lists of Items from the list to the maps."""

    @pytest.fixture
    def landsat(self, catalogue: Path) -> Path:
        """The catalogue's Items with a thermal band each."""
        painted = paint_scene(catalogue / "painted", 60, 70)
        for path in (*catalogue.glob("july/[ot]*.json"), catalogue / "alone" / "alone.json"):
            document = json.loads(path.read_text())
            document["properties"] |= {"platform": "landsat-9", "instruments": ["tirs"]}
            band = {"unit": "W m-2 sr-1 um-1", "nodata": 0, "data_type": "uint16", "raster:scale": 3e-4,
                    "raster:offset": 0.1, "eo:common_name": "lwir11"}  # fmt: skip
            document["assets"] = {"lwir11": {"href": f"{path.stem}.tif", "roles": ["data"], "bands": [band]}}
            write(path, document)
            shutil.copy(painted.folder / "thermal.tif", path.with_suffix(".tif"))
        settle(catalogue)
        return catalogue

    def run(self, folder: Path, scenes: str, output: Path) -> dict[str, str]:
        job = folder / "job.toml"
        job.write_text(BRIGHTNESS.format(scenes=scenes, output=output))
        finished = groundglow("run", job, "--json", "--quiet")
        assert finished.code == 0, finished.err
        return {scene["name"]: scene["status"] for scene in json.loads(finished.out)["scenes"]}

    def test_the_same_maps_from_every_kind_of_list(self, landsat: Path, server: str, tmp_path: Path) -> None:
        done = dict.fromkeys(("alone", "one", "two"), "done")
        items = [json.loads((landsat / path).read_text()) for path in ("alone/alone.json", "july/one.json")]
        items.append(json.loads((landsat / "july" / "two.json").read_text()))
        for one, folder in zip(items, ("alone", "july", "july"), strict=True):
            one["assets"]["lwir11"]["href"] = f"{folder}/{one['id']}.tif"
        write(landsat / "found.json", {"type": "FeatureCollection", "features": items})
        kinds = {
            "items": "*/*one.json",
            "catalogue": "collection.json",
            "collection": "found.json",
            "network": f"{server}/collection.json",
        }
        digests = {}
        for kind, scenes in kinds.items():
            found = self.run(landsat, scenes, tmp_path / kind)
            assert found == {
                name: status for name, status in done.items() if kind != "items" or name != "two"
            }
            digests[kind] = layer_digests(tmp_path / kind)
            assert set(self.run(landsat, scenes, tmp_path / kind).values()) == {"up to date"}
        assert digests["catalogue"] == digests["collection"] == digests["network"]
        assert digests["items"].items() < digests["catalogue"].items()

    def test_an_item_that_changes_within_its_list_is_made_again(self, landsat: Path, tmp_path: Path) -> None:
        items = [json.loads((landsat / path).read_text()) for path in ("alone/alone.json", "july/one.json")]
        for one, folder in zip(items, ("alone", "july"), strict=True):
            one["assets"]["lwir11"]["href"] = f"{folder}/{one['id']}.tif"
        write(landsat / "found.json", {"type": "FeatureCollection", "features": items})
        self.run(landsat, "found.json", tmp_path / "maps")
        items[1]["assets"]["lwir11"]["bands"][0]["raster:offset"] = 0.2
        write(landsat / "found.json", {"type": "FeatureCollection", "features": items})
        assert self.run(landsat, "found.json", tmp_path / "maps") == {"alone": "up to date", "one": "done"}
