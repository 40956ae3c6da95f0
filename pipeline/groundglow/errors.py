"""The errors a user can meet: what is wrong, where, and what to do about it.

Every error that Groundglow raises on purpose derives from :class:`GroundglowError`; the command
line prints its text on one line and leaves with its ``exit_code``. Anything else is a defect.
"""

from __future__ import annotations


class GroundglowError(Exception):
    """Base of all errors with a message for the user.

    Parameters
    ----------
    what : str
        What is wrong, in one clause, with the value found and the value needed.
    where : str, optional
        The file, key or variable at fault.
    remedy : str, optional
        What the reader can do about it.
    """

    exit_code = 3

    def __init__(self, what: str, *, where: str | None = None, remedy: str | None = None) -> None:
        super().__init__(what, where, remedy)
        self.what = what
        self.where = where
        self.remedy = remedy

    def __str__(self) -> str:
        text = f"{self.where}: {self.what}" if self.where else self.what
        return f"{text}. {self.remedy}" if self.remedy else text


class ConfigError(GroundglowError):
    """A job, scene or sensor file, or a command line, that cannot be followed as written."""

    exit_code = 2


class InputError(GroundglowError):
    """A raster, table or metadata file that is missing, damaged or not what it should be."""


class DomainError(GroundglowError):
    """A number outside what physics or a method's validity allows."""


class OutputError(GroundglowError):
    """A result that cannot be written: no permission, no space, or a folder in use."""


class BusyError(GroundglowError):
    """Another run holds what this one needs; trying again later can succeed."""

    exit_code = 75
