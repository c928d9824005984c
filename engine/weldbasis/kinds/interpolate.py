"""Tables read by interpolation: linear between nodes along one number, one surface for each set of levels.

Between nodes the value is linear, so the extremes over a range lie at its ends or at nodes inside it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from weldbasis.kinds.compiled import BoundRead, Compiled, Explanation, read_range, refuse, to_vocabulary
from weldbasis.kinds.condition import compile_test
from weldbasis.kinds.view import View
from weldbasis.ranges import parse_range
from weldbasis.values import Bytes, Column, Floats, Levels, Truth, numbers_where


@dataclass(frozen=True)
class Curve:
    """Nodes along the number axis that hold for some levels of the other columns (bits by name)."""

    levels: Mapping[str, int]
    at: NDArray[np.float64]
    value: NDArray[np.float64]


@dataclass(frozen=True)
class Surface:
    """The number read, the level columns, and the curves."""

    along: BoundRead
    beside: tuple[BoundRead, ...]
    curves: tuple[Curve, ...]


def compile_surface(compiled: Compiled) -> Surface:
    """Collect the rows into curves. Exactly one column is a number; the others are levels."""
    rule = compiled.rule
    numbers = [read for read in compiled.reads if read.quantity.is_number]
    if len(numbers) != 1:
        raise refuse(
            rule,
            f"an interpolated table reads one number, this one {len(numbers)}",
            "reads",
            do="make the other columns levels, or split the table",
        )
    along, beside = numbers[0], tuple(read for read in compiled.reads if not read.quantity.is_number)
    nodes: dict[tuple[int, ...], list[tuple[float, float]]] = {}
    for place, row in enumerate(rule.body["rows"]):
        try:
            place_at = parse_range(row["when"][along.name])
            given = parse_range(row["give"])
            key = tuple(compile_test(r.quantity, row["when"].get(r.name, list(r.quantity.order))).mask for r in beside)
        except (ValueError, KeyError) as fault:
            raise refuse(rule, f"row {place + 1}: {fault}", "rows", place) from fault
        if place_at.low != place_at.high or given.low != given.high:
            raise refuse(rule, f"row {place + 1} needs single numbers to interpolate between", "rows", place)
        nodes.setdefault(key, []).append((place_at.low, given.low))
    curves = []
    for key, points in sorted(nodes.items()):
        points.sort()
        at, value = np.array([p[0] for p in points]), np.array([p[1] for p in points])
        if len(points) < 2 or bool((np.diff(at) == 0).any()):
            raise refuse(rule, "a curve needs two or more nodes, no two at the same place", "rows")
        converted, _ = to_vocabulary(compiled, value, value)
        curves.append(Curve({r.name: mask for r, mask in zip(beside, key, strict=True)}, at, converted))
    return Surface(along, beside, tuple(curves))


def evaluate_surface(
    compiled: Compiled, surface: Surface, view: View, there: Truth, flags: Bytes
) -> Mapping[str, Column]:
    """The hull over the curves that may hold; absent beyond the outer nodes, which are never extended."""
    low, high = read_range(compiled, surface.along, view, there)
    least, most = np.full(view.rows, np.inf), np.full(view.rows, -np.inf)
    covered, touched = np.ones(view.rows, np.bool_), np.zeros(view.rows, np.bool_)
    matched = {read.name: np.zeros(view.rows, np.uint64) for read in surface.beside}
    for curve in surface.curves:
        here = np.ones(view.rows, np.bool_)
        for read in surface.beside:
            column = view.column(read.quantity.id)
            assert isinstance(column, Levels)
            here &= (column.mask & np.uint64(curve.levels[read.name])) != 0
            matched[read.name] |= np.uint64(curve.levels[read.name])
        bottom, top, inside = curve_range(curve, low, high)
        reaches = here & (high >= curve.at[0]) & (low <= curve.at[-1])
        np.minimum(least, bottom, out=least, where=reaches)
        np.maximum(most, top, out=most, where=reaches)
        touched |= reaches
        covered &= ~here | inside
    for read in surface.beside:
        column = view.column(read.quantity.id)
        assert isinstance(column, Levels)
        covered &= (column.mask & ~matched[read.name]) == 0
    if high is low and bool((least == most)[touched].all()):
        most = least
    return {compiled.gives[0].id: numbers_where(there & Truth(touched, touched & covered), least, most, flags)}


def curve_range(curve: Curve, low: Floats, high: Floats) -> tuple[Floats, Floats, NDArray[np.bool_]]:
    """Least and greatest value over each range, cut to the nodes, and whether the range lay within them."""
    inside = (low >= curve.at[0]) & (high <= curve.at[-1])
    left, right = np.interp(low, curve.at, curve.value), np.interp(high, curve.at, curve.value)
    least, most = np.minimum(left, right), np.maximum(left, right)
    for at, value in zip(curve.at, curve.value, strict=True):
        between = (low < at) & (at < high)
        np.minimum(least, value, out=least, where=between)
        np.maximum(most, value, out=most, where=between)
    return least, most, inside


def explain_surface(surface: Surface) -> Explanation:
    """The nodes in words."""
    parts = []
    for curve in surface.curves:
        nodes = ", ".join(f"{at:g} → {value:g}" for at, value in zip(curve.at, curve.value, strict=True))
        parts.append(nodes)
    return Explanation(f"between nodes of {surface.along.name}: " + "; ".join(parts))
