"""Opening rasters: one handle a thread, and a clear word where a file is not what it should be."""

from __future__ import annotations

import re
import threading
import warnings
from collections import OrderedDict
from dataclasses import dataclass
from pathlib import Path
from weakref import WeakKeyDictionary

from rasterio.errors import NotGeoreferencedWarning, RasterioError
from rasterio.io import DatasetReader
from rasterio.windows import Window

from groundglow.errors import InputError
from groundglow.raster.drivers import allowed_drivers
from groundglow.raster.environment import gdal_environment
from groundglow.raster.grid import Grid

_HANDLES_PER_THREAD = 32
_NETWORK = ("/vsicurl/", "/vsis3/", "/vsigs/", "/vsiaz/", "http://", "https://", "s3://", "gs://", "az://")

_local = threading.local()
_warnings_lock = threading.Lock()


@dataclass(frozen=True)
class RasterInfo:
    """What the header of a raster says.

    Attributes
    ----------
    path : str
    driver : str
        GDAL's short name.
    grid : Grid
    dtypes : tuple of str
        Stored type of each band.
    nodata : tuple of float or None
        Of each band.
    scales, offsets : tuple of float
        Of each band.
    units : tuple of str or None
        Of each band.
    """

    path: str
    driver: str
    grid: Grid
    dtypes: tuple[str, ...]
    nodata: tuple[float | None, ...]
    scales: tuple[float, ...]
    offsets: tuple[float, ...]
    units: tuple[str | None, ...]


def open_raster(path: str, *, indirect: bool = False) -> DatasetReader:
    """The calling thread's handle of a raster; opened at first use, and again where the file changed.

    Parameters
    ----------
    path : str
        A local path, an address, or a path of one of GDAL's virtual file systems.
    indirect : bool
        True where another file named this one; formats that read further files are then refused.

    Returns
    -------
    rasterio dataset
        Owned by the cache: do not close it, and do not hand it to another thread.

    Raises
    ------
    InputError
        If the file is missing, empty, or not a raster.
    """
    handles: OrderedDict[object, DatasetReader] | None = getattr(_local, "handles", None)
    if handles is None:
        handles = _local.handles = OrderedDict()
    key = (path, indirect, _stamp(path))
    if key in handles:
        handles.move_to_end(key)
        return handles[key]
    dataset = _open(path, indirect)
    handles[key] = dataset
    while len(handles) > _HANDLES_PER_THREAD:
        handles.popitem(last=False)[1].close()
    return dataset


def close_rasters() -> None:
    """Close all handles of the calling thread."""
    handles = getattr(_local, "handles", None) or {}
    for dataset in handles.values():
        dataset.close()
    _local.handles = OrderedDict()


def describe_raster(path: str, *, indirect: bool = False) -> RasterInfo:
    """The header of a raster that has a place on the Earth and whose last pixel can be read.

    Parameters
    ----------
    path, indirect
        As for :func:`open_raster`.

    Returns
    -------
    RasterInfo

    Raises
    ------
    InputError
        As :func:`open_raster`; also if the raster has no coordinate reference system, no position,
        only ground control points, or ends before its last pixel.
    """
    dataset = open_raster(path, indirect=indirect)
    grid = grid_of(path, indirect=indirect)
    if is_local(path):
        _read_last_pixel(dataset, path)
    return RasterInfo(
        path=path,
        driver=dataset.driver,
        grid=grid,
        dtypes=tuple(dataset.dtypes),
        nodata=tuple(dataset.nodatavals),
        scales=tuple(dataset.scales),
        offsets=tuple(dataset.offsets),
        units=tuple(dataset.units),
    )


def grid_of(path: str, *, indirect: bool = False) -> Grid:
    """The grid of a raster, remembered with the calling thread's handle.

    Raises
    ------
    InputError
        As :func:`describe_raster`, without reading pixels.
    """
    dataset = open_raster(path, indirect=indirect)
    grids: WeakKeyDictionary[DatasetReader, Grid] | None = getattr(_local, "grids", None)
    if grids is None:
        grids = _local.grids = WeakKeyDictionary()
    if dataset not in grids:
        grids[dataset] = _grid(dataset, path)
    return grids[dataset]


def is_local(path: str) -> bool:
    """Whether a path is an ordinary one, not an address, a virtual file or a driver's own syntax."""
    return not (path.startswith("/vsi") or re.match(r"^[A-Za-z][A-Za-z0-9_+.]+:", path))


def _stamp(path: str) -> tuple[int, int, int] | None:
    """What tells one state of a local file from the next."""
    if not is_local(path):
        return None
    try:
        status = Path(path).stat()
    except OSError:
        return None
    return status.st_ino, status.st_size, status.st_mtime_ns


def _open(path: str, indirect: bool) -> DatasetReader:
    """Open a raster with the drivers that are allowed for it."""
    if is_local(path):
        _check_local_file(Path(path))
    with gdal_environment(), _warnings_lock, warnings.catch_warnings():
        warnings.simplefilter("ignore", NotGeoreferencedWarning)
        try:
            dataset = DatasetReader(path, sharing=False, driver=allowed_drivers(path, indirect=indirect))
        except RasterioError as error:
            raise InputError(
                _why_not_a_raster(path, indirect), where=path, remedy=f"GDAL says: {_tidy(str(error))}"
            ) from error
        if dataset.count == 0:
            dataset.close()
            raise InputError(
                "holds several rasters, and none was chosen",
                where=path,
                remedy=f"Name one of: {', '.join(dataset.subdatasets[:6]) or 'its parts'}",
            )
        dataset.gcps  # noqa: B018  (fills rasterio's cache while the warning is still silenced)
    return dataset


def _check_local_file(path: Path) -> None:
    """Say plainly what is wrong before GDAL says it in its own words."""
    try:
        size = path.stat().st_size
        if path.is_dir():
            # Some formats are folders; GDAL decides, and an empty folder is none of them.
            if not any(path.iterdir()):
                raise InputError("is an empty folder, not a raster", where=str(path))
            return
        with path.open("rb"):
            pass
    except FileNotFoundError:
        raise InputError(
            "there is no such file",
            where=str(path),
            remedy="Check the path; relative paths start at the scene file",
        ) from None
    except OSError as error:
        raise InputError(f"cannot be read: {error.strerror}", where=str(path)) from error
    if size == 0:
        raise InputError("the file is empty (0 bytes)", where=str(path), remedy="Fetch or write it again")


def _why_not_a_raster(path: str, indirect: bool) -> str:
    """The likeliest reason for a failure to open."""
    if path.startswith(_NETWORK):
        return "cannot be fetched, or is not a raster"
    if not is_local(path):
        return "cannot be opened as a raster"
    file = Path(path)
    if file.is_dir():
        return "is a folder, not a raster"
    with file.open("rb") as stream:
        start = stream.read(512)
    if b"<VRTDataset" in start or b"<GDAL_" in start or b"<MRF_META" in start:
        reason = "another file named it" if indirect else "its suffix does not say so"
        return f"is a file that makes GDAL read other files, which is refused because {reason}"
    if start[:4] in (b"II*\x00", b"MM\x00*", b"II+\x00", b"MM\x00+"):
        return "is a TIFF whose header is damaged or cut short"
    if b"\x00" not in start and _is_text(start):
        return "is a text file, not a raster"
    return "is not a raster that GDAL can read"


def _is_text(start: bytes) -> bool:
    """Whether bytes read as text; the last ones may cut a character in two."""
    try:
        start[:-4].decode("utf-8")
    except UnicodeDecodeError:
        return False
    return True


def _tidy(message: str) -> str:
    """GDAL's message on one line."""
    return " ".join(message.split()).rstrip(".")


def _grid(dataset: DatasetReader, path: str) -> Grid:
    """The grid of an open raster, or the reason why it has none."""
    transform, crs = dataset.transform, dataset.crs
    points, points_crs = dataset.gcps
    if points and (transform.is_identity or crs is None):
        target = points_crs.to_string() if points_crs else "EPSG:<code>"
        raise InputError(
            f"is placed by {len(points)} ground control points, not by a grid",
            where=path,
            remedy=f"Rectify it first, for example: gdalwarp -tps -r near -t_srs {target} INPUT OUTPUT",
        )
    if transform.is_identity and dataset.rpcs is not None:
        raise InputError(
            "is placed by a camera model (RPC), not by a grid",
            where=path,
            remedy="Orthorectify it first, for example: gdalwarp -rpc -to RPC_DEM=elevation.tif INPUT OUTPUT",
        )
    if transform.is_identity:
        raise InputError(
            "has no position (no affine transform)", where=path, remedy="Georeference the raster first"
        )
    if crs is None:
        raise InputError(
            "has no coordinate reference system",
            where=path,
            remedy="Write the one it was made in into it, for example: gdal_edit.py -a_srs EPSG:<code> FILE",
        )
    if transform.determinant == 0.0:
        raise InputError(f"has pixels of no size (transform {tuple(transform)[:6]})", where=path)
    return Grid(crs, transform, dataset.width, dataset.height)


def _read_last_pixel(dataset: DatasetReader, path: str) -> None:
    """Find a file that was cut short before any work is spent on it."""
    window = Window(dataset.width - 1, dataset.height - 1, 1, 1)
    try:
        with gdal_environment():
            dataset.read(dataset.count, window=window)
    except RasterioError as error:
        raise unreadable(path, error) from error


def unreadable(path: str, error: Exception) -> InputError:
    """The error for pixels that cannot be had: a damaged file, or an address that does not answer."""
    if path.startswith(_NETWORK):
        return InputError(
            "pixels cannot be fetched, or are damaged",
            where=path,
            remedy=f"Check the address, the right to read it, and the network. GDAL says: {_tidy(str(error))}",
        )
    return InputError(
        "pixels cannot be read: the file is damaged or cut short",
        where=path,
        remedy=f"Fetch or write it again. GDAL says: {_tidy(str(error))}",
    )
