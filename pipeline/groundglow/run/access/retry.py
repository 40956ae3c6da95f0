"""Which errors may pass by themselves, and how long to wait before trying again."""

from __future__ import annotations

import errno
from urllib.error import HTTPError, URLError

from rasterio.errors import RasterioError

from groundglow.errors import ConfigError, DomainError, GroundglowError, InputError, OutputError

# What a network file system, a store or a failing cable says; a missing file or right says something else.
_PASSING = frozenset(
    {
        errno.EIO, errno.ESTALE, errno.ETIMEDOUT, errno.EAGAIN, errno.EINTR, errno.EBUSY, errno.ENODEV,
        errno.ECONNRESET, errno.ECONNREFUSED, errno.ECONNABORTED, errno.EHOSTUNREACH, errno.ENETUNREACH,
        errno.EPIPE, errno.EREMOTEIO,
    }
)  # fmt: skip
# Request timeout, too early, too many requests.
_PASSING_ANSWERS = frozenset({408, 425, 429})
_LONGEST_PAUSE = 600.0


class ChangedInputError(InputError):
    """An input became another while it was read."""


class LostWorkerError(GroundglowError):
    """A worker of the cluster died again and again over the same piece of work."""


class LostStoreError(OutputError):
    """An object store did not answer, or not as it should."""


class StoppedError(GroundglowError):
    """The run was asked to end before this was finished."""

    exit_code = 130


def may_pass(error: BaseException) -> bool:
    """Whether trying again may help.

    Parameters
    ----------
    error : exception
        With what caused it, as ``raise ... from`` recorded it.

    Returns
    -------
    bool
    """
    if isinstance(error, ChangedInputError | LostWorkerError | LostStoreError):
        return True
    if isinstance(error, ConfigError | DomainError | OutputError):
        return False
    if isinstance(error, HTTPError):
        return error.code in _PASSING_ANSWERS or error.code >= 500
    if isinstance(error, TimeoutError | ConnectionError | URLError):
        return True
    if isinstance(error, OSError) and not isinstance(error, RasterioError):
        return error.errno in _PASSING
    if isinstance(error, RasterioError):
        return True
    return error.__cause__ is not None and may_pass(error.__cause__)


def pause(attempt: int, delay: float) -> float:
    """Seconds to wait after an attempt has failed.

    Parameters
    ----------
    attempt : int
        The attempt that failed, the first being 1.
    delay : float
        Pause after the first. [s]
    """
    return min(delay * 2.0 ** (attempt - 1), _LONGEST_PAUSE)
