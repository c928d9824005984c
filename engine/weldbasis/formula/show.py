"""A formula as a reader writes it: with its names, or with one joint's figures put in."""

from __future__ import annotations

from collections.abc import Mapping

from weldbasis.formula.parse import Binary, Call, Formula, Minus, Name, Node, Number

_RANK = {"+": 1, "-": 1, "*": 2, "/": 2, "**": 4}
_SIGN = {"+": " + ", "-": " − ", "*": " × ", "/": " / ", "**": "^"}
_MINUS_RANK, _WHOLE = 3, 9


def show(formula: Formula, figures: Mapping[str, str]) -> str:
    """The formula with figures put in for names: "697 × 0.362 + 160 × tanh(40 / 35)".

    A figure that is a range, or negative, is put in brackets. A name without a figure stays a name.
    """
    return _text(formula.root, figures)[0]


def symbolic(formula: Formula) -> str:
    """The formula with its names, in the same print."""
    return _text(formula.root, {})[0]


def _text(node: Node, figures: Mapping[str, str]) -> tuple[str, int]:
    if isinstance(node, Number):
        return node.spelling, _WHOLE
    if isinstance(node, Name):
        figure = figures.get(node.name, node.name)
        plain = figure.replace(".", "", 1).replace("_", "").isalnum()
        return (figure if plain else f"({figure})"), _WHOLE
    if isinstance(node, Minus):
        text, rank = _text(node.part, figures)
        return "−" + (text if rank >= _MINUS_RANK else f"({text})"), _MINUS_RANK
    if isinstance(node, Call):
        inner = ", ".join(_text(argument, figures)[0] for argument in node.arguments)
        return f"{node.function}({inner})", _WHOLE
    return _binary(node, figures)


def _binary(node: Binary, figures: Mapping[str, str]) -> tuple[str, int]:
    rank = _RANK[node.sign]
    left, left_rank = _text(node.left, figures)
    right, right_rank = _text(node.right, figures)
    if left_rank < rank or (node.sign == "**" and left_rank <= rank):
        left = f"({left})"
    tight = node.sign in ("-", "/", "**")
    if right_rank < rank or (tight and right_rank == rank and node.sign != "**") or right_rank == _MINUS_RANK:
        right = f"({right})"
    return f"{left}{_SIGN[node.sign]}{right}", rank
