"""Quality words of an agency's raster, read by rule into the flags of our own quality layer."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import ConfigError
from groundglow.quantities import FLAG

Flags = NDArray[np.uint16]
WORD_BITS = 32


@dataclass(frozen=True)
class QualityRule:
    """When a word of the quality raster sets one of our flags.

    Exactly one of ``bits``, ``field`` with ``equals``, or ``values`` is given.

    Attributes
    ----------
    flag : str
        A name of :data:`groundglow.quantities.FLAGS`.
    bits : tuple of int
        Any of these bits set.
    field : tuple of int or None
        First bit and number of bits of a field within the word.
    equals : tuple of int
        Values of the field.
    values : tuple of int
        Exact stored words.
    """

    flag: str
    bits: tuple[int, ...] = ()
    field: tuple[int, int] | None = None
    equals: tuple[int, ...] = ()
    values: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        problem = _problem(self)
        if problem:
            raise ConfigError(problem, where=f"quality rule for {self.flag!r}")


def lookup_table(rules: Sequence[QualityRule], bits: int) -> Flags:
    """Our flags for every word of a raster of 8 or 16 bits.

    Parameters
    ----------
    rules : sequence of QualityRule
        Each adds its flag where it holds.
    bits : int
        8 or 16.

    Returns
    -------
    uint16 array (2**bits,)
        The flags that all rules together set for each word.
    """
    return _lookup_table(tuple(rules), bits)


@lru_cache(maxsize=16)
def _lookup_table(rules: tuple[QualityRule, ...], bits: int) -> Flags:
    table = _flags(np.arange(1 << bits, dtype=np.int64), rules)
    table.setflags(write=False)
    return table


def flags_of_codes(codes: NDArray[np.integer], rules: Sequence[QualityRule]) -> Flags:
    """Our flags for an array of quality words.

    Parameters
    ----------
    codes : integer array, any shape
        Stored words; a negative number is read as its two's complement, bit by bit.
    rules : sequence of QualityRule
        Each adds its flag where it holds.

    Returns
    -------
    uint16 array, same shape
        Flags of :data:`groundglow.quantities.FLAGS`.
    """
    if codes.dtype in (np.uint8, np.uint16):
        return np.take(lookup_table(rules, 8 * codes.dtype.itemsize), codes)
    return _flags(codes.astype(np.int64), rules)


def _flags(words: NDArray[np.int64], rules: Sequence[QualityRule]) -> Flags:
    """All rules, one after the other."""
    flags = np.zeros(words.shape, dtype=np.uint16)
    for rule in rules:
        flags[_matches(words, rule)] |= np.uint16(FLAG[rule.flag].mask)
    return flags


def _matches(words: NDArray[np.int64], rule: QualityRule) -> NDArray[np.bool_]:
    """Where one rule holds."""
    if rule.bits:
        return np.asarray((words & sum(1 << bit for bit in set(rule.bits))) != 0)
    if rule.field is not None:
        first, length = rule.field
        return np.isin((words >> first) & ((1 << length) - 1), rule.equals)
    return np.isin(words, rule.values)


def _problem(rule: QualityRule) -> str | None:
    """What is wrong with a rule, or None."""
    if rule.flag not in FLAG:
        return f"there is no flag of that name; choose from {', '.join(FLAG)}"
    given = [name for name in ("bits", "field", "values") if getattr(rule, name)]
    if len(given) != 1:
        return f"needs exactly one of bits, field (with equals) or values, found {', '.join(given) or 'none'}"
    if bool(rule.equals) != (rule.field is not None):
        return "field and equals belong together"
    if any(not 0 <= bit < WORD_BITS for bit in rule.bits):
        return f"bits must lie in 0 to {WORD_BITS - 1}, found {list(rule.bits)}"
    if rule.field is not None:
        first, length = rule.field
        if first < 0 or length < 1 or first + length > WORD_BITS:
            return (
                f"field must be [first bit, number of bits] within {WORD_BITS} bits, found {list(rule.field)}"
            )
        if any(not 0 <= value < 1 << length for value in rule.equals):
            return (
                f"a field of {length} bits holds 0 to {(1 << length) - 1}, found equals {list(rule.equals)}"
            )
    return None
