"""Cells of a table inside a rule's domain: which lie in it, and runs of cells told together as one box. All exact."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from weldbasis.kinds.compiled import BoundRead
from weldbasis.kinds.grid import Axis
from weldbasis.proofs.domain import Box, body_range
from weldbasis.ranges import EVERYTHING, Range, common
from weldbasis.values import Bools

Cells: TypeAlias = NDArray[np.bool_]
Block: TypeAlias = tuple[tuple[int, int], ...]  # first and last segment along every axis


def inside(axes: Sequence[Axis], reads: Sequence[BoundRead], boxes: Sequence[Box]) -> Cells:
    """The cells of the grid that hold a point of some box."""
    found = np.zeros(tuple(axis.segments for axis in axes), np.bool_)
    for box in boxes:
        found[np.ix_(*[_met(axis, read, box) for axis, read in zip(axes, reads, strict=True)])] = True
    return found


def _met(axis: Axis, read: BoundRead, box: Box) -> Bools:
    if not axis.quantity.is_number:
        return axis.covers(box.levels_of(axis.quantity))
    limits = body_range(box, read)
    return np.array([common(axis.segment_range(at), limits) is not None for at in range(axis.segments)])


def blocks(cells: Cells) -> Iterator[Block]:
    """The marked cells as blocks that do not overlap, each grown along the last axes first."""
    left = cells.copy()
    while left.any():
        start = np.unravel_index(int(np.argmax(left)), left.shape)
        ends = [(int(at), int(at)) for at in start]
        for axis in reversed(range(left.ndim)):
            first, last = ends[axis]
            while last + 1 < left.shape[axis] and bool(left[_slices(ends, axis, last + 1)].all()):
                last += 1
            ends[axis] = (first, last)
        left[_slices(ends)] = False
        yield tuple(ends)


def _slices(ends: Sequence[tuple[int, int]], axis: int = -1, at: int = 0) -> tuple[slice, ...]:
    return tuple(
        slice(at, at + 1) if place == axis else slice(first, last + 1) for place, (first, last) in enumerate(ends)
    )


def block_words(axes: Sequence[Axis], reads: Sequence[BoundRead], boxes: Sequence[Box], block: Block) -> str:
    """A block in words, cut to the domain: "thickness is (20, 38], restraint is high"; axes it leaves whole are left
    out.
    """
    words = []
    for axis, read, (first, last) in zip(axes, reads, block, strict=True):
        if axis.quantity.is_number:
            limits = [body_range(box, read) for box in boxes]
            widest = Range(min(r.low for r in limits), max(r.high for r in limits))
            span = common(_span(axis, first, last), _span_of(limits))
            if span is not None and not (span.low <= widest.low and span.high >= widest.high):
                words.append(f"{axis.name} is {span}")
        elif last - first + 1 < axis.segments:
            words.append(f"{axis.name} is {' or '.join(axis.quantity.order[first : last + 1])}")
    return ", ".join(words) or "everything the rule lets in"


def _span_of(limits: Sequence[Range]) -> Range:
    """The least range that holds them all."""
    low, low_open = min((r.low, r.low_open) for r in limits)
    high, high_closed = max((r.high, not r.high_open) for r in limits)
    return Range(low, high, low_open, not high_closed)


def _span(axis: Axis, first: int, last: int) -> Range:
    low, high = axis.segment_range(first), axis.segment_range(last)
    return Range(low.low, high.high, low.low_open, high.high_open)


def point_in(
    axes: Sequence[Axis], reads: Sequence[BoundRead], boxes: Sequence[Box], block: Block
) -> dict[str, float | str]:
    """One point of a block inside the domain, in the units of the rule's body."""
    for box in boxes:
        found = _point(axes, reads, box, block)
        if found:
            return found
    return {}


def _point(axes: Sequence[Axis], reads: Sequence[BoundRead], box: Box, block: Block) -> dict[str, float | str]:
    point: dict[str, float | str] = {}
    for axis, read, (first, last) in zip(axes, reads, block, strict=True):
        if axis.quantity.is_number:
            here = [common(axis.segment_range(at), body_range(box, read)) for at in range(first, last + 1)]
            there = [piece for piece in here if piece is not None]
            if not there:
                return {}
            point[axis.name] = number_in(max(there, key=lambda piece: piece.high - piece.low))
        else:
            met = [at for at in range(first, last + 1) if box.levels_of(axis.quantity) >> at & 1]
            if not met:
                return {}
            point[axis.name] = axis.quantity.order[met[0]]
    return point


def number_in(span: Range) -> float:
    """A number of a range, as round as can be."""
    if span == EVERYTHING:
        return 0.0
    low = span.low if np.isfinite(span.low) else span.high - max(1.0, abs(span.high))
    high = span.high if np.isfinite(span.high) else span.low + max(1.0, abs(span.low))
    middle = low / 2 + high / 2
    for digits in range(1, 16):
        rounded = float(f"{middle:.{digits}g}")
        if span.holds(rounded):
            return rounded
    return middle
