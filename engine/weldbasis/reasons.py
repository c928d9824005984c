"""Read one joint's reasons out of the columns: decisions with their chains, findings, steps."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from weldbasis.evaluate import Evaluation
from weldbasis.findings import findings_of
from weldbasis.graph import quantity_node
from weldbasis.knowledge import Quantity
from weldbasis.narrow import in_parts_text
from weldbasis.settling.settle import Narrowing, settle
from weldbasis.state import demanding_end, state_of
from weldbasis.steps import Steps, member_rows, refs_in_order
from weldbasis.trace import Decision, JointTrace, Ref, Step
from weldbasis.values import may_be_at


def trace_joint(
    evaluation: Evaluation, row: int, narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]] | None = None
) -> JointTrace:
    """All reasons of the joint at `row`.

    `narrowings` hands over what would settle each open decision where it is known already for many joints;
    else it is worked out for this joint.
    """
    if narrowings is None:
        narrowings = settle(evaluation, [row])
    steps = Steps(evaluation, row)
    decisions = tuple(_decision(quantity, steps) for quantity in evaluation.knowledge.decisions)
    # Two parts may say the same of the joint; it counts once.
    findings = tuple(dict.fromkeys(findings_of(evaluation, row, narrowings)))
    names = tuple(evaluation.facts.members[at] for at in member_rows(evaluation, row))
    given, gave = _with_values(evaluation, row)
    parts = in_parts_text(evaluation, row)
    return JointTrace(evaluation.facts.joints[row], names, decisions, findings, steps, given, gave, parts)


def _with_values(evaluation: Evaluation, row: int) -> tuple[tuple[Ref, ...], tuple[Ref, ...]]:
    """What was given for one joint, and what rules gave a value."""
    members = member_rows(evaluation, row)
    given, gave = [], []
    for ref in refs_in_order(evaluation, len(members)):
        at = members[ref.member - 1] if ref.member else row
        column = evaluation.facts.given.get(ref.quantity)
        if column is not None and may_be_at(column, at):
            given.append(ref)
        elif may_be_at(evaluation.columns[ref.quantity], at):
            gave.append(ref)
    return tuple(given), tuple(gave)


def _decision(quantity: Quantity, steps: Mapping[Ref, Step]) -> Decision:
    ref = Ref(quantity.id)
    step = steps[ref]
    chain = tuple(dict.fromkeys(_chain(steps, ref, set())))
    state = state_of(step.value, quantity)
    governing = governing_rules(steps, ref)
    return Decision(ref, step.value, state, demanding_end(step.value, quantity), governing, chain)


def governing_rules(steps: Mapping[Ref, Step], ref: Ref) -> tuple[str, ...]:
    """The rules that settled a quantity: down through choices, and through what only rounds or caps, to its origin."""
    found: list[str] = []
    seen: set[Ref] = set()
    queue = [ref]
    while queue:
        step = steps[queue.pop(0)]
        if step.ref in seen or step.state != "gave":
            continue
        seen.add(step.ref)
        below = [candidate.ref for candidate in step.candidates if candidate.governs] or _passed_on(step, steps)
        if not below:
            found.append(step.rule)
        queue += below
    return tuple(dict.fromkeys(found))


def _passed_on(step: Step, steps: Mapping[Ref, Step]) -> list[Ref]:
    """The one worked-out read of a step with the step's own unit: such a rule only rounds or caps it."""
    worked = [read for read in step.reads if read in steps and steps[read].state == "gave"]
    same = len(worked) == 1 and step.value.unit and steps[worked[0]].value.unit == step.value.unit
    return worked if same else []


def _chain(steps: Mapping[Ref, Step], ref: Ref, seen: set[Ref]) -> Iterator[Ref]:
    """The steps from a quantity down to the inputs: of a choice only what governs, of all else every read."""
    if ref in seen or ref not in steps:
        return
    seen.add(ref)
    yield ref
    step = steps[ref]
    if step.state == "given":
        return
    governing = [candidate.ref for candidate in step.candidates if candidate.governs]
    for below in governing or step.reads:
        yield from _chain(steps, below, seen)


def bears_on_text(evaluation: Evaluation, quantity: str) -> tuple[str, ...]:
    """The decisions that a quantity bears on, by title, for pages and messages."""
    below = evaluation.graph.bears_on(quantity_node(quantity))
    quantities = evaluation.knowledge.quantities
    return tuple(quantities[n.id].title for n in below if n.sort == "quantity" and quantities[n.id].decision)
