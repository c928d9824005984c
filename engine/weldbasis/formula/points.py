"""A formula at points: compiled once to nested NumPy calls, then evaluated on whole columns."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import cache
from typing import TypeAlias

import numpy as np

from weldbasis.formula.parse import Binary, Call, Formula, Minus, Name, Node, Number
from weldbasis.values import Floats

Program: TypeAlias = Callable[[Mapping[str, Floats]], Floats]

_NOISE = 1e-9


def value_at(formula: Formula, values: Mapping[str, Floats]) -> Floats:
    """The formula's value for every row; nan where it has none. All arrays have one length.

    Raises KeyError where a name of the formula has no value.
    """
    with np.errstate(all="ignore"):
        return np.asarray(_compiled(formula)(values), dtype=np.float64)


def round_up(number: Floats, step: Floats) -> Floats:
    """The least multiple of `step` that is not below `number`.

    A number within one part in 10⁹ of a multiple counts as that multiple, so that the last bits of a sum
    cannot push the result a whole step up.
    """
    steps = number / step
    near = np.rint(steps)
    return np.where(np.abs(steps - near) <= _NOISE * np.maximum(1.0, np.abs(near)), near, np.ceil(steps)) * step


def power(base: Floats, exponent: Floats) -> Floats:
    """Powers, with the common small whole ones multiplied out."""
    if np.ndim(exponent) == 0:
        if exponent == 2:
            return base * base
        if exponent == 3:
            return base * base * base
        if exponent == 0.5:
            return np.sqrt(base)
    return np.power(base, exponent)


FUNCTION_AT: Mapping[str, Callable[..., Floats]] = {
    "sqrt": np.sqrt,
    "exp": np.exp,
    "log": np.log,
    "log10": np.log10,
    "tanh": np.tanh,
    "atan": np.arctan,
    "abs": np.abs,
    "round_up": round_up,
}
BINARY_AT: Mapping[str, Callable[[Floats, Floats], Floats]] = {
    "+": np.add,
    "-": np.subtract,
    "*": np.multiply,
    "/": np.divide,
    "**": power,
}


@cache
def _compiled(formula: Formula) -> Program:
    return _program(formula.root)


def _program(node: Node) -> Program:
    if isinstance(node, Number):
        constant = np.float64(node.value)
        return lambda _: constant  # type: ignore[return-value]  # a scalar stands for a constant column
    if isinstance(node, Name):
        name = node.name
        return lambda values: values[name]
    if isinstance(node, Minus):
        part = _program(node.part)
        return lambda values: -part(values)
    if isinstance(node, Binary):
        join, left, right = BINARY_AT[node.sign], _program(node.left), _program(node.right)
        return lambda values: join(left(values), right(values))
    return _call_program(node)


def _call_program(node: Call) -> Program:
    parts = [_program(argument) for argument in node.arguments]
    if node.function in ("min", "max"):
        join = np.minimum if node.function == "min" else np.maximum

        def folded(values: Mapping[str, Floats]) -> Floats:
            result = parts[0](values)
            for part in parts[1:]:
                result = join(result, part(values))
            return result

        return folded
    function = FUNCTION_AT[node.function]
    return lambda values: function(*[part(values) for part in parts])
