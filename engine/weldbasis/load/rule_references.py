"""What a rule says of quantities, levels, units and sources must lead somewhere."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from typing import Any, TypeAlias

from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.problem import Problem, nearest
from weldbasis.ranges import parse_range

_NAME = re.compile(r"\{(\w+)\}")


Path_: TypeAlias = tuple[str | int, ...]


def rule_problems(rule: Rule, knowledge: Knowledge) -> Iterator[Problem]:
    """Everything a rule names that is not there or does not fit, with the nearest that would."""
    for name, path in _named(rule):
        if name not in knowledge.quantities:
            yield _no_quantity(rule, name, path, knowledge)
    for path, condition in _conditions(rule):
        yield from _condition_problems(rule, condition, knowledge, path)
    for place, row in enumerate(rule.body.get("rows", ())):
        yield from _row_problems(rule, place, row, knowledge)
    for place, cite in enumerate(rule.cites):
        if cite.source not in knowledge.sources:
            yield Problem(
                rule.place_of("cites", place, "source"),
                f"{rule.id} cites {cite.source!r}, which is no source",
                do=nearest(cite.source, knowledge.sources) + " Sources lie in sources/.",
            )
    yield from _scope_problems(rule, knowledge)
    yield from _word_problems(rule, knowledge)
    yield from _history_problems(rule)


def _named(rule: Rule) -> Iterator[tuple[str, Path_]]:
    """Every quantity a rule names outside its conditions, with where."""
    yield from ((name, ("gives",)) for name in rule.gives)
    yield from ((read.quantity, ("reads", read.name)) for read in rule.reads)
    yield from ((name, ("direction", name)) for name in rule.direction)
    yield from ((rule.body[part], (part,)) for part in ("of", "by") if part in rule.body)
    for place, candidate in enumerate(rule.body.get("candidates", ())):
        yield candidate if isinstance(candidate, str) else candidate["quantity"], ("candidates", place)
    yield from ((name, ("compare", place)) for place, name in enumerate(rule.body.get("compare", ())))


def _conditions(rule: Rule) -> Iterator[tuple[Path_, Mapping[str, Any]]]:
    """Every condition of a rule, with where it stands."""
    yield ("applies_when",), rule.applies_when
    yield ("valid_within",), rule.valid_within
    yield ("where",), rule.body.get("where", {})
    for place, candidate in enumerate(rule.body.get("candidates", ())):
        if not isinstance(candidate, str):
            yield ("candidates", place, "when"), candidate.get("when", {})


def _no_quantity(rule: Rule, name: str, path: Path_, knowledge: Knowledge) -> Problem:
    return Problem(
        rule.place_of(*path),
        f"rule {rule.id}: {name!r} is no quantity of the vocabulary",
        do=nearest(name, knowledge.quantities),
    )


def _condition_problems(
    rule: Rule, condition: Mapping[str, Any], knowledge: Knowledge, path: Path_
) -> Iterator[Problem]:
    for name, wanted in condition.items():
        if name == "any_of":
            for place, part in enumerate(wanted):
                yield from _condition_problems(rule, part, knowledge, (*path, "any_of", place))
        elif name not in knowledge.quantities:
            yield _no_quantity(rule, name, (*path, name), knowledge)
        elif wanted not in ("present", "absent"):
            try:
                check_value(knowledge.quantities[name], wanted)
            except ValueError as fault:
                yield Problem(rule.place_of(*path, name), f"rule {rule.id}, {path[0]}: {fault}")


def _row_problems(rule: Rule, place: int, row: Mapping[str, Any], knowledge: Knowledge) -> Iterator[Problem]:
    """The cells of one row of a table: what it looks at and what it gives."""
    bound = {read.name: knowledge.quantities.get(read.quantity) for read in rule.reads}
    cells: list[tuple[tuple[str, ...], Quantity | None, Any]] = [
        (("when", name), bound.get(name), wanted) for name, wanted in row.get("when", {}).items()
    ]
    give = row.get("give")
    if isinstance(give, Mapping):
        for name in sorted(set(give) - set(rule.gives)):
            yield Problem(
                rule.place_of("rows", place, "give", name),
                f"rule {rule.id}: row {place + 1} gives {name!r}, which the rule does not give",
                do=nearest(name, rule.gives),
            )
        cells += [(("give", name), knowledge.quantities.get(name), give[name]) for name in rule.gives if name in give]
    else:
        cells += [(("give",), knowledge.quantities.get(name), give) for name in rule.gives]
    for path, quantity, wanted in cells:
        if quantity is None or wanted in ("present", "absent"):
            continue
        try:
            check_value(quantity, wanted)
        except ValueError as fault:
            said = f"row {place + 1}, {path[1]}" if path[0] == "when" else f"row {place + 1} gives {wanted!r}"
            yield Problem(rule.place_of("rows", place, *path), f"rule {rule.id}: {said}: {fault}")


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
    reads: list[tuple[str, Path_]] = [(read.quantity, ("reads", read.name)) for read in rule.reads]
    for part in ("applies_when", "valid_within"):
        reads += _looked_at(getattr(rule, part), (part,))
    for name, path in reads:
        quantity = knowledge.quantities.get(name)
        if quantity and quantity.of == "member":
            yield Problem(
                rule.place_of(*path),
                f"rule {rule.id} works for each joint and reads {name}, which each member has",
                do="gather it to the joint first, or write for_each: member",
            )


def _looked_at(condition: Mapping[str, Any], path: Path_) -> Iterator[tuple[str, Path_]]:
    """Every quantity a condition looks at, with where."""
    for name, wanted in condition.items():
        if name == "any_of":
            for place, part in enumerate(wanted):
                yield from _looked_at(part, (*path, "any_of", place))
        else:
            yield name, (*path, name)


def _word_problems(rule: Rule, knowledge: Knowledge) -> Iterator[Problem]:
    names = {read.name for read in rule.reads} | {"result"} | set(knowledge.quantities)
    for name in _NAME.findall(rule.say):
        if name not in names:
            yield Problem(
                rule.place_of("say"),
                f"say of rule {rule.id} names {{{name}}}, which the rule does not read",
                do=nearest(name, names),
            )


def _history_problems(rule: Rule) -> Iterator[Problem]:
    """The history runs forward and ends with the version that stands."""
    latest = rule.changes[-1].version if rule.changes else 0
    if latest != rule.version:
        yield Problem(
            rule.place_of("version"),
            f"rule {rule.id} is version {rule.version}, its last changes entry is of {latest}",
            do="write a changes entry for this version",
        )
    for place, (before, after) in enumerate(zip(rule.changes, rule.changes[1:], strict=False), start=1):
        if after.version <= before.version or after.date < before.date:
            yield Problem(
                rule.place_of("changes", place),
                f"rule {rule.id}: version {after.version} of {after.date} stands after "
                f"version {before.version} of {before.date}",
                "the history runs forward, newest last",
                "put the entries in order",
            )


def check_value(quantity: Quantity, wanted: Any) -> None:
    """Raises ValueError where a value does not fit the quantity."""
    if quantity.is_number:
        if isinstance(wanted, list | tuple):
            raise ValueError(f"{quantity.id} is a number; a range is wanted, not a list")
        parse_range(wanted)
        return
    for level in wanted if isinstance(wanted, list | tuple) else [wanted]:
        if level not in quantity.order:
            raise ValueError(f"{level!r} is no level of {quantity.id}. {nearest(str(level), quantity.order)}")
