"""The least value of a formula over boxes, by splitting them.

Every piece of a box has a bound that no value in it lies below. Pieces that cannot hold the least value are dropped;
a piece over which the formula rises or falls along a name shrinks to that name's end, until a corner is left.
The bounds of all pieces dropped or given up are kept, so that the result is a true bound whenever the search stops.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from weldbasis.formula.intervals import Jet, jet_of
from weldbasis.formula.parse import Formula
from weldbasis.formula.points import value_at
from weldbasis.values import Bools, Floats, Ints

Box: TypeAlias = NDArray[np.float64]  # names × rows

_ROUNDS = 48  # times a box may be split in half
_PIECES = 32  # pieces of one row kept alive at a time
_FINE, _COARSE = 1e-9, 1e-4  # relative slack that counts as exact; that ends the search after some rounds
_FINE_ROUNDS = 40


@dataclass(frozen=True)
class Least:
    """For every row a value not above the least, nan where there is none; whether it is the least itself; whether
    the formula is proved to have a value all over the box.
    """

    value: Floats
    exact: Bools
    whole: Bools


@dataclass(frozen=True)
class _Pieces:
    """Pieces of boxes: the row each belongs to, its ends, a lower bound, how far each name may move the value, and
    whether the formula has a value all over it.
    """

    row: Ints
    low: Box
    high: Box
    bound: Floats
    pull: Box
    whole: Bools

    def take(self, keep: Bools | Ints) -> _Pieces:
        ends = self.low[:, keep], self.high[:, keep]
        return _Pieces(self.row[keep], *ends, self.bound[keep], self.pull[:, keep], self.whole[keep])


class _Found:
    """What a search has found so far, an entry a row."""

    def __init__(self, rows: int) -> None:
        self.best = np.full(rows, np.inf)  # least value met at a point
        self.size = np.zeros(rows)  # greatest size of a value met
        self.floor = np.full(rows, np.inf)  # least bound of the pieces left behind
        self.hole = np.zeros(rows, np.bool_)  # a piece not proved to have values all over was left behind

    def meet(self, row: Ints, values: Floats) -> None:
        """Note the values at points."""
        finite = np.isfinite(values)
        np.minimum.at(self.best, row[finite], values[finite])
        np.maximum.at(self.size, row[finite], np.abs(values[finite]))

    def leave(self, row: Ints, bound: Floats, whole: Bools) -> None:
        """Leave pieces behind."""
        np.minimum.at(self.floor, row, bound)
        self.hole[row[~whole]] = True

    def slack(self, share: float) -> Floats:
        """How far below the best point a bound may lie and still count as it."""
        return share * np.maximum(np.abs(np.where(np.isfinite(self.best), self.best, 0.0)), 1e-3 * self.size)


def box_jet(formula: Formula, low: Box, high: Box) -> Jet:
    """Bounds on value and slopes over boxes."""
    names = formula.names
    return jet_of(formula, dict(zip(names, low, strict=True)), dict(zip(names, high, strict=True)), low.shape[1])


def at_point(formula: Formula, point: Box) -> Floats:
    """The formula's value at points of names × rows."""
    return value_at(formula, dict(zip(formula.names, point, strict=True)))


def ways(formula: Formula, jet: Jet) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """For names × rows, whether the formula surely rises along the name, and whether it surely falls and moves."""
    nothing = np.zeros_like(jet.low)
    found = [jet.slopes.get(name, (nothing, nothing)) for name in formula.names]
    rising = np.stack([low >= 0 for low, _ in found])
    return rising, np.stack([high <= 0 for _, high in found]) & ~rising


def least_over(formula: Formula, low: Box, high: Box) -> Least:
    """A value not above the least over each box."""
    rows = low.shape[1]
    found = _Found(rows)
    alive = _Pieces(np.arange(rows), low, high, np.full(rows, -np.inf), np.zeros_like(low), np.zeros(rows, np.bool_))
    for turn in range(_ROUNDS):
        alive = _look(formula, alive, found, _FINE if turn < _FINE_ROUNDS else _COARSE)
        alive = _most_promising(alive, found)
        if not len(alive.row):
            break
        alive = _split(alive)
    found.leave(alive.row, alive.bound, alive.whole)
    value = np.minimum(found.floor, found.best)
    none = np.isposinf(value)
    exact = (found.floor >= found.best - found.slack(_FINE)) & np.isfinite(found.best)
    return Least(np.where(none, np.nan, value), exact, ~found.hole & ~none)


def _look(formula: Formula, alive: _Pieces, found: _Found, share: float) -> _Pieces:
    """Bound every piece, note the points met, and leave behind the pieces that are settled or cannot matter."""
    jet = box_jet(formula, alive.low, alive.high)
    low, high = _shrunk(formula, alive, jet)
    centre = _middle(low, high)
    at_centre, at_corner = at_point(formula, centre), at_point(formula, low)
    found.meet(alive.row, at_centre)
    found.meet(alive.row, at_corner)
    pull = _pull(formula, jet, high - low)
    by_slopes = np.where(jet.defined, at_centre - pull.sum(axis=0) / 2, -np.inf)
    bound = np.maximum(np.fmax(jet.low, by_slopes), alive.bound)
    settled = jet.defined & (low == high).all(axis=0) & np.isfinite(at_corner)
    reach = (found.best - found.slack(share))[alive.row]
    keep = ~settled & ~jet.none & (bound < reach)
    passed = ~settled & ~jet.none & ~keep
    found.leave(alive.row[passed], bound[passed], jet.defined[passed])
    found.hole[alive.row[jet.none]] = True
    return _Pieces(alive.row, low, high, bound, pull, jet.defined).take(keep)


def _shrunk(formula: Formula, alive: _Pieces, jet: Jet) -> tuple[Box, Box]:
    """The pieces' ends, with every name along which the formula surely rises or falls held at its lesser end."""
    rising, falling = ways(formula, jet)
    low = np.where(jet.defined & falling & np.isfinite(alive.high), alive.high, alive.low)
    high = np.where(jet.defined & rising & np.isfinite(alive.low), alive.low, alive.high)
    return low, high


def _pull(formula: Formula, jet: Jet, width: Box) -> Box:
    """How far each name may move the value over the piece: the greatest slope times the width."""
    nothing = (np.zeros_like(jet.low), np.zeros_like(jet.low))
    steepest = np.stack([np.maximum(*np.abs(jet.slopes.get(name, nothing))) for name in formula.names])
    return np.where((width > 0) & (steepest > 0), steepest * width, 0.0)


def _middle(low: Box, high: Box) -> Box:
    """A point between the ends; a piece without an end is halved by doubling what is known of it."""
    middle = np.where(low == high, low, low / 2 + high / 2)
    onward = np.where(np.isposinf(high), low + np.maximum(1.0, np.abs(low)), middle)
    back = np.where(np.isneginf(low), high - np.maximum(1.0, np.abs(high)), onward)
    return np.where(np.isneginf(low) & np.isposinf(high), 0.0, back)


def _most_promising(alive: _Pieces, found: _Found) -> _Pieces:
    """The pieces of every row with the least bounds; the others are left behind."""
    counts = np.bincount(alive.row, minlength=len(found.best))
    if not len(alive.row) or counts.max() <= _PIECES:
        return alive
    order = np.lexsort((alive.bound, alive.row))
    rank = np.arange(len(order)) - (np.cumsum(counts) - counts)[alive.row[order]]
    left = order[rank >= _PIECES]
    found.leave(alive.row[left], alive.bound[left], alive.whole[left])
    return alive.take(order[rank < _PIECES])


def _split(alive: _Pieces) -> _Pieces:
    """Halve every piece along the name that moves the value most."""
    movable = np.where(alive.high > alive.low, np.nan_to_num(alive.pull, posinf=1e300) + 1e-300, -1.0)
    along, piece = np.argmax(movable, axis=0), np.arange(len(alive.row))
    left_high, right_low = alive.high.copy(), alive.low.copy()
    middle = _middle(alive.low[along, piece], alive.high[along, piece])
    left_high[along, piece] = middle
    right_low[along, piece] = middle
    return _Pieces(
        np.tile(alive.row, 2),
        np.hstack([alive.low, right_low]),
        np.hstack([left_high, alive.high]),
        np.tile(alive.bound, 2),
        np.tile(alive.pull, 2),
        np.tile(alive.whole, 2),
    )
