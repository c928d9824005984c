"""Interval arithmetic with slopes: for a box of inputs, bounds on a formula's value and on its slope along every name.

A `Jet` carries, row by row, a closed interval that holds every value the part takes over the box, for every
name an interval that holds every slope, and whether the part has a value at every point of the box. Where it
has none at some points, the interval covers those points where it has one.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from weldbasis.formula.parse import Binary, Formula, Minus, Name, Node, Number
from weldbasis.formula.points import round_up
from weldbasis.values import Bools, Floats

Interval: TypeAlias = tuple[Floats, Floats]


@dataclass(frozen=True)
class Jet:
    """Bounds on a value and on its slopes; names that are not in `slopes` have none."""

    low: Floats
    high: Floats
    slopes: Mapping[str, Interval]
    defined: Bools

    @property
    def value(self) -> Interval:
        """The value's interval."""
        return self.low, self.high


def jet_of(formula: Formula, lows: Mapping[str, Floats], highs: Mapping[str, Floats], rows: int) -> Jet:
    """Bounds over a box for each row, in one pass through the formula."""
    with np.errstate(all="ignore"):
        return _jet(formula.root, lows, highs, rows)


def _jet(node: Node, lows: Mapping[str, Floats], highs: Mapping[str, Floats], rows: int) -> Jet:
    everywhere = np.ones(rows, np.bool_)
    if isinstance(node, Number):
        constant = np.full(rows, node.value)
        return Jet(constant, constant, {}, everywhere)
    if isinstance(node, Name):
        one = np.ones(rows)
        return Jet(lows[node.name], highs[node.name], {node.name: (one, one)}, everywhere)
    if isinstance(node, Minus):
        part = _jet(node.part, lows, highs, rows)
        return Jet(-part.high, -part.low, {n: (-h, -low) for n, (low, h) in part.slopes.items()}, part.defined)
    if isinstance(node, Binary):
        left, right = (_jet(side, lows, highs, rows) for side in (node.left, node.right))
        return _BINARY[node.sign](left, right)
    parts = [_jet(argument, lows, highs, rows) for argument in node.arguments]
    if node.function in ("min", "max"):
        joined = parts[0]
        for part in parts[1:]:
            joined = _extreme(joined, part, node.function == "max")
        return joined
    return _stepped(*parts) if node.function == "round_up" else _FUNCTION[node.function](parts[0])


def plus(one: Interval, other: Interval) -> Interval:
    """Sum of intervals."""
    return one[0] + other[0], one[1] + other[1]


def times(one: Interval, other: Interval) -> Interval:
    """Product of intervals; zero times infinity counts as zero, since a slope of zero moves nothing."""
    if one[0] is one[1]:
        products = [one[0] * other[0], one[0] * other[1]]
    elif other[0] is other[1]:
        products = [one[0] * other[0], one[1] * other[0]]
    else:
        products = [a * b for a in one for b in other]
    if not all(np.isfinite(product).all() for product in products):
        products = [np.where(np.isnan(product), 0.0, product) for product in products]
    low, high = np.minimum(products[0], products[1]), np.maximum(products[0], products[1])
    if len(products) == 4:
        low = np.minimum(low, np.minimum(products[2], products[3]))
        high = np.maximum(high, np.maximum(products[2], products[3]))
    return low, high


def _scaled(slopes: Mapping[str, Interval], factor: Interval) -> dict[str, Interval]:
    return {name: times(slope, factor) for name, slope in slopes.items()}


def _summed(one: Mapping[str, Interval], other: Mapping[str, Interval]) -> dict[str, Interval]:
    joined = dict(one)
    for name, slope in other.items():
        joined[name] = plus(joined[name], slope) if name in joined else slope
    return joined


def _add(left: Jet, right: Jet) -> Jet:
    low, high = plus(left.value, right.value)
    return Jet(low, high, _summed(left.slopes, right.slopes), left.defined & right.defined)


def _subtract(left: Jet, right: Jet) -> Jet:
    negative = Jet(-right.high, -right.low, {n: (-h, -low) for n, (low, h) in right.slopes.items()}, right.defined)
    return _add(left, negative)


def _multiply(left: Jet, right: Jet) -> Jet:
    low, high = times(left.value, right.value)
    slopes = _summed(_scaled(left.slopes, right.value), _scaled(right.slopes, left.value))
    missing = np.isnan(left.low) | np.isnan(right.low)
    return Jet(np.where(missing, np.nan, low), np.where(missing, np.nan, high), slopes, left.defined & right.defined)


def _reciprocal(part: Jet) -> Jet:
    spans = (part.low <= 0) & (part.high >= 0)
    only_zero = (part.low == 0) & (part.high == 0)
    one_sided_up, one_sided_down = (part.low == 0) & ~only_zero, (part.high == 0) & ~only_zero
    low = np.where(spans, -np.inf, 1 / part.high)
    high = np.where(spans, np.inf, 1 / part.low)
    low = np.where(one_sided_up, 1 / part.high, low)
    high = np.where(one_sided_down, 1 / part.low, high)
    low, high = np.where(only_zero, np.nan, low), np.where(only_zero, np.nan, high)
    square = times((low, high), (low, high))
    square = (np.maximum(square[0], 0.0), square[1])
    return Jet(low, high, _scaled(part.slopes, (-square[1], -square[0])), part.defined & ~spans)


def _divide(left: Jet, right: Jet) -> Jet:
    return _multiply(left, _reciprocal(right))


def _increasing(
    part: Jet,
    at: Callable[[Floats], Floats],
    slope: Callable[[Floats], Floats],
    rising: bool,
    least: float = -np.inf,
    open_end: bool = False,
) -> Jet:
    """A rising function whose own slope rises or falls; values below `least` are outside its domain."""
    inside = part.low > least if open_end else part.low >= least
    none = part.high <= least if open_end else part.high < least
    from_low, to_high = np.maximum(part.low, least), np.maximum(part.high, least)
    low, high = at(from_low), at(to_high)
    ends = slope(from_low), slope(to_high)
    own = ends if rising else (ends[1], ends[0])
    low, high = np.where(none, np.nan, low), np.where(none, np.nan, high)
    return Jet(low, high, _scaled(part.slopes, own), part.defined & inside)


def _bell(part: Jet, at: Callable[[Floats], Floats], slope: Callable[[Floats], Floats]) -> Jet:
    """A rising function whose slope is greatest at zero and falls off on both sides (tanh, atan)."""
    ends = slope(part.low), slope(part.high)
    spans = (part.low < 0) & (part.high > 0)
    own = np.minimum(*ends), np.where(spans, slope(np.zeros_like(part.low)), np.maximum(*ends))
    return Jet(at(part.low), at(part.high), _scaled(part.slopes, own), part.defined)


def _absolute(part: Jet) -> Jet:
    spans = (part.low < 0) & (part.high > 0)
    ends = np.abs(part.low), np.abs(part.high)
    low = np.where(spans, 0.0, np.minimum(*ends))
    own = np.where(part.low >= 0, 1.0, -1.0), np.where(part.high <= 0, -1.0, 1.0)
    return Jet(low, np.maximum(*ends), _scaled(part.slopes, own), part.defined)


def _extreme(left: Jet, right: Jet, highest: bool) -> Jet:
    join = np.maximum if highest else np.minimum
    left_only = left.low >= right.high if highest else left.high <= right.low
    right_only = right.low >= left.high if highest else right.high <= left.low
    slopes: dict[str, Interval] = {}
    nothing = (np.zeros_like(left.low), np.zeros_like(left.low))
    for name in (*left.slopes, *right.slopes):
        one, other = left.slopes.get(name, nothing), right.slopes.get(name, nothing)
        low = np.where(left_only, one[0], np.where(right_only, other[0], np.minimum(one[0], other[0])))
        high = np.where(left_only, one[1], np.where(right_only, other[1], np.maximum(one[1], other[1])))
        slopes[name] = (low, high)
    return Jet(join(left.low, right.low), join(left.high, right.high), slopes, left.defined & right.defined)


def _stepped(part: Jet, step: Jet) -> Jet:
    """round_up rises with its first argument; along a step that is itself a range nothing is claimed."""
    fixed = step.low == step.high
    low, high = round_up(part.low, step.low), round_up(part.high, step.low)
    low = np.where(fixed, low, part.low)
    high = np.where(fixed, high, np.where(step.low > 0, part.high + step.high, np.inf))
    wide = part.low < part.high
    own = np.zeros_like(low), np.where(wide, np.inf, 0.0)
    any_slope = np.where(fixed, 0.0, -np.inf), np.where(fixed, 0.0, np.inf)
    slopes = _summed(_scaled(part.slopes, own), _scaled(step.slopes, any_slope))
    return Jet(low, high, slopes, part.defined & step.defined & (step.low > 0))


def _power(base: Jet, exponent: Jet) -> Jet:
    constant = bool((exponent.low == exponent.high).all()) and not exponent.slopes
    if constant and len(exponent.low) and bool((exponent.low == exponent.low[0]).all()):
        return _constant_power(base, float(exponent.low[0]))
    logs = _FUNCTION["log"](base)
    return _FUNCTION["exp"](_multiply(exponent, logs))


def _constant_power(base: Jet, n: float) -> Jet:
    if n == 0:
        one = np.ones_like(base.low)
        return Jet(one, one, {}, base.defined)
    if n < 0:
        return _reciprocal(_constant_power(base, -n))
    low, high, inside = _power_range(base, n)
    slope = _power_range(base, n - 1)[:2] if n != 1 else (np.ones_like(low), np.ones_like(low))
    own = n * slope[0], n * slope[1]
    return Jet(low, high, _scaled(base.slopes, own), base.defined & inside)


def _power_range(base: Jet, n: float) -> tuple[Floats, Floats, Bools]:
    """x**n over the base; for an exponent that is no whole number only x ≥ 0 counts (x > 0 below zero)."""
    if n < 0:
        at_low = np.where(base.low <= 0, np.inf, np.power(np.maximum(base.low, 0.0), n))
        return np.power(np.maximum(base.high, 0.0), n), at_low, base.low > 0
    if n != int(n):
        low = np.where(base.high < 0, np.nan, np.power(np.maximum(base.low, 0.0), n))
        return low, np.where(base.high < 0, np.nan, np.power(np.maximum(base.high, 0.0), n)), base.low >= 0
    ends = np.power(base.low, n), np.power(base.high, n)
    everywhere = np.ones(len(base.low), np.bool_)
    if n % 2 == 1:
        return ends[0], ends[1], everywhere
    spans = (base.low < 0) & (base.high > 0)
    return np.where(spans, 0.0, np.minimum(*ends)), np.maximum(*ends), everywhere


_BINARY: Mapping[str, Callable[[Jet, Jet], Jet]] = {
    "+": _add,
    "-": _subtract,
    "*": _multiply,
    "/": _divide,
    "**": _power,
}
_FUNCTION: Mapping[str, Callable[[Jet], Jet]] = {
    "exp": lambda part: _increasing(part, np.exp, np.exp, True),
    "log": lambda part: _increasing(part, np.log, lambda x: 1 / x, False, 0.0, True),
    "log10": lambda part: _increasing(part, np.log10, lambda x: 1 / (x * np.log(10.0)), False, 0.0, True),
    "sqrt": lambda part: _increasing(part, np.sqrt, lambda x: 0.5 / np.sqrt(x), False, 0.0),
    "tanh": lambda part: _bell(part, np.tanh, lambda x: 1 - np.tanh(x) ** 2),
    "atan": lambda part: _bell(part, np.arctan, lambda x: 1 / (1 + x * x)),
    "abs": _absolute,
}
