"""What is to be said of a joint: findings of limit rules, concessions, what is open or not covered."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from weldbasis.evaluate import Evaluation
from weldbasis.kinds import Compiled
from weldbasis.knowledge import Quantity
from weldbasis.nearest import nearest_text
from weldbasis.reading import value_of
from weldbasis.sentences import outcome_text, say, value_text, why_not
from weldbasis.settling.settle import ANALYSIS, Narrowing, open_inputs
from weldbasis.state import demanding_end, state_of
from weldbasis.steps import member_rows, origin_at
from weldbasis.trace import Finding, Ref, Value
from weldbasis.values import may_be_at
from weldbasis.words import levels_text, number_text, with_unit

_WITH_CASES, _MOST_CASES = 2, 4
_ASKING = frozenset({"recommended", "required"})


def findings_of(
    evaluation: Evaluation, row: int, narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]]
) -> Iterator[Finding]:
    """The findings of limit rules, then what is open with what would settle it, then what no rule covers."""
    for name, truth in evaluation.findings.items():
        rule = evaluation.graph.rules[name]
        rows = [row] if rule.rule.for_each == "joint" else list(member_rows(evaluation, row))
        for at in rows:
            if bool(truth.may[at]):
                sure = bool(truth.surely[at])
                level = rule.body.level if sure else rule.body.level_if_unsure
                if level != "none":
                    text = say(evaluation, rule, Value(), at)
                    text = text if sure else f"{text} (not sure: {_unsure(rule, evaluation, at)})"
                    leave = evaluation.facts.set_aside.get(name, {}).get(row)
                    if leave:
                        yield Finding("note", name, f"Set aside ({leave.text}): {text}", sure)
                    else:
                        yield Finding(level, name, text, sure)
    yield from _conceded(evaluation, row)
    for quantity in evaluation.knowledge.decisions:
        yield from _undecided(evaluation, quantity, row, narrowings)


def _conceded(evaluation: Evaluation, row: int) -> Iterator[Finding]:
    """What a concession puts in the place of what the rules give, and whether that asks for less."""
    for name, ruled in evaluation.overruled.items():
        quantity = evaluation.knowledge.quantities[name]
        origin = origin_at(evaluation, name, row) if quantity.of == "joint" else None
        if origin is None or origin.kind != "concession" or not may_be_at(evaluation.facts.given[name], row):
            continue
        value, instead = value_of(evaluation.columns[name], quantity, row), value_of(ruled, quantity, row)
        words = {1: ", which asks for more", -1: ", which asks for less", 0: ""}[_asks(quantity, value, instead)]
        text = f"{quantity.title} {value_text(quantity, value)} instead of {value_text(quantity, instead)}{words}"
        yield Finding("caution", evaluation.graph.giving[name], f"{text}: {origin.text}")


def _asks(quantity: Quantity, value: Value, instead: Value) -> int:
    """1 where the demanding end of a value asks for more than that of another, −1 for less, 0 where nobody can say."""
    one, other = demanding_end(value, quantity), demanding_end(instead, quantity)
    if one is None or other is None or one == other or quantity.worse == "neither":
        return 0
    if isinstance(one, str) or isinstance(other, str):
        more = quantity.order.index(str(one)) > quantity.order.index(str(other))
        return 1 if more == (quantity.worse == "last") else -1
    return 1 if (one > other) == (quantity.worse == "higher") else -1


def _unsure(rule: Compiled, evaluation: Evaluation, row: int) -> str:
    return "; ".join(why_not(rule, evaluation.views[rule.rule.for_each], row)) or "the sets leave it open"


def _undecided(
    evaluation: Evaluation, quantity: Quantity, row: int, narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]]
) -> Iterator[Finding]:
    value = value_of(evaluation.columns[quantity.id], quantity, row)
    state = state_of(value, quantity)
    rule = evaluation.graph.giving.get(quantity.id, "")
    if quantity.part_of:
        if state == "uncovered" and _to_be_done(evaluation, quantity.part_of, row):
            text = f"{quantity.title} is asked for, and the rules give none."
            yield Finding("hold", rule, f"{text} {nearest_text(evaluation, quantity.id, row)}")
        return
    if state == "uncovered":
        near = nearest_text(evaluation, quantity.id, row)
        yield Finding(
            "hold" if quantity.given == "must" else "caution",
            rule,
            f"{quantity.title}: the rules do not cover this case. {near}".rstrip(),
        )
    if state == "open":
        text = f"{quantity.title} is open: {value_text(quantity, value)}"
        if value.presence == "maybe":
            text += ", or not covered"
        yield Finding(
            "hold", rule, f"{text}. {settling_text(evaluation, row, quantity, narrowings.get((row, quantity.id), ()))}"
        )


def _to_be_done(evaluation: Evaluation, decision: str, row: int) -> bool:
    """Whether a decision may have something done, so that its parts have to say how."""
    quantity = evaluation.knowledge.quantities[decision]
    return not _ASKING.isdisjoint(value_of(evaluation.columns[decision], quantity, row).any_of)


def settling_text(evaluation: Evaluation, row: int, quantity: Quantity, narrowings: tuple[Narrowing, ...]) -> str:
    """What would settle a decision, best first; the best two with where the decision turns."""
    if not narrowings:
        titles = ", ".join(open_inputs(evaluation, quantity, row)) or "no input that is open"
        return f"No input of the project narrows it, alone or with another; it rests on {titles}."
    gains = [_gain(evaluation, row, quantity, n, place < _WITH_CASES) for place, n in enumerate(narrowings[:4])]
    return "To know " + "; ".join(gains) + "."


def _gain(evaluation: Evaluation, row: int, decision: Quantity, narrowing: Narrowing, with_cases: bool) -> str:
    pairs = zip(narrowing.refs, narrowing.now, strict=True)
    asked = " together with ".join(asked_text(evaluation, row, ref, now) for ref, now in pairs)
    gain = "settles it" if narrowing.settles else f"leaves {narrowing.left}"
    cases = cases_text(evaluation, decision, narrowing) if with_cases else ""
    return f"{asked} {gain}{': ' + cases if cases else ''}"


def asked_text(evaluation: Evaluation, row: int, ref: Ref, now: Value) -> str:
    """What is to be found out, with what is known of it: "Carbon of web (now 0.05 to 0.25 %)"."""
    name = evaluation.facts.members[member_rows(evaluation, row)[ref.member - 1]] if ref.member else ""
    if ref.quantity == ANALYSIS:
        return f"the whole analysis of {name}"
    quantity = evaluation.knowledge.quantities[ref.quantity]
    title = quantity.title if quantity.symbol else quantity.title.lower()
    return f"{title}{f' of {name}' if name else ''} (now {value_text(quantity, now)})"


def cases_text(evaluation: Evaluation, decision: Quantity, narrowing: Narrowing) -> str:
    """Where a decision turns: "up to 0.14 % 50 °C, above that 60 to 140 °C"; nothing where it does not turn."""
    if not 1 < len(narrowing.cases) <= _MOST_CASES:
        return ""
    asked = evaluation.knowledge.quantities[narrowing.ref.quantity]
    outcomes = [outcome_text(decision, case.outcome) for case in narrowing.cases]
    if asked.levels:
        return ", ".join(
            f"{levels_text(asked, case.found.any_of)} {outcome}"
            for case, outcome in zip(narrowing.cases, outcomes, strict=True)
        )
    easy, rest = (case.found for case in narrowing.cases)
    assert easy.low is not None
    assert easy.high is not None
    assert rest.low is not None
    rising = rest.low > easy.low
    edge = with_unit(number_text(easy.high if rising else easy.low, asked.decimals), asked.unit)
    words = ("up to", "above") if rising else ("from", "below")
    return f"{words[0]} {edge} {outcomes[0]}, {words[1]} that {outcomes[1]}"
