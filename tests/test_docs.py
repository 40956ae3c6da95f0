"""The guide is current and true: generated pages are those of the code, and its examples run."""

from __future__ import annotations

import importlib.util
import json
import re
import tomllib
from pathlib import Path
from types import ModuleType

import jsonschema
import numpy as np
import pytest
import rasterio

from command_line import groundglow
from groundglow.documents import checked
from groundglow.quantities import FLAGS
from groundglow.run.config.job import Job
from groundglow.scene.scene_document import SceneDocument
from groundglow.scene.sensor_document import SensorDocument
from invented_scene import paint_scene

ROOT = Path(__file__).resolve().parent.parent
DOCS = ROOT / "docs"
PAGES = sorted(DOCS.glob("*.md"))


@pytest.fixture(scope="module")
def reference() -> ModuleType:
    described = importlib.util.spec_from_file_location("build_reference", DOCS / "build_reference.py")
    assert described is not None
    assert described.loader is not None
    module = importlib.util.module_from_spec(described)
    described.loader.exec_module(module)
    return module


def code(page: str, language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```", (DOCS / page).read_text(), re.MULTILINE | re.DOTALL)


@pytest.mark.parametrize("name", ["job-file.md", "layers.md", "sensors-shipped.md", "job.schema.json"])
def test_generated_pages_are_current(reference: ModuleType, name: str) -> None:
    assert (DOCS / name).read_text() == reference.pages()[name], "run: python docs/build_reference.py"


def test_every_key_of_the_job_file_is_described(reference: ModuleType) -> None:
    schema = json.loads((DOCS / "job.schema.json").read_text())
    page = (DOCS / "job-file.md").read_text()
    for model in (schema, *schema["$defs"].values()):
        for key in model["properties"]:
            assert f"| `{key}` |" in page
    # A row without a meaning teaches nothing; a few numbers speak for themselves beside their table's title.
    bare = re.findall(r"^\| `(\w+)` \|.*\|  \|$", page, re.MULTILINE)
    assert len(bare) < 30, bare


def test_every_flag_is_in_the_guide() -> None:
    page = (DOCS / "layers.md").read_text()
    for flag in FLAGS:
        assert f"| {flag.mask} | `{flag.name}` | {flag.title} |" in page


@pytest.mark.parametrize("path", sorted((ROOT / "configs").glob("*.toml")), ids=lambda path: path.name)
def test_the_schema_takes_the_ready_job_files(path: Path) -> None:
    schema = json.loads((DOCS / "job.schema.json").read_text())
    jsonschema.Draft202012Validator.check_schema(schema)
    content = json.loads(json.dumps(tomllib.loads(path.read_text()), default=str))
    jsonschema.validate(content, schema)
    checked(Job, tomllib.loads(path.read_text()), where=path.name)


@pytest.mark.parametrize(
    "wrong",
    [{"output": 3}, {"lairs": {}}, {"temperature": {"method": "guess"}}],
    ids=["kind", "unknown", "choice"],
)
def test_the_schema_refuses_what_the_program_refuses(wrong: dict[str, object]) -> None:
    schema = json.loads((DOCS / "job.schema.json").read_text())
    content = tomllib.loads((ROOT / "configs" / "noise-only.toml").read_text()) | wrong
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(content, schema)


def test_the_schema_is_what_the_command_prints() -> None:
    found = groundglow("job-schema")
    assert (found.code, found.out) == (0, (DOCS / "job.schema.json").read_text())


@pytest.mark.parametrize("number", [0, 1])
def test_the_python_examples_run(number: int, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    example = code("python.md", "python")[number].replace('"maps"', repr(str(tmp_path / "maps")))
    monkeypatch.chdir(ROOT)
    names: dict[str, object] = {}
    exec(compile(example, f"docs/python.md, example {number + 1}", "exec"), names)
    if number == 0:
        with rasterio.open(tmp_path / "maps" / "surface_temperature.tif") as raster:
            assert raster.units == ("K",)
    else:
        found = names["maps"]["surface_temperature"].values  # type: ignore[index]  # (a name of the example)
        assert 280.0 < np.nanmean(found) < 320.0


def test_the_commands_of_the_stage_page_run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    paint_scene(tmp_path)
    monkeypatch.chdir(tmp_path)
    (script,) = code("stages.md", "sh")
    commands = script.replace("\\\n", " ").strip().split("\n")
    assert len(commands) == 7
    for command in commands:
        program, *arguments = command.split()
        assert program == "groundglow"
        found = groundglow(*arguments)
        assert (found.code, found.err) == (0, ""), command
    assert (tmp_path / "maps" / "scene" / "surface_temperature.tif").is_file()


def test_the_sensor_of_the_guide_is_one() -> None:
    (text,) = code("sensors.md", "toml")
    sensor = checked(SensorDocument, tomllib.loads(text), where="docs/sensors.md").sensor(DOCS)
    assert sensor.bands["1"].response.effective_wavelength == pytest.approx(10.9, abs=0.05)


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_links_lead_somewhere(page: Path) -> None:
    for target in re.findall(r"\]\(([^)#]+)\)", page.read_text()):
        if not target.startswith("https://"):
            assert (DOCS / target).exists(), target


def test_commands_named_in_the_guide_exist() -> None:
    listed = groundglow("--help").out
    for page in PAGES:
        for command in re.findall(r"(?:`|^)groundglow ([a-z][a-z-]+)", page.read_text(), re.MULTILINE):
            assert re.search(rf"^  {command}\b", listed, re.MULTILINE), f"{page.name}: {command}"


@pytest.mark.parametrize(
    "command",
    ["run", "plan", "radiance", "brightness-temperature", "emissivity", "atmosphere", "surface-temperature", "flux",
     "layers", "explain"],
)  # fmt: skip
def test_help_says_what_is_read_what_is_written_and_how_it_ends(command: str) -> None:
    found = groundglow(command, "--help")
    assert found.code == 0
    text = " ".join(found.out.split())
    assert "Exit codes: 0" in text
    assert re.search(r"Reads|Writes|writes|written", text)


def test_the_readmes_job_and_scene_are_what_the_models_take() -> None:
    blocks = re.findall(r"```toml\n(.*?)```", (ROOT / "README.md").read_text(), flags=re.DOTALL)
    job, scene = (tomllib.loads(block) for block in blocks)
    assert checked(Job, job, where="README.md").emissivity.source == "land-cover"
    assert checked(SceneDocument, scene, where="README.md").scene.name == "harbour-2026-07-14"
