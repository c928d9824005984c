"""Plain words of YAML: the value each stands for, or the trap it is, with what to write instead."""

from __future__ import annotations

import math
import re
from functools import lru_cache
from typing import NamedTuple

_INTEGER = re.compile(r"[-+]?(?:0|[1-9][0-9]*)")
_REAL = re.compile(r"[-+]?(?:[0-9]+\.[0-9]*|\.[0-9]+|[0-9]+\.?[0-9]*[eE][-+]?[0-9]+|\.[0-9]+[eE][-+]?[0-9]+)")
_SLIPPERY_REAL = re.compile(r"[-+]?[0-9]+[eE][-+]?[0-9]+|[-+]?(?:[0-9]+\.[0-9]*|\.[0-9]+)[eE][0-9]+")
_YES_NO = re.compile(r"(?:y|n|yes|no|on|off)", re.IGNORECASE)
_OTHER_BOOL = re.compile(r"(?:True|TRUE|False|FALSE)")
_NOTHING = frozenset({"", "~", "null", "Null", "NULL"})
_DATE = re.compile(r"[0-9]{4}-[0-9]{1,2}-[0-9]{1,2}(?:(?:[Tt]|\s+).*)?")
_CLOCK = re.compile(r"[-+]?[0-9]+(?::[0-5]?[0-9])+(?:\.[0-9]*)?")
_OCTAL = re.compile(r"[-+]?0[0-9_]+|[-+]?0o[0-7]+|[-+]?0x[0-9a-fA-F_]+|[-+]?0b[01_]+")
_NOT_FINITE = re.compile(r"[-+]?\.(?:inf|Inf|INF)|\.(?:nan|NaN|NAN)")
_GROUPED = re.compile(r"[-+]?[0-9]+(?:_+[0-9]+)+(?:\.[0-9_]*)?")
# Whole numbers above this cannot be kept exactly by every reader of the record.
_LARGEST_INTEGER = 2**53 - 1
_MOST_DIGITS = 40
_MISTAKEN = "plain {} is read as true or false by most YAML readers"


class Trap(NamedTuple):
    """What is wrong with a plain word, why, and what to do."""

    what: str
    why: str = ""
    do: str = ""


@lru_cache(maxsize=4096)  # a knowledge base says the same words over and over
def plain_value(word: str) -> str | int | float | bool | Trap:
    """The value of an unquoted word: true or false, a number or the text itself; or the trap it is."""
    if word in ("true", "false"):
        return word == "true"
    if _INTEGER.fullmatch(word):
        if len(word) > _MOST_DIGITS or abs(int(word)) > _LARGEST_INTEGER:
            return Trap("this number is too large to be kept exactly", "", "write it in quotes for the text")
        return int(word)
    if _REAL.fullmatch(word) and not _SLIPPERY_REAL.fullmatch(word):
        number = float(word)
        return number + 0.0 if math.isfinite(number) else Trap("this number is too large to be measured")
    return _trap(word) or word


@lru_cache(maxsize=4096)
def key_trap(word: str) -> Trap | None:
    """The trap an unquoted key is; single letters pass, for N is nitrogen."""
    if word in _NOTHING:
        return Trap("a key is empty here", "", "write 'key: value'")
    if word == "<<":
        return Trap("'<<' merges another part of the file", "merging hides what a rule says", "write it out")
    if (_YES_NO.fullmatch(word) and len(word) > 1) or word.lower() in ("true", "false"):
        return Trap(_MISTAKEN.format(word), do=f'write "{word}" in quotes')
    return None


def _trap(word: str) -> Trap | None:
    quoted = f'write "{word}" in quotes for the text'
    if word in _NOTHING:
        return Trap(
            "nothing stands after this key",
            "an empty value would be read as null",
            "write the value, or take the key out",
        )
    if _YES_NO.fullmatch(word):
        return Trap(_MISTAKEN.format(word), do=f'write "{word}" in quotes')
    if _OTHER_BOOL.fullmatch(word):
        return Trap(f"{word} is spelled {word.lower()} here", do=f"write {word.lower()}, or {quoted}")
    if _SLIPPERY_REAL.fullmatch(word):
        number = float(word)
        written = f"write {_steady(number)} for the number, or {quoted}" if math.isfinite(number) else quoted
        return Trap(f"{word} is a text to some YAML readers and a number to others", do=written)
    if _DATE.fullmatch(word):
        return Trap(f"{word} is read as a date by most YAML readers", do=quoted)
    if _CLOCK.fullmatch(word):
        return Trap(f"{word} is read as a count of seconds by some YAML readers", do=quoted)
    if _OCTAL.fullmatch(word):
        return Trap(
            f"{word} is read to base 8, 16 or 2 by some YAML readers",
            do=f"write it without the leading 0, or {quoted}",
        )
    if _NOT_FINITE.fullmatch(word):
        return Trap(
            f"{word} is no number that can be measured",
            do="write a range such as '> 38' where there is no upper end",
        )
    if _GROUPED.fullmatch(word):
        return Trap(f"{word} is a number to some YAML readers and a text to others", do="write it without '_'")
    return None


def _steady(number: float) -> str:
    """A number as every YAML reader takes it for one: with a point before its exponent."""
    mantissa, mark, exponent = repr(number).partition("e")
    return mantissa + (".0" if mark and "." not in mantissa else "") + mark + exponent
