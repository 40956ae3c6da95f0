"""The wheel carries all it needs: built here, installed elsewhere, run from there."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("wheel")
    build = [sys.executable, "-m", "build", "--wheel", "--no-isolation", "--outdir", str(folder), str(ROOT)]
    subprocess.run(build, check=True, capture_output=True)
    return next(folder.glob("*.whl"))


@pytest.fixture(scope="module")
def installed(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the installed package; its dependencies are those of this environment."""
    folder = tmp_path_factory.mktemp("elsewhere")
    install = [
        sys.executable,
        "-m",
        "pip",
        "install",
        "--quiet",
        "--no-deps",
        "--target",
        str(folder),
        str(wheel),
    ]
    subprocess.run(install, check=True, capture_output=True)
    return folder


def test_the_wheel_holds_its_data_and_nothing_of_the_demo(wheel: Path) -> None:
    names = zipfile.ZipFile(wheel).namelist()
    inside = {name for name in names if name.startswith("groundglow/")}
    shipped = {
        path.relative_to(ROOT / "pipeline").as_posix()
        for path in (ROOT / "pipeline" / "groundglow").rglob("*")
        if path.is_file() and "__pycache__" not in path.parts
    }
    assert inside == shipped
    assert any(name.endswith("licenses/LICENSE") for name in names)
    assert not any("data_demo" in name or "configs" in name for name in names)


def test_it_runs_from_where_it_was_installed(installed: Path, tmp_path: Path) -> None:
    program = "import groundglow, sys; print(groundglow.__file__); from groundglow.cli import main; main()"
    job = str(ROOT / "configs" / "demo.toml")
    done = subprocess.run(
        [sys.executable, "-P", "-c", program, "run", job, "--output", str(tmp_path / "out")],
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(installed), "NUMBA_CACHE_DIR": str(tmp_path / "cache")},
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.startswith(str(installed))
    assert list((tmp_path / "out").glob("*/surface_temperature.tif"))


def test_kernels_load_where_nothing_can_be_cached(installed: Path, tmp_path: Path) -> None:
    # A file stands where each cache folder would be: nothing can be written there, even by root.
    folder = tmp_path / "locked" / "groundglow"
    shutil.copytree(installed / "groundglow", folder, ignore=shutil.ignore_patterns("__pycache__"))
    for module in folder.rglob("*.py"):
        (module.parent / "__pycache__").touch()
    program = (
        "import logging, numpy as np\nlogging.basicConfig()\n"
        "from groundglow.retrieval.chain_cloud import near_cloud\n"
        "cloud = np.zeros((9, 9), bool)\ncloud[4, 4] = True\n"
        "print(near_cloud(cloud, (0, 0, 0, 0), (30.0, 30.0), 30.0).sum())"
    )
    environment = {
        **os.environ,
        "PYTHONPATH": str(folder.parent),
        "HOME": "/dev/null",
        "XDG_CACHE_HOME": "/dev/null",
    }
    environment.pop("NUMBA_CACHE_DIR", None)
    done = subprocess.run(
        [sys.executable, "-P", "-c", program], env=environment, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip() == "4"
    assert done.stderr.count("no cache folder can be written") == 1
