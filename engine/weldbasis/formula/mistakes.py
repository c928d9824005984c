"""What is wrong with a text that is no formula, said as its author would want to hear it."""

from __future__ import annotations

import re
from collections.abc import Iterator

_TOKEN = re.compile(r"(\d+\.?\d*(?:[eE][-+]?\d+)?|\.\d+(?:[eE][-+]?\d+)?)|([A-Za-z_]\w*)|(\*\*|\S)")
_NUMBER = re.compile(r"(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?")
_INSTEAD = {
    "×": "write *",
    "·": "write *",
    "÷": "write /",
    "−": "write the plain -",
    "–": "write the plain -",
    "²": "write **2",
    "³": "write **3",
    "√": "write sqrt(…)",
    "≤": "write <=",
    "≥": "write >=",
}


def foreign_sign(text: str) -> tuple[str, int] | None:
    """The first character that no formula holds: what to say of it and its column; None where there is none."""
    for column, sign in enumerate(text, 1):
        if sign == "^":
            return "'^' is not a power here; write **", column
        if sign in "#\\" or not sign.isascii() or not (sign.isprintable() or sign in "\t\r\n"):
            do = _INSTEAD.get(sign, "use plain letters and + - * / **")
            return f"{sign!r} cannot stand in a formula; {do}", column
    return None


def is_plain_number(spelling: str) -> bool:
    """Whether a number is spelled in plain decimals, such as 697, 0.35 or 1.0e-3."""
    return _NUMBER.fullmatch(spelling) is not None


def what_is_missing(text: str) -> tuple[str, int] | None:
    """For a text that does not parse: a sign left out between two parts, or a bracket without its other half."""
    return _missing_sign(text) or _lone_bracket(text)


def _missing_sign(text: str) -> tuple[str, int] | None:
    before = ""
    for word, column, is_operand in _words(text):
        if before and (is_operand or word == "("):
            return f"a sign is missing between {before!r} and {word!r}; to multiply, write *", column
        before = word if is_operand or word == ")" else ""
        if is_operand and text[column - 1 + len(word) :].lstrip().startswith("(") and not word[0].isdigit():
            before = ""  # a name before a bracket calls a function
    return None


def _lone_bracket(text: str) -> tuple[str, int] | None:
    still_open: list[int] = []
    for word, column, _ in _words(text):
        if word == "(":
            still_open.append(column)
        elif word == ")" and not still_open:
            return "this bracket closes nothing", column
        elif word == ")":
            still_open.pop()
    return ("this bracket is never closed", still_open[-1]) if still_open else None


def _words(text: str) -> Iterator[tuple[str, int, bool]]:
    for match in _TOKEN.finditer(text):
        number, name, sign = match.groups()
        yield number or name or sign, match.start() + 1, sign is None
