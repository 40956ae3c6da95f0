"""Inputs from and outputs to an object store, against a real S3-compatible server on this machine."""

from __future__ import annotations

import json
import os
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from command_line import groundglow
from groundglow.run.access.store_client import store_client
from groundglow.run.placing import store as publish_store
from groundglow.run.placing.store import StorePlace, place_at
from invented_scene import scene_text
from night import NAMES, layer_digests, paint_night, write_job

BUCKET = "s3://thermal"


@pytest.fixture(scope="module")
def server() -> Iterator[str]:
    """A server with one bucket; the environment leads GDAL and our client to it."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    command = [sys.executable, "-c", "import sys; from moto.server import main; main(sys.argv[1:])"]
    process = subprocess.Popen(
        [*command, "-H", "127.0.0.1", "-p", str(port)], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    with pytest.MonkeyPatch.context() as patch:
        for name, value in {
            "AWS_S3_ENDPOINT": f"127.0.0.1:{port}", "AWS_HTTPS": "NO", "AWS_VIRTUAL_HOSTING": "FALSE",
            "AWS_ACCESS_KEY_ID": "invented", "AWS_SECRET_ACCESS_KEY": "invented", "AWS_DEFAULT_REGION": "us-east-1",
        }.items():  # fmt: skip
            patch.setenv(name, value)
        store_client.cache_clear()
        wait_for(port)
        store_client().mkdir("thermal")
        yield f"127.0.0.1:{port}"
        store_client.cache_clear()
    process.terminate()
    process.wait(timeout=30)


def wait_for(port: int) -> None:
    limit = time.monotonic() + 60
    while True:
        try:
            socket.create_connection(("127.0.0.1", port), timeout=1).close()
            return
        except OSError:
            assert time.monotonic() < limit
            time.sleep(0.1)


@pytest.fixture(scope="module")
def night(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Scenes, and the bytes that a run on this machine gives."""
    job = paint_night(tmp_path_factory.mktemp("night"))
    assert groundglow("run", job, "--quiet").code == 0
    return job.parent


@pytest.fixture
def output(server: str, request: pytest.FixtureRequest) -> str:
    return f"{BUCKET}/{request.node.name.replace('[', '-').replace(']', '')}"


def run(folder: Path, output: str, *options: str, code: int = 0) -> dict[str, Any]:
    finished = groundglow("run", folder / "job.toml", "--output", output, "--json", "--quiet", *options)
    assert finished.code == code, finished.err
    report: dict[str, Any] = json.loads(finished.out)
    return report


def objects(output: str) -> list[str]:
    root = output.removeprefix("s3://")
    return sorted(path.removeprefix(f"{root}/") for path in store_client().find(root))


def fetched(output: str, folder: Path) -> dict[str, str]:
    """Digests of the layers in the store."""
    store_client().get(output.removeprefix("s3://"), str(folder), recursive=True)
    return layer_digests(folder)


def test_outputs_are_the_bytes_of_a_local_run(night: Path, output: str, tmp_path: Path) -> None:
    report = run(night, output)
    assert [scene["status"] for scene in report["scenes"]] == ["done"] * 3
    assert fetched(output, tmp_path / "all") == layer_digests(night / "maps")
    assert {"collection.json", ".groundglow/report.json", ".groundglow/log.jsonl"} <= set(objects(output))
    assert ".groundglow/lock" not in objects(output)
    again = run(night, output)
    assert [scene["status"] for scene in again["scenes"]] == ["up to date"] * 3
    listed = json.loads(store_client().cat_file(f"{output}/collection.json"))["links"]
    assert [link["title"] for link in listed if link["rel"] == "item"] == list(NAMES)


def test_an_interrupted_upload_leaves_nothing_visible(
    night: Path, output: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    client = store_client()
    sound = client.put_file

    def breaking(source: str, target: str, **options: Any) -> None:
        if target.endswith("second/quality.tif"):
            raise KeyboardInterrupt
        sound(source, target, **options)

    monkeypatch.setattr(client, "put_file", breaking)
    place = place_at(output)
    folder = place.building("second", "00aa")
    for path in (night / "maps" / "second").iterdir():
        (folder / path.name).write_bytes(path.read_bytes())
    with pytest.raises(KeyboardInterrupt):
        place.put("second", "00aa", durable=False)
    assert place.names() == []
    assert place.item("second") is None
    assert "second/emitted_flux.tif" in objects(output)
    monkeypatch.undo()
    os.environ.setdefault("AWS_DEFAULT_REGION", "us-east-1")
    assert {scene["status"] for scene in run(night, output)["scenes"]} == {"done"}
    assert fetched(output, tmp_path / "all") == layer_digests(night / "maps")


def test_a_replaced_scene_is_never_half_old_half_new(
    night: Path, output: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    run(night, output)
    client, steps = store_client(), []
    for name in ("put_file", "rm_file"):
        sound = getattr(client, name)

        def noted(*arguments: str, name: str = name, sound: Any = sound, **options: Any) -> None:
            steps.append((name, arguments[-1].rpartition("/")[2]))
            sound(*arguments, **options)

        monkeypatch.setattr(client, name, noted)
    place = place_at(output)
    folder = place.building("first", "00bb")
    for name in ("emitted_flux.tif", "first.json"):
        (folder / name).write_bytes((night / "maps" / "first" / name).read_bytes())
    place.put("first", "00bb", durable=False)
    assert steps[0] == ("rm_file", "first.json")
    assert steps[1] == ("put_file", "emitted_flux.tif")
    assert steps[-1] == ("put_file", "first.json")
    assert ("rm_file", "quality.tif") in steps
    assert not folder.exists()


def test_spoiled_outputs_are_made_again(night: Path, output: str) -> None:
    run(night, output)
    store_client().rm_file(f"{output}/first/quality.tif".removeprefix("s3://"))
    report = run(night, output)
    assert [scene["status"] for scene in report["scenes"]] == ["done", "up to date", "up to date"]


def test_inputs_are_read_from_the_store(night: Path, output: str, tmp_path: Path) -> None:
    client, root = store_client(), output.removeprefix("s3://")
    scene = tmp_path / "scenes" / "first"
    scene.mkdir(parents=True)
    source = night / "scenes" / "first"
    (scene / "narrow.toml").write_bytes((source / "narrow.toml").read_bytes())
    client.put_file(str(source / "thermal.tif"), f"{root}/thermal.tif")
    client.put_file(str(source / "quality.tif"), f"{root}/quality.tif")
    text = scene_text(name="first", thermal={"path": f"{output}/thermal.tif"})
    (scene / "scene.toml").write_text(text.replace('"quality.tif"', f'"{output}/quality.tif"'))
    write_job(tmp_path)
    local = str(tmp_path / "maps")
    assert run(tmp_path, local)["scenes"][0]["status"] == "done"
    wanted = {key: value for key, value in layer_digests(night / "maps").items() if key.startswith("first/")}
    assert layer_digests(tmp_path / "maps") == wanted
    assert run(tmp_path, local)["scenes"][0]["status"] == "up to date"
    # Another object under the same name is another input.
    client.put_file(str(night / "scenes" / "second" / "thermal.tif"), f"{root}/thermal.tif")
    assert run(tmp_path, local)["scenes"][0]["status"] == "done"
    client.rm_file(f"{root}/thermal.tif")
    assert "thermal.tif" in run(tmp_path, local, code=3)["scenes"][0]["reason"]


class TestLock:
    def test_a_second_run_is_told_who_holds_the_place(self, night: Path, output: str) -> None:
        with place_at(output).locked():
            finished = groundglow("run", night / "job.toml", "--output", output)
        assert finished.code == 75
        assert f"process {os.getpid()}" in finished.err

    def test_a_dead_holder_is_replaced(self, output: str, monkeypatch: pytest.MonkeyPatch) -> None:
        store_client().pipe_file(f"{output}/.groundglow/lock".removeprefix("s3://"), b'{"process": 1}')
        monkeypatch.setattr(publish_store, "_DEAD_AFTER", -1.0)
        monkeypatch.setattr(publish_store, "_SECOND_LOOK", 0.05)
        with place_at(output).locked():
            assert ".groundglow/lock" in objects(output)
        assert ".groundglow/lock" not in objects(output)

    def test_a_holder_renews_its_lock(self, output: str, monkeypatch: pytest.MonkeyPatch) -> None:
        monkeypatch.setattr(publish_store, "_RENEWED_EVERY", 0.05)
        client, renewed = store_client(), threading.Event()
        sound = client.pipe_file

        def pipe_file(path: str, data: bytes, **options: Any) -> None:
            sound(path, data, **options)
            if path.endswith("lock") and not options:
                renewed.set()

        monkeypatch.setattr(client, "pipe_file", pipe_file)
        with place_at(output).locked():
            assert renewed.wait(20)


def test_a_store_that_does_not_answer(night: Path, monkeypatch: pytest.MonkeyPatch, server: str) -> None:
    monkeypatch.setenv("AWS_S3_ENDPOINT", "127.0.0.1:9")
    monkeypatch.setenv("AWS_MAX_ATTEMPTS", "1")
    store_client.cache_clear()
    finished = groundglow("run", night / "job.toml", "--output", f"{BUCKET}/nobody")
    store_client.cache_clear()
    assert finished.code == 3
    assert "cannot be reached" in finished.err
    assert "Traceback" not in finished.err


def test_a_drop_of_the_network_costs_one_more_attempt(
    night: Path, output: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    client, drops = store_client(), [1]
    sound = client.put_file

    def dropping(source: str, target: str, **options: Any) -> None:
        if target.endswith("second/second.json") and drops.pop() if drops else False:
            raise ConnectionResetError(104, "Connection reset by peer")
        sound(source, target, **options)

    monkeypatch.setattr(client, "put_file", dropping)
    assert [scene["attempts"] for scene in run(night, output)["scenes"]] == [1, 2, 1]


@pytest.mark.parametrize("address", ["gs://bucket/maps", "s3://", "ftp://example.com/maps"])
def test_addresses_that_are_not_written_to(night: Path, address: str) -> None:
    finished = groundglow("run", night / "job.toml", "--output", address)
    assert finished.code == 2
    assert address.rstrip("/") in finished.err


def test_a_place_can_be_sent_to_a_worker() -> None:
    import pickle

    place = pickle.loads(pickle.dumps(StorePlace("s3://bucket/maps/")))
    assert place.folder("first") == "s3://bucket/maps/first"
