"""A formula as a reader writes it: with its names, or with one joint's figures put in."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache

from weldbasis.formula.parse import Binary, Call, Formula, Minus, Name, Node, Number

_RANK = {"+": 1, "-": 1, "*": 2, "/": 2, "**": 4}
_SIGN = {"+": " + ", "-": " − ", "*": " × ", "/": " / ", "**": "^"}
_MINUS_RANK, _WHOLE = 3, 9
_MARK = "\0"  # stands before a name among the pieces


def show(formula: Formula, figures: Mapping[str, str]) -> str:
    """The formula with figures put in for names: "697 × 0.362 + 160 × tanh(40 / 35)".

    A figure that is a range, or negative, is put in brackets. A name without a figure stays a name.
    """
    return "".join(piece if not is_name else _figure(figures.get(piece, piece)) for piece, is_name in _pieces(formula))


def symbolic(formula: Formula) -> str:
    """The formula with its names, in the same print."""
    return show(formula, {})


def _figure(text: str) -> str:
    return text if text.replace(".", "", 1).replace("_", "").isalnum() else f"({text})"


@cache
def _pieces(formula: Formula) -> tuple[tuple[str, bool], ...]:
    """The print as fixed pieces and names, in order."""
    text, _ = _text(formula.root)
    return tuple((piece[1:], True) if piece.startswith(_MARK) else (piece, False) for piece in text)


def _text(node: Node) -> tuple[list[str], int]:
    if isinstance(node, Number):
        return [node.spelling], _WHOLE
    if isinstance(node, Name):
        return [_MARK + node.name], _WHOLE
    if isinstance(node, Minus):
        text, rank = _text(node.part)
        return ["−", *(text if rank >= _MINUS_RANK else _bracketed(text))], _MINUS_RANK
    if isinstance(node, Call):
        inner: list[str] = []
        for argument in node.arguments:
            inner += [", "] if inner else []
            inner += _text(argument)[0]
        return [node.function, *_bracketed(inner)], _WHOLE
    return _binary(node)


def _bracketed(text: list[str]) -> list[str]:
    return ["(", *text, ")"]


def _binary(node: Binary) -> tuple[list[str], int]:
    rank = _RANK[node.sign]
    left, left_rank = _text(node.left)
    right, right_rank = _text(node.right)
    if left_rank < rank or (node.sign == "**" and left_rank <= rank):
        left = _bracketed(left)
    tight = node.sign in ("-", "/")
    if right_rank < rank or (tight and right_rank == rank) or right_rank == _MINUS_RANK:
        right = _bracketed(right)
    return [*left, _SIGN[node.sign], *right], rank
