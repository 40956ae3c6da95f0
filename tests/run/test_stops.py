"""A run may be stopped or killed at any moment: readers never find half a scene, and the next run completes."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from command_line import groundglow
from groundglow.run.placing.place import LocalPlace
from night import layer_digests, leftovers, paint_night, write_job

INTERRUPTED = 130

# Dies at the given file-system step within a folder; with step 0 it lives and counts them.
KILLED_AT = """
import os, signal, sys
step, root = int(sys.argv.pop(1)), sys.argv.pop(1)
seen = 0
def watch(event, arguments):
    global seen
    if event not in ("open", "os.rename", "os.remove", "os.mkdir", "os.rmdir", "shutil.rmtree"):
        return
    if isinstance(arguments[0], (str, os.PathLike)) and os.fspath(arguments[0]).startswith(root):
        seen += 1
        if seen == step:
            os.kill(os.getpid(), signal.SIGKILL)
sys.addaudithook(watch)
from groundglow.cli import main
try:
    main()
finally:
    print(seen)
"""


def start(job: Path, *before: object) -> subprocess.Popen[str]:
    """A run in a process of its own."""
    program = ["-c", KILLED_AT, *before] if before else ["-m", "groundglow"]
    command = [sys.executable, *program, "run", job, "--quiet"]
    return subprocess.Popen(
        [str(part) for part in command], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )


def every_scene_is_whole(output: Path) -> bool:
    """Whether each folder that a reader sees has an Item, and the files it lists in their sizes."""
    place = LocalPlace(output)
    folders = [path.name for path in output.glob("*") if path.is_dir() and not path.name.startswith(".")]
    items = {name: place.item(name) for name in folders}
    return all(item is not None and place.fault(name, item) is None for name, item in items.items())


@pytest.fixture(scope="module")
def changed_night(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict[str, str], int]:
    """A job whose outputs are all to be replaced, the bytes it leads to, and the steps it takes."""
    job = paint_night(tmp_path_factory.mktemp("night"), ("first", "second"))
    assert groundglow("run", job, "--quiet").code == 0
    before = layer_digests(job.parent / "maps")
    write_job(job.parent, "[quality]\ncloud_buffer = 90.0\n")
    # Steps are counted, and undisturbed bytes made, on a copy of the outputs.
    subprocess.run(["cp", "-a", job.parent / "maps", job.parent / "undisturbed"], check=True)
    text = job.read_text()
    job.write_text(text.replace('"maps"', '"undisturbed"'))
    counting = start(job, 0, job.parent / "undisturbed")
    steps = int(counting.communicate(timeout=60)[0])
    assert counting.returncode == 0
    job.write_text(text)
    wanted = layer_digests(job.parent / "undisturbed")
    assert wanted.keys() == before.keys()
    assert wanted != before
    return job, wanted, steps


def test_after_kill_upon_kill_the_next_run_completes_with_the_same_bytes(
    changed_night: tuple[Path, dict[str, str], int],
) -> None:
    job, wanted, steps = changed_night
    output = job.parent / "maps"
    assert steps > 60
    for share in (0.35, 0.6, 0.8):
        killed = start(job, int(share * steps), output)
        killed.communicate(timeout=60)
        assert killed.returncode in (-signal.SIGKILL, 0)
        assert every_scene_is_whole(output)
    assert groundglow("run", job, "--quiet").code == 0
    assert layer_digests(output) == wanted
    assert leftovers(output) == []


def test_killed_between_the_two_renames_of_a_scene(changed_night: tuple[Path, dict[str, str], int]) -> None:
    job, wanted, _ = changed_night
    output = job.parent / "maps"
    assert groundglow("run", job, "--quiet").code == 0
    # What a kill leaves after the old folder went aside and before the new one came in.
    (output / "first").rename(output / ".first.aside")
    half = output / ".first.building-00112233"
    half.mkdir()
    (half / "quality.tif").write_bytes(b"half")
    assert groundglow("run", job, "--quiet").code == 0
    assert layer_digests(output) == wanted
    assert leftovers(output) == []


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_a_signal_ends_the_run_cleanly_within_seconds(tmp_path: Path, number: signal.Signals) -> None:
    job = paint_night(tmp_path, [f"scene-{number}" for number in range(12)])
    log = tmp_path / "maps" / ".groundglow" / "log.jsonl"
    run = start(job)
    limit = time.monotonic() + 60
    while not (log.exists() and '"put in place"' in log.read_text()):
        assert run.poll() is None, run.communicate()
        assert time.monotonic() < limit
        time.sleep(0.01)
    told = time.monotonic()
    os.kill(run.pid, number)
    _, errors = run.communicate(timeout=60)
    # Seconds, on a machine that may be busy with other tests.
    assert time.monotonic() - told < 8
    assert run.returncode == INTERRUPTED
    assert "interrupted" in errors
    assert "Traceback" not in errors
    assert leftovers(tmp_path / "maps") == []
    assert every_scene_is_whole(tmp_path / "maps")
    report = json.loads((log.parent / "report.json").read_text())
    assert report["ended"] == "stopped"
    assert 0 < report["counts"]["done"] < 12
    collection = json.loads((tmp_path / "maps" / "collection.json").read_text())
    listed = [link for link in collection["links"] if link["rel"] == "item"]
    assert len(listed) == report["counts"]["done"]
