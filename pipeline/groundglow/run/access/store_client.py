"""The client of an S3-compatible store, set up by the same environment variables as GDAL's own.

GDAL reads rasters from stores by itself; this client does what GDAL's raster interface does not:
listing, conditional creation, plain uploads, and telling whether an object has changed.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from functools import lru_cache
from typing import Any

from groundglow.errors import InputError, OutputError
from groundglow.run.access.retry import LostStoreError

_SCHEME = "s3://"
_VIRTUAL = "/vsis3/"


def is_store_address(address: str) -> bool:
    """Whether an address names a store."""
    return address.startswith(_SCHEME)


def object_path(path: str) -> str | None:
    """Bucket and key of a raster's path; None where it is in no store."""
    for prefix in (_SCHEME, _VIRTUAL):
        if path.startswith(prefix):
            return path.removeprefix(prefix)
    return None


@lru_cache(maxsize=1)
def store_client() -> Any:
    """The client; credentials and region from the places every S3 client looks at.

    Raises
    ------
    InputError
        If its package is not installed.
    """
    try:
        import s3fs  # noqa: PLC0415  (half a second of import, and an extra)
    except ImportError as error:
        raise InputError(
            "an object store needs the package 's3fs'",
            where="s3://",
            remedy="Install it with: pip install 'groundglow[store]'",
        ) from error
    return s3fs.S3FileSystem(endpoint_url=_endpoint(), use_listings_cache=False, default_cache_type="none")


def _endpoint() -> str | None:
    """The store's address, as GDAL's variables or the common one say; None for the usual one."""
    named = os.environ.get("AWS_S3_ENDPOINT")
    if named is None:
        return os.environ.get("AWS_ENDPOINT_URL_S3") or os.environ.get("AWS_ENDPOINT_URL")
    if "://" in named:
        return named
    plain = os.environ.get("AWS_HTTPS", "YES").upper() in ("NO", "FALSE", "OFF", "0")
    return f"{'http' if plain else 'https'}://{named}"


@contextmanager
def store_errors(where: str) -> Iterator[None]:
    """Say in our words what keeps a store from being written.

    Raises
    ------
    OutputError
        Where trying again cannot help; else a :class:`LostStoreError`.
    """
    from botocore.exceptions import BotoCoreError, ClientError, NoCredentialsError  # noqa: PLC0415  (an extra)

    try:
        yield
    except NoCredentialsError as error:
        raise OutputError(
            "the store's credentials are not known",
            where=where,
            remedy="Set AWS_ACCESS_KEY_ID and AWS_SECRET_ACCESS_KEY, or AWS_PROFILE",
        ) from error
    except PermissionError as error:
        raise OutputError(f"the store refuses to be written ({error})", where=where) from error
    except FileNotFoundError as error:
        raise OutputError(f"the store has no such place ({error})", where=where) from error
    except (BotoCoreError, ClientError, OSError) as error:
        raise LostStoreError(f"the store cannot be reached or written ({error})", where=where) from error
