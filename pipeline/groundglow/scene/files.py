"""The files of a scene that comes as a folder or an archive, by name, without unpacking."""

from __future__ import annotations

import stat
import tarfile
import zipfile
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from groundglow.errors import InputError

# An archive is refused where its members' declared sizes pass these bounds: no scene is so large.
MOST_MEMBERS = 20_000
MOST_BYTES = 256 << 30
MOST_EXPANSION = 200
FREE_BYTES = 4 << 30  # expansion is not judged below this

_LARGEST_DOCUMENT = 8 << 20


@dataclass(frozen=True)
class SceneFiles:
    """Names within a folder or an archive.

    Attributes
    ----------
    root : Path
        The folder or archive.
    kind : str
        "folder", "tar" or "zip".
    names : mapping of str to str
        Path within the root, by its lower-case form.
    """

    root: Path
    kind: str
    names: Mapping[str, str]

    def find(self, name: str, *, beside: str = "") -> str | None:
        """The path within the root of a file named in a document, whatever the case of its letters.

        Parameters
        ----------
        name : str
            As the document says; must be a bare file name.
        beside : str
            Path within the root of the document.

        Raises
        ------
        InputError
            If the name leads elsewhere.
        """
        if PurePosixPath(name).name != name or "\\" in name or name in ("", ".", ".."):
            raise InputError(f"names a file {name!r} that is not beside it", where=f"{self.root}, {beside}")
        wanted = str(PurePosixPath(beside).parent / name)
        exact = wanted if wanted in self.names.values() else None
        return exact or self.names.get(wanted.lower())

    def raster_path(self, inner: str) -> str:
        """The path by which GDAL opens a file."""
        if self.kind == "folder":
            return str(self.root / inner)
        return f"/vsi{self.kind}/{{{self.root.resolve()}}}/{inner}"

    def text(self, inner: str) -> bytes:
        """The content of a small document.

        Raises
        ------
        InputError
            If it cannot be read, or is too large to be a document.
        """
        try:
            content = self._read(inner)
        except (OSError, tarfile.TarError, zipfile.BadZipFile, EOFError) as error:
            raise InputError(f"{inner} cannot be read ({error})", where=str(self.root)) from error
        if len(content) > _LARGEST_DOCUMENT:
            raise InputError(f"{inner} is too large to be a description of a scene", where=str(self.root))
        return content

    def _read(self, inner: str) -> bytes:
        if self.kind == "folder":
            with (self.root / inner).open("rb") as stream:
                return stream.read(_LARGEST_DOCUMENT + 1)
        if self.kind == "zip":
            with zipfile.ZipFile(self.root) as archive, archive.open(inner) as stream:
                return stream.read(_LARGEST_DOCUMENT + 1)
        with tarfile.open(self.root) as tape:
            member = tape.extractfile(inner)
            return b"" if member is None else member.read(_LARGEST_DOCUMENT + 1)


def scene_files(path: Path) -> SceneFiles | None:
    """The files of a folder, tar, tar.gz or zip; None for a path that is none of them.

    Parameters
    ----------
    path : Path
        Must exist.

    Raises
    ------
    InputError
        If an archive is damaged, or holds what an honest one does not: absolute paths, ``..``, links,
        devices, a name twice, or sizes that no scene has.
    """
    if path.is_dir():
        names = [child.name for child in sorted(path.iterdir()) if child.is_file()]
        return SceneFiles(path, "folder", {name.lower(): name for name in names})
    lower = path.name.lower()
    if lower.endswith(".zip"):
        return SceneFiles(path, "zip", _checked(path, _zip_members(path)))
    if lower.endswith((".tar", ".tar.gz", ".tgz")):
        return SceneFiles(path, "tar", _checked(path, _tar_members(path)))
    return None


def _tar_members(path: Path) -> Iterator[tuple[str, int]]:
    """Names and sizes of the files of a tape archive; headers are judged before bodies are passed."""
    try:
        with tarfile.open(path) as tape:
            for member in tape:
                if member.isdir():
                    continue
                if not member.isfile():
                    kind = "a link" if member.issym() or member.islnk() else "a device"
                    raise _refused(path, f"{member.name!r} is {kind}")
                yield member.name, member.size
    except (tarfile.TarError, EOFError, OSError) as error:
        raise InputError(
            f"is not a complete tar archive ({error})", where=str(path), remedy="Fetch it again"
        ) from error


def _zip_members(path: Path) -> Iterator[tuple[str, int]]:
    """Names and sizes of the files of a zip archive."""
    try:
        with zipfile.ZipFile(path) as archive:
            for member in archive.infolist():
                if member.is_dir():
                    continue
                if stat.S_ISLNK(member.external_attr >> 16):
                    raise _refused(path, f"{member.filename!r} is a link")
                if member.flag_bits & 1:
                    raise _refused(path, f"{member.filename!r} is encrypted")
                yield member.filename, member.file_size
    except (zipfile.BadZipFile, EOFError, OSError) as error:
        raise InputError(
            f"is not a complete zip archive ({error})", where=str(path), remedy="Fetch it again"
        ) from error


def _checked(path: Path, members: Iterator[tuple[str, int]]) -> dict[str, str]:
    """Names by their lower-case form, after every check."""
    packed = path.stat().st_size
    names: dict[str, str] = {}
    total = 0
    for name, size in members:
        parts = PurePosixPath(name).parts
        if name.startswith(("/", "\\")) or ".." in parts or "\\" in name or ":" in parts[0]:
            raise _refused(path, f"{name!r} leads out of it")
        plain = str(PurePosixPath(name))
        if plain.lower() in names:
            raise _refused(path, f"{name!r} is in it twice")
        names[plain.lower()] = name
        total += size
        if len(names) > MOST_MEMBERS:
            raise _refused(path, f"it holds more than {MOST_MEMBERS} files")
        if total > MOST_BYTES or (total > FREE_BYTES and total > MOST_EXPANSION * packed):
            raise _refused(path, f"it would unpack to {total >> 20} MiB or more from {packed >> 20} MiB")
    return names


def _refused(path: Path, reason: str) -> InputError:
    return InputError(
        f"the archive is refused: {reason}",
        where=str(path),
        remedy="Repack the scene's own files into a plain archive",
    )
