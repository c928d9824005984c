"""The hull of a formula over boxes of inputs, sound always and exact where that can be proved.

Where the slope along a name keeps its sign over the whole box, the extremes lie at that name's ends; where all
do, two corners give the exact range. What remains is narrowed by search. Rows are worked together, never one by one.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np

from weldbasis.formula.intervals import jet_of
from weldbasis.formula.parse import Formula, Minus
from weldbasis.formula.points import value_at
from weldbasis.formula.search import Box, at_point, box_jet, least_over, ways
from weldbasis.values import Bools, Floats, Ints

_CHUNK, _SEARCHED = 20_000, 1_000  # rows worked at once, to bound memory
_MIXER = np.uint64(0x9E3779B97F4A7C15)  # 2⁶⁴ over the golden ratio, odd: it spreads neighbours


@dataclass(frozen=True)
class Ranges:
    """Hull for every row. `exact`: proved to be the hull; `defined`: the formula has a value all over the box."""

    low: Floats
    high: Floats
    exact: Bools
    defined: Bools


def range_over(formula: Formula, lows: Mapping[str, Floats], highs: Mapping[str, Floats]) -> Ranges:
    """Least and greatest value over the box of every row; nan, not exact and not defined where there is none.

    Where the formula has a value at some points of the box only, the hull is over those. An end at infinity
    in a box stands for all finite numbers up to there.
    """
    names = formula.names
    low = np.atleast_1d(value_at(formula, lows))
    low = np.where(np.isfinite(low), low, np.nan)
    high, exact, defined = low.copy(), np.isfinite(low), np.isfinite(low)
    wide, missing = _wide_and_missing(names, lows, highs, len(low))
    for column in (low, high):
        column[missing] = np.nan
    for flags in (exact, defined):
        flags[missing] = False
    at = np.flatnonzero(wide & ~missing)
    with np.errstate(all="ignore"):
        for start in range(0, len(at), _CHUNK):
            part = at[start : start + _CHUNK]
            boxes = np.vstack([_stacked(names, lows, part), _stacked(names, highs, part)])
            # Joints of one steel share their boxes; each different box is worked once.
            different, back = _different(boxes)
            found = _hull(formula, different[: len(names)], different[len(names) :])
            low[part], high[part], exact[part], defined[part] = (values[back] for values in found)
    return Ranges(low, high, exact, defined)


def slopes(
    formula: Formula, lows: Mapping[str, Floats], highs: Mapping[str, Floats]
) -> Mapping[str, tuple[Floats, Floats]]:
    """For every name an interval that holds the formula's slope along it anywhere in the box where it has a value."""
    if not formula.names:
        return {}
    rows = len(lows[formula.names[0]])
    found = jet_of(formula, lows, highs, rows).slopes
    nothing = np.zeros(rows)
    return {name: found.get(name, (nothing, nothing)) for name in formula.names}


def _different(boxes: Floats) -> tuple[Floats, Ints]:
    """The columns that differ, and for every column the place of its like among them.

    Columns are sorted by a number made of their bits; should two different ones ever share it, all are compared.
    """
    bits = np.ascontiguousarray(boxes + 0.0).view(np.uint64)
    mixed = np.zeros(boxes.shape[1], np.uint64)
    for row in bits:
        mixed = (mixed ^ (row + (row >> np.uint64(29)))) * _MIXER
    _, first, back = np.unique(mixed, return_index=True, return_inverse=True)
    different = boxes[:, first]
    if not np.array_equal(different[:, back], boxes, equal_nan=True):
        different, back = np.unique(boxes, axis=1, return_inverse=True)
    return different, back.reshape(-1)


def _wide_and_missing(
    names: Sequence[str], lows: Mapping[str, Floats], highs: Mapping[str, Floats], rows: int
) -> tuple[Bools, Bools]:
    wide, missing = np.zeros(rows, np.bool_), np.zeros(rows, np.bool_)
    for name in names:
        missing |= np.isnan(lows[name])
        if highs[name] is not lows[name]:
            wide |= lows[name] != highs[name]
            missing |= np.isnan(highs[name])
    return wide, missing


def _stacked(names: Sequence[str], values: Mapping[str, Floats], rows: Ints) -> Box:
    return np.stack([values[name][rows] for name in names])


def _hull(formula: Formula, low: Box, high: Box) -> tuple[Floats, Floats, Bools, Bools]:
    """Low, high, exact and defined for boxes of names × rows."""
    least, most, exact, whole = _by_corners(formula, low, high)
    rest = np.flatnonzero(~exact)
    for start in range(0, len(rest), _SEARCHED):
        at = rest[start : start + _SEARCHED]
        bottom = least_over(formula, low[:, at], high[:, at])
        top = least_over(_negative(formula), low[:, at], high[:, at])
        whole[at] = bottom.whole | top.whole
        least[at], most[at], exact[at] = bottom.value, -top.value, bottom.exact & top.exact & whole[at]
    bounded = np.isfinite(least) & np.isfinite(most)
    endless = ~(np.isfinite(low) & np.isfinite(high)).all(axis=0)
    return least, most, exact & bounded, whole & ~np.isnan(least) & (bounded | endless)


def _by_corners(formula: Formula, low: Box, high: Box) -> tuple[Floats, Floats, Bools, Bools]:
    """The exact hull of boxes over which the formula rises or falls along every name; nan for the others."""
    jet = box_jet(formula, low, high)
    rising, falling = ways(formula, jet)
    at = np.flatnonzero((rising | falling).all(axis=0) & jet.defined & np.isfinite(low + high).all(axis=0))
    least, most = np.full(low.shape[1], np.nan), np.full(low.shape[1], np.nan)
    up, bottom, top = rising[:, at], low[:, at], high[:, at]
    ends = at_point(formula, np.where(up, bottom, top)), at_point(formula, np.where(up, top, bottom))
    # Where the value hardly moves, rounding may turn the two about.
    least[at], most[at] = np.minimum(*ends), np.maximum(*ends)
    return least, most, np.isfinite(least) & np.isfinite(most), jet.defined.copy()


@cache
def _negative(formula: Formula) -> Formula:
    return Formula(Minus(formula.root), f"-({formula.text})")
