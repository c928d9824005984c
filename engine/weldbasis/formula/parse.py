"""Formula text into a tree of a few known parts. Text is parsed, never executed.

The grammar is ordinary arithmetic: numbers, names, + - * / **, brackets and a closed list of functions.
Python's own parser reads the text; every part that is not on the list is refused with its column.
"""

from __future__ import annotations

import ast
import math
import warnings
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import TypeAlias

from weldbasis.formula.mistakes import foreign_sign, is_plain_number, what_is_missing
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
_COMPARISONS: Mapping[type[ast.cmpop], str] = {ast.LtE: "<=", ast.Lt: "<", ast.GtE: ">=", ast.Gt: ">"}
_LONGEST, _DEEPEST = 2000, 100
_TOO_DEEP = "this formula nests too deeply to be read"
_HOLDS = "it holds numbers, names, + - * / ** and functions"


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


@dataclass(frozen=True)
class Formula:
    """A parsed formula and the text it came from; the text alone settles equality, since it settles the tree."""

    root: Node = field(compare=False)
    text: str

    @cached_property
    def names(self) -> tuple[str, ...]:
        """The names it uses, once each, in order of appearance."""
        return names_in(self.root)


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


def names_in(node: Node) -> tuple[str, ...]:
    """The names a tree uses, once each, in order of appearance."""
    return tuple(dict.fromkeys(part.name for part in walk(node) if isinstance(part, Name)))


def parse_formula(text: str) -> Formula:
    """Read a formula. Raises FormulaError for anything that is not plain arithmetic of the closed list."""
    source = _Source(text)
    return Formula(source.node(source.tree()), text)


def parse_comparison(text: str) -> Comparison:
    """Read a comparison such as "Tp <= Ti + 5". Raises FormulaError for anything else."""
    source = _Source(text)
    tree = source.tree()
    if not isinstance(tree, ast.Compare):
        raise FormulaError("a comparison has two sides and one of <=, <, >=, > between them", source.column(tree))
    sides = [tree.left, *tree.comparators]
    if len(sides) > 2:
        raise FormulaError("a comparison has two sides only; write two rules instead", source.column(sides[2]))
    if type(tree.ops[0]) not in _COMPARISONS:
        at = source.column(tree.left) + len(source.spelling(tree.left)) + 1
        raise FormulaError("the sign of a comparison is <=, <, >= or >", at)
    left, right = (Formula(source.node(side), source.spelling(side)) for side in sides)
    return Comparison(left, _COMPARISONS[type(tree.ops[0])], right)


class _Source:
    """One text being read: Python's tree of it, and where in the text a part stands."""

    def __init__(self, text: str) -> None:
        self.text = " ".join(text.splitlines())
        self.code = self.text.strip()
        self.shift = len(self.text) - len(self.text.lstrip())

    def column(self, tree: ast.expr) -> int:
        return tree.col_offset + self.shift + 1

    def spelling(self, tree: ast.expr) -> str:
        return self.code[tree.col_offset : tree.end_col_offset]

    def refuse(self, tree: ast.expr, message: str) -> FormulaError:
        return FormulaError(message, self.column(tree))

    def tree(self) -> ast.expr:
        """Python's reading of the text, not yet checked for what it holds."""
        if len(self.text) > _LONGEST:
            raise FormulaError(
                f"a formula has at most {_LONGEST} characters, this one has {len(self.text)}", _LONGEST + 1
            )
        if fault := foreign_sign(self.text):
            raise FormulaError(*fault)
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # Python's advice on odd code is no concern of a formula's author
                return ast.parse(self.code or "?", mode="eval").body
        except (SyntaxError, ValueError, RecursionError, MemoryError) as fault_there:
            raise self._not_read(fault_there) from fault_there

    def _not_read(self, fault: Exception) -> FormulaError:
        if not isinstance(fault, SyntaxError) or "too many nested" in fault.msg:
            return FormulaError(_TOO_DEEP, 1)
        if missing := what_is_missing(self.text):
            return FormulaError(*missing)
        column = max(fault.offset or 1, 1) + self.shift if self.code else 1
        return FormulaError("this is no formula: a sign, a bracket or a name is missing or too many", column)

    def node(self, tree: ast.expr, depth: int = 0) -> Node:
        """Our own tree, of what a formula may hold and nothing else."""
        if depth > _DEEPEST:
            raise self.refuse(tree, _TOO_DEEP)
        if isinstance(tree, ast.Constant):
            return self._number(tree)
        if isinstance(tree, ast.Name):
            if tree.id in FUNCTIONS:
                raise self.refuse(tree, f"{tree.id} is a function; give it its arguments in brackets")
            return Name(tree.id)
        if isinstance(tree, ast.UnaryOp) and isinstance(tree.op, ast.USub):
            return Minus(self.node(tree.operand, depth + 1))
        if isinstance(tree, ast.BinOp) and type(tree.op) in _SIGNS:
            left, right = self.node(tree.left, depth + 1), self.node(tree.right, depth + 1)
            return Binary(_SIGNS[type(tree.op)], left, right)
        if isinstance(tree, ast.Call):
            return self._call(tree, depth)
        if isinstance(tree, ast.Tuple):
            raise self.refuse(tree, "a comma outside a function cannot stand in a formula; a decimal point is a point")
        raise self.refuse(tree, f"{_what(tree)} cannot stand in a formula; {_HOLDS}")

    def _number(self, tree: ast.Constant) -> Number:
        spelling = self.spelling(tree)
        if isinstance(tree.value, bool) or not isinstance(tree.value, int | float):
            raise self.refuse(tree, f"{tree.value!r} is no number")
        if not is_plain_number(spelling):
            raise self.refuse(tree, f"{spelling} is no number of a formula; write it in plain decimals")
        if not math.isfinite(float(spelling)):
            raise self.refuse(tree, "this number is too large")
        return Number(float(spelling), spelling)

    def _call(self, tree: ast.Call, depth: int) -> Call:
        if isinstance(tree.func, ast.Constant):
            raise self.refuse(tree, f"a sign is missing after {self.spelling(tree.func)}; to multiply, write *")
        if not isinstance(tree.func, ast.Name):
            raise self.refuse(tree, "only a function of the list can be called")
        name = tree.func.id
        if name not in FUNCTIONS:
            raise self.refuse(tree, f"there is no function {name!r}. {nearest(name, FUNCTIONS)}")
        if tree.keywords:
            raise self.refuse(tree, f"{name} takes plain arguments, without names")
        least, most = FUNCTIONS[name]
        if len(tree.args) < least or (most and len(tree.args) > most):
            wanted = f"{least} argument{'s' if least > 1 else ''}" if least == most else f"{least} or more arguments"
            raise self.refuse(tree, f"{name} takes {wanted}, here it has {len(tree.args)}")
        return Call(name, tuple(self.node(argument, depth + 1) for argument in tree.args))


_WORDS: Mapping[type[ast.expr], str] = {
    ast.Compare: "a comparison",
    ast.BoolOp: "'and' or 'or'",
    ast.Attribute: "a dot",
    ast.Subscript: "a square bracket",
    ast.Lambda: "a lambda",
    ast.IfExp: "an 'if'",
    ast.List: "a list",
    ast.Dict: "a dictionary",
    ast.Set: "a set",
    ast.JoinedStr: "a text",
    ast.Starred: "a star",
    ast.NamedExpr: "an assignment",
    ast.BinOp: "this sign",
    ast.UnaryOp: "this sign",
}


def _what(tree: ast.expr) -> str:
    return _WORDS.get(type(tree), "this")
