"""Opening the files of a gridded analysis: NetCDF of both kinds, and GRIB where its library is installed.

The library is chosen by the first bytes of the file, not by its name. Nothing heavy is imported until a
file is opened.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator, Sequence
from contextlib import ExitStack, contextmanager
from importlib import import_module
from pathlib import Path
from typing import TYPE_CHECKING

from groundglow.errors import InputError

if TYPE_CHECKING:
    import xarray as xr

# What the libraries raise for files that are damaged or not what their first bytes promise.
DAMAGED = (OSError, EOFError, ValueError, TypeError, KeyError, IndexError, RuntimeError)
_MAPPED = 1 << 30  # bytes


@contextmanager
def open_analysis_file(path: Path) -> Iterator[list[xr.Dataset]]:
    """The datasets of one file, closed afterwards: one of a NetCDF file, several of a GRIB file.

    Raises
    ------
    InputError
        If the file is missing, damaged, of another format, or needs a library that is not installed.
    """
    engine = _engine(path)
    with ExitStack() as stack:
        try:
            datasets = _opened(path, engine, stack)
        except DAMAGED as error:
            raise InputError(
                f"the file is damaged or incomplete ({first_line(error)})", where=str(path)
            ) from error
        for dataset in datasets:
            stack.callback(dataset.close)
        yield datasets


def _engine(path: Path) -> str:
    """Name of the library that reads a file."""
    try:
        with path.open("rb") as stream:
            start = stream.read(8)
    except FileNotFoundError:
        raise InputError("there is no such file", where=str(path)) from None
    except OSError as error:
        raise InputError(f"the file cannot be read ({error.strerror})", where=str(path)) from error
    if start[:4] in (b"CDF\x01", b"CDF\x02"):
        return "scipy"
    if start == b"\x89HDF\r\n\x1a\n":
        _require(("h5netcdf", "h5py"), "NetCDF 4", "netcdf", path)
        return "h5netcdf"
    if start[:4] == b"GRIB":
        _require(("cfgrib",), "GRIB", "grib", path)
        return "cfgrib"
    raise InputError(
        "is neither NetCDF nor GRIB", where=str(path), remedy="Give an analysis on pressure levels as NetCDF"
    )


def _require(modules: Sequence[str], format_name: str, extra: str, path: Path) -> None:
    for module in modules:
        try:
            import_module(module)
        except (ImportError, RuntimeError, OSError) as error:  # the module itself, or the library under it
            raise InputError(
                f"is {format_name}, and {module}, which reads it, is not installed",
                where=str(path),
                remedy=f"Install groundglow[{extra}]",
            ) from error


def first_line(error: Exception) -> str:
    """What a library says is wrong, in one line."""
    return next(iter(str(error).splitlines()), type(error).__name__)


def _opened(path: Path, engine: str, stack: ExitStack) -> list[xr.Dataset]:
    if engine == "cfgrib":
        return _opened_grib(path)
    import xarray as xr  # noqa: PLC0415  (slow to import, and needed for analyses only)

    if engine == "scipy":
        # A mapped file that proves damaged cannot be closed; only large ones are mapped.
        stream = stack.enter_context(path.open("rb"))
        return [
            xr.open_dataset(stream, engine=engine, mmap=path.stat().st_size > _MAPPED, decode_timedelta=False)
        ]
    return [xr.open_dataset(path, engine=engine, decode_timedelta=False)]


def _opened_grib(path: Path) -> list[xr.Dataset]:
    import cfgrib  # noqa: PLC0415  (an extra, and slow to import)

    damaged = import_module("eccodes").CodesInternalError
    # No index files are left beside the user's data, and damaged messages are not passed over.
    options = {"indexpath": "", "errors": "raise"}
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", FutureWarning)  # of the reader, about what it asks of xarray
        try:
            return list(cfgrib.open_datasets(str(path), backend_kwargs=options))
        except damaged as error:
            raise OSError(first_line(error)) from error
