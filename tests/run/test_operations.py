"""The recipes for unattended runs do what they say: their commands are run as cron and systemd would run them."""

from __future__ import annotations

import json
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

from night import paint_night

RECIPES = Path(__file__).parents[2] / "configs" / "operations"


@pytest.fixture
def machine(tmp_path: Path) -> Path:
    """A root with the program and a job where the recipes expect them."""
    job = paint_night(tmp_path / "srv" / "thermal", ("first",))
    job.rename(job.with_name("night.toml"))
    program = tmp_path / "opt" / "groundglow" / "bin" / "groundglow"
    program.parent.mkdir(parents=True)
    program.write_text(f'#!/bin/sh\nexec {sys.executable} -m groundglow "$@"\n')
    program.chmod(0o755)
    return tmp_path


def placed(text: str, machine: Path) -> str:
    for top in ("/srv/", "/opt/", "/var/"):
        text = text.replace(top, f"{machine}{top}")
    return text


def made(machine: Path) -> bool:
    report = json.loads((machine / "srv/thermal/maps/.groundglow/report.json").read_text())
    return bool(report["counts"] == {"done": 1})


def bare(machine: Path) -> dict[str, str]:
    """The environment that cron and systemd give: no more than this."""
    return {
        "PATH": "/usr/bin:/bin",
        "HOME": str(machine),
        "NUMBA_CACHE_DIR": str(machine / "cache"),
        "LANG": "C",
    }


def test_the_line_for_cron(machine: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    lines = [
        line for line in (RECIPES / "crontab").read_text().splitlines() if line and not line.startswith("#")
    ]
    variables, (entry,) = lines[:-1], lines[-1:]
    assert [line.split("=")[0] for line in variables] == ["NUMBA_CACHE_DIR"]
    *times, command = entry.split(maxsplit=5)
    assert times == ["15", "2", "*", "*", "*"]
    environment = bare(machine)
    # The kernels of this test's own installation are compiled already.
    del environment["NUMBA_CACHE_DIR"]
    done = subprocess.run(["/bin/sh", "-c", placed(command, machine)], cwd="/", env=environment, check=False)
    assert done.returncode == 0
    assert made(machine)
    assert (machine / "srv/thermal/errors.log").read_text() == ""


def test_the_units_for_systemd(machine: Path) -> None:
    # The format is that of systemd.syntax(7): sections, keys, values.
    unit = dict(
        line.split("=", 1)
        for line in (RECIPES / "groundglow-night.service").read_text().splitlines()
        if "=" in line and not line.startswith("#")
    )
    environment = bare(machine)
    del environment["NUMBA_CACHE_DIR"]
    command = shlex.split(placed(unit["ExecStart"], machine))
    done = subprocess.run(
        command, cwd=placed(unit["WorkingDirectory"], machine), env=environment, check=False
    )
    assert done.returncode == 0
    assert made(machine)
    assert unit["SuccessExitStatus"].split() == ["4", "75"]
    assert "OnCalendar=" in (RECIPES / "groundglow-night.timer").read_text()
