"""Fetching a STAC document, and deciding which addresses its assets may have."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any
from urllib.error import HTTPError, URLError
from urllib.parse import unquote, urljoin, urlsplit
from urllib.request import Request, urlopen

from groundglow import __version__
from groundglow.errors import InputError

_LARGEST_DOCUMENT = 16 << 20
_PATIENCE = 30.0  # seconds
_VIRTUAL = {"http": "/vsicurl/", "https": "/vsicurl/", "s3": "/vsis3/", "gs": "/vsigs/", "az": "/vsiaz/"}
_FETCHED = ("http", "https", "file")


def has_scheme(path: str) -> bool:
    """Whether a path is an address (``scheme://...``)."""
    return re.match(r"^[A-Za-z][A-Za-z0-9+.-]*://", path) is not None


def fetch_document(address: str) -> dict[str, Any]:
    """A JSON object from a local file or over HTTP.

    Parameters
    ----------
    address : str
        A path, or an ``http``, ``https`` or ``file`` address.

    Raises
    ------
    InputError
        If it cannot be had, is too large, or is not a JSON object.
    """
    content = _fetch(address) if has_scheme(address) else _read(Path(address))
    if len(content) > _LARGEST_DOCUMENT:
        raise InputError("is too large to be a STAC document", where=address)
    try:
        document = json.loads(content.decode("utf-8-sig"))
    except (UnicodeDecodeError, json.JSONDecodeError) as error:
        raise InputError(f"is not valid JSON ({error})", where=address) from error
    except RecursionError as error:
        raise InputError("is JSON nested too deeply", where=address) from error
    if not isinstance(document, dict):
        raise InputError("is JSON, but not an object", where=address)
    return document


def _read(path: Path) -> bytes:
    try:
        with path.open("rb") as stream:
            return stream.read(_LARGEST_DOCUMENT + 1)
    except OSError as error:
        raise InputError(f"cannot be read: {error.strerror}", where=str(path)) from error


def _fetch(address: str) -> bytes:
    scheme = urlsplit(address).scheme.lower()
    if scheme == "file":
        return _read(Path(unquote(urlsplit(address).path)))
    if scheme not in _FETCHED:
        raise InputError(
            f"addresses of the scheme {scheme!r} are not fetched",
            where=address,
            remedy="Use http, https or a path",
        )
    request = Request(
        address, headers={"User-Agent": f"groundglow/{__version__}", "Accept": "application/json, */*"}
    )
    try:
        with urlopen(request, timeout=_PATIENCE) as answer:
            return bytes(answer.read(_LARGEST_DOCUMENT + 1))
    except HTTPError as error:
        raise InputError(f"the server answers {error.code} {error.reason}", where=address) from error
    except (URLError, TimeoutError, OSError, ValueError) as error:
        raise InputError(
            f"cannot be fetched ({error})", where=address, remedy="Check the address and network"
        ) from error


def asset_path(href: str, item: str) -> str:
    """GDAL's path of an asset.

    Parameters
    ----------
    href : str
        As the Item says; relative ones start at the Item.
    item : str
        Where the Item came from.

    Raises
    ------
    InputError
        If the scheme is none that is read, or an Item from the network points into this machine.
    """
    from_network = has_scheme(item) and urlsplit(item).scheme.lower() != "file"
    if has_scheme(href):
        full = href
    elif from_network:
        full = urljoin(item, href)
    else:
        base = unquote(urlsplit(item).path) if has_scheme(item) else item
        return _local(str(Path(base).absolute().parent / href), href, item)
    scheme = urlsplit(full).scheme.lower()
    if scheme == "file" and not from_network:
        return _local(unquote(urlsplit(full).path), href, item)
    prefix = _VIRTUAL.get(scheme)
    if prefix is None:
        raise InputError(
            f"the href {href!r} has a scheme that is not followed",
            where=item,
            remedy=f"Assets may be relative or absolute paths, or {', '.join(_VIRTUAL)}",
        )
    return prefix + (full if prefix == "/vsicurl/" else full.split("://", 1)[1])


def _local(path: str, href: str, item: str) -> str:
    if "/vsi" in href:
        raise InputError(
            f"the href {href!r} asks for a virtual file system, which is not followed", where=item
        )
    return path
