"""Rows of facts into columns: what is given, what the vocabulary puts where nothing is given, and every origin."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from weldbasis.facts import Facts, Origin
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.problem import Place
from weldbasis.project.given import Fact, standing_in
from weldbasis.project.steels import ELEMENTS
from weldbasis.ranges import Range
from weldbasis.values import ABSENT, ASSUMED, PRESENT, UNKNOWN, Column, Levels, Numbers, mask_of


@dataclass(frozen=True)
class MemberRow:
    """One member and its facts by quantity id."""

    name: str
    facts: Mapping[str, Fact]
    weld_metal: bool = False


@dataclass(frozen=True)
class JointRow:
    """One joint, its facts and its members; the weld metal comes last."""

    id: str
    title: str
    form: str
    note: str
    place: Place
    facts: Mapping[str, Fact]
    members: tuple[MemberRow, ...]


@dataclass(frozen=True)
class _Cell:
    low: float
    high: float
    mask: int
    presence: int
    flags: int
    origin: Origin


_NOTHING = _Cell(float("nan"), float("nan"), 0, int(ABSENT), 0, Origin("unknown", "not given"))


def facts_from_rows(knowledge: Knowledge, rows: Sequence[JointRow]) -> Facts:
    """Columns over all joints and members, with defaults of the vocabulary filled in and their origins."""
    members = [(number, member) for number, row in enumerate(rows) for member in row.members]
    origins: dict[Origin, int] = {}
    given: dict[str, Column] = {}
    places: dict[str, Any] = {}
    said = {name for row in rows for name in row.facts} | {name for _, m in members for name in m.facts}
    for quantity in knowledge.quantities.values():
        default = _default_cell(quantity)
        if default is _NOTHING and quantity.id not in said:
            continue
        made: dict[int, _Cell] = {}  # parts of one steel share their facts
        if quantity.of == "joint":
            cells = [_cell(quantity, row.facts.get(quantity.id), default, made) for row in rows]
        else:
            # What nothing is known of in weld metal stays absent: a residual range of parent plate says nothing of it.
            cells = [
                _cell(quantity, m.facts.get(quantity.id), _NOTHING if m.weld_metal else default, made)
                for _, m in members
            ]
        if all(cell.presence == ABSENT for cell in cells):
            continue
        given[quantity.id] = _column(quantity, cells)
        places[quantity.id] = np.array([origins.setdefault(cell.origin, len(origins)) for cell in cells], np.intp)
    return Facts(
        tuple(row.id for row in rows),
        tuple(m.name for _, m in members),
        np.array([number for number, _ in members], np.intp),
        given,
        places,
        tuple(origins),
    )


def _default_cell(quantity: Quantity) -> _Cell:
    """What the vocabulary puts where nothing is given; an element taken as residual is an assumption."""
    fact = standing_in(quantity)
    if fact is None:
        return _NOTHING
    if quantity.id in ELEMENTS.values() and not fact.unknown:
        fact = Fact(fact.value, Origin("assumption", fact.origin.text), assumed=True)
    return _cell(quantity, fact, _NOTHING, {})


def _cell(quantity: Quantity, fact: Fact | None, default: _Cell, made: dict[int, _Cell]) -> _Cell:
    if fact is None:
        return default
    if id(fact) not in made:
        made[id(fact)] = _made(quantity, fact)
    return made[id(fact)]


def _made(quantity: Quantity, fact: Fact) -> _Cell:
    flags = (int(ASSUMED) if fact.assumed else 0) | (int(UNKNOWN) if fact.unknown else 0)
    return _filled(quantity, fact.value, flags, fact.origin)


def _filled(quantity: Quantity, value: Range | tuple[str, ...], flags: int, origin: Origin) -> _Cell:
    if isinstance(value, Range):
        return _Cell(value.low, value.high, 0, int(PRESENT), flags, origin)
    return _Cell(0.0, 0.0, mask_of(value, quantity.order), int(PRESENT), flags, origin)


def _column(quantity: Quantity, cells: Sequence[_Cell]) -> Column:
    presence = np.array([cell.presence for cell in cells], np.uint8)
    flags = np.array([cell.flags for cell in cells], np.uint8)
    if not quantity.is_number:
        return Levels(np.array([cell.mask for cell in cells], np.uint64), presence, flags)
    low, high = np.array([cell.low for cell in cells]), np.array([cell.high for cell in cells])
    point = np.array_equal(low, high, equal_nan=True)
    return Numbers(low, low if point else high, presence, flags)


def plain_facts(rows: Sequence[JointRow]) -> list[dict[str, Any]]:
    """All given facts as plain data, in vocabulary units, for the digest of a project's inputs."""
    return [
        {
            "joint": row.id,
            "facts": _plain(row.facts),
            "members": [{"name": member.name, "facts": _plain(member.facts)} for member in row.members],
        }
        for row in rows
    ]


def _plain(facts: Mapping[str, Fact]) -> dict[str, Any]:
    found: dict[str, Any] = {}
    for name, fact in sorted(facts.items()):
        value = fact.value
        plain: Any = [value.low, value.high] if isinstance(value, Range) else list(value)
        found[name] = {"value": plain, "origin": fact.origin.kind, "from": fact.origin.text}
    return found
