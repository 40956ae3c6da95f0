"""What identifies an input: its size and checksum, and those of the files that belong to it."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path

from rasterio.errors import RasterioError

from groundglow.errors import InputError
from groundglow.raster.environment import gdal_environment
from groundglow.raster.open import is_local, open_raster

_CHUNK = 1 << 20


@dataclass(frozen=True)
class Fingerprint:
    """One file as it was read.

    Attributes
    ----------
    path : str
        As it was named.
    size : int or None
        In bytes; None for what is not a local file.
    sha256 : str or None
        In hexadecimal digits; None for what is not a local file.
    """

    path: str
    size: int | None
    sha256: str | None

    @property
    def multihash(self) -> str | None:
        """The checksum as the STAC file extension wants it: code and length of SHA2-256, then its digits."""
        return None if self.sha256 is None else f"1220{self.sha256}"


def fingerprint(path: str) -> Fingerprint:
    """Size and SHA-256 of a file, read in pieces.

    Parameters
    ----------
    path : str
        A file within an archive (``/vsitar/...``, ``/vsizip/...``) is identified by its archive; an
        address by its name alone.

    Raises
    ------
    InputError
        If the file is missing or cannot be read.
    """
    file = container(path)
    if file is None:
        return Fingerprint(path, None, None)
    digest = hashlib.sha256()
    size = 0
    try:
        with file.open("rb") as stream:
            while piece := stream.read(_CHUNK):
                digest.update(piece)
                size += len(piece)
    except FileNotFoundError:
        raise InputError("there is no such file", where=path) from None
    except OSError as error:
        raise InputError(f"cannot be read: {error.strerror}", where=path) from error
    return Fingerprint(path, size, digest.hexdigest())


def container(path: str) -> Path | None:
    """The local file that holds a path: the file itself, or the archive around it; None for addresses."""
    if is_local(path):
        return Path(path)
    for prefix in ("/vsitar/", "/vsizip/", "/vsigzip/"):
        if path.startswith(prefix):
            inner = path.removeprefix(prefix)
            inner = inner.strip("{}") if inner.startswith("{") and inner.endswith("}") else inner
            candidate = Path(inner.split("}", 1)[0].removeprefix("{"))
            while candidate != candidate.parent:
                if candidate.is_file():
                    return candidate
                candidate = candidate.parent
            return None
    return None


def belonging_files(path: str, *, indirect: bool = False) -> tuple[str, ...]:
    """The files that a raster consists of, the named one first.

    World files, headers, external masks and overviews, and what a VRT names, as GDAL lists them.

    Parameters
    ----------
    path, indirect
        As for :func:`groundglow.raster.open.open_raster`.

    Raises
    ------
    InputError
        If the raster cannot be opened.
    """
    dataset = open_raster(path, indirect=indirect)
    try:
        with gdal_environment():
            files = list(dataset.files)
    except RasterioError as error:
        raise InputError("its parts cannot be listed", where=path) from error
    # GDAL lists an external mask only once it has read it.
    masks = [f"{path}.msk"] if is_local(path) and Path(f"{path}.msk").is_file() else []
    return tuple(dict.fromkeys([path, *(str(file) for file in files), *masks]))
