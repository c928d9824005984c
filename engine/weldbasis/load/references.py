"""Names that must lead somewhere: every id, level, source and unit that one record says of another."""

from __future__ import annotations

from collections.abc import Iterator

from weldbasis.knowledge import Consumable, Era, Grade, Knowledge, Quantity, Rule, Sampling
from weldbasis.load.rule_references import check_value, rule_problems
from weldbasis.problem import Place, Problem, nearest
from weldbasis.units import is_unit


def reference_problems(knowledge: Knowledge) -> Iterator[Problem]:
    """Every name that leads nowhere, with the nearest that would."""
    for quantity in knowledge.quantities.values():
        yield from _quantity_problems(quantity, knowledge)
    givers: dict[str, Rule] = {}
    for rule in knowledge.rules.values():
        yield from rule_problems(rule, knowledge)
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
    records: list[Grade | Era | Sampling | Consumable] = [
        *knowledge.grades.values(),
        *knowledge.eras.values(),
        *([knowledge.sampling] if knowledge.sampling else ()),
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
    yield from _level_problems(knowledge)
    yield from _decision_problems(knowledge)


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
    yield from _lever_problems(quantity)
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
        check_value(quantity, default)
    except ValueError as fault:
        yield Problem(quantity.place, f"if_not_given of {quantity.id}: {fault}")


def _lever_problems(quantity: Quantity) -> Iterator[Problem]:
    """A number that is a lever is set in steps inside a range that it can have, or to named values."""
    lever = quantity.lever
    if lever is None or not quantity.is_number or lever.settings:
        return
    if not lever.step or not 0 < lever.within.low < lever.within.high < float("inf"):
        yield Problem(
            quantity.place,
            f"{quantity.id} is a lever without a step and a range above nothing in which it can be set",
            "nothing could be tried",
            'add within: "[low, high]" and step, or settings with names',
        )


def _decision_problems(knowledge: Knowledge) -> Iterator[Problem]:
    """Decisions have places of their own, and parts belong to a decision."""
    first: dict[int, Quantity] = {}
    for quantity in knowledge.decisions:
        other = first.setdefault(quantity.decision, quantity)
        if other is not quantity:
            yield Problem(
                quantity.place,
                f"{other.id} and {quantity.id} are both decision {quantity.decision}",
                f"the other stands in {other.place}",
                "give one of them another place",
            )
    for quantity in knowledge.quantities.values():
        whole = knowledge.quantities.get(quantity.part_of)
        if whole and not whole.decision:
            yield Problem(
                quantity.place,
                f"{quantity.id} is part of {whole.id}, which is no decision",
                do=nearest(whole.id, [decision.id for decision in knowledge.decisions]),
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


def _level_problems(knowledge: Knowledge) -> Iterator[Problem]:
    """Words of steels and consumables that must be levels of the vocabulary."""
    said: list[tuple[Grade | Era | Consumable, str, str]] = []
    said += [(era, "steel_family", era.family) for era in knowledge.eras.values()]
    for grade in knowledge.grades.values():
        said.append((grade, "steel_family", grade.family))
        said += [(grade, "delivery", level) for level in grade.delivery]
    for consumable in knowledge.consumables.values():
        said += [(consumable, "covering", consumable.covering), (consumable, "process", consumable.process)]
    for part, name, level in said:
        quantity = knowledge.quantities.get(name)
        if quantity and level not in quantity.order:
            yield Problem(part.place, f"{part.id}: {level!r} is no level of {name}", do=nearest(level, quantity.order))


def duplicate_problem(kind: str, name: str, place: Place, first: Place) -> Problem:
    """Two records of one kind with the same id."""
    return Problem(
        place, f"{kind} {name!r} stands here a second time", f"first in {first}", "give one of them another id"
    )
