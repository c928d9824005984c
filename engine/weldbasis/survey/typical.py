"""Joints of typical steel over settings, for comparing methods: an analysis a grade may have, facts of its joints."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace

import numpy as np

from weldbasis.facts import Facts, Origin
from weldbasis.knowledge import Grade, Knowledge
from weldbasis.problem import Place
from weldbasis.project.columns import JointRow, MemberRow, facts_from_rows
from weldbasis.project.given import Fact, standing_in, within
from weldbasis.project.grades import limits_in
from weldbasis.project.steels import ELEMENTS, Steel, member_facts
from weldbasis.ranges import Range
from weldbasis.values import Bits, Column, exact_numbers, level_sets, mask_of

_POINT = Origin("project", "a point of the lattice")
_NO_PAPER = Origin("project", "by grade alone")

Setting = Mapping[str, float | str]


def typical_analysis(
    knowledge: Knowledge, grade: Grade, thickness_mm: float, shares: Mapping[str, float], residual_share: float
) -> dict[str, Fact] | None:
    """One analysis that a grade may have at a thickness; None where its standard does not reach there.

    An element with both limits stands in their middle, one with a maximum alone at its share of it (`shares`, by
    symbol, else `residual_share`); an element that the grade does not name at `residual_share` of the residual level
    of the vocabulary. Where neither is there, the element stays unknown.
    """
    limits = limits_in(grade, Range(thickness_mm, thickness_mm))
    if limits is None:
        return None
    found: dict[str, Fact] = {}
    for symbol, name in ELEMENTS.items():
        quantity = knowledge.quantities[name]
        limit = limits.composition.get(symbol)
        if limit is not None and limit.high <= quantity.range.high:
            limit = within(quantity, limit)
            share = shares.get(symbol, residual_share)
            content = (limit.low + limit.high) / 2 if limit.low > 0 else share * limit.high
            text = f"typical of {grade.designation} by its limits"
        else:
            default = standing_in(quantity)
            if default is None or default.unknown or not isinstance(default.value, Range):
                continue
            content, text = residual_share * default.value.high, "residual, not named by the grade"
        found[name] = Fact(Range(content, content), Origin("assumption", text), assumed=True)
    return found


def joints_of_grade(
    knowledge: Knowledge,
    grade: Grade,
    thicknesses_mm: Iterable[float],
    joint: Setting,
    analyse: Mapping[float, Mapping[str, Fact]] | None = None,
) -> list[JointRow]:
    """One butt-like joint of one part a thickness, known by grade, or by the analysis that stands for a thickness.

    `joint` holds what all of them say: numbers in the vocabulary's unit, levels by name. A joint's id is
    "grade thickness".
    """
    vocabulary = knowledge.quantities
    said = {name: _fact(value) for name, value in joint.items()}
    steel = Steel(grade.id, "", grade, None, {}, {}, (), _NO_PAPER, "", "", "", "")
    rows = []
    for thickness in thicknesses_mm:
        at = replace(steel, analysed=dict(analyse[thickness])) if analyse else steel
        facts = member_facts(at, Range(thickness, thickness), vocabulary)
        facts |= {"member_thickness": _fact(thickness), "member_role": _fact("parent"), "member_number": _fact(1.0)}
        weld = {"member_role": _fact("weld-metal"), "member_number": _fact(2.0)}
        members = (MemberRow(grade.designation, facts), MemberRow("weld metal", weld, weld_metal=True))
        rows.append(JointRow(f"{grade.id} {thickness:g}", "", str(joint["form"]), "", Place(""), said, members))
    return rows


def _fact(value: float | str) -> Fact:
    return Fact((value,) if isinstance(value, str) else Range(float(value), float(value)), _POINT)


def lattice_facts(knowledge: Knowledge, rows: Sequence[JointRow], settings: Sequence[Setting]) -> Facts:
    """Every joint under every setting: facts of len(rows) × len(settings) joints, the setting running fastest.

    All settings name the same quantities, which are of the joint; what a row says of them is replaced.
    """
    base = facts_from_rows(knowledge, rows)
    count = len(settings)
    joint_rows = np.repeat(np.arange(len(rows)), count)
    sizes = np.bincount(base.joint_of, minlength=len(rows))
    starts = np.cumsum(sizes) - sizes
    widths = sizes[joint_rows]
    offsets = np.cumsum(widths) - widths
    joint_of = np.repeat(np.arange(len(joint_rows)), widths)
    member_rows = np.arange(len(joint_of)) - offsets[joint_of] + starts[joint_rows][joint_of]
    given: dict[str, Column] = {}
    origins = {}
    for name, column in base.given.items():
        wanted = joint_rows if knowledge.quantities[name].of == "joint" else member_rows
        given[name] = column.take(wanted)
        origins[name] = base.origins[name][wanted]
    for name in settings[0]:
        given[name] = _column(knowledge, name, [setting[name] for setting in settings], len(rows))
        origins[name] = np.full(len(joint_rows), len(base.origin_list), np.intp)
    joints = tuple(f"{row.id} {number}" for row in rows for number in range(1, count + 1))
    members = tuple(base.members[row] for row in member_rows)
    return Facts(joints, members, joint_of, given, origins, (*base.origin_list, _POINT))


def _column(knowledge: Knowledge, name: str, values: Sequence[float | str], times: int) -> Column:
    quantity = knowledge.quantities[name]
    if quantity.is_number:
        return exact_numbers(np.tile(np.array(values, np.float64), times))
    masks: Bits = np.array([mask_of([str(value)], quantity.order) for value in values], np.uint64)
    return level_sets(np.tile(masks, times))
