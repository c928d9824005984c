"""Formula text into a tree of a few known parts. Text is parsed, never executed.

The grammar is ordinary arithmetic: numbers, names, + - * / **, brackets and a closed list of functions.
Python's own parser reads the text; every part that is not on the list is refused with its column.
"""

from __future__ import annotations

import ast
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TypeAlias

from weldbasis.problem import nearest

# Name and number of arguments: (least, most), most 0 for any number.
FUNCTIONS: Mapping[str, tuple[int, int]] = {
    "sqrt": (1, 1),
    "exp": (1, 1),
    "log": (1, 1),
    "log10": (1, 1),
    "tanh": (1, 1),
    "atan": (1, 1),
    "abs": (1, 1),
    "min": (2, 0),
    "max": (2, 0),
    "round_up": (2, 2),
}
_SIGNS: Mapping[type[ast.operator], str] = {ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/", ast.Pow: "**"}
_LONGEST, _DEEPEST = 2000, 60
_COMPARISONS: Mapping[type[ast.cmpop], str] = {ast.LtE: "<=", ast.Lt: "<", ast.GtE: ">=", ast.Gt: ">"}


class FormulaError(ValueError):
    """A text that is no formula; `column` counts from 1."""

    def __init__(self, message: str, column: int) -> None:
        super().__init__(message)
        self.column = column


@dataclass(frozen=True)
class Number:
    """A constant, with the spelling of its author."""

    value: float
    spelling: str


@dataclass(frozen=True)
class Name:
    """A bound name."""

    name: str


@dataclass(frozen=True)
class Minus:
    """The negative of a part."""

    part: Node


@dataclass(frozen=True)
class Binary:
    """Two parts joined by + - * / or **."""

    sign: str
    left: Node
    right: Node


@dataclass(frozen=True)
class Call:
    """A function of the closed list."""

    function: str
    arguments: tuple[Node, ...]


Node: TypeAlias = Number | Name | Minus | Binary | Call


@dataclass(frozen=True, eq=False)
class Formula:
    """A parsed formula and the text it came from; compared by identity, so that what is made of it can be kept."""

    root: Node
    text: str

    @cached_property
    def names(self) -> tuple[str, ...]:
        """The names it uses, once each, in order of appearance."""
        return tuple(dict.fromkeys(part.name for part in walk(self.root) if isinstance(part, Name)))


@dataclass(frozen=True)
class Comparison:
    """Two formulas and the sign between them: <=, <, >= or >."""

    left: Formula
    sign: str
    right: Formula


def walk(node: Node) -> Iterator[Node]:
    """Every part of a tree, a part before what it holds."""
    yield node
    if isinstance(node, Minus):
        yield from walk(node.part)
    elif isinstance(node, Binary):
        yield from walk(node.left)
        yield from walk(node.right)
    elif isinstance(node, Call):
        for argument in node.arguments:
            yield from walk(argument)


def parse_formula(text: str) -> Formula:
    """Read a formula. Raises FormulaError for anything that is not plain arithmetic of the closed list."""
    body = _python_tree(text)
    return Formula(_node(body, text, 0), text)


def parse_comparison(text: str) -> Comparison:
    """Read a comparison such as "Tp <= Ti + 5". Raises FormulaError for anything else."""
    body = _python_tree(text)
    if not isinstance(body, ast.Compare) or len(body.ops) != 1 or type(body.ops[0]) not in _COMPARISONS:
        raise FormulaError("a comparison has two sides and one of <=, <, >=, > between them", 1)
    left, right = body.left, body.comparators[0]
    sides = [Formula(_node(side, text, 0), ast.get_source_segment(text, side) or text) for side in (left, right)]
    return Comparison(sides[0], _COMPARISONS[type(body.ops[0])], sides[1])


def _python_tree(text: str) -> ast.expr:
    if len(text) > _LONGEST:
        raise FormulaError(f"a formula has at most {_LONGEST} characters, this one has {len(text)}", _LONGEST)
    if "^" in text:
        raise FormulaError("'^' is not a power here; write **", text.index("^") + 1)
    flat = text.replace("\n", " ")
    if not flat.isascii():
        at = next(place for place, sign in enumerate(flat) if not sign.isascii())
        raise FormulaError(f"{flat[at]!r} cannot stand in a formula; use plain letters and + - * / **", at + 1)
    try:
        return ast.parse(flat.strip() or "?", mode="eval").body
    except SyntaxError as fault:
        raise FormulaError(
            "this is no formula: a sign, a bracket or a name is missing or too many", max(fault.offset or 1, 1)
        ) from fault
    except (ValueError, RecursionError, MemoryError) as fault:
        raise FormulaError("this formula nests too deeply to be read", 1) from fault


def _node(tree: ast.expr, text: str, depth: int) -> Node:
    column = tree.col_offset + 1
    if depth > _DEEPEST:
        raise FormulaError("this formula nests too deeply to be read", column)
    if isinstance(tree, ast.Constant):
        return _number(tree, text, column)
    if isinstance(tree, ast.Name):
        if tree.id in FUNCTIONS:
            raise FormulaError(f"{tree.id} is a function; give it its arguments in brackets", column)
        return Name(tree.id)
    if isinstance(tree, ast.UnaryOp) and isinstance(tree.op, ast.USub | ast.UAdd):
        part = _node(tree.operand, text, depth + 1)
        return Minus(part) if isinstance(tree.op, ast.USub) else part
    if isinstance(tree, ast.BinOp) and type(tree.op) in _SIGNS:
        return Binary(_SIGNS[type(tree.op)], _node(tree.left, text, depth + 1), _node(tree.right, text, depth + 1))
    if isinstance(tree, ast.Call):
        return _call(tree, text, depth, column)
    raise FormulaError(
        f"{_what(tree)} cannot stand in a formula; it holds numbers, names, + - * / ** and functions", column
    )


def _number(tree: ast.Constant, text: str, column: int) -> Number:
    if isinstance(tree.value, bool) or not isinstance(tree.value, int | float):
        raise FormulaError(f"{tree.value!r} is no number", column)
    try:
        value = float(tree.value)
    except OverflowError as fault:
        raise FormulaError("this number is too large", column) from fault
    return Number(value, ast.get_source_segment(text.replace("\n", " ").strip(), tree) or f"{value:g}")


def _call(tree: ast.Call, text: str, depth: int, column: int) -> Call:
    if not isinstance(tree.func, ast.Name):
        raise FormulaError("only a function of the list can be called", column)
    name = tree.func.id
    if name not in FUNCTIONS:
        raise FormulaError(f"there is no function {name!r}. {nearest(name, FUNCTIONS)}", column)
    if tree.keywords:
        raise FormulaError(f"{name} takes plain arguments, without names", column)
    least, most = FUNCTIONS[name]
    if len(tree.args) < least or (most and len(tree.args) > most):
        wanted = f"{least}" if least == most else f"{least} or more"
        raise FormulaError(f"{name} takes {wanted} arguments, here it has {len(tree.args)}", column)
    return Call(name, tuple(_node(argument, text, depth + 1) for argument in tree.args))


def _what(tree: ast.expr) -> str:
    words: Mapping[type[ast.expr], str] = {
        ast.Compare: "a comparison",
        ast.BoolOp: "'and' or 'or'",
        ast.Attribute: "a dot",
        ast.Subscript: "a square bracket",
        ast.Lambda: "a lambda",
        ast.IfExp: "an 'if'",
        ast.List: "a list",
        ast.Tuple: "a comma outside a function",
        ast.Dict: "a dictionary",
        ast.Set: "a set",
        ast.JoinedStr: "a text",
        ast.Starred: "a star",
        ast.NamedExpr: "an assignment",
        ast.BinOp: "this sign",
        ast.UnaryOp: "this sign",
    }
    return words.get(type(tree), "this")
