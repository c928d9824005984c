"""The hull of a formula over boxes of inputs, sound always and exact where that can be proved.

Where the slope along a name keeps its sign over the whole box, the extremes lie at that name's ends; where all
do, two corners give the exact range. What remains is narrowed by splitting the box: pieces that cannot hold the
extreme are dropped, pieces that turn monotone are finished at a corner. Rows are worked together, never one by one.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from weldbasis.formula.intervals import Jet, jet_of
from weldbasis.formula.parse import Formula, Minus
from weldbasis.formula.points import value_at
from weldbasis.values import Bools, Floats, Ints

Box: TypeAlias = NDArray[np.float64]  # names × rows

_ROUNDS = 48  # times a box may be split in half
_PIECES = 96  # pieces of one row kept alive at a time
_EXACT = 1e-9  # relative slack at which a bound counts as exact
_CHUNK = 20_000  # rows worked at once, to bound memory


@dataclass(frozen=True)
class Ranges:
    """Hull for every row. `exact`: proved to be the hull; `defined`: the formula has a value all over the box."""

    low: Floats
    high: Floats
    exact: Bools
    defined: Bools


def range_over(formula: Formula, lows: Mapping[str, Floats], highs: Mapping[str, Floats]) -> Ranges:
    """Least and greatest value over the box of every row; nan, not exact and not defined where there is none."""
    names = formula.names
    rows = len(lows[names[0]]) if names else 1
    low = value_at(formula, lows) if names else np.full(1, float(value_at(formula, {})))
    high, exact = low.copy(), np.isfinite(low)
    defined = np.isfinite(low)
    wide = np.zeros(rows, np.bool_)
    for name in names:
        if highs[name] is not lows[name]:
            wide |= lows[name] != highs[name]
    at = np.flatnonzero(wide & ~_missing(names, lows, highs, rows))
    with np.errstate(all="ignore"):
        for start in range(0, len(at), _CHUNK):
            part = at[start : start + _CHUNK]
            boxes = np.vstack([_stacked(names, lows, part), _stacked(names, highs, part)])
            # Joints of one steel share their boxes; each different box is worked once.
            different, back = np.unique(boxes, axis=1, return_inverse=True)
            found = _hull(formula, different[: len(names)], different[len(names) :])
            low[part], high[part], exact[part], defined[part] = (values[back.reshape(-1)] for values in found)
    return Ranges(low, high, exact, defined)


def slopes(
    formula: Formula, lows: Mapping[str, Floats], highs: Mapping[str, Floats]
) -> Mapping[str, tuple[Floats, Floats]]:
    """For every name an interval that holds the formula's slope along it anywhere in the box."""
    rows = len(next(iter(lows.values())))
    jet = jet_of(formula, lows, highs, rows)
    nothing = np.zeros(rows)
    return {name: jet.slopes.get(name, (nothing, nothing)) for name in formula.names}


def _missing(names: Sequence[str], lows: Mapping[str, Floats], highs: Mapping[str, Floats], rows: int) -> Bools:
    missing = np.zeros(rows, np.bool_)
    for name in names:
        missing |= np.isnan(lows[name]) | np.isnan(highs[name])
    return missing


def _stacked(names: Sequence[str], values: Mapping[str, Floats], rows: Ints) -> Box:
    return np.stack([values[name][rows] for name in names])


def _hull(formula: Formula, low: Box, high: Box) -> tuple[Floats, Floats, Bools, Bools]:
    rows = low.shape[1]
    jet = _jet(formula, low, high)
    least, most = np.full(rows, np.nan), np.full(rows, np.nan)
    exact, whole = np.zeros(rows, np.bool_), jet.defined.copy()
    rising, falling = _signs(formula, jet)
    monotone = (rising | falling).all(axis=0) & jet.defined
    if monotone.any():
        r, bottom, top = rising[:, monotone], low[:, monotone], high[:, monotone]
        first = _at(formula, np.where(r, bottom, top))
        second = _at(formula, np.where(r, top, bottom))
        good = np.isfinite(first) & np.isfinite(second)
        least[monotone], most[monotone], exact[monotone] = first, second, good
        monotone[np.flatnonzero(monotone)[~good]] = False
    rest = np.flatnonzero(~monotone)
    if len(rest):
        negative = _negative(formula)
        least[rest], exact_low, whole_low = _least(formula, low[:, rest], high[:, rest])
        highest, exact_high, whole_high = _least(negative, low[:, rest], high[:, rest])
        most[rest], exact[rest] = -highest, exact_low & exact_high
        whole[rest] = whole_low | whole_high
    return least, most, exact & whole, whole & np.isfinite(least)


@cache
def _negative(formula: Formula) -> Formula:
    return Formula(Minus(formula.root), f"-({formula.text})")


def _jet(formula: Formula, low: Box, high: Box) -> Jet:
    names = formula.names
    return jet_of(formula, dict(zip(names, low, strict=True)), dict(zip(names, high, strict=True)), low.shape[1])


def _at(formula: Formula, point: Box) -> Floats:
    return np.broadcast_to(value_at(formula, dict(zip(formula.names, point, strict=True))), point.shape[1:]).copy()


def _signs(formula: Formula, jet: Jet) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    rising = np.stack([jet.slopes[name][0] >= 0 for name in formula.names])
    falling = np.stack([jet.slopes[name][1] <= 0 for name in formula.names])
    return rising, falling & ~rising


@dataclass(frozen=True)
class _Pieces:
    """Pieces still alive in the search for each row's least value: row, box, lower bound, pull along every name, and
    whether the formula has a value all over the piece.
    """

    row: Ints
    low: Box
    high: Box
    bound: Floats
    pull: Box
    whole: Bools

    def take(self, keep: Bools | Ints) -> _Pieces:
        """Some of the pieces."""
        boxes = self.low[:, keep], self.high[:, keep]
        return _Pieces(self.row[keep], *boxes, self.bound[keep], self.pull[:, keep], self.whole[keep])


def _least(formula: Formula, low: Box, high: Box) -> tuple[Floats, Bools, Bools]:
    """A value not above the least over each box, whether it is exact, and whether the formula is proved to have a value
    all over the box. nan where it has none anywhere.
    """
    rows = low.shape[1]
    best = np.full(rows, np.inf)  # least value seen at a point
    floor = np.full(rows, np.inf)  # least bound of pieces that were given up
    hole = np.zeros(rows, np.bool_)  # a piece without value, or not proved to have one all over, was left
    alive = _Pieces(np.arange(rows), low, high, np.full(rows, -np.inf), np.zeros_like(low), np.zeros(rows, np.bool_))
    for _ in range(_ROUNDS):
        alive = _give_up(_look(formula, alive, best, hole), floor, hole, rows)
        if not len(alive.row):
            break
        alive = _split(alive)
    np.minimum.at(floor, alive.row, alive.bound)
    hole[alive.row[~alive.whole]] = True
    # A piece that was dropped lies above the best point seen, or within the noise of arithmetic below it.
    result = np.minimum(floor, best)
    exact = floor >= best - _EXACT * np.maximum(1.0, np.abs(best))
    none = ~np.isfinite(result) & ~np.isneginf(result)
    return np.where(none, np.nan, result), exact & ~none, ~hole & ~none


def _look(formula: Formula, alive: _Pieces, best: Floats, hole: Bools) -> _Pieces:
    """Bound every piece, update the best points and the holes, drop the pieces that cannot matter."""
    jet = _jet(formula, alive.low, alive.high)
    rising, falling = _signs(formula, jet)
    whole = jet.defined
    low = np.where(whole & falling, alive.high, alive.low)
    high = np.where(whole & rising, alive.low, alive.high)
    middle = _at(formula, np.where(np.isfinite(low + high), (low + high) / 2, low))
    corner = _at(formula, low)
    for seen in (middle, corner):
        ok = np.isfinite(seen)
        np.minimum.at(best, alive.row[ok], seen[ok])
    done = whole & (rising | falling).all(axis=0) & np.isfinite(corner)
    steepest = np.stack([np.maximum(np.abs(jet.slopes[n][0]), np.abs(jet.slopes[n][1])) for n in formula.names])
    width = high - low
    pull = np.where(width > 0, steepest * width, 0.0)
    bound = np.where(whole, np.fmax(jet.low, middle - pull.sum(axis=0) / 2), jet.low)
    bound = np.maximum(bound, alive.bound)
    reach = best[alive.row]
    matters = bound < reach - _EXACT * np.maximum(1.0, np.abs(reach))
    keep = ~done & ~np.isnan(bound) & (matters | ~np.isfinite(reach))
    hole[alive.row[~whole & (~keep | ~np.isfinite(middle))]] = True
    pull = np.where(width > 0, np.where(np.isfinite(pull), pull, 1e300) + 1e-300, -1.0)
    return _Pieces(alive.row, low, high, bound, pull, whole).take(keep)


def _give_up(alive: _Pieces, floor: Floats, hole: Bools, rows: int) -> _Pieces:
    """Keep the most promising pieces of every row; the bounds of the others stand as the row's floor."""
    if len(alive.row) <= _PIECES:
        return alive
    order = np.lexsort((alive.bound, alive.row))
    counts = np.bincount(alive.row, minlength=rows)
    rank = np.arange(len(order)) - (np.cumsum(counts) - counts)[alive.row[order]]
    leave = order[rank >= _PIECES]
    np.minimum.at(floor, alive.row[leave], alive.bound[leave])
    hole[alive.row[leave[~alive.whole[leave]]]] = True
    return alive.take(order[rank < _PIECES])


def _split(alive: _Pieces) -> _Pieces:
    """Halve every piece along the name that moves the value most."""
    along = np.argmax(alive.pull, axis=0)
    piece = np.arange(len(along))
    middle = (alive.low[along, piece] + alive.high[along, piece]) / 2
    left_high, right_low = alive.high.copy(), alive.low.copy()
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
