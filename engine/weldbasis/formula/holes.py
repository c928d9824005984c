"""Where a formula has no value: proved absent over a box, or shown with a point; else left open.

Every part that needs more than finite arguments (a logarithm, a root, a quotient, a power, round_up) is looked at by
itself: pieces of the box whose interval bounds meet the need are done with, the others are tried at points and split.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import reduce

import numpy as np

from weldbasis.formula.factors import bounds_over, factors, part_formula
from weldbasis.formula.intervals import Jet
from weldbasis.formula.parse import Binary, Call, Formula, Node, Number, walk
from weldbasis.formula.points import folded, value_at
from weldbasis.formula.search import Box, at_point, box_jet
from weldbasis.formula.show import symbolic
from weldbasis.values import Bools, Floats, Ints

_ROUNDS, _MOST = 40, 4_096  # times a piece may be halved; pieces alive at a time
_HALVINGS = 200


@dataclass(frozen=True)
class Hole:
    """A part of a formula that may have no value, in print, and why. `point` shows it; without one it could neither be
    shown nor ruled out.
    """

    part: str
    why: str
    point: Mapping[str, float] | None


@dataclass(frozen=True)
class _Need:
    """What a part needs of another: `met` judges bounds, `broken` values at points."""

    part: Node
    of: Node
    why: str
    met: Callable[[Jet], Bools]
    broken: Callable[[Floats], Bools]
    zero: bool = False  # broken also where the value passes through zero


def holes(formula: Formula, low: Mapping[str, float], high: Mapping[str, float]) -> tuple[Hole, ...]:
    """Every part that has, or may have, no value somewhere in the box from `low` to `high`, ends taken in."""
    names = formula.names
    bottom, top = (np.array([[end[name]] for name in names], np.float64).reshape(len(names), 1) for end in (low, high))
    with np.errstate(all="ignore"):
        if names and bool(box_jet(formula, bottom, top).defined.all()):
            return ()
        found = [_hole(need, formula, low, high) for need in _needs(formula.root)]
    return tuple(hole for hole in found if hole)


def _above_zero(part: Node, of: Node, why: str) -> _Need:
    return _Need(part, of, why, lambda jet: jet.low > 0, lambda value: value <= 0)


def _not_below_zero(part: Node, of: Node, why: str) -> _Need:
    return _Need(part, of, why, lambda jet: jet.low >= 0, lambda value: value < 0)


def _not_zero(part: Node, of: Node, why: str) -> _Need:
    return _Need(part, of, why, lambda jet: (jet.low > 0) | (jet.high < 0), lambda value: value == 0, True)


def _needs(root: Node) -> Iterator[_Need]:
    for part in walk(root):
        if isinstance(part, Call) and part.function in ("log", "log10"):
            yield _above_zero(part, part.arguments[0], "a logarithm of zero or less")
        elif isinstance(part, Call) and part.function == "sqrt":
            yield _not_below_zero(part, part.arguments[0], "a square root of less than zero")
        elif isinstance(part, Call) and part.function == "round_up":
            yield _above_zero(part, part.arguments[1], "rounding to steps of zero or less")
        elif isinstance(part, Binary) and part.sign == "/":
            yield from (_not_zero(part, of, "a division by zero") for of in _zeros(part.right))
        elif isinstance(part, Binary) and part.sign == "**":
            yield from _power_needs(part)


def _power_needs(part: Binary) -> Iterator[_Need]:
    exponent = folded(part_formula(part.right))
    if not isinstance(exponent, Number):
        yield _above_zero(part, part.left, "a changing power of zero or less")
    elif exponent.value != int(exponent.value):
        need = _above_zero if exponent.value < 0 else _not_below_zero
        yield need(part, part.left, "a fractional power of less than zero")
    elif exponent.value < 0:
        yield from (_not_zero(part, of, "a division by zero") for of in _zeros(part.left))


def _zeros(node: Node) -> Iterator[Node]:
    """Parts of which one is zero wherever the node is: the factors of a product, the base of a power."""
    if isinstance(node, Binary) and node.sign == "*":
        yield from _zeros(node.left)
        yield from _zeros(node.right)
    elif isinstance(node, Binary) and node.sign == "**" and _is_positive(folded(part_formula(node.right))):
        yield from _zeros(node.left)
    elif isinstance(node, Call) and node.function == "sqrt":
        yield from _zeros(node.arguments[0])
    elif not _is_positive(node):
        yield node


def _is_positive(node: Node) -> bool:
    return isinstance(node, Number) and node.value > 0


def _hole(need: _Need, whole: Formula, low: Mapping[str, float], high: Mapping[str, float]) -> Hole | None:
    inner = part_formula(need.of if need.zero else _what_decides(need, low, high))
    names = inner.names
    part = symbolic(part_formula(need.part))
    if not names:
        value = value_at(inner, {})
        return Hole(part, need.why, between(low, high)) if bool(need.broken(np.asarray(value))) else None
    ends = [np.array([[end[name]] for name in names], np.float64) for end in (low, high)]
    point = _search(need, inner, ends[0], ends[1])
    if point is None:
        return None
    if isinstance(point, bool):
        return Hole(part, need.why, None)
    return _shown(need, whole, between(low, high), dict(zip(names, point.tolist(), strict=True)))


def _what_decides(need: _Need, low: Mapping[str, float], high: Mapping[str, float]) -> Node:
    """The product that has the sign of what is needed: divisors as factors, factors that surely meet the need left out.

    That a divisor is not zero is a need of its own.
    """
    left = [node for _, node in factors(need.of) if not bool(need.met(bounds_over(node, low, high)).all())]
    return reduce(lambda one, other: Binary("*", one, other), left) if left else Number(1.0, "1")


def between(low: Mapping[str, float], high: Mapping[str, float]) -> dict[str, float]:
    """The middle of a box."""
    return {name: low[name] / 2 + high[name] / 2 for name in low}


def _shown(need: _Need, whole: Formula, beside: Mapping[str, float], point: Mapping[str, float]) -> Hole:
    """The hole with a point of the whole box; the formula itself is asked whether it has no value there."""
    everywhere = {name: float(point.get(name, beside[name])) for name in whole.names}
    value = float(np.ravel(value_at(whole, {name: np.array([at]) for name, at in everywhere.items()}))[0])
    confirmed = need.zero or not np.isfinite(value)
    return Hole(symbolic(part_formula(need.part)), need.why, everywhere if confirmed else None)


def _search(need: _Need, inner: Formula, low: Box, high: Box) -> Floats | bool | None:
    """A point where the need is not met; None where it is proved to be met all over; False where that stays open."""
    for _ in range(_ROUNDS):
        jet = box_jet(inner, low, high)
        left = np.flatnonzero(~need.met(jet) & ~jet.none)
        if not len(left):
            return None
        low, high = low[:, left], high[:, left]
        point = _broken_at(need, inner, jet, left, low, high)
        if point is not None:
            return point
        if len(left) > _MOST:
            return False
        low, high = _halved(inner, jet, left, low, high)
    return False


def _broken_at(need: _Need, inner: Formula, jet: Jet, left: Ints, low: Box, high: Box) -> Floats | None:
    """A point of the pieces that breaks the need: a corner towards which the value falls or rises, or a middle."""
    rises = np.stack([_leaning(jet, name, len(jet.low))[left] >= 0 for name in inner.names])
    down, up = np.where(rises, low, high), np.where(rises, high, low)
    points = np.hstack([down, up, low / 2 + high / 2])
    values = at_point(inner, points)
    broken = np.flatnonzero(need.broken(values))
    if len(broken):
        found: Floats = points[:, broken[0]]
        return found
    if need.zero and bool((values < 0).any()) and bool((values > 0).any()):
        return _zero_between(inner, points[:, np.argmax(values < 0)], points[:, np.argmax(values > 0)])
    return None


def _leaning(jet: Jet, name: str, rows: int) -> Floats:
    """Which way a name moves the value on the whole: the sign of the middle of its slopes."""
    if name not in jet.slopes:
        return np.zeros(rows)
    least, most = jet.slopes[name]
    return np.nan_to_num(np.clip(least, -1e300, 1e300) / 2 + np.clip(most, -1e300, 1e300) / 2)


def _zero_between(inner: Formula, below: Floats, above: Floats) -> Floats | None:
    """The point on the line between two points of opposite sign at which the value passes through zero.

    None where it jumps from one sign to the other through a hole of its own.
    """
    size = max(abs(float(at_point(inner, point[:, None])[0])) for point in (below, above))
    for _ in range(_HALVINGS):
        middle = below / 2 + above / 2
        value = float(at_point(inner, middle[:, None])[0])
        if value == 0 or (middle == below).all() or (middle == above).all():
            return middle if abs(value) <= 1e-6 * size else None
        if not np.isfinite(value):
            return None
        below, above = (middle, above) if value < 0 else (below, middle)
    return None


def _halved(inner: Formula, jet: Jet, left: Ints, low: Box, high: Box) -> tuple[Box, Box]:
    """Every piece in two halves, cut along the name that may move the value most."""
    nothing = np.zeros_like(jet.low)
    steepest = np.stack([np.maximum(*np.abs(jet.slopes.get(n, (nothing, nothing))))[left] for n in inner.names])
    width = high - low
    moved = np.where(width > 0, np.nan_to_num(steepest * width, nan=0.0, posinf=1e300) + 1e-12 * width, -1.0)
    along, piece = np.argmax(moved, axis=0), np.arange(len(left))
    middle = low[along, piece] / 2 + high[along, piece] / 2
    left_high, right_low = high.copy(), low.copy()
    left_high[along, piece] = middle
    right_low[along, piece] = middle
    return np.hstack([low, right_low]), np.hstack([left_high, high])
