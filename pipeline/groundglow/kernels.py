"""The one decorator for compiled kernels.

Kernels are compiled for explicit signatures, cached beside the source or in the folder that the
environment variable ``NUMBA_CACHE_DIR`` names. Where no cache folder can be written (a read-only
install run by a user without a home) they are compiled in memory at each start, and one log line
says so. ``fastmath`` and ``parallel`` stay off: they would let the machine decide the bytes.
"""

from __future__ import annotations

import logging
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import cache, partial
from typing import TypeVar, cast

import numba

log = logging.getLogger(__name__)

Function = TypeVar("Function", bound=Callable[..., object])


def kernel(*signatures: str, inline: bool = False) -> Callable[[Function], Function]:
    """Compile a function for the given Numba signatures, without the interpreter lock.

    Parameters
    ----------
    *signatures : str
        Numba signatures, for example ``"void(float32[:, ::1], float32[:, ::1])"``. None for a
        small helper that is compiled as part of its callers (which must live in the same file:
        the cache does not see a change in another one).
    inline : bool
        Ask LLVM to inline a helper into its callers.

    Returns
    -------
    decorator
        Gives back a function with the same call signature.
    """

    def compile_it(function: Function) -> Function:
        chosen = list(signatures) or None
        compiled = partial(numba.njit, chosen, nogil=True, error_model="numpy", forceinline=inline)
        try:
            with _linear_algebra_unseen():
                return cast("Function", compiled(cache=True)(function))
        except (RuntimeError, OSError) as error:
            if isinstance(error, RuntimeError) and "cannot cache" not in str(error):
                raise
            _tell_once(str(error))
            return cast("Function", compiled()(function))

    return compile_it


@cache
def _tell_once(reason: str) -> None:
    """One line, however many kernels there are."""
    log.warning(
        "kernels are compiled anew at each start: no cache folder can be written (%s); "
        "set NUMBA_CACHE_DIR to a writable folder",
        reason,
    )


@contextmanager
def _linear_algebra_unseen() -> Iterator[None]:
    """Keep Numba's first kernel from loading scipy.linalg, which costs every start a quarter of a second.

    Numba looks for scipy's BLAS when its first kernel is made, and again when a kernel wants linear
    algebra. Ours never do; a user's own, compiled later, find it as usual.
    """
    if "scipy.linalg" in sys.modules:
        yield
        return
    sys.modules["scipy.linalg"] = None  # type: ignore[assignment]  # how Python marks a module that is not there
    try:
        yield
    finally:
        del sys.modules["scipy.linalg"]
