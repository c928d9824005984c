"""Interval arithmetic with slopes: for a box of inputs, bounds on a formula's value and on its slope along every name.

A `Jet` carries, row by row, a closed interval that holds every value the part takes over the box, for every name
an interval that holds every slope, whether the part has a value at every point of the box, and whether it surely has
none. Where it has a value at some points only, the intervals speak of those points. An end at infinity says that the
finite values have no bound; so zero times infinity is zero, and infinity less infinity is no bound at all.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import reduce
from typing import TypeAlias

import numpy as np

from weldbasis.formula.parse import Binary, Call, Formula, Minus, Name, Node, Number
from weldbasis.formula.points import folded, round_up
from weldbasis.values import Bools, Floats

Interval: TypeAlias = tuple[Floats, Floats]
Slopes: TypeAlias = Mapping[str, Interval]

_TRUE, _FALSE, _ZERO, _ONE = np.array(True), np.array(False), np.array(0.0), np.array(1.0)


@dataclass(frozen=True)
class Jet:
    """Bounds on a value and on its slopes; a name that is not in `slopes` moves nothing.

    Arrays are of one entry a row, or of one entry for all rows.
    """

    low: Floats
    high: Floats
    slopes: Slopes
    defined: Bools
    none: Bools

    @property
    def value(self) -> Interval:
        """The value's interval."""
        return self.low, self.high


def jet_of(formula: Formula, lows: Mapping[str, Floats], highs: Mapping[str, Floats], rows: int) -> Jet:
    """Bounds over a box for each row, in one pass through the formula; every array has one entry a row."""
    with np.errstate(all="ignore"):
        found = _jet(folded(formula), lows, highs)
    low, high = np.broadcast_to(found.low, rows), np.broadcast_to(found.high, rows)
    defined, none = np.broadcast_to(found.defined, rows), np.broadcast_to(found.none, rows)
    slopes = {n: (np.broadcast_to(a, rows), np.broadcast_to(b, rows)) for n, (a, b) in found.slopes.items()}
    return Jet(low, high, slopes, defined, none)


def _jet(node: Node, lows: Mapping[str, Floats], highs: Mapping[str, Floats]) -> Jet:
    if isinstance(node, Number):
        value, there = np.array(node.value), np.array(bool(np.isfinite(node.value)))
        return Jet(value, value, {}, there, ~there)
    if isinstance(node, Name):
        return Jet(lows[node.name], highs[node.name], {node.name: (_ONE, _ONE)}, _TRUE, _FALSE)
    if isinstance(node, Minus):
        return _negative(_jet(node.part, lows, highs))
    if isinstance(node, Binary):
        left = _jet(node.left, lows, highs)
        if isinstance(node.right, Number) and node.sign in _BY_NUMBER:
            return _BY_NUMBER[node.sign](left, node.right.value)
        return _BINARY[node.sign](left, _jet(node.right, lows, highs))
    assert isinstance(node, Call)
    return _FUNCTION[node.function](*[_jet(part, lows, highs) for part in node.arguments])


def plus(one: Interval, other: Interval) -> Interval:
    """Sum of intervals; what cannot be told apart from no bound is none."""
    return np.fmax(one[0] + other[0], -np.inf), np.fmin(one[1] + other[1], np.inf)


def times(one: Interval, other: Interval) -> Interval:
    """Product of intervals; zero times infinity counts as zero."""
    firsts = one[:1] if one[0] is one[1] else one
    seconds = other[:1] if other[0] is other[1] else other
    products = [a * b for a in firsts for b in seconds]
    if not all(np.isfinite(product).all() for product in products):
        products = [np.where(np.isnan(product), 0.0, product) for product in products]
    return reduce(np.minimum, products), reduce(np.maximum, products)


def _scaled(slopes: Slopes, factor: Interval) -> Slopes:
    return {name: times(slope, factor) for name, slope in slopes.items()}


def _summed(one: Slopes, other: Slopes) -> Slopes:
    joined = dict(one)
    for name, slope in other.items():
        joined[name] = plus(joined[name], slope) if name in joined else slope
    return joined


def _joined(value: Interval, slopes: Slopes, *parts: Jet) -> Jet:
    """A value that is there where all its parts are."""
    defined = reduce(np.logical_and, [part.defined for part in parts])
    none = reduce(np.logical_or, [part.none for part in parts])
    return Jet(*value, slopes, defined, none)


def _negative(part: Jet) -> Jet:
    slopes = {name: (-high, -low) for name, (low, high) in part.slopes.items()}
    return replace(part, low=-part.high, high=-part.low, slopes=slopes)


def _add(left: Jet, right: Jet) -> Jet:
    return _joined(plus(left.value, right.value), _summed(left.slopes, right.slopes), left, right)


def _subtract(left: Jet, right: Jet) -> Jet:
    return _add(left, _negative(right))


def _multiply(left: Jet, right: Jet) -> Jet:
    slopes = _summed(_scaled(left.slopes, right.value), _scaled(right.slopes, left.value))
    return _joined(times(left.value, right.value), slopes, left, right)


def _reciprocal(part: Jet) -> Jet:
    """1/x: without an end where x comes near zero, and without value where x is zero."""
    at_zero = (part.low <= 0) & (part.high >= 0)
    below, above = part.low < 0, part.high > 0
    low = np.where(at_zero & below, -np.inf, 1 / part.high)
    high = np.where(at_zero & above, np.inf, 1 / part.low)
    shrunk = 1 / np.maximum(np.abs(part.low), np.abs(part.high))
    steepest = np.maximum(low * low, high * high)
    slopes = _scaled(part.slopes, (-steepest, -shrunk * shrunk))
    return Jet(low, high, slopes, part.defined & ~at_zero, part.none | (at_zero & ~below & ~above))


def _divide(left: Jet, right: Jet) -> Jet:
    return _multiply(left, _reciprocal(right))


def _divide_by_number(left: Jet, divisor: float) -> Jet:
    """Dividing once is exact to the last bit, where a product with the reciprocal is not."""
    if divisor == 0 or not np.isfinite(divisor):
        return replace(left, defined=_FALSE, none=_TRUE)
    if divisor < 0:
        return _divide_by_number(_negative(left), -divisor)
    slopes = {name: (low / divisor, high / divisor) for name, (low, high) in left.slopes.items()}
    return replace(left, low=left.low / divisor, high=left.high / divisor, slopes=slopes)


def _rising(
    at: Callable[[Floats], Floats],
    slope: Callable[[Floats], Floats],
    steeper: bool = False,
    least: float = -np.inf,
    least_itself: bool = True,
) -> Callable[[Jet], Jet]:
    """A rising function that grows steeper, or flatter, throughout; it has no value below `least`."""

    def jet(part: Jet) -> Jet:
        inside = part.low >= least if least_itself else part.low > least
        outside = part.high < least if least_itself else part.high <= least
        bottom, top = np.maximum(part.low, least), np.maximum(part.high, least)
        ends = slope(bottom), slope(top)
        slopes = _scaled(part.slopes, ends if steeper else (ends[1], ends[0]))
        return Jet(at(bottom), at(top), slopes, part.defined & inside, part.none | outside)

    return jet


def _bell(at: Callable[[Floats], Floats], slope: Callable[[Floats], Floats]) -> Callable[[Jet], Jet]:
    """A rising function whose slope is 1 at zero and falls off on both sides."""

    def jet(part: Jet) -> Jet:
        ends = slope(part.low), slope(part.high)
        spans = (part.low < 0) & (part.high > 0)
        own = np.minimum(*ends), np.where(spans, 1.0, np.maximum(*ends))
        return replace(part, low=at(part.low), high=at(part.high), slopes=_scaled(part.slopes, own))

    return jet


def _absolute(part: Jet) -> Jet:
    ends = np.abs(part.low), np.abs(part.high)
    low = np.where((part.low < 0) & (part.high > 0), 0.0, np.minimum(*ends))
    own = np.where(part.low >= 0, 1.0, -1.0), np.where(part.high <= 0, -1.0, 1.0)
    return replace(part, low=low, high=np.maximum(*ends), slopes=_scaled(part.slopes, own))


def _lesser(left: Jet, right: Jet) -> Jet:
    """min: the slopes of the part that is surely the lesser, else of both."""
    first, second = left.high <= right.low, right.high <= left.low
    slopes: dict[str, Interval] = {}
    for name in dict.fromkeys((*left.slopes, *right.slopes)):
        one, other = (part.slopes.get(name, (_ZERO, _ZERO)) for part in (left, right))
        low, high = np.minimum(one[0], other[0]), np.maximum(one[1], other[1])
        slopes[name] = (
            np.where(first, one[0], np.where(second, other[0], low)),
            np.where(first, one[1], np.where(second, other[1], high)),
        )
    value = np.minimum(left.low, right.low), np.minimum(left.high, right.high)
    return _joined(value, slopes, left, right)


def _least(*parts: Jet) -> Jet:
    return reduce(_lesser, parts)


def _greatest(*parts: Jet) -> Jet:
    return _negative(_least(*[_negative(part) for part in parts]))


def _stepped(part: Jet, step: Jet) -> Jet:
    """round_up rises with its first argument; along a step that is itself a range nothing is claimed."""
    fixed = (step.low == step.high) & np.isfinite(step.low)
    above = np.where(step.high > 0, part.high + step.high, np.nan)
    noise = 1e-9 * np.maximum(np.abs(part.low), step.high)  # round_up lets so little pass
    below = np.where(part.low >= 0, np.maximum(part.low - noise, 0.0), part.low - noise)
    low = np.where(fixed, round_up(part.low, step.low), below)
    high = np.where(fixed, round_up(part.high, step.low), above)
    own = _ZERO, np.where(part.low < part.high, np.inf, 0.0)
    free = np.where(fixed, 0.0, np.inf)
    slopes = _summed(_scaled(part.slopes, own), _scaled(step.slopes, (-free, free)))
    found = _joined((low, high), slopes, part, step)
    return replace(found, defined=found.defined & (step.low > 0), none=found.none | (step.high <= 0))


def _free_power(base: Jet, exponent: Jet) -> Jet:
    return _FUNCTION["exp"](_multiply(exponent, _FUNCTION["log"](base)))


def _fixed_power(base: Jet, exponent: float) -> Jet:
    if not np.isfinite(exponent):
        return replace(base, defined=_FALSE, none=_TRUE)
    if exponent == 0:
        return Jet(_ONE, _ONE, {}, base.defined, base.none)
    if exponent < 0:
        return _reciprocal(_fixed_power(base, -exponent))
    if exponent != int(exponent):
        return _real_power(exponent)(base)
    return _whole_power(base, exponent)


def _real_power(exponent: float) -> Callable[[Jet], Jet]:
    return _rising(
        lambda x: np.power(x, exponent), lambda x: exponent * np.power(x, exponent - 1), exponent > 1, least=0.0
    )


def _whole_power(base: Jet, exponent: float) -> Jet:
    def power(n: float, odd: bool) -> Interval:
        ends = np.power(base.low, n), np.power(base.high, n)
        if odd:
            return ends
        return np.where((base.low < 0) & (base.high > 0), 0.0, np.minimum(*ends)), np.maximum(*ends)

    odd = exponent % 2 == 1
    low, high = power(exponent - 1, not odd) if exponent != 1 else (_ONE, _ONE)
    value = power(exponent, odd)
    return replace(base, low=value[0], high=value[1], slopes=_scaled(base.slopes, (exponent * low, exponent * high)))


_BINARY: Mapping[str, Callable[[Jet, Jet], Jet]] = {
    "+": _add,
    "-": _subtract,
    "*": _multiply,
    "/": _divide,
    "**": _free_power,
}
_BY_NUMBER: Mapping[str, Callable[[Jet, float], Jet]] = {"/": _divide_by_number, "**": _fixed_power}
_FUNCTION: Mapping[str, Callable[..., Jet]] = {
    "exp": _rising(np.exp, np.exp, steeper=True),
    "log": _rising(np.log, lambda x: 1 / x, least=0.0, least_itself=False),
    "log10": _rising(np.log10, lambda x: 1 / (x * np.log(10.0)), least=0.0, least_itself=False),
    "sqrt": _rising(np.sqrt, lambda x: 0.5 / np.sqrt(x), least=0.0),
    "tanh": _bell(np.tanh, lambda x: 1 - np.tanh(x) ** 2),
    "atan": _bell(np.arctan, lambda x: 1 / (1 + x * x)),
    "abs": _absolute,
    "min": _least,
    "max": _greatest,
    "round_up": _stepped,
}
