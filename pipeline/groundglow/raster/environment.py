"""GDAL's appetite, set by us in one place."""

from __future__ import annotations

from contextlib import AbstractContextManager, nullcontext

import rasterio
from rasterio.env import getenv, hasenv

CACHE_MEGABYTES = 64

# TRUE rather than EMPTY_DIR: world files and headers beside a raster are still found by name.
_OPTIONS = {
    "GDAL_CACHEMAX": CACHE_MEGABYTES,
    "GDAL_NUM_THREADS": "1",
    "GDAL_PAM_ENABLED": "NO",
    "GDAL_DISABLE_READDIR_ON_OPEN": "TRUE",
    "GDAL_HTTP_MAX_RETRY": "3",
    "GDAL_HTTP_RETRY_DELAY": "1",
    # Reading a compressed archive must not leave a note of its size beside it.
    "CPL_VSIL_GZIP_WRITE_PROPERTIES": "NO",
    # A server that stalls must not hold a night's run: give up on silence, not on slowness.
    "GDAL_HTTP_CONNECTTIMEOUT": "20",
    "GDAL_HTTP_LOW_SPEED_TIME": "30",
    "GDAL_HTTP_LOW_SPEED_LIMIT": "1",
}


def gdal_environment() -> AbstractContextManager[object]:
    """The settings under which every raster is opened and read.

    A small block cache, one thread, no side files of statistics, no listing of folders. Entering
    costs about 0.1 ms, and nothing where the calling thread is already inside.

    Returns
    -------
    context manager
    """
    if hasenv() and getenv().get("GDAL_PAM_ENABLED") == "NO":
        return nullcontext()
    return rasterio.Env(**_OPTIONS)  # type: ignore[no-any-return]
