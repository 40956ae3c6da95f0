"""The workflows run for real: the same bytes as one run of the job; a stage that fails is resumed, the others kept."""

from __future__ import annotations

import hashlib
import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

TOP = Path(__file__).parents[3]
WORKFLOWS = TOP / "configs" / "workflows"
BIN = Path(sys.executable).parent
JOB, SCENE = "configs/demo.toml", "data_demo/scene.toml"
# The emissivity stage alone needs it.
VITAL = "data_demo/classes.csv"


# Stands before the program in the path: fails at one stage until the mark is away.
FAILING = """#!/bin/sh
if [ "$1" = emissivity ] && [ -e "{mark}" ]; then echo "no emissivity today" >&2; exit 3; fi
exec "{program}" "$@"
"""


def command(*arguments: object, cwd: Path, first: Path = BIN) -> subprocess.CompletedProcess[str]:
    environment = os.environ | {"PATH": f"{first}:{BIN}:{os.environ['PATH']}"}
    words = [str(argument) for argument in arguments]
    return subprocess.run(words, cwd=cwd, env=environment, capture_output=True, text=True, check=False)


def digests(folder: Path) -> dict[str, str]:
    return {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in sorted(folder.glob("*.tif"))}


@pytest.fixture(scope="module")
def wanted(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    """The layers that one run of the job gives."""
    folder = tmp_path_factory.mktemp("run")
    done = command("groundglow", "run", TOP / JOB, "--output", folder, "--quiet", cwd=TOP)
    assert done.returncode == 0, done.stderr
    found = digests(folder / "emberholt-2026-07-14")
    assert "surface_temperature.tif" in found
    return found


@pytest.fixture
def project(tmp_path: Path) -> Path:
    """The demo's job and data in a folder of its own."""
    for name in ("configs", "data_demo"):
        shutil.copytree(TOP / name, tmp_path / "project" / name)
    return tmp_path / "project"


def stage_times(work: Path) -> dict[str, int]:
    return {path.parent.name: path.stat().st_mtime_ns for path in work.glob("*/*/stage.json")}


def test_snakemake(project: Path, wanted: dict[str, str]) -> None:
    call = [
        "snakemake", "--snakefile", WORKFLOWS / "Snakefile", "--cores", "2", "--keep-going", "--quiet", "all",
        "--config", f"job={JOB}", f"scenes={SCENE}", "work=work", "output=maps",
    ]  # fmt: skip
    (project / VITAL).rename(project / "away")
    failed = command(*call, cwd=project)
    assert failed.returncode != 0
    before = stage_times(project / "work")
    assert set(before) == {"radiance", "brightness_temperature", "atmosphere"}
    assert list(project.rglob(".*building*")) == []
    (project / "away").rename(project / VITAL)
    done = command(*call, cwd=project)
    assert done.returncode == 0, done.stderr
    after = stage_times(project / "work")
    assert {name: after[name] for name in before} == before
    assert digests(project / "maps" / "data_demo--scene") == wanted
    assert "Nothing to be done" in command(*call[:5], *call[8:], cwd=project).stderr


def test_cwltool(project: Path, wanted: dict[str, str], tmp_path: Path) -> None:
    call = [
        "cwltool", "--no-container", "--cachedir", tmp_path / "cache", "--outdir", tmp_path / "maps",
        WORKFLOWS / "chain.cwl", "--project", project, "--job", JOB, "--scene", SCENE, "--name", "emberholt",
    ]  # fmt: skip
    mark, shadow = tmp_path / "mark", tmp_path / "bin" / "groundglow"
    mark.touch()
    shadow.parent.mkdir()
    shadow.write_text(FAILING.format(mark=mark, program=BIN / "groundglow"))
    shadow.chmod(0o755)
    failed = command(*call, cwd=tmp_path, first=shadow.parent)
    assert failed.returncode != 0
    assert "no emissivity today" in failed.stderr
    assert not (tmp_path / "maps" / "emberholt").exists()
    mark.unlink()
    done = command(*call, cwd=tmp_path, first=shadow.parent)
    assert done.returncode == 0, done.stderr
    # cwltool decides what it takes from its cache; made again or not, the bytes are those of the fused run.
    assert digests(tmp_path / "maps" / "emberholt") == wanted


@pytest.mark.parametrize("path", sorted(WORKFLOWS.glob("*.cwl")), ids=lambda path: path.stem)
def test_descriptions_are_valid(path: Path, tmp_path: Path) -> None:
    done = command("cwltool", "--validate", path, cwd=tmp_path)
    assert done.returncode == 0, done.stderr
