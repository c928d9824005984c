"""Draw boxes of facts at random, and points inside boxes: how a rule set is tried against itself.

A box is what a project may say of a joint: every given quantity a number, a range, some levels, or not said. A point
is one case the box allows. One composition of a part feeds everything that reads it. Ends of ranges and the figures
at which rules change over are drawn far more often than chance would, because there mistakes show.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from weldbasis.facts import Facts
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.project.steels import ELEMENTS
from weldbasis.ranges import parse_range
from weldbasis.values import (
    ABSENT,
    PRESENT,
    Bools,
    Column,
    Floats,
    Ints,
    Levels,
    Numbers,
    exact_numbers,
    level_sets,
    mask_of,
)

_SPAN = 2000.0  # a quantity without a turning figure is drawn over this much of what it may be
_DOUBTS = (0.03, 0.12, 0.4)  # share of a joint's inputs that are no single value
_PLAIN = 0.6  # share of joints drawn as most are: one grade of steel, middling figures, most things said
_OFF_GRADE = 0.3  # share of the other steels that no grade or era describes
_MIDDLE = (0.2, 0.75)
_ON_FIGURE = 0.35  # share of numbers that are a turning figure itself
_NONE = (float("nan"), float("nan"))


def random_boxes(knowledge: Knowledge, figures: Mapping[str, Floats], joints: int, rng: np.random.Generator) -> Facts:
    """As many joints of one to three parts and the weld metal, of which anything may be said that a project may say."""
    sizes = rng.integers(2, 5, joints)
    joint_of = np.repeat(np.arange(joints), sizes)
    last = np.cumsum(sizes) - 1
    weld = np.zeros(len(joint_of), np.bool_)
    weld[last] = True
    number = np.arange(len(joint_of)) - (last - sizes + 1)[joint_of] + 1.0
    doubt = rng.choice(_DOUBTS, joints)
    plain = rng.random(joints) < _PLAIN
    told = ~weld | (rng.random(joints) < 0.5)[joint_of]  # whether anything is said of the weld metal
    limits, grade = _limits(knowledge), rng.integers(0, _standing_count(knowledge), len(joint_of))
    grade = np.where(plain[joint_of], grade[last][joint_of], grade)
    grade[(rng.random(len(grade)) < _OFF_GRADE) & ~plain[joint_of]] = -1
    roles = knowledge.quantities["member_role"].order
    given: dict[str, Column] = {
        "member_number": exact_numbers(number),
        "member_role": level_sets(
            np.where(weld, mask_of(["weld-metal"], roles), mask_of(["parent"], roles)).astype(np.uint64)
        ),
    }
    for quantity in knowledge.quantities.values():
        if quantity.given == "never" or quantity.id in given:
            continue
        row = np.arange(joints) if quantity.of == "joint" else joint_of
        column = _box(quantity, figures.get(quantity.id), doubt[row], plain[row], rng)
        here = (rng.random(len(row)) < np.where(plain[row], 0.8, 0.5)) | (quantity.given == "must")
        if quantity.id in limits:
            column = _by_grade(column, limits[quantity.id][grade], doubt[row], plain[row], rng)
            here |= ~np.isnan(limits[quantity.id][grade, 0])
        given[quantity.id] = _with_default(quantity, column, here, told if quantity.of == "member" else None)
    names = tuple("weld metal" if metal else "part" for metal in weld.tolist())
    return Facts(tuple(map(str, range(joints))), names, joint_of, given)


def _standing_count(knowledge: Knowledge) -> int:
    return sum(len(grade.bands) for grade in knowledge.grades.values()) + len(knowledge.eras)


def _limits(knowledge: Knowledge) -> Mapping[str, Floats]:
    """For every element what each grade, by band of thickness, and each era allows; the last row allows nothing."""
    known = [band.composition for grade in knowledge.grades.values() for band in grade.bands]
    known += [era.typical for era in knowledge.eras.values()]
    found = {}
    for element, name in ELEMENTS.items():
        wide, usual = knowledge.quantities[name].range, knowledge.quantities[name].if_not_given
        other = _NONE if usual in ("unknown", "absent") else (parse_range(usual).low, parse_range(usual).high)
        ends = [(max(r.low, wide.low), min(r.high, wide.high)) if (r := one.get(element)) else other for one in known]
        found[name] = np.array([*ends, _NONE])
    return found


def _by_grade(column: Column, limits: Floats, doubt: Floats, plain: Bools, rng: np.random.Generator) -> Column:
    """What the steel's grade allows, or one content inside it; as it was where the grade says nothing."""
    assert isinstance(column, Numbers)
    low, high = limits.T
    content = low + (high - low) * np.where(plain, rng.uniform(0.5, 1.0, len(low)), rng.random(len(low)))
    whole, known = rng.random(len(low)) < doubt, ~np.isnan(low)
    bottom = np.where(known, np.where(whole, low, content), column.low)
    return Numbers(bottom, np.where(known, np.where(whole, high, content), column.high), column.presence, column.flags)


def _with_default(quantity: Quantity, column: Column, said: Bools, told: Bools | None) -> Column:
    """What is said; elsewhere what the vocabulary puts there, and nothing for weld metal nobody speaks of."""
    default = quantity.if_not_given
    stands = np.full(len(said), default != "absent") if told is None else told & (default != "absent")
    if told is not None:
        said = said & told
    presence = np.where(said | stands, PRESENT, ABSENT).astype(np.uint8)
    flags = np.zeros(len(said), np.uint8)
    if isinstance(column, Levels):
        levels = {"absent": (), "unknown": quantity.order}.get(default, (default,))
        usual = np.uint64(mask_of(levels, quantity.order))
        mask = np.where(said, column.mask, np.where(stands, usual, np.uint64(0)))
        return Levels(mask.astype(np.uint64), presence, flags)
    limits = quantity.range if default in ("unknown", "absent") else parse_range(default)
    low = np.where(said, column.low, np.where(stands, limits.low, np.nan))
    high = np.where(said, column.high, np.where(stands, limits.high, np.nan))
    return Numbers(low, high, presence, flags)


def _box(quantity: Quantity, figures: Floats | None, doubt: Floats, plain: Bools, rng: np.random.Generator) -> Column:
    rows = len(doubt)
    wide = rng.random(rows) < doubt
    if not quantity.is_number:
        count = len(quantity.order)
        single = np.uint64(1) << rng.integers(0, count, rows).astype(np.uint64)
        other = np.uint64(1) << rng.integers(0, count, rows).astype(np.uint64)
        every = np.uint64((1 << count) - 1)
        some = rng.integers(1, 1 << count, rows, dtype=np.uint64, endpoint=False)
        kind = rng.random(rows)
        many = np.where(kind < 0.5, single | other, np.where(kind < 0.8, some, every))
        return level_sets(np.where(wide, many, single))
    first, second = _number(quantity, figures, plain, rng), _number(quantity, figures, plain, rng)
    near = np.minimum(first * (1 + rng.choice([0.001, 0.05, 0.3], rows)), quantity.range.high)
    low, high = np.minimum(first, second), np.maximum(first, second)
    kind = rng.random(rows)
    low = np.where(~wide | (kind < 0.4), first, np.where(kind < 0.9, low, quantity.range.low))
    high = np.where(kind < 0.4, np.maximum(first, near), np.where(kind < 0.9, high, quantity.range.high))
    high = np.where(wide, high, first)
    presence = np.full(rows, PRESENT, np.uint8)
    return Numbers(low, high, presence, np.zeros(rows, np.uint8))


def _number(quantity: Quantity, figures: Floats | None, plain: Bools, rng: np.random.Generator) -> Floats:
    """A turning figure, or a number between two neighbours of them; of the middle ones where the joint is plain."""
    low, rows = quantity.range.low, len(plain)
    if figures is None or not len(figures):
        between: Floats = rng.uniform(low, min(quantity.range.high, low + _SPAN), rows)
        return between
    knots = np.unique(np.concatenate([[low], figures, [min(quantity.range.high, 1.3 * figures[-1] + 1e-9)]]))
    rank = np.where(plain, rng.uniform(*_MIDDLE, rows), rng.random(rows))
    place = np.minimum((rank * (len(knots) - 1)).astype(np.intp), len(knots) - 2)
    share = np.where(rng.random(rows) < _ON_FIGURE, 0.0, rng.random(rows))
    found: Floats = knots[place] + share * (knots[place + 1] - knots[place])
    return found


def points_in(
    facts: Facts, knowledge: Knowledge, figures: Mapping[str, Floats], joints: Ints, rng: np.random.Generator
) -> tuple[Facts, Ints]:
    """One point inside the box of each joint named, as joints of their own; and the member rows they come from."""
    boxes, members = facts.repeated(joints, knowledge.quantities)
    given = {name: _points(column, figures.get(name), rng) for name, column in boxes.given.items()}
    return Facts(boxes.joints, boxes.members, boxes.joint_of, given), members


def _points(column: Column, figures: Floats | None, rng: np.random.Generator) -> Column:
    rows = len(column)
    if isinstance(column, Levels):
        return Levels(_one_level(column.mask, rng), column.presence, column.flags)
    kind = rng.random(rows)
    share = np.where(kind < 0.4, rng.random(rows), np.where(kind < 0.7, 0.0, 1.0))
    values = np.where(column.low == column.high, column.low, column.low + (column.high - column.low) * share)
    values = np.where(share == 1.0, column.high, values)
    if figures is not None and len(figures):
        figure = figures[rng.integers(0, len(figures), rows)]
        inside = (figure >= column.low) & (figure <= column.high) & (rng.random(rows) < 0.2)
        values = np.where(inside, figure, values)
    return Numbers(values, values, column.presence, column.flags)


def _one_level(mask: Any, rng: np.random.Generator) -> Any:
    """One of the bits of every mask, each as likely; an empty mask stays empty."""
    picked = mask.copy()
    several = np.flatnonzero(mask & (mask - np.uint64(1)))
    if len(several):
        bits = (mask[several, None] >> np.arange(64, dtype=np.uint64)) & np.uint64(1)
        keys = np.where(bits == 1, rng.random(bits.shape), -1.0)
        picked[several] = np.uint64(1) << np.argmax(keys, axis=1).astype(np.uint64)
    return picked
