"""A formula as a reader writes it: with its names, or with one joint's figures put in."""

from __future__ import annotations

import re
from collections.abc import Mapping
from functools import cache

from weldbasis.formula.parse import Binary, Call, Formula, Minus, Name, Node, Number

_RANK = {"+": 1, "-": 1, "*": 2, "/": 2, "**": 4}
_SIGN = {"+": " + ", "-": " − ", "*": " × ", "/": " / ", "**": "^"}
_MINUS_RANK, _WHOLE = 3, 9
_MARK, _ALONE = "\0", "\1"  # before a name among the pieces; before one that has brackets of its own already
_PLAIN = re.compile(r"\d+\.?\d*|\.\d+|[A-Za-z_]\w*")


def show(formula: Formula, figures: Mapping[str, str]) -> str:
    """The formula with figures put in for names: "697 × 0.362 + 160 × tanh(40 / 35)".

    A figure that is a range, or negative, is put in brackets. A name without a figure stays a name.
    """
    return "".join(_filled(piece, figures) for piece in _pieces(formula))


def symbolic(formula: Formula) -> str:
    """The formula with its names, in the same print."""
    return show(formula, {})


def _filled(piece: str, figures: Mapping[str, str]) -> str:
    if not piece.startswith((_MARK, _ALONE)):
        return piece
    figure = figures.get(piece[1:], piece[1:])
    return figure if piece[0] == _ALONE or _PLAIN.fullmatch(figure) else f"({figure})"


@cache
def _pieces(formula: Formula) -> tuple[str, ...]:
    """The print as fixed pieces and marked names, in order."""
    return tuple(_text(formula.root)[0])


def _text(node: Node) -> tuple[list[str], int]:
    """The pieces of a part, and how firmly it holds together: what holds less firmly than its place needs brackets."""
    if isinstance(node, Number):
        return [node.spelling], _WHOLE
    if isinstance(node, Name):
        return [_MARK + node.name], _WHOLE
    if isinstance(node, Minus):
        text, rank = _text(node.part)
        return ["−", *(text if rank > _MINUS_RANK else _bracketed(text))], _MINUS_RANK
    if isinstance(node, Call):
        inner: list[str] = []
        for argument in node.arguments:
            inner += [", "] if inner else []
            inner += [_ALONE + argument.name] if isinstance(argument, Name) else _text(argument)[0]
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
