"""Plain joints of many steels over a lattice of conditions, as columns: for sheets of steels, methods side by side.

A joint of a steel and thickness is read as a project would read it, once; conditions are then varied in the columns.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from pathlib import Path
from typing import Any

import numpy as np

from weldbasis.facts import Facts, Origin
from weldbasis.knowledge import Era, Grade, Knowledge
from weldbasis.load.yaml_text import Document
from weldbasis.problem import Place, Refused
from weldbasis.project.columns import JointRow, facts_from_rows
from weldbasis.project.given import Fact, value_of
from weldbasis.project.grades import GradeLimits, limits_in
from weldbasis.project.joints import joint_row, read_defaults
from weldbasis.project.reading import Reading, Written
from weldbasis.project.steels import Steel
from weldbasis.ranges import Range
from weldbasis.values import ABSENT, PRESENT, Column, Floats, Ints, Levels, Numbers, mask_of

_PLACE = Place("conditions of the sheets")
_MEMBERS = 3  # two parts and the weld metal


@dataclass(frozen=True)
class Lattice:
    """Facts of one joint for every steel, thickness (mm) and combination of the varied fields.

    The joint of steel s, thickness t and combination c stands in row (c × steels + s) × thicknesses + t.
    """

    facts: Facts
    steels: tuple[str, ...]
    thickness_mm: tuple[float, ...]
    combinations: tuple[tuple[int, ...], ...]

    def row(self, steel: int, thickness: int, combination: int) -> int:
        """The row of one joint."""
        return (combination * len(self.steels) + steel) * len(self.thickness_mm) + thickness


def steel_of_grade(grade: Grade) -> Steel:
    """A steel of which only the grade is known, as a project would name it."""
    origin = Origin("grade-limit", f"limits of {grade.designation}, {grade.standard}")
    return Steel(grade.id, "", grade, None, {}, {}, (), origin, "", "", "", str(grade.place))


def steel_of_era(era: Era) -> Steel:
    """An undocumented steel of a time and product, never sampled."""
    origin = Origin("era-envelope", f"envelope of {era.title}")
    return Steel(era.id, "", None, era, {}, {}, (), origin, "", "", "", str(era.place))


def lattice(
    knowledge: Knowledge,
    steels: Sequence[Steel],
    joint: Mapping[str, Any],
    thickness_mm: Sequence[float],
    varied: Sequence[Sequence[Mapping[str, Any]]],
) -> Lattice:
    """Joints between two equal parts of each steel. `joint` and `varied` hold fields as a project writes them.

    Of each sequence in `varied` one mapping of fields counts at a time. Raises Refused where a field does not fit.
    """
    reading = Reading(knowledge, Document(_PLACE.file, {}, {}, ()), _PLACE.file, Path())
    reading.steels.update({steel.id: steel for steel in steels})
    first = {key: value for options in varied for key, value in options[0].items()}
    defaults = read_defaults(reading, Written({}, lambda *_: _PLACE))
    rows: list[JointRow] = []
    base: list[int] = []  # for every steel and thickness the row whose limits it shares
    for steel in steels:
        known: list[tuple[GradeLimits | None, int]] = []
        for thickness in thickness_mm:
            limits = limits_in(steel.grade, Range(thickness, thickness)) if steel.grade else None
            like = next((place for other, place in known if other == limits), len(rows))
            if like == len(rows):
                parts = [{"steel": steel.id, "thickness": thickness}] * 2
                said = {"joint": f"{steel.id} {thickness:g}", "members": parts, **joint, **first}
                row = joint_row(reading, Written(said, lambda *_: _PLACE), defaults, ())
                rows += [row] if row else []
                known.append((limits, like))
            base.append(like)
    if reading.problems:
        raise Refused(dict.fromkeys(reading.problems))
    combinations = tuple(product(*(range(len(options)) for options in varied)))
    fields = [
        {k: v for at, options in zip(c, varied, strict=True) for k, v in options[at].items()} for c in combinations
    ]
    thicknesses = np.tile(np.array(thickness_mm, np.float64), len(steels))
    plain = _in_thickness(knowledge, facts_from_rows(knowledge, rows), np.array(base, np.intp), thicknesses)
    facts = _varied(knowledge, plain, [_facts(knowledge, said) for said in fields])
    return Lattice(facts, tuple(steel.id for steel in steels), tuple(thickness_mm), combinations)


def _in_thickness(knowledge: Knowledge, facts: Facts, base: Ints, thickness_mm: Floats) -> Facts:
    """Joints made from those at `base`, their parts in the thicknesses (mm) given."""
    members = (base[:, None] * _MEMBERS + np.arange(_MEMBERS)).reshape(-1)
    rows = {"joint": base, "member": members}
    given = {name: column.take(rows[knowledge.quantities[name].of]) for name, column in facts.given.items()}
    column = given["member_thickness"]
    sized = np.where(column.presence == PRESENT, np.repeat(thickness_mm, _MEMBERS), np.nan)
    given["member_thickness"] = Numbers(sized, sized, column.presence, column.flags)
    joint_of = np.repeat(np.arange(len(base)), _MEMBERS)
    joints = tuple(facts.joints[row] for row in base)
    return Facts(joints, tuple(facts.members[row] for row in members), joint_of, given)


def _facts(knowledge: Knowledge, said: Mapping[str, Any]) -> dict[str, Fact]:
    origin = Origin("project", "the conditions of the sheet")
    return {name: Fact(value_of(knowledge.quantities[name], value), origin) for name, value in said.items()}


def _varied(knowledge: Knowledge, facts: Facts, combinations: Sequence[Mapping[str, Fact]]) -> Facts:
    """The same joints once for each combination of facts of the joint."""
    joints, members, times = len(facts.joints), len(facts.members), len(combinations)
    rows = {"joint": np.tile(np.arange(joints), times), "member": np.tile(np.arange(members), times)}
    given = {name: column.take(rows[knowledge.quantities[name].of]) for name, column in facts.given.items()}
    for name in dict.fromkeys(name for combination in combinations for name in combination):
        values = [combination.get(name) for combination in combinations]
        given[name] = _column(knowledge, name, values, np.repeat(np.arange(times), joints))
    joint_of: Ints = np.concatenate([facts.joint_of + place * joints for place in range(times)])
    return Facts(facts.joints * times, facts.members * times, joint_of, given)


def _column(knowledge: Knowledge, name: str, values: Sequence[Fact | None], rows: Ints) -> Column:
    presence = np.array([PRESENT if fact else ABSENT for fact in values], np.uint8)[rows]
    flags = np.zeros(len(rows), np.uint8)
    quantity = knowledge.quantities[name]
    if quantity.is_number:
        ranges = [fact.value if fact and isinstance(fact.value, Range) else None for fact in values]
        low = np.array([found.low if found else np.nan for found in ranges])[rows]
        high = np.array([found.high if found else np.nan for found in ranges])[rows]
        return Numbers(low, low if np.array_equal(low, high, equal_nan=True) else high, presence, flags)
    levels = [fact.value if fact and isinstance(fact.value, tuple) else () for fact in values]
    mask = np.array([mask_of(found, quantity.order) for found in levels], np.uint64)[rows]
    return Levels(mask, presence, flags)
