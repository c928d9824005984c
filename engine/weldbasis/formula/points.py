"""A formula at points: compiled once to nested NumPy calls, then evaluated on whole columns.

Arrays that the formula itself made are written over, so a formula of any length keeps few columns in memory.
A point outside a function's domain has no value (nan), also where NumPy would answer with an infinity.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import cache
from typing import TypeAlias

import numpy as np

from weldbasis.formula.parse import Binary, Call, Formula, Minus, Name, Node, Number, walk
from weldbasis.values import Bools, Floats

Columns: TypeAlias = Sequence[Floats]
Program: TypeAlias = Callable[[Columns], Floats]
# Works on arrays; the last argument is an array that may be written over with the result, or None.
Step: TypeAlias = Callable[..., Floats]

_NOISE = 1e-9
_BLOCK = 32_768  # rows worked at once, so that what is made on the way stays in the processor's cache
_SHORT = 5  # steps of a formula that is worked in one go
_MULTIPLIED = 16  # greatest whole power that is multiplied out


def value_at(formula: Formula, values: Mapping[str, Floats]) -> Floats:
    """The formula's value for every row; nan where it has none. All arrays have one length.

    Raises KeyError where a name of the formula has no value.
    """
    columns = [np.asarray(values[name], np.float64) for name in formula.names]
    if len({column.shape for column in columns}) > 1:
        columns = list(np.broadcast_arrays(*columns))
    shape = columns[0].shape if columns else ()
    if columns and not shape:
        columns = [column.reshape(1) for column in columns]
    program = _compiled(formula)
    with np.errstate(all="ignore"):
        if shape and shape[0] > _BLOCK and _is_long(formula):
            found = np.empty(shape)
            for start in range(0, shape[0], _BLOCK):
                found[start : start + _BLOCK] = program([column[start : start + _BLOCK] for column in columns])
            return found
        found = np.asarray(program(columns), np.float64).reshape(shape)
    return found.copy() if isinstance(formula.root, Name) else found


def round_up(number: Floats, step: Floats, out: Floats | None = None) -> Floats:
    """The least multiple of `step` that is not below `number`; none where the step is not above zero.

    A number within one part in 10⁹ above a multiple counts as that multiple, so that the last bits of a sum
    cannot push the result a whole step up.
    """
    steps = np.asarray(np.divide(number, step, out=out if out is number else None))
    noise = np.clip(np.abs(steps), 1.0, 0.5 / _NOISE) * _NOISE
    raised = np.ceil(steps - noise) * step + 0.0  # adding zero turns −0 into 0
    return _without(~(step > 0), raised)


@cache
def folded(formula: Formula) -> Node:
    """The formula's tree with every part that holds no name reckoned out; such a part may be nan."""
    with np.errstate(all="ignore"):
        return _fold(formula.root)


def _fold(node: Node) -> Node:
    parts = tuple(_fold(part) for part in parts_of(node))
    if not parts:
        return node
    numbers = [np.float64(part.value) for part in parts if isinstance(part, Number)]
    if isinstance(node, Minus):
        rebuilt: Node = Minus(parts[0])
    elif isinstance(node, Binary):
        rebuilt = Binary(node.sign, *parts)
    else:
        assert isinstance(node, Call)
        rebuilt = Call(node.function, parts)
    return Number(float(_step(rebuilt, parts)(*numbers, None)), "") if len(numbers) == len(parts) else rebuilt


def parts_of(node: Node) -> tuple[Node, ...]:
    """The parts that a part is made of, in order."""
    if isinstance(node, Minus):
        return (node.part,)
    if isinstance(node, Binary):
        return (node.left, node.right)
    return node.arguments if isinstance(node, Call) else ()


@cache
def _compiled(formula: Formula) -> Program:
    return _program(folded(formula), formula.names)


@cache
def _is_long(formula: Formula) -> bool:
    """Whether a formula makes so many arrays that working it in blocks gains more than it costs."""
    return sum(not isinstance(part, Name | Number) for part in walk(folded(formula))) > _SHORT


def _program(node: Node, names: tuple[str, ...]) -> Program:
    if isinstance(node, Name):
        place = names.index(node.name)
        return lambda columns: columns[place]
    if isinstance(node, Number):
        constant = np.float64(node.value)
        return lambda _: constant  # type: ignore[return-value]  # a scalar stands for a constant column
    parts = parts_of(node)
    own = next((at for at, part in enumerate(parts) if not isinstance(part, Name | Number)), None)
    return _applied(_step(node, parts), [_program(part, names) for part in parts], own)


def _applied(step: Step, programs: Sequence[Program], own: int | None) -> Program:
    """One step of the program; `own` is the part whose array this formula made and may write over."""
    if len(programs) == 1:
        only = programs[0]
        if own is None:
            return lambda columns: step(only(columns), None)

        def over(columns: Columns) -> Floats:
            made = only(columns)
            return step(made, made)

        return over

    def run(columns: Columns) -> Floats:
        made = [program(columns) for program in programs]
        return step(*made, None if own is None else made[own])

    return run


def _step(node: Node, parts: Sequence[Node]) -> Step:
    if isinstance(node, Minus):
        return np.negative
    if isinstance(node, Call):
        return _FUNCTION[node.function]
    assert isinstance(node, Binary)
    fixed = parts[1].value if isinstance(parts[1], Number) else None
    if node.sign == "**":
        return _free_power if fixed is None else _fixed_power(fixed)
    return _divide if node.sign == "/" and not fixed else _PLAIN[node.sign]


def _without(missing: Bools, found: Floats) -> Floats:
    """`found`, with nan where `missing` holds; in the usual case that it holds nowhere nothing is touched."""
    return np.where(missing, np.nan, found) if missing.any() else found


def _divide(one: Floats, other: Floats, out: Floats | None) -> Floats:
    missing = other == 0
    return _without(missing, np.divide(one, other, out=out))


def _logarithm(function: np.ufunc) -> Step:
    def step(part: Floats, out: Floats | None) -> Floats:
        missing = part <= 0
        return _without(missing, function(part, out=out))

    return step


def _fixed_power(exponent: float) -> Step:
    """x to a fixed power; whole ones by multiplying, since a general power costs twenty times as much."""
    if exponent == 0.5:
        return lambda base, _, out: np.sqrt(base, out=out)
    if not np.isfinite(exponent):
        return lambda base, _, out: np.multiply(base, np.nan, out=out)
    if exponent == int(exponent) and 1 < exponent <= _MULTIPLIED:
        return lambda base, _, out: _whole_power(base, int(exponent), out)

    def step(base: Floats, _: Floats, out: Floats | None) -> Floats:
        missing = base == 0 if exponent < 0 else np.isnan(base)
        return _without(missing, np.power(base, exponent, out=out))

    return step


def _whole_power(base: Floats, exponent: int, out: Floats | None) -> Floats:
    """x to a whole power above 1, by squaring."""
    half = base if exponent < 4 else _whole_power(base, exponent // 2, None)
    odd = exponent % 2 == 1
    squared = np.square(half, out=None if odd else out)
    return np.multiply(squared, base, out=out) if odd else squared


def _free_power(base: Floats, exponent: Floats, out: Floats | None) -> Floats:
    """A power whose exponent is itself reckoned: only a base above zero has one."""
    missing = ~(base > 0) | np.isnan(exponent)
    return _without(missing, np.power(base, exponent, out=out))


def _folded(join: np.ufunc) -> Step:
    def step(first: Floats, second: Floats, *more: Floats) -> Floats:
        *others, out = more
        result: Floats = join(first, second, out=None if others else out)
        for other in others:
            result = join(result, other)
        return result

    return step


_PLAIN: Mapping[str, Step] = {"+": np.add, "-": np.subtract, "*": np.multiply, "/": np.divide}
_FUNCTION: Mapping[str, Step] = {
    "sqrt": np.sqrt,
    "exp": np.exp,
    "log": _logarithm(np.log),
    "log10": _logarithm(np.log10),
    "tanh": np.tanh,
    "atan": np.arctan,
    "abs": np.abs,
    "min": _folded(np.minimum),
    "max": _folded(np.maximum),
    "round_up": round_up,
}
