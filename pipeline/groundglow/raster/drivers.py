"""Which of GDAL's drivers may open a file: those that read further files only on the user's own word."""

from __future__ import annotations

from functools import lru_cache

from rasterio.env import Env

# Drivers whose files name further files or addresses to read. The suffixes are those under which a
# user names such a file on purpose.
_READS_OTHER_FILES = {
    "VRT": (".vrt",),
    "MRF": (".mrf",),
    "WMS": (".xml", ".wms"),
    "WMTS": (".xml", ".wmts"),
    "WCS": (".xml", ".wcs"),
    "GTI": (".gti", ".gpkg", ".fgb"),
    "STACIT": (".json",),
    "STACTA": (".json",),
    "TIL": (".til",),
    "ECRGTOC": (".xml",),
    "RPFTOC": (".toc",),
    "DIMAP": (".xml", ".dim"),
    "PDS4": (".xml",),
    "SENTINEL2": (".xml",),
    "SAFE": (".xml", ".safe"),
    "FAST": (".fst",),
    "ISIS3": (".lbl", ".cub"),
    "PDS": (".lbl", ".img"),
    "VICAR": (".lbl", ".vic"),
    "PAux": (".aux",),
    "DERIVED": (),
    "DAAS": (),
    "EEDAI": (),
    "PLMOSAIC": (),
    "HTTP": (),
}


@lru_cache(maxsize=64)
def _drivers_without(refused: frozenset[str]) -> tuple[str, ...]:
    with Env() as environment:
        return tuple(name for name in environment.drivers() if name not in refused)


def allowed_drivers(path: str, *, indirect: bool) -> list[str]:
    """All drivers but those that read other files, unless the user names such a file directly.

    Parameters
    ----------
    path : str
        Its suffix says whether it was meant to be such a file.
    indirect : bool
        True where another file named this one.

    Returns
    -------
    list of str
        GDAL's short names, in GDAL's order of trial.
    """
    lower = path.lower()
    refused = {
        name
        for name, suffixes in _READS_OTHER_FILES.items()
        if indirect or not (suffixes and lower.endswith(suffixes))
    }
    return list(_drivers_without(frozenset(refused)))
