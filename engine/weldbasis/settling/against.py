"""Why not: which rules stand against another value of a decision, and which checks would fail with it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from weldbasis.evaluate import Evaluation
from weldbasis.findings import findings_of
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.reasons import trace_joint
from weldbasis.settling.trials import Pin, Trial, decided_again
from weldbasis.settling.wishes import Wish
from weldbasis.state import demanding_end, state_of
from weldbasis.trace import Finding, JointTrace, Ref, Step, Value
from weldbasis.values import mask_of


@dataclass(frozen=True)
class Objection:
    """A rule whose own value asks for more than is wished; not `surely` where only a part of its set does."""

    step: Step
    governs: bool
    surely: bool


@dataclass(frozen=True)
class WhyNot:
    """What stands against a value of a decision, the governing rule first, and the checks that fail with it.

    `asks_more` tells that the wish asks for more of the shop than the rules do; `uncovered` that no rule covers the
    decision, so that nothing stands against the value and nothing for it.
    """

    wish: Wish
    now: Value
    objections: tuple[Objection, ...]
    checks: tuple[Finding, ...]
    asks_more: bool
    uncovered: bool


def why_not_value(evaluation: Evaluation, joint: int, wish: Wish) -> WhyNot:
    """Walk from the decision down: every candidate that stands for choice and asks for more than the wish."""
    trace = trace_joint(evaluation, joint, {})
    now = trace.steps[Ref(wish.decision.id)].value
    uncovered = state_of(now, wish.decision) == "uncovered"
    found = {o.step.ref: o for o in _objections(evaluation, trace, Ref(wish.decision.id), wish, True)}
    ordered = sorted(found.values(), key=lambda o: (not o.governs, not o.surely, -_rank(wish.decision, o.step.value)))
    asks_more = not uncovered and _wished(wish) > _rank(wish.decision, now)
    return WhyNot(wish, now, tuple(ordered), tuple(_checks(evaluation, joint, wish)), asks_more, uncovered)


def _wished(wish: Wish) -> float:
    value = wish.value
    return _rank(wish.decision, Value(any_of=(value,)) if isinstance(value, str) else Value(value, value))


def _rank(quantity: Quantity, value: Value) -> float:
    """How much a set asks at its demanding end, rising, to the quantity's decimals; below all where it is absent."""
    end = demanding_end(value, quantity)
    if end is None:
        return float("-inf")
    if isinstance(end, str):
        place = quantity.order.index(end)
        return float(place if quantity.worse == "last" else -place)
    return round(end if quantity.worse == "higher" else -end, quantity.decimals)


def _least(quantity: Quantity, value: Value) -> float:
    """The same at the end that asks least."""
    if value.low is not None and value.high is not None:
        return round(value.low if quantity.worse == "higher" else -value.high, quantity.decimals)
    return min(_rank(quantity, Value(any_of=(level,))) for level in value.any_of)


def _objections(evaluation: Evaluation, trace: JointTrace, ref: Ref, wish: Wish, governs: bool) -> Iterator[Objection]:
    """The rules at the origin of every value beyond the wish; a rule that only rounds or caps counts if none below."""
    step = trace.steps[ref]
    if step.state == "given":
        return
    if step.value.presence == "absent" or _rank(wish.decision, step.value) <= _wished(wish):
        return
    below = list(_chosen_from(evaluation, step, trace.steps))
    found = [o for other, leads in below for o in _objections(evaluation, trace, other, wish, governs and leads)]
    if found:
        yield from found
        return
    surely = step.value.presence == "present" and _least(wish.decision, step.value) > _wished(wish)
    yield Objection(step, governs, surely)


def _chosen_from(evaluation: Evaluation, step: Step, steps: Mapping[Ref, Step]) -> Iterator[tuple[Ref, bool]]:
    """What a rule takes its value from: candidates that stand for choice, or what it only rounds or caps."""
    if step.candidates:
        first = evaluation.graph.rules[step.rule].rule.body.get("take") == "first"
        for candidate in step.candidates:
            if candidate.governs if first else candidate.taken:
                yield candidate.ref, candidate.governs
        return
    quantities = evaluation.knowledge.quantities
    mine = quantities[step.ref.quantity]
    for read in step.reads:
        other = quantities[read.quantity]
        alike = bool(mine.unit) and other.unit == mine.unit and mine.is_number and other.is_number
        if read in steps and steps[read].state == "gave" and (alike or (mine.levels and other.order == mine.order)):
            yield read, True


def _checks(evaluation: Evaluation, joint: int, wish: Wish) -> Iterator[Finding]:
    """The findings that come up when the decision is set to the wished value."""
    value = wish.value
    if isinstance(value, str):
        pin = Pin(wish.decision.id, (joint,), mask=mask_of([value], wish.decision.order))
    else:
        pin = Pin(wish.decision.id, (joint,), value, value)
    yield from new_findings(evaluation, Trial(joint, (pin,)))


def new_findings(evaluation: Evaluation, trial: Trial) -> Iterator[Finding]:
    """The findings of checks that a trial raises and that the joint does not have as it stands."""
    yield from _new(evaluation, trial.joint, decided_again(evaluation, [trial]))


def consequences(evaluation: Evaluation, trial: Trial) -> tuple[list[tuple[Quantity, Value]], list[Finding]]:
    """The decisions of the first rank that a trial changes, with what they become, and the findings that come up."""
    after = decided_again(evaluation, [trial])
    changed = []
    for decision in evaluation.knowledge.decisions:
        before = value_of(evaluation.columns[decision.id], decision, trial.joint)
        then = value_of(after.columns[decision.id], decision, 0)
        if not decision.part_of and _shown(decision, before) != _shown(decision, then):
            changed.append((decision, then))
    return changed, list(_new(evaluation, trial.joint, after))


def _shown(decision: Quantity, value: Value) -> tuple[object, ...]:
    ends = [None if end is None else round(end, decision.decimals) for end in (value.low, value.high)]
    return (*ends, value.any_of, value.presence)


def _new(evaluation: Evaluation, joint: int, after: Evaluation) -> Iterator[Finding]:
    before = {(f.rule, f.level) for f in _limit_findings(evaluation, joint)}
    for finding in _limit_findings(after, 0):
        if (finding.rule, finding.level) not in before:
            yield finding


def _limit_findings(evaluation: Evaluation, joint: int) -> Sequence[Finding]:
    return [f for f in dict.fromkeys(findings_of(evaluation, joint, {})) if f.rule in evaluation.findings]
