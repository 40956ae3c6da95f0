"""Folders and archives give the same scene; dishonest archives are refused."""

from __future__ import annotations

import io
import os
import tarfile
import zipfile
from pathlib import Path

import pytest

from groundglow.errors import ConfigError, InputError
from groundglow.raster.fingerprint import fingerprint
from groundglow.scene.files import scene_files
from groundglow.scene.open import open_scene
from level1_scenes import GRID, Level1Scene, as_json, collection_2
from painted_rasters import read_all


def packed(painted: Level1Scene, path: Path, inside: str = "") -> Path:
    """The scene's files in an archive of the kind that its name says."""
    files = sorted(painted.folder.iterdir())
    if path.suffix == ".zip":
        with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
            for file in files:
                archive.write(file, inside + file.name)
    else:
        with tarfile.open(path, "w:gz" if path.name.endswith("gz") else "w") as tape:
            for file in files:
                tape.add(file, inside + file.name)
    return path


@pytest.mark.parametrize("name", ["scene.tar", "scene.tar.gz", "scene.tgz", "scene.zip", "a {b} ü.tar"])
@pytest.mark.parametrize("inside", ["", "LC09/data/"])
def test_an_archive_reads_like_its_folder(name: str, inside: str, tmp_path: Path) -> None:
    if "{" in name:
        name = name.replace("{b}", "b")
    painted = Level1Scene(tmp_path / "folder", collection_2())
    plain = open_scene(str(painted.folder))
    archived = open_scene(str(packed(painted, tmp_path / name, inside)))
    assert archived.name == plain.name
    assert archived.notes == plain.notes
    for one, other in zip(plain.sources(), archived.sources(), strict=True):
        assert other.indirect
        assert read_all(other, GRID).values.tobytes() == read_all(one, GRID).values.tobytes()
    assert {file.name for file in tmp_path.iterdir()} == {"folder", name}


def test_an_archive_stands_for_its_members_in_the_provenance(tmp_path: Path) -> None:
    painted = Level1Scene(tmp_path / "folder", collection_2())
    archive = packed(painted, tmp_path / "scene.tar")
    source = open_scene(str(archive)).thermal[0].source
    assert fingerprint(source.path).sha256 == fingerprint(str(archive)).sha256


def test_text_and_json_form_together_are_one_scene(tmp_path: Path) -> None:
    painted = Level1Scene(tmp_path, collection_2())
    painted.metadata.with_suffix(".json").write_bytes(as_json(painted.groups))
    assert open_scene(str(tmp_path)).origin.endswith("_MTL.txt")


def test_two_scenes_in_one_folder(tmp_path: Path) -> None:
    Level1Scene(tmp_path, collection_2())
    Level1Scene(tmp_path, collection_2("LC09_L1TP_193027_20220730_20230101_02_T1"))
    with pytest.raises(ConfigError, match=r"holds 2 scenes, and one is needed. Name one of: LC09"):
        open_scene(str(tmp_path))


def test_a_folder_without_a_description(tmp_path: Path) -> None:
    (tmp_path / "a.txt").write_text("x")
    with pytest.raises(InputError, match=r"holds no description of a scene. Name a scene file"):
        open_scene(str(tmp_path))
    with pytest.raises(InputError, match="there is no such file or folder"):
        open_scene(str(tmp_path / "none"))
    with pytest.raises(InputError, match="is not a description of a scene"):
        open_scene(str(tmp_path / "a.txt"))


def tape_of(path: Path, *members: tarfile.TarInfo) -> Path:
    with tarfile.open(path, "w") as tape:
        for member in members:
            tape.addfile(member, io.BytesIO(b"x" * member.size))
    return path


def member(name: str, kind: bytes = tarfile.REGTYPE, target: str = "", size: int = 1) -> tarfile.TarInfo:
    info = tarfile.TarInfo(name)
    info.type, info.linkname, info.size = kind, target, size if kind == tarfile.REGTYPE else 0
    return info


@pytest.mark.parametrize(
    ("members", "message"),
    [
        ([member("/etc/a_MTL.txt")], "'/etc/a_MTL.txt' leads out of it"),
        ([member("../a_MTL.txt")], "leads out of it"),
        ([member("x/../../a")], "leads out of it"),
        ([member("C:/a")], "leads out of it"),
        ([member("x\\..\\a")], "leads out of it"),
        ([member("a", tarfile.SYMTYPE, "/etc/passwd")], "'a' is a link"),
        ([member("a", tarfile.LNKTYPE, "b")], "'a' is a link"),
        ([member("a", tarfile.FIFOTYPE)], "'a' is a device"),
        ([member("a"), member("A")], "'A' is in it twice"),
    ],
)
def test_dishonest_tars(members: list[tarfile.TarInfo], message: str, tmp_path: Path) -> None:
    path = tape_of(tmp_path / "bad.tar", *members)
    with pytest.raises(InputError, match=r"bad.tar: the archive is refused: ") as caught:
        open_scene(str(path))
    assert message in str(caught.value)
    assert [file.name for file in tmp_path.iterdir()] == ["bad.tar"]


@pytest.mark.parametrize("name", ["/a", "../a", "x/../../a"])
def test_dishonest_zips(name: str, tmp_path: Path) -> None:
    with zipfile.ZipFile(tmp_path / "bad.zip", "w") as archive:
        archive.writestr(zipfile.ZipInfo(name), "x")
    with pytest.raises(InputError, match=r"the archive is refused: .* leads out of it"):
        open_scene(str(tmp_path / "bad.zip"))


def test_a_link_in_a_zip(tmp_path: Path) -> None:
    info = zipfile.ZipInfo("a_MTL.txt")
    info.external_attr = 0o120777 << 16
    with zipfile.ZipFile(tmp_path / "bad.zip", "w") as archive:
        archive.writestr(info, "/etc/passwd")
    with pytest.raises(InputError, match=r"'a_MTL.txt' is a link"):
        open_scene(str(tmp_path / "bad.zip"))


def test_bombs_are_refused_by_what_their_headers_say(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("groundglow.scene.files.FREE_BYTES", 1 << 20)
    with zipfile.ZipFile(tmp_path / "bomb.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("a_MTL.txt", bytes(8 << 20))
    with pytest.raises(InputError, match="would unpack to 8 MiB or more from 0 MiB"):
        open_scene(str(tmp_path / "bomb.zip"))
    # A tape archive whose only header claims more than any scene has: refused before the body is passed.
    huge = tarfile.TarInfo("a_MTL.txt")
    huge.size = 1 << 40
    (tmp_path / "bomb.tar").write_bytes(huge.tobuf(tarfile.GNU_FORMAT) + bytes(4096))
    with pytest.raises(InputError, match="would unpack to 1048576 MiB or more"):
        open_scene(str(tmp_path / "bomb.tar"))
    monkeypatch.setattr("groundglow.scene.files.MOST_MEMBERS", 3)
    path = tape_of(tmp_path / "many.tar", *(member(f"f{n}") for n in range(5)))
    with pytest.raises(InputError, match="holds more than 3 files"):
        open_scene(str(path))


@pytest.mark.parametrize("name", ["scene.tar", "scene.tar.gz", "scene.zip"])
def test_archives_cut_short_or_of_another_kind(name: str, tmp_path: Path) -> None:
    path = packed(Level1Scene(tmp_path / "folder", collection_2()), tmp_path / name)
    os.truncate(path, path.stat().st_size // 3)
    with pytest.raises(InputError, match=r"is not a complete (tar|zip) archive.*Fetch it again"):
        open_scene(str(path))
    path.write_text("not an archive at all, only a few words of text")
    with pytest.raises(InputError, match=r"is not a complete (tar|zip) archive"):
        open_scene(str(path))


def test_names_lead_nowhere_else(tmp_path: Path) -> None:
    (tmp_path / "a.tif").write_text("x")
    files = scene_files(tmp_path)
    assert files is not None
    assert files.find("A.TIF") == "a.tif"
    assert files.find("b.tif") is None
    for name in ("../a.tif", "/a.tif", "x/a.tif", "..", "", "x\\a.tif"):
        with pytest.raises(InputError, match="that is not beside it"):
            files.find(name)


def test_a_large_document_is_not_swallowed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("groundglow.scene.files._LARGEST_DOCUMENT", 1000)
    painted = Level1Scene(tmp_path, collection_2())
    with pytest.raises(InputError, match="is too large to be a description of a scene"):
        open_scene(str(painted.metadata))
