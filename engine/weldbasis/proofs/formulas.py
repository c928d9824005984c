"""Proofs about formulas over the domain of their rule: a value everywhere, of a size the vocabulary knows, moving the
way the rule says.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import combinations, product

import numpy as np

from weldbasis.formula import Comparison, Formula, range_over, slopes, value_at
from weldbasis.formula.factors import what_turns
from weldbasis.formula.holes import Hole, holes
from weldbasis.kinds.compiled import BoundRead, Compiled
from weldbasis.kinds.limit import Limit
from weldbasis.proofs.domain import Box, formula_ends
from weldbasis.proofs.finding import VetFinding, point_text
from weldbasis.values import Floats

_CORNERS = 10  # names whose ends are all combined; further ones are tried at random
_TRIED = 512  # points of a box tried for a slope the wrong way
_STEPS = (0.05, 1e-3, 0.4)  # shares of a range, for the pair of points that shows it
_NOISE = 1e-9
_SLICES = 2304  # pieces of a box, along one name or along two


def formula_findings(compiled: Compiled, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """Everything proved about the formula of one rule, or about both sides of its comparison."""
    if isinstance(compiled.body, Formula):
        yield from hole_findings(compiled, "formula", compiled.body, boxes)
        yield from foreign_values(compiled, boxes)
        yield from wrong_directions(compiled, boxes)
    elif isinstance(compiled.body, Limit) and isinstance(compiled.body.must_hold, Comparison):
        for side in (compiled.body.must_hold.left, compiled.body.must_hold.right):
            yield from hole_findings(compiled, "must_hold", side, boxes)


def hole_findings(compiled: Compiled, part: str, formula: Formula, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """Parts of a formula that have, or may have, no value inside the rule's validity."""
    told: set[tuple[str, str]] = set()
    found = [hole for box in boxes for hole in holes(formula, *formula_ends(compiled, formula, box))]
    for hole in sorted(found, key=lambda hole: hole.point is None):
        if (hole.part, hole.why) not in told:
            told.add((hole.part, hole.why))
            yield _hole_finding(compiled, part, hole)


def _hole_finding(compiled: Compiled, part: str, hole: Hole) -> VetFinding:
    place, rule = compiled.rule.place_of(part), compiled.rule
    if hole.point is None:
        what = f"rule {rule.id}: it could not be proved that {hole.part} is never {hole.why}"
        return VetFinding(place, "caution", "formulas", what, "narrow valid_within, or bound the part with max or min")
    return VetFinding(
        place,
        "stop",
        "formulas",
        f"rule {rule.id}: {hole.part} is {hole.why} inside its validity, and has no value there",
        "narrow valid_within so that it cannot be, or bound the part with max or min",
        point_text(hole.point),
    )


def foreign_values(compiled: Compiled, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """A formula whose every value lies outside the vocabulary's range: its units do not fit."""
    formula, given = compiled.body, compiled.gives[0]
    spans = []
    for box in boxes:
        low, high = (_columns(end) for end in formula_ends(compiled, formula, box))
        if not low:
            return
        middle = {name: (low[name] + high[name]) / 2 for name in low}
        tried = np.concatenate([value_at(formula, point) for point in (low, high, middle)])
        tried = compiled.gives_factor * tried[np.isfinite(tried)] + compiled.gives_offset
        if bool(((tried >= given.range.low) & (tried <= given.range.high)).any()):
            return
        hull = range_over(formula, low, high)
        spans.append((float(hull.low[0]), float(hull.high[0])))
    if not spans or not np.isfinite(spans).any():
        return
    low_end, high_end = (
        compiled.gives_factor * end + compiled.gives_offset
        for end in (min(low for low, _ in spans), max(high for _, high in spans))
    )
    if low_end > given.range.high or high_end < given.range.low:
        yield VetFinding(
            compiled.rule.place_of("formula"),
            "stop",
            "vocabulary",
            f"rule {compiled.rule.id}: the formula gives {low_end:.4g} to {high_end:.4g}, and the vocabulary allows "
            f"{given.id} only {given.range} {given.unit}".rstrip(),
            "look at the units of reads and gives_unit, or at the vocabulary",
        )


def _columns(end: Mapping[str, float]) -> dict[str, Floats]:
    return {name: np.array([value]) for name, value in end.items()}


def wrong_directions(compiled: Compiled, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """Stated directions that the formula contradicts somewhere inside its validity, with two points that show it."""
    stated = [read for read in compiled.reads if compiled.rule.direction.get(read.quantity.id) in ("up", "down")]
    open_still = {read.name: read for read in stated}
    for box in boxes:
        low, high = formula_ends(compiled, compiled.body, box)
        bounds = slopes(compiled.body, _columns(low), _columns(high)) if open_still else {}
        unsure = [read for read in open_still.values() if not _follows(compiled, read, bounds[read.name])]
        points = _points(low, high) if unsure else {}
        for read in unsure:
            pair = _against(compiled, read, points, low, high)
            if pair:
                del open_still[read.name]
                yield _direction_finding(compiled, read, *pair)
            elif not _follows_in_slices(compiled, read, low, high):
                del open_still[read.name]
                yield _open_direction(compiled, read)


def _sign(compiled: Compiled, read: BoundRead) -> float:
    return 1.0 if compiled.rule.direction[read.quantity.id] == "up" else -1.0


def _follows(compiled: Compiled, read: BoundRead, bounds: tuple[Floats, Floats]) -> bool:
    sign = _sign(compiled, read)
    return bool((bounds[0] >= 0).all() if sign > 0 else (bounds[1] <= 0).all())


def _follows_in_slices(
    compiled: Compiled, read: BoundRead, low: Mapping[str, float], high: Mapping[str, float]
) -> bool:
    """Whether bounds on the slope prove the direction over slices of the box, cut along one name or along two."""
    formula = what_turns(compiled.body, read.name, low, high)
    for cut in (*combinations(formula.names, 1), *combinations(formula.names, 2)):
        each = round(_SLICES ** (1 / len(cut)))
        edges = [_edges(low[name], high[name], each) for name in cut]
        bottoms = np.meshgrid(*[ends[:-1] for ends in edges])
        tops = np.meshgrid(*[ends[1:] for ends in edges])
        rows = each ** len(cut)
        lows = {name: np.full(rows, end) for name, end in low.items()}
        highs = {name: np.full(rows, end) for name, end in high.items()}
        lows |= {name: ends.ravel() for name, ends in zip(cut, bottoms, strict=True)}
        highs |= {name: ends.ravel() for name, ends in zip(cut, tops, strict=True)}
        if _follows(compiled, read, slopes(formula, lows, highs)[read.name]):
            return True
    return False


def _edges(low: float, high: float, slices: int) -> Floats:
    """The ends of slices of a range: of like ratio where it lies above zero, else of like width."""
    return np.geomspace(low, high, slices + 1) if low > 0 else np.linspace(low, high, slices + 1)


def _points(low: Mapping[str, float], high: Mapping[str, float]) -> dict[str, Floats]:
    """Points of a box: its corners, and points drawn evenly, always the same ones."""
    names = list(low)
    corners = np.array(list(product((0.0, 1.0), repeat=min(len(names), _CORNERS))))
    drawn = np.random.default_rng(7).random((_TRIED, len(names)))
    drawn[: len(corners), : corners.shape[1]] = corners[:_TRIED]
    return {name: low[name] + (high[name] - low[name]) * drawn[:, at] for at, name in enumerate(names)}


def _against(
    compiled: Compiled,
    read: BoundRead,
    points: Mapping[str, Floats],
    low: Mapping[str, float],
    high: Mapping[str, float],
) -> tuple[dict[str, float], float, float, float] | None:
    """A point, the other end of a step from it along one name, and both values, where these move the wrong way."""
    name = read.name
    for share in _STEPS:
        step = share * (high[name] - low[name])
        start = low[name] + (1 - share) * (points[name] - low[name])
        before = value_at(compiled.body, {**points, name: start})
        after = value_at(compiled.body, {**points, name: start + step})
        moved = _sign(compiled, read) * (after - before)
        moved = np.where(np.isfinite(moved), moved, 0.0)
        worst = int(np.argmin(moved))
        if moved[worst] < -_NOISE * max(1.0, abs(float(before[worst]))):
            point = {**{other: float(values[worst]) for other, values in points.items()}, name: float(start[worst])}
            return point, float(start[worst] + step), float(before[worst]), float(after[worst])
    return None


def _direction_finding(
    compiled: Compiled, read: BoundRead, point: Mapping[str, float], onward: float, before: float, after: float
) -> VetFinding:
    rule, stated = compiled.rule, compiled.rule.direction[read.quantity.id]
    return VetFinding(
        rule.place_of("direction", read.quantity.id),
        "stop",
        "directions",
        f"rule {rule.id} says that the result goes {stated} with {read.quantity.id}, and the formula does not",
        "turn the direction round, narrow valid_within, or write either",
        f"{point_text(point)} gives {before:.6g}; {read.name} = {onward:.6g} gives {after:.6g}",
    )


def _open_direction(compiled: Compiled, read: BoundRead) -> VetFinding:
    rule, stated = compiled.rule, compiled.rule.direction[read.quantity.id]
    return VetFinding(
        rule.place_of("direction", read.quantity.id),
        "caution",
        "directions",
        f"rule {rule.id}: it could not be proved that the result goes {stated} with {read.quantity.id}",
        "narrow valid_within, or write either",
    )
