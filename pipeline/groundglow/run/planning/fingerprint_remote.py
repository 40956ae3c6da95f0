"""What tells one state of a remote input from the next: the size and entity tag that its server states.

References
----------
RFC 9110, "HTTP Semantics", IETF 2022, sections 8.6 (Content-Length), 8.8.2 (Last-Modified), 8.8.3 (ETag).
"""

from __future__ import annotations

from http.client import HTTPException
from urllib.error import URLError
from urllib.request import Request, urlopen

from groundglow import __version__
from groundglow.errors import InputError
from groundglow.run.access.store_client import object_path, store_client, store_errors

_PATIENCE = 30.0  # s


def remote_state(path: str) -> tuple[int | None, str | None]:
    """Size and tag of a remote raster.

    Parameters
    ----------
    path : str
        As it was named: an address or one of GDAL's virtual paths.

    Returns
    -------
    size : int or None
        [byte]
    tag : str or None
        None where the server says nothing that could tell states apart, or the path is of another kind.

    Raises
    ------
    InputError
        If the server does not have it or does not answer.
    """
    stored = object_path(path)
    if stored is not None:
        return _object_state(stored, path)
    address = path.removeprefix("/vsicurl/")
    if address.startswith(("http://", "https://")):
        return _page_state(address)
    return None, None


def _object_state(stored: str, path: str) -> tuple[int | None, str | None]:
    client = store_client()
    with store_errors(path):
        try:
            known = client.info(stored, refresh=True)
        except FileNotFoundError as error:
            raise InputError("the store has no such object", where=path) from error
    return int(known["size"]), str(known.get("ETag", "")).strip('"') or None


def _page_state(address: str) -> tuple[int | None, str | None]:
    request = Request(address, method="HEAD", headers={"User-Agent": f"groundglow/{__version__}"})
    try:
        with urlopen(request, timeout=_PATIENCE) as answer:
            length, headers = answer.headers.get("Content-Length"), answer.headers
    except (URLError, HTTPException, OSError, ValueError) as error:
        raise InputError(f"cannot be reached ({error})", where=address) from error
    tag = headers.get("ETag") or headers.get("Last-Modified")
    return int(length) if length and length.isdecimal() else None, tag
