"""A night's batch: what is up to date is skipped, what changed is made again, and no scene stops another."""

from __future__ import annotations

import errno
import io
import json
import os
import shutil
import subprocess
import tarfile
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from rasterio.errors import RasterioIOError

from command_line import groundglow
from groundglow.errors import InputError
from groundglow.run.batch import scene as batch_scene
from groundglow.run.placing import publish
from invented_scene import InventedScene, scene_text, write_raster
from night import NAMES, layer_digests, leftovers, paint_night, settle, write_job

DONE, USAGE, NOTHING, SOME, BUSY = 0, 2, 3, 4, 75


@pytest.fixture(scope="module")
def made_once(tmp_path_factory: pytest.TempPathFactory) -> Path:
    job = paint_night(tmp_path_factory.mktemp("night"))
    assert groundglow("run", job, "--quiet").code == DONE
    return job.parent


@pytest.fixture
def night(made_once: Path, tmp_path: Path) -> Path:
    """A finished night that a test may spoil."""
    folder = tmp_path / "night"
    shutil.copytree(made_once, folder)
    settle(folder / "scenes")
    # The copy's files are other files: look at them once, by their content.
    assert set(statuses(run(folder)).values()) == {"up to date"}
    return folder


def run(folder: Path, *options: object, code: int = DONE) -> dict[str, Any]:
    finished = groundglow("run", folder / "job.toml", "--json", "--quiet", *options)
    assert finished.code == code, finished.err
    assert "Traceback" not in finished.err
    report: dict[str, Any] = json.loads(finished.out)
    return report


def plan(folder: Path, *options: object) -> dict[str, Any]:
    finished = groundglow("plan", folder / "job.toml", "--json", *options)
    assert finished.code == DONE, finished.err
    found: dict[str, Any] = json.loads(finished.out)
    return found


def statuses(report: dict[str, Any]) -> dict[str, str]:
    return {scene["name"]: scene["status"] for scene in report["scenes"]}


def reasons(folder: Path) -> dict[str, str]:
    """Why scenes were made, from the log."""
    return {event["scene"]: event["reason"] for event in log(folder) if event["event"] == "to be made"}


def log(folder: Path) -> list[dict[str, Any]]:
    text = (folder / "maps" / ".groundglow" / "log.jsonl").read_text(encoding="utf-8")
    return [json.loads(line) for line in text.splitlines()]


def flip(path: Path) -> None:
    """Other content of the same size and time, as the worst clock would have it."""
    before = path.stat()
    data = bytearray(path.read_bytes())
    data[-2000] ^= 1
    path.write_bytes(bytes(data))
    os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))


class TestResume:
    def test_what_is_up_to_date_is_skipped_and_said_so(self, night: Path) -> None:
        before = {path: path.stat().st_mtime_ns for path in (night / "maps").glob("[!.]*/*")}
        report = run(night)
        assert statuses(report) == dict.fromkeys(NAMES, "up to date")
        assert {path: path.stat().st_mtime_ns for path in (night / "maps").glob("[!.]*/*")} == before

    def test_unchanged_files_are_not_even_opened(self, night: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        def never(path: str) -> None:
            raise AssertionError(f"opened {path}")

        monkeypatch.setattr(batch_scene, "open_scene", never)
        assert set(statuses(run(night)).values()) == {"up to date"}

    def test_without_its_memory_the_items_are_compared(self, night: Path) -> None:
        (night / "maps" / ".groundglow" / "seen.sqlite").unlink()
        assert set(statuses(run(night)).values()) == {"up to date"}

    def test_a_damaged_memory_is_begun_anew(self, night: Path) -> None:
        memory = night / "maps" / ".groundglow" / "seen.sqlite"
        memory.write_bytes(b"not a database at all" * 400)
        assert set(statuses(run(night)).values()) == {"up to date"}
        assert memory.read_bytes().startswith(b"SQLite format 3")

    def test_a_changed_input_is_made_again_with_the_reason(self, night: Path) -> None:
        pixels = np.full((90, 110), 20_000, np.uint16)
        transform = InventedScene(night, pixels, pixels, _transform(night)).transform
        write_raster(night / "scenes" / "second" / "thermal.tif", pixels, transform)
        assert statuses(run(night)) == {"first": "up to date", "second": "done", "third": "up to date"}
        assert reasons(night) == {"second": "input thermal changed"}

    def test_a_changed_job_makes_all_again_and_names_the_key(self, night: Path) -> None:
        write_job(night, "[quality]\ncloud_buffer = 60.0\n")
        assert set(statuses(run(night)).values()) == {"done"}
        assert set(reasons(night).values()) == {"configuration changed: quality.cloud_buffer"}

    def test_what_never_changes_a_byte_makes_nothing_again(self, night: Path) -> None:
        write_job(night, "[run]\nblock = 512\nworkers = 1\n", head="")
        assert set(statuses(run(night)).values()) == {"up to date"}

    def test_a_changed_description_is_seen(self, night: Path) -> None:
        path = night / "scenes" / "third" / "scene.toml"
        path.write_text(scene_text(name="third").replace("elevation = 400.0", "elevation = 450.0"))
        run(night)
        # The air here does not depend on height, and still the description is another one.
        assert "description" in reasons(night)["third"]

    def test_a_changed_sensor_file_is_seen(self, night: Path) -> None:
        path = night / "scenes" / "first" / "narrow.toml"
        path.write_text(path.read_text().replace("10.6, 11.2", "10.6, 11.3"))
        assert statuses(run(night))["first"] == "done"
        assert "sensor" in reasons(night)["first"]

    @pytest.mark.parametrize("spoil", [Path.unlink, lambda path: path.write_bytes(path.read_bytes()[:-7])])
    def test_spoiled_outputs_are_made_again(self, night: Path, spoil: Any) -> None:
        before = layer_digests(night / "maps")
        spoil(night / "maps" / "first" / "emitted_flux.tif")
        assert statuses(run(night))["first"] == "done"
        assert "emitted_flux" in reasons(night)["first"]
        assert layer_digests(night / "maps") == before

    def test_a_scene_without_its_item_was_never_finished(self, night: Path) -> None:
        (night / "maps" / "first" / "first.json").unlink()
        assert statuses(run(night))["first"] == "done"

    def test_force_makes_all_again_into_the_same_bytes(self, night: Path) -> None:
        before = layer_digests(night / "maps")
        assert set(statuses(run(night, "--force")).values()) == {"done"}
        assert layer_digests(night / "maps") == before

    def test_times_in_the_future_prove_nothing(self, night: Path) -> None:
        # A clock that went back leaves files that seem to come from tomorrow.
        raster = night / "scenes" / "first" / "thermal.tif"
        os.utime(raster, (4_000_000_000, 4_000_000_000))
        assert statuses(run(night))["first"] == "up to date"
        flip(raster)
        os.utime(raster, (4_000_000_000, 4_000_000_000))
        assert statuses(run(night))["first"] == "done"


def _transform(night: Path) -> Any:
    import rasterio

    with rasterio.open(night / "scenes" / "second" / "thermal.tif") as raster:
        return raster.transform


class TestPlan:
    def test_says_what_and_why_and_writes_nothing(self, night: Path) -> None:
        (night / "scenes" / "second" / "thermal.tif").unlink()
        (night / "maps" / "third" / "quality.tif").unlink()
        shutil.copytree(night / "scenes" / "first", night / "scenes" / "fourth")
        (night / "scenes" / "fourth" / "scene.toml").write_text(scene_text(name="fourth"))
        before = sorted((str(path), path.stat().st_mtime_ns) for path in night.rglob("*"))
        found = {scene["scene"]: scene for scene in plan(night)["scenes"]}
        assert sorted((str(path), path.stat().st_mtime_ns) for path in night.rglob("*")) == before
        assert found["first"]["state"] == "up to date"
        assert (found["third"]["state"], found["third"]["why"]) == (
            "changed",
            "the file of quality is missing",
        )
        assert found["fourth"]["state"] == "new"
        assert found["fourth"]["grid"] == "110 x 90 at 30 m, EPSG:32633"
        assert found["fourth"]["peak_memory_mib"] > 100
        broken = next(scene for scene in found.values() if scene["state"] == "cannot be read")
        assert "thermal.tif" in broken["why"]

    def test_time_comes_from_the_last_run_that_made_something(self, night: Path) -> None:
        fresh = plan(night, "--output", night / "elsewhere")["estimate"]
        assert "default" in fresh["constant_from"]
        known = plan(night)["estimate"]
        assert known["constant_from"] == "the last run here"
        assert known["seconds"] == 0.0

    def test_scenes_beyond_the_detail_are_counted(self, night: Path) -> None:
        found = plan(night, "--output", night / "elsewhere", "--detailed", "1")
        assert found["counts"] == {"new": 1, "not looked at": 2}
        everything = plan(night, "--output", night / "elsewhere")
        assert found["estimate"]["disk_mib"] == pytest.approx(everything["estimate"]["disk_mib"], abs=0.11)

    def test_reads_as_a_table(self, night: Path) -> None:
        write_job(night, '[layers]\nwrite = ["emitted_flux"]\n')
        finished = groundglow("plan", night / "job.toml")
        assert finished.code == DONE
        assert "configuration changed: layers.write" in finished.out
        assert "3 scenes: 3 changed" in finished.out


class TestIsolation:
    def test_a_bad_scene_stops_no_other(self, tmp_path: Path) -> None:
        job = paint_night(tmp_path)
        raster = tmp_path / "scenes" / "second" / "thermal.tif"
        raster.write_bytes(raster.read_bytes()[:9000])
        report = run(job.parent, code=SOME)
        assert statuses(report) == {"first": "done", "second": "failed", "third": "done"}
        failed = report["scenes"][1]
        assert "second" in failed["address"]
        assert "cut short" in failed["reason"]
        assert failed["attempts"] == 2
        assert not (tmp_path / "maps" / "second").exists()
        assert leftovers(tmp_path / "maps") == []

    def test_a_defect_stops_no_other_and_leaves_its_trace(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        job = paint_night(tmp_path)
        sound = batch_scene.plan_scene

        def defective(job: Any, folder: Path, scene: Any) -> Any:
            if scene.name == "second":
                raise ZeroDivisionError("by nought")
            return sound(job, folder, scene)

        monkeypatch.setattr(batch_scene, "plan_scene", defective)
        report = run(job.parent, code=SOME)
        assert "a defect of Groundglow" in report["scenes"][1]["reason"]
        (trace,) = [event["trace"] for event in log(tmp_path) if event["event"] == "defect"]
        assert "by nought" in trace

    def test_a_fully_clouded_scene_is_a_result(self, tmp_path: Path) -> None:
        job = paint_night(tmp_path)
        words = np.full((90, 110), 1 << 3, np.uint16)
        write_raster(tmp_path / "scenes" / "second" / "quality.tif", words, _transform(tmp_path))
        report = run(job.parent)
        assert statuses(report)["second"] == "nothing valid"
        assert statuses(run(job.parent))["second"] == "up to date"

    @pytest.mark.parametrize(
        ("spoil", "code"),
        [("[scene]\nname = 5\n", USAGE), (None, NOTHING)],
        ids=["descriptions that cannot be followed", "rasters that cannot be read"],
    )
    def test_nothing_could_run(self, tmp_path: Path, spoil: str | None, code: int) -> None:
        job = paint_night(tmp_path)
        for path in (tmp_path / "scenes").glob("*/*"):
            if path.name == "scene.toml" and spoil is not None:
                path.write_text(spoil)
            elif path.name == "thermal.tif" and spoil is None:
                path.write_bytes(b"")
        run(job.parent, code=code)

    def test_one_name_twice_is_refused_before_it_spoils_anything(self, tmp_path: Path) -> None:
        job = paint_night(tmp_path)
        (tmp_path / "scenes" / "third" / "scene.toml").write_text(scene_text(name="first"))
        report = run(job.parent, code=SOME)
        assert sorted(scene["status"] for scene in report["scenes"]) == ["done", "done", "failed"]
        (failed,) = [scene for scene in report["scenes"] if scene["status"] == "failed"]
        assert "'first' is that of another scene" in failed["reason"]
        assert leftovers(tmp_path / "maps") == []


class TestRetry:
    def fail(self, monkeypatch: pytest.MonkeyPatch, times: int, error: Exception) -> None:
        """Let the second scene fail so often."""
        sound, left = batch_scene.scene_fingerprint, [times]

        def failing(job: Any, plan: Any) -> Any:
            if plan.name == "second" and left[0]:
                left[0] -= 1
                raise error
            return sound(job, plan)

        monkeypatch.setattr(batch_scene, "scene_fingerprint", failing)

    def passing(self) -> InputError:
        error = InputError("pixels cannot be read", where="thermal.tif")
        error.__cause__ = RasterioIOError("Connection timed out")
        return error

    def test_an_error_that_passes_costs_one_more_attempt(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        job = paint_night(tmp_path)
        self.fail(monkeypatch, 1, self.passing())
        report = run(job.parent)
        assert set(statuses(report).values()) == {"done"}
        assert [scene["attempts"] for scene in report["scenes"]] == [1, 2, 1]
        assert any(event["event"] == "to be tried again" for event in log(tmp_path))

    def test_a_scene_that_fails_twice_is_reported(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        job = paint_night(tmp_path)
        self.fail(monkeypatch, 2, self.passing())
        assert run(job.parent, code=SOME)["scenes"][1]["attempts"] == 2

    def test_what_cannot_pass_is_not_tried_again(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        job = paint_night(tmp_path)
        self.fail(monkeypatch, 1, InputError("is no raster of this Earth", where="thermal.tif"))
        assert run(job.parent, code=SOME)["scenes"][1]["attempts"] == 1

    def test_an_input_replaced_while_it_was_read(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        job = paint_night(tmp_path)
        sound, replaced = batch_scene.build_scene, []

        def build(plan: Any, *arguments: Any, **options: Any) -> Any:
            outcome = sound(plan, *arguments, **options)
            if plan.name == "second" and not replaced:
                path = tmp_path / "scenes" / "second" / "thermal.tif"
                replaced.append(shutil.copy(path, path.with_name("other.tif")))
                path.with_name("other.tif").replace(path)
            return outcome

        monkeypatch.setattr(batch_scene, "build_scene", build)
        report = run(job.parent)
        assert replaced
        assert report["scenes"][1]["attempts"] == 2
        again = [event for event in log(tmp_path) if event["event"] == "to be tried again"]
        assert "replaced while" in again[0]["reason"]
        assert leftovers(tmp_path / "maps") == []

    def test_an_input_that_vanishes(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        job = paint_night(tmp_path)
        sound = batch_scene.build_scene

        def build(plan: Any, *arguments: Any, **options: Any) -> Any:
            if plan.name == "second":
                (tmp_path / "scenes" / "second" / "quality.tif").unlink(missing_ok=True)
            return sound(plan, *arguments, **options)

        monkeypatch.setattr(batch_scene, "build_scene", build)
        report = run(job.parent, code=SOME)
        assert "quality.tif" in report["scenes"][1]["reason"]
        assert leftovers(tmp_path / "maps") == []


class TestReports:
    def test_report_table_and_log(self, night: Path) -> None:
        folder = night / "maps" / ".groundglow"
        report = run(night, "--force")
        kept = json.loads((folder / "report.json").read_text())
        assert [scene["name"] for scene in kept["scenes"]] == list(NAMES)
        assert kept["counts"] == {"done": 3}
        assert kept["ended"] == "complete"
        assert kept["measured"]["worker_seconds_per_megapixel"] > 0
        assert {scene["name"]: scene["valid_percent"] for scene in report["scenes"]} == {
            scene["name"]: scene["valid_percent"] for scene in kept["scenes"]
        }
        assert "median K" in (folder / "report.txt").read_text()
        steps = [event["event"] for event in log(night) if event.get("scene") == "second"]
        assert steps == [
            "planned", "inputs read for checksums", "to be made", "layers made", "put in place", "ended",
        ]  # fmt: skip
        assert (log(night)[0]["event"], log(night)[-1]["event"]) == ("run began", "run ended")
        assert all(event["time"].endswith("+00:00") for event in log(night))

    def test_earlier_reports_stay_few_whatever_the_clock_says(self, night: Path) -> None:
        folder = night / "maps" / ".groundglow"
        earlier = folder / "earlier"
        for number in range(2, 80):
            (earlier / f"{number:06d}.report.json").write_text("{}")
            os.utime(earlier / f"{number:06d}.report.json", (4_000_000_000 - number,) * 2)
        run(night)
        numbers = {int(path.name.split(".")[0]) for path in earlier.iterdir()}
        assert numbers == set(range(51, 81))


class TestFolder:
    def test_two_runs_on_one_folder(self, night: Path) -> None:
        with publish.locked(night / "maps"):
            finished = groundglow("run", night / "job.toml")
        assert finished.code == BUSY
        assert f"process {os.getpid()}" in finished.err

    def test_the_lock_of_a_dead_process_holds_nobody_up(self, night: Path) -> None:
        gone = subprocess.Popen(["true"])
        gone.wait()
        lock = night / "maps" / ".groundglow" / "lock"
        lock.write_text(json.dumps({"process": gone.pid, "host": "elsewhere", "since": "2020-01-01"}))
        assert set(statuses(run(night)).values()) == {"up to date"}

    def test_output_that_cannot_be_written(self, night: Path) -> None:
        # The kernel's own file system refuses folders even to the superuser.
        finished = groundglow("run", night / "job.toml", "--output", "/proc/groundglow")
        assert finished.code == NOTHING
        assert "cannot be written" in finished.err

    def test_names_and_paths_beyond_ascii(self, tmp_path: Path) -> None:
        names = ("Straße-Überhitze", "地表温度", "x" * 200)
        job = paint_night(tmp_path / "nächtliche Läufe", names)
        assert statuses(run(job.parent)) == dict.fromkeys(sorted(names), "done")
        assert set(statuses(run(job.parent)).values()) == {"up to date"}

    def test_a_name_too_long_for_the_file_system(self, tmp_path: Path) -> None:
        job = paint_night(tmp_path, ("first", "second"))
        # 200 letters are allowed, and these take three bytes each; file systems stop at 255.
        (tmp_path / "scenes" / "second" / "scene.toml").write_text(scene_text(name="熱" * 200))
        report = run(job.parent, code=SOME)
        assert [scene["status"] for scene in report["scenes"]] == ["done", "failed"]
        assert "too long" in report["scenes"][1]["reason"]

    def test_a_disk_that_fills_in_mid_scene(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        job = paint_night(tmp_path)
        sound, full = Path.replace, OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

        def replace(path: Path, target: Path) -> Path:
            if "second" in str(target) and Path(target).name == "emitted_flux.tif":
                raise full
            return sound(path, target)

        monkeypatch.setattr(Path, "replace", replace)
        report = run(job.parent, code=SOME)
        assert statuses(report) == {"first": "done", "second": "failed", "third": "done"}
        assert "No space left" in report["scenes"][1]["reason"]
        assert report["scenes"][1]["attempts"] == 1
        assert leftovers(tmp_path / "maps") == []
        monkeypatch.undo()
        assert statuses(run(job.parent)) == {"first": "up to date", "second": "done", "third": "up to date"}

    def test_spoiled_archives_are_refused_alone(self, tmp_path: Path) -> None:
        job = paint_night(tmp_path)
        (tmp_path / "scenes" / "cut.tar").write_bytes(b"not an archive" * 100)
        member = tarfile.TarInfo("../escaped_MTL.txt")
        with tarfile.open(tmp_path / "scenes" / "escaping.tar", "w") as tape:
            tape.addfile(member, io.BytesIO())
        write_job(tmp_path, scenes=("scenes/*.tar", "scenes/*/scene.toml"))
        report = run(job.parent, code=SOME)
        found = {
            Path(scene["address"]).name: (scene["status"], scene["reason"]) for scene in report["scenes"]
        }
        assert [status for status, _ in found.values()].count("failed") == 2
        assert found["cut.tar"][0] == "failed"
        assert "leads out of it" in found["escaping.tar"][1]
        assert not (tmp_path / "escaped_MTL.txt").exists()
