"""A house layer looked over: how strict every amendment is against what lies beneath, and what needs mending."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from weldbasis.authority.strictness import Strictness, strictness_of
from weldbasis.knowledge import Amendment, Knowledge, Quantity, Rule
from weldbasis.problem import Problem


@dataclass(frozen=True)
class Amended:
    """One amendment with the record beneath and the one that counts now; either is None where there is none."""

    amendment: Amendment
    before: Any
    after: Any
    strictness: Strictness

    @property
    def asks_for_less(self) -> bool:
        """Whether it asks for less than the layer beneath, somewhere."""
        return self.strictness.verdict in ("looser", "mixed")


def amended_records(knowledge: Knowledge) -> tuple[Amended, ...]:
    """Every amendment of every layer above the lowest, compared with what it changes."""
    return tuple(_amended(amendment, knowledge) for amendment in knowledge.amendments)


def _amended(amendment: Amendment, knowledge: Knowledge) -> Amended:
    kept = "quantities" if amendment.of == "quantity" else f"{amendment.of}s"
    before = knowledge.beneath.get((amendment.of, amendment.id))
    after = getattr(knowledge, kept).get(amendment.id)
    return Amended(amendment, before, after, _strictness(before, after, knowledge))


def _strictness(before: Any, after: Any, knowledge: Knowledge) -> Strictness:
    if isinstance(before, Rule) and isinstance(after, Rule):
        return strictness_of(before, after, knowledge)
    rule = before or after
    if isinstance(rule, Rule):
        asks = rule.kind == "limit" or any(knowledge.quantities[q].worse != "neither" for q in rule.gives)
        if not asks:
            return Strictness("no direction", why="what it gives has no demanding end of its own")
        return Strictness("looser" if after is None else "stricter", why="a whole rule")
    if isinstance(before, Quantity) and isinstance(after, Quantity):
        return _defaults(before, after)
    return Strictness("no direction", why="what it asks for is seen in the joints that use it")


def _defaults(before: Quantity, after: Quantity) -> Strictness:
    """A default against the one it replaces, by the demanding end that the vocabulary states."""
    old, new = before.if_not_given, after.if_not_given
    if old == new:
        return Strictness("same")
    if before.is_number or before.worse not in ("first", "last") or not {old, new} <= set(after.order):
        return Strictness("no direction", why=f"where nothing is given: {old} before, {new} now")
    more = (after.order.index(new) > after.order.index(old)) == (before.worse == "last")
    return Strictness("stricter" if more else "looser", why=f"where nothing is given: {old} before, {new} now")


def house_problems(amended: tuple[Amended, ...]) -> Iterator[Problem]:
    """Amendments that are not what they say, or ask for less without a named justification."""
    for one in amended:
        amendment, verdict = one.amendment, one.strictness.verdict
        what = f"{amendment.of} {amendment.id!r}"
        if amendment.how == "tighten" and one.asks_for_less:
            do = "write how: replace or relax, and name the justification under justified_by"
            yield Problem(amendment.place, f"{what} is said to tighten, and asks for less somewhere", _worst(one), do)
        elif one.asks_for_less and not amendment.justified_by:
            do = "name what allows it under justified_by, or ask for no less"
            yield Problem(amendment.place, f"{what} asks for less than the layer beneath", _worst(one), do)
        elif amendment.how == "relax" and verdict in ("stricter", "same"):
            do = "write what it does: tighten or replace"
            yield Problem(amendment.place, f"{what} is said to relax, and asks for no less anywhere", "", do)


def _worst(one: Amended) -> str:
    example = one.strictness.looser
    if example is None:
        return one.strictness.why or "what was asked for is asked no more"
    given = ", ".join(f"{name} {value}" for name, value in example.given.items())
    return f"for example {example.after} instead of {example.before}" + (f" at {given}" if given else "")
