"""Reading a large JSON object member by member, with one element of its long list in memory at a time."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import IO, Any

_PIECE = 1 << 18
_SPACE = " \t\r\n"


def top_members(stream: IO[str], *, spread: str) -> Iterator[tuple[str, Any]]:
    """Members of the object in a text stream, in their order.

    Parameters
    ----------
    stream : text stream
        At the beginning of the object.
    spread : str
        Key whose value is a list that is given element by element.

    Yields
    ------
    key : str
    value
        The member's value; for ``spread``, one element of it.

    Raises
    ------
    json.JSONDecodeError
        If the text is not one JSON object.
    """
    text = _Text(stream)
    text.expect("{")
    if text.skip("}"):
        return
    while True:
        key = text.value()
        text.expect(":")
        if key == spread and text.peek() == "[":
            text.expect("[")
            yield from ((key, element) for element in _elements(text))
        else:
            yield key, text.value()
        if not text.skip(","):
            text.expect("}")
            return


def _elements(text: _Text) -> Iterator[Any]:
    if text.skip("]"):
        return
    while True:
        yield text.value()
        if not text.skip(","):
            text.expect("]")
            return


class _Text:
    """A window on the stream that grows until a value fits."""

    def __init__(self, stream: IO[str]) -> None:
        self._stream = stream
        self._buffer = ""
        self._at = 0
        self._ended = False
        self._decoder = json.JSONDecoder()

    def peek(self) -> str:
        """The next letter that is no space; empty at the end."""
        while True:
            while self._at < len(self._buffer):
                if self._buffer[self._at] not in _SPACE:
                    return self._buffer[self._at]
                self._at += 1
            if not self._more():
                return ""

    def skip(self, letter: str) -> bool:
        """Pass over a letter, if it is the next one."""
        if self.peek() != letter:
            return False
        self._at += 1
        return True

    def expect(self, letter: str) -> None:
        """Pass over a letter that must come."""
        if not self.skip(letter):
            raise json.JSONDecodeError(f"expected {letter!r}", self._buffer, self._at)

    def value(self) -> Any:
        """The next value."""
        self.peek()
        while True:
            try:
                found, end = self._decoder.raw_decode(self._buffer, self._at)
            except json.JSONDecodeError:
                if not self._more():
                    raise
                continue
            # A number at the edge of the window may go on behind it.
            if end == len(self._buffer) and self._more():
                continue
            self._at = end
            return found

    def _more(self) -> bool:
        """Widen the window; False at the end of the stream."""
        if self._ended:
            return False
        # At least as much again, so that a long value is not decoded in ever so many attempts.
        piece = self._stream.read(max(_PIECE, len(self._buffer) - self._at))
        self._ended = not piece
        self._buffer = self._buffer[self._at :] + piece
        self._at = 0
        return bool(piece)
