"""A table as a grid of cells: every axis cut at the ends of its ranges, every cell won by one row or by none.

Between two cuts lies one open segment and every cut is a segment of its own, so open and closed ends are
kept exactly. On sets, the cells that a box touches are found axis by axis; nothing is sampled.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from weldbasis.knowledge import Quantity
from weldbasis.ranges import EVERYTHING, ROUNDING, Range
from weldbasis.values import Bools, Column, Floats, Ints, Levels

MOST_CELLS = 200_000


@dataclass(frozen=True)
class Axis:
    """One column of a table: cuts of a number, or the levels of a category."""

    name: str
    quantity: Quantity
    cuts: Floats

    @property
    def segments(self) -> int:
        """How many segments the axis has."""
        return 2 * len(self.cuts) + 1 if self.quantity.is_number else len(self.quantity.order)

    def covers(self, wanted: Range | int) -> Bools:
        """Which segments a row's range (or bits of levels) takes in."""
        if isinstance(wanted, int):
            return np.array([bool(wanted >> place & 1) for place in range(self.segments)])
        return np.array([wanted.holds(point) for point in self.middles()])

    def middles(self) -> list[float]:
        """One number inside every segment of a number axis."""
        if not len(self.cuts):
            return [0.0]
        cuts = [float(cut) for cut in self.cuts]
        between = [(low + high) / 2 for low, high in pairwise(cuts)]
        found = [cuts[0] - 1.0]
        for place, cut in enumerate(cuts):
            found += [cut, between[place] if place < len(between) else cut + 1.0]
        return found

    def segment_range(self, segment: int) -> Range:
        """The numbers of one segment."""
        if not len(self.cuts):
            return EVERYTHING
        place, is_cut = divmod(segment, 2)
        if is_cut:
            return Range(float(self.cuts[place]), float(self.cuts[place]))
        low = float(self.cuts[place - 1]) if place else -np.inf
        high = float(self.cuts[place]) if place < len(self.cuts) else np.inf
        return Range(low, high, True, True)

    def segment_of(self, points: Floats) -> Ints:
        """The segment each number lies in."""
        if not len(self.cuts):
            return np.zeros(len(points), np.intp)
        near = ROUNDING * np.abs(self.cuts)
        left = np.searchsorted(self.cuts + near, points, side="left")
        on_cut = np.append(self.cuts - near, np.inf)[left] <= points
        segments: Ints = (2 * left + on_cut).astype(np.intp)
        return segments

    def touched(self, column: Column, low: Floats | None, high: Floats | None) -> tuple[Ints, Ints] | Bools:
        """First and last segment that each set touches, or, for levels, which ones it touches."""
        if isinstance(column, Levels):
            places = np.arange(self.segments, dtype=np.uint64)
            bits: Bools = (column.mask[:, None] >> places[None, :] & np.uint64(1)).astype(np.bool_)
            return bits
        assert low is not None
        assert high is not None
        first = self.segment_of(low)
        return first, first if high is low else self.segment_of(high)


def number_axis(name: str, quantity: Quantity, ranges: Sequence[Range]) -> Axis:
    """An axis cut at every finite end of its ranges."""
    ends = {end for row in ranges for end in (row.low, row.high) if np.isfinite(end)}
    return Axis(name, quantity, np.array(sorted(ends), np.float64))


def level_axis(name: str, quantity: Quantity) -> Axis:
    """An axis with one segment a level."""
    return Axis(name, quantity, np.array([], np.float64))


def winners(axes: Sequence[Axis], covers: Sequence[Sequence[Bools]], rank: Sequence[float]) -> NDArray[np.int32]:
    """The row that wins each cell, -1 where none covers it; of several the one with the highest rank.

    `covers[row][axis]` says which segments the row takes in.
    """
    shape = tuple(axis.segments for axis in axes)
    won = np.full(shape, -1, np.int32)
    for row in sorted(range(len(covers)), key=lambda r: (rank[r], -r)):
        won[np.ix_(*covers[row])] = row
    return won


def overlaps(axes: Sequence[Axis], covers: Sequence[Sequence[Bools]]) -> list[tuple[int, int, tuple[int, ...]]]:
    """Pairs of rows that cover a common cell, with one such cell."""
    found = []
    for first in range(len(covers)):
        for second in range(first + 1, len(covers)):
            both = [a & b for a, b in zip(covers[first], covers[second], strict=True)]
            if all(axis.any() for axis in both):
                found.append((first, second, tuple(int(np.argmax(axis)) for axis in both)))
    assert all(len(cell) == len(axes) for _, _, cell in found)
    return found


def cell_sets(axes: Sequence[Axis], touched: Sequence[tuple[Ints, Ints] | Bools]) -> NDArray[np.bool_]:
    """For each row of facts, which cells of the flattened grid its box touches: rows × cells."""
    cells: NDArray[np.bool_] | None = None
    for axis, part in zip(axes, touched, strict=True):
        if isinstance(part, tuple):
            places = np.arange(axis.segments)[None, :]
            here = (places >= part[0][:, None]) & (places <= part[1][:, None])
        else:
            here = part
        cells = here if cells is None else (cells[:, :, None] & here[:, None, :]).reshape(len(here), -1)
    assert cells is not None
    return cells


def single_cells(axes: Sequence[Axis], touched: Sequence[tuple[Ints, Ints] | Bools], rows: int) -> tuple[Ints, Bools]:
    """The flat cell of each row of facts, and whether its box touches that one cell only."""
    flat, single = np.zeros(rows, np.intp), np.ones(rows, np.bool_)
    for axis, part in zip(axes, touched, strict=True):
        if isinstance(part, tuple):
            place = part[0]
            if part[1] is not part[0]:
                single &= part[0] == part[1]
        else:
            place = np.argmax(part, axis=1)
            single &= part.sum(axis=1) == 1
        flat = flat * axis.segments + place
    return flat, single
