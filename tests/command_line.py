"""Runs the command line in this process and gives back what a shell would see."""

from __future__ import annotations

import contextlib
import io
import sys
from dataclasses import dataclass
from unittest import mock

from groundglow.cli import main


@dataclass(frozen=True)
class Finished:
    """Exit code and both streams of one command."""

    code: int
    out: str
    err: str


def groundglow(*arguments: object) -> Finished:
    """Run ``groundglow ARGUMENTS``; an exception that a shell would show as a traceback passes through."""
    out, err = io.StringIO(), io.StringIO()
    code = 0
    with (
        mock.patch.object(sys, "argv", ["groundglow", *(str(argument) for argument in arguments)]),
        contextlib.redirect_stdout(out),
        contextlib.redirect_stderr(err),
    ):
        try:
            main()
        except SystemExit as end:
            code = end.code if isinstance(end.code, int) else int(bool(end.code))
    return Finished(code, out.getvalue(), err.getvalue())
