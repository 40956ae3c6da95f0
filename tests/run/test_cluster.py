"""The same job on a real Dask cluster, a scheduler and two worker processes over TCP: the same bytes, whatever dies."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from distributed import Client

from command_line import groundglow
from groundglow.run.access.retry import LostWorkerError
from groundglow.run.batch import cluster as batch_cluster
from groundglow.run.batch.cluster import ClusterRunner
from groundglow.run.making import scheduler_cluster
from groundglow.run.making.scheduler_cluster import Cluster
from night import layer_digests, leftovers, paint_night, write_job

NAMES = tuple(f"scene-{number}" for number in range(6))
# One death is forgiven, a second one over the same work is not: the default of three takes longer.
PATIENCE = {"DASK_DISTRIBUTED__SCHEDULER__ALLOWED_FAILURES": "1"}


@pytest.fixture(scope="module")
def cluster(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    """Address of a scheduler with two workers, each in a process of its own."""
    folder = tmp_path_factory.mktemp("cluster")
    address_file = folder / "scheduler.json"
    common = ["--scheduler-file", str(address_file), "--no-dashboard"]
    scheduler = [*common, "--host", "127.0.0.1", "--port", "0"]
    worker = [*common, "--nthreads", "1", "--local-directory", str(folder), "--memory-limit", "1GiB"]
    commands = [("dask_scheduler", scheduler), ("dask_worker", worker), ("dask_worker", worker)]
    processes = [
        subprocess.Popen(
            [sys.executable, "-m", f"distributed.cli.{program}", *arguments],
            stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, env=os.environ | PATIENCE,
        )
        for program, arguments in commands
    ]  # fmt: skip
    try:
        until(address_file.exists)
        address = json.loads(address_file.read_text())["address"]
        with Client(address, timeout=60) as client:
            client.wait_for_workers(2, timeout=60)
        yield str(address)
    finally:
        for process in reversed(processes):
            process.terminate()
        for process in processes:
            try:
                process.wait(timeout=5)
            except subprocess.TimeoutExpired:
                # One that waits for a worker of its own that a test has killed.
                process.kill()
                process.wait()


@pytest.fixture(scope="module")
def night(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Scenes with the bytes of the local run in ``maps``."""
    job = paint_night(tmp_path_factory.mktemp("night"), NAMES, height=600, width=500)
    assert groundglow("run", job, "--quiet").code == 0
    return job.parent


def until(happened: Any, seconds: float = 60.0) -> None:
    limit = time.monotonic() + seconds
    while not happened():
        assert time.monotonic() < limit
        time.sleep(0.02)


def run(night: Path, output: Path, scheduler: str, *options: str) -> dict[str, Any]:
    finished = groundglow(
        "run", night / "job.toml", "--output", output, "--scheduler", scheduler, "--json", "--quiet", *options
    )
    assert finished.code == 0, finished.err
    report: dict[str, Any] = json.loads(finished.out)
    assert [scene["name"] for scene in report["scenes"]] == list(NAMES)
    return report


def test_the_bytes_are_those_of_the_local_run(night: Path, tmp_path: Path, cluster: str) -> None:
    run(night, tmp_path, cluster)
    assert layer_digests(tmp_path) == layer_digests(night / "maps")
    assert leftovers(tmp_path) == []
    again = run(night, tmp_path, cluster)
    assert {scene["status"] for scene in again["scenes"]} == {"up to date"}


def test_large_scenes_are_spread_by_blocks(
    night: Path, tmp_path: Path, cluster: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(batch_cluster, "LARGEST_UNIT", 1)
    write_job(night, "[run]\nblock = 512\n")
    run(night, tmp_path, cluster)
    assert layer_digests(tmp_path) == layer_digests(night / "maps")


def test_workers_that_do_not_see_the_output_get_blocks(
    night: Path, tmp_path: Path, cluster: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(ClusterRunner, "_see_the_place", lambda self, place: False)
    run(night, tmp_path, cluster)
    assert layer_digests(tmp_path) == layer_digests(night / "maps")


@pytest.mark.parametrize("largest", [batch_cluster.LARGEST_UNIT, 1], ids=["by scenes", "by blocks"])
def test_a_worker_killed_mid_run_does_not_lose_the_batch(
    night: Path, tmp_path: Path, cluster: str, largest: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(batch_cluster, "LARGEST_UNIT", largest)
    with Client(cluster, timeout=30) as client:
        client.wait_for_workers(2, timeout=60)
        victim = min(client.run(os.getpid).values())
    log = tmp_path / ".groundglow" / "log.jsonl"
    killed = []

    def kill() -> None:
        until(lambda: log.exists() and '"put in place"' in log.read_text())
        os.kill(victim, signal.SIGKILL)
        killed.append(victim)

    killer = threading.Thread(target=kill)
    killer.start()
    run(night, tmp_path, cluster)
    killer.join()
    assert killed
    assert layer_digests(tmp_path) == layer_digests(night / "maps")
    assert leftovers(tmp_path) == []


def test_work_that_kills_every_worker_is_given_up_with_a_hint(cluster: str) -> None:
    done: list[int] = []

    def die_of_hunger(work: object, item: int) -> int:
        """What the system does to a process whose memory runs out."""
        if item == 3:
            os.kill(os.getpid(), signal.SIGKILL)
        return item

    shared = Cluster(cluster)
    try:
        shared.client.wait_for_workers(2, timeout=60)
        with pytest.raises(LostWorkerError, match="memory"):
            shared.spread(die_of_hunger, None, range(6), done.append)
        # The cluster is still of use.
        shared.client.wait_for_workers(1, timeout=60)
        shared.spread(die_of_hunger, None, [7, 8], done.append)
    finally:
        shared.close()
    assert {7, 8} <= set(done)
    assert 3 not in done


def test_a_local_cluster_of_processes(night: Path, tmp_path: Path) -> None:
    run(night, tmp_path, "processes:2")
    assert layer_digests(tmp_path) == layer_digests(night / "maps")


def test_no_scheduler_answers(night: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scheduler_cluster, "_TIMEOUT", 0.5)
    finished = groundglow("run", night / "job.toml", "--output", tmp_path, "--scheduler", "tcp://127.0.0.1:9")
    assert finished.code == 3
    assert "no Dask scheduler answers at tcp://127.0.0.1:9" in finished.err


@pytest.mark.parametrize("number", ["0", "many", "-1"])
def test_impossible_numbers_of_processes(night: Path, tmp_path: Path, number: str) -> None:
    finished = groundglow(
        "run", night / "job.toml", "--output", tmp_path, "--scheduler", f"processes:{number}"
    )
    assert finished.code == 2
    assert "--scheduler" in finished.err
