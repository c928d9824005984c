"""Names that must lead somewhere: every id, level, source and unit that one record says of another."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from typing import Any

from weldbasis.knowledge import Consumable, Era, Grade, Knowledge, Quantity, Rule
from weldbasis.problem import Place, Problem, nearest
from weldbasis.ranges import parse_range
from weldbasis.units import is_unit

_NAME = re.compile(r"\{(\w+)\}")


def reference_problems(knowledge: Knowledge) -> Iterator[Problem]:
    """Every name that leads nowhere, with the nearest that would."""
    for quantity in knowledge.quantities.values():
        yield from _quantity_problems(quantity, knowledge)
    givers: dict[str, Rule] = {}
    for rule in knowledge.rules.values():
        yield from _rule_problems(rule, knowledge)
        for name in rule.gives:
            if name in givers:
                other = givers[name]
                yield Problem(
                    rule.place,
                    f"rules {other.id} and {rule.id} both give {name}",
                    f"one quantity, one rule; the other stands in {other.place}",
                    "let each give a quantity of its own and bring them together in a governing rule",
                )
            givers.setdefault(name, rule)
    records: list[Rule | Grade | Era | Consumable] = [
        *knowledge.rules.values(),
        *knowledge.grades.values(),
        *knowledge.eras.values(),
        *knowledge.consumables.values(),
    ]
    for record in records:
        for cite in record.cites:
            if cite.source not in knowledge.sources:
                yield Problem(
                    record.place,
                    f"{record.id} cites {cite.source!r}, which is no source",
                    do=nearest(cite.source, knowledge.sources) + " Sources lie in sources/.",
                )
    yield from _case_problems(knowledge)
    yield from _steel_problems(knowledge)


def _quantity_problems(quantity: Quantity, knowledge: Knowledge) -> Iterator[Problem]:
    if quantity.is_number and not is_unit(quantity.unit):
        yield Problem(
            quantity.place,
            f"{quantity.id} is measured in {quantity.unit!r}, which is no unit",
            do="write one like mm, kJ/mm, degC, mL/100g, MPa or %",
        )
    if quantity.part_of and quantity.part_of not in knowledge.quantities:
        yield Problem(
            quantity.place,
            f"{quantity.id} is part of {quantity.part_of!r}, which is no quantity",
            do=nearest(quantity.part_of, knowledge.quantities),
        )
    default = quantity.if_not_given
    if default in ("absent", "unknown"):
        return
    if not quantity.if_not_given_because:
        yield Problem(
            quantity.place,
            f"{quantity.id} takes {default!r} where nothing is given, without a reason",
            do="add because: …",
        )
    try:
        _check_value(quantity, default)
    except ValueError as fault:
        yield Problem(quantity.place, f"if_not_given of {quantity.id}: {fault}")


def _check_value(quantity: Quantity, wanted: Any) -> None:
    """Raises ValueError where a value does not fit the quantity."""
    if quantity.is_number:
        if isinstance(wanted, list | tuple):
            raise ValueError(f"{quantity.id} is a number; a range is wanted, not a list")
        parse_range(wanted)
        return
    for level in wanted if isinstance(wanted, list | tuple) else [wanted]:
        if level not in quantity.order:
            raise ValueError(f"{level!r} is no level of {quantity.id}. {nearest(str(level), quantity.order)}")


def _rule_problems(rule: Rule, knowledge: Knowledge) -> Iterator[Problem]:
    def known(name: str, *path: str | int) -> Iterator[Problem]:
        if name not in knowledge.quantities:
            yield Problem(
                rule.place_of(*path),
                f"rule {rule.id}: {name!r} is no quantity of the vocabulary",
                do=nearest(name, knowledge.quantities),
            )

    for name in rule.gives:
        yield from known(name, "gives")
    for read in rule.reads:
        yield from known(read.quantity, "reads", read.name)
    for name in rule.direction:
        yield from known(name, "direction", name)
    for part, condition in (
        ("applies_when", rule.applies_when),
        ("valid_within", rule.valid_within),
        ("where", rule.body.get("where", {})),
    ):
        yield from _condition_problems(rule, condition, knowledge, (part,))
    for part in ("of", "by"):
        if part in rule.body:
            yield from known(rule.body[part], part)
    for place, candidate in enumerate(rule.body.get("candidates", ())):
        name = candidate if isinstance(candidate, str) else candidate["quantity"]
        yield from known(name, "candidates", place)
        if not isinstance(candidate, str):
            yield from _condition_problems(rule, candidate.get("when", {}), knowledge, ("candidates", place, "when"))
    for place, name in enumerate(rule.body.get("compare", ())):
        yield from known(name, "compare", place)
    yield from _scope_problems(rule, knowledge)
    yield from _word_problems(rule, knowledge)


def _condition_problems(
    rule: Rule, condition: Mapping[str, Any], knowledge: Knowledge, path: tuple[str | int, ...]
) -> Iterator[Problem]:
    for name, wanted in condition.items():
        if name == "any_of":
            for place, part in enumerate(wanted):
                yield from _condition_problems(rule, part, knowledge, (*path, "any_of", place))
        elif name not in knowledge.quantities:
            yield Problem(
                rule.place_of(*path, name),
                f"rule {rule.id}: {name!r} is no quantity of the vocabulary",
                do=nearest(name, knowledge.quantities),
            )
        elif wanted not in ("present", "absent"):
            try:
                _check_value(knowledge.quantities[name], wanted)
            except ValueError as fault:
                yield Problem(rule.place_of(*path, name), f"rule {rule.id}, {path[0]}: {fault}")


def _scope_problems(rule: Rule, knowledge: Knowledge) -> Iterator[Problem]:
    """A rule for joints sees joints; gather is the only way up from members."""
    for name in rule.gives:
        quantity = knowledge.quantities.get(name)
        if quantity and quantity.of != rule.for_each:
            yield Problem(
                rule.place_of("gives"),
                f"rule {rule.id} works for each {rule.for_each}, but {name} is of the {quantity.of}",
                do=f"write for_each: {quantity.of}, or give another quantity",
            )
    if rule.for_each == "member":
        return
    reads = [(read.quantity, ("reads", read.name)) for read in rule.reads]
    reads += [(name, (part, name)) for part in ("applies_when", "valid_within") for name in getattr(rule, part)]
    for name, path in reads:
        quantity = knowledge.quantities.get(name)
        if quantity and quantity.of == "member":
            yield Problem(
                rule.place_of(*path),
                f"rule {rule.id} works for each joint and reads {name}, which each member has",
                do="gather it to the joint first, or write for_each: member",
            )


def _word_problems(rule: Rule, knowledge: Knowledge) -> Iterator[Problem]:
    names = {read.name for read in rule.reads} | {"result"} | set(knowledge.quantities)
    for name in _NAME.findall(rule.say):
        if name not in names:
            yield Problem(
                rule.place_of("say"),
                f"say of rule {rule.id} names {{{name}}}, which the rule does not read",
                do=nearest(name, names),
            )
    latest = rule.changes[-1].version if rule.changes else 0
    if latest != rule.version:
        yield Problem(
            rule.place_of("version"),
            f"rule {rule.id} is version {rule.version}, its last changes entry is of {latest}",
            do="write a changes entry for this version",
        )


def _case_problems(knowledge: Knowledge) -> Iterator[Problem]:
    for case in knowledge.cases:
        if case.rule not in knowledge.rules:
            yield Problem(
                case.place,
                f"case {case.id} is for {case.rule!r}, which is no rule",
                do=nearest(case.rule, knowledge.rules),
            )
        if case.source not in knowledge.sources:
            yield Problem(
                case.place,
                f"case {case.id} names {case.source!r}, which is no source",
                do=nearest(case.source, knowledge.sources),
            )
        for name in (*case.given, *case.expect):
            if name not in knowledge.quantities and name != "finding":
                yield Problem(
                    case.place,
                    f"case {case.id}: {name!r} is no quantity of the vocabulary",
                    do=nearest(name, knowledge.quantities),
                )


def _steel_problems(knowledge: Knowledge) -> Iterator[Problem]:
    family = knowledge.quantities.get("steel_family")
    records: list[Grade | Era] = [*knowledge.grades.values(), *knowledge.eras.values()]
    for record in records:
        if family and record.family not in family.order:
            yield Problem(
                record.place,
                f"{record.id}: {record.family!r} is no level of steel_family",
                do=nearest(record.family, family.order),
            )
    delivery = knowledge.quantities.get("delivery")
    for grade in knowledge.grades.values():
        for level in grade.delivery:
            if delivery and level not in delivery.order:
                yield Problem(
                    grade.place, f"{grade.id}: {level!r} is no level of delivery", do=nearest(level, delivery.order)
                )


def duplicate_problem(kind: str, name: str, place: Place, first: Place) -> Problem:
    """Two records of one kind with the same id."""
    return Problem(
        place, f"{kind} {name!r} stands here a second time", f"first in {first}", "give one of them another id"
    )
