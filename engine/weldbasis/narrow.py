"""Narrower sets where one input bears on a decision by several ways.

A set worked out step by step takes the inputs of a step as if each were free of the others. Where the carbon of a
plate both raises a preheat and ends the validity of its method, that is too wide. So the box of a joint whose
decisions are open is cut into parts, each worked out as a joint of its own; what they give together is the set.
Every part is sound, so the whole is. Cuts lie where rules change over, and at equal steps of what the joint itself has.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from weldbasis.evaluate import Evaluation, Parts, evaluate
from weldbasis.graph import quantity_node
from weldbasis.knowledge import Quantity
from weldbasis.state import open_rows
from weldbasis.turning import first_beyond
from weldbasis.values import ABSENT, NARROWED, PRESENT, Bits, Bools, Bytes, Column, Floats, Ints, Levels, Numbers, Truth

MOST_PARTS = 128  # parts of one joint at the most
_STEPS = 8  # equal steps of a joint's own number
_MOST_LEVELS = 6  # a category of more levels is not cut
_OF_DECISION = 1000.0  # what a decision's set counts against those it rests on
_GAIN = 1e-6  # share of a set that a cut must take off to count


@dataclass(frozen=True)
class _Cut:
    """One input of a joint cut into segments: number ends, or single levels as bits."""

    quantity: str
    row: int  # of the column: a joint's or a member's
    low: Floats
    high: Floats
    bits: tuple[int, ...] = ()

    @property
    def segments(self) -> int:
        return len(self.bits) or len(self.low)


def narrowed(evaluation: Evaluation) -> Evaluation:
    """The same with every set of a joint with open decisions cut down to what its parts give together."""
    cuts = _cuts(evaluation)
    if not cuts:
        return evaluation
    chosen = _worth_it(evaluation, cuts)
    if not chosen:
        return evaluation
    boxes = [
        (joint, tuple(zip(some, place, strict=True)))
        for joint, some in chosen.items()
        for place in np.ndindex(*(cut.segments for cut in some))
    ]
    outcome, members = _evaluated(evaluation, boxes, None)
    joints: Ints = np.array([joint for joint, _ in boxes])
    starts = evaluation.views["member"].starts
    parts = {
        joint: Parts(
            int(np.prod([cut.segments for cut in some])),
            tuple((cut.quantity, _member(evaluation, cut, int(starts[joint]))) for cut in some),
        )
        for joint, some in chosen.items()
    }
    quantities = evaluation.knowledge.quantities
    columns = {
        name: _joined(column, outcome.columns[name], joints if quantities[name].of == "joint" else members)
        for name, column in evaluation.columns.items()
    }
    findings = {
        name: _truth(truth, outcome.findings[name], joints if _of_joint(evaluation, name) else members)
        for name, truth in evaluation.findings.items()
    }
    return replace(evaluation, columns=columns, findings=findings, parts=parts)


def in_parts_text(evaluation: Evaluation, row: int) -> str:
    """How the joint at `row` was cut into parts, in a sentence; empty where it was not."""
    if row not in evaluation.parts:
        return ""
    parts, first = evaluation.parts[row], int(evaluation.views["member"].starts[row])
    words = []
    for name, number in parts.along:
        title = evaluation.knowledge.quantities[name].title.lower()
        words.append(f"{title} of {evaluation.facts.members[first + number - 1]} (part {number})" if number else title)
    verb, together = ("was", "") if len(words) == 1 else ("were", " together")
    return (
        f"The ranges of this joint were narrowed: {' and '.join(words)} {verb} split into {parts.count} parts"
        f"{together}, where rules change over or by equal steps; each was worked out by itself, and what they give "
        "together counts. Steps marked narrowed hold less than whole ranges would give."
    )


def _of_joint(evaluation: Evaluation, rule: str) -> bool:
    return evaluation.graph.rules[rule].rule.for_each == "joint"


def _member(evaluation: Evaluation, cut: _Cut, first: int) -> int:
    return 0 if evaluation.knowledge.quantities[cut.quantity].of == "joint" else cut.row - first + 1


def _cuts(evaluation: Evaluation) -> dict[int, list[_Cut]]:
    """For every joint with an open decision, how each of its inputs can be cut."""
    knowledge, facts = evaluation.knowledge, evaluation.facts
    undecided = np.zeros(len(facts.joints), np.bool_)
    for decision in knowledge.decisions:
        undecided |= open_rows(evaluation.columns[decision.id], decision)
    if not undecided.any():
        return {}
    needed = evaluation.graph.rules_for(tuple(decision.id for decision in knowledge.decisions))
    turns = first_beyond(evaluation.graph.rules[name] for name in sorted(needed))
    found: dict[int, list[_Cut]] = {}
    for name in sorted(facts.given):
        column, quantity = facts.given[name], knowledge.quantities[name]
        if not needed.isdisjoint(rule.id for rule in evaluation.graph.feeds(quantity_node(name))):
            joint_of = np.arange(len(facts.joints)) if quantity.of == "joint" else facts.joint_of
            for row in np.flatnonzero(_is_wide(column) & undecided[joint_of]).tolist():
                cut = _cut(quantity, column, row, turns.get(name, np.zeros(0)))
                if cut.segments > 1:
                    found.setdefault(int(joint_of[row]), []).append(cut)
    return found


def _is_wide(column: Column) -> Bools:
    there: Bools = column.presence == PRESENT
    if isinstance(column, Levels):
        several: Bools = there & ((column.mask & (column.mask - np.uint64(1))) != 0)
        return several
    wide: Bools = there & (column.low < column.high)
    return wide


def _cut(quantity: Quantity, column: Column, row: int, turns: Floats) -> _Cut:
    nothing = np.zeros(0)
    if isinstance(column, Levels):
        mask = int(column.mask[row])
        bits = tuple(1 << place for place in range(mask.bit_length()) if mask >> place & 1)
        return _Cut(quantity.id, row, nothing, nothing, bits if len(bits) <= _MOST_LEVELS else ())
    low, high = float(column.low[row]), float(column.high[row])
    firsts = turns[(turns > low) & (turns <= high)]
    if quantity.of == "joint":
        firsts = np.unique(np.concatenate([firsts, np.linspace(low, high, _STEPS + 1)[1:-1]]))
    lasts = np.nextafter(firsts, -np.inf)
    return _Cut(quantity.id, row, np.concatenate([[low], firsts]), np.concatenate([lasts, [high]]))


def _worth_it(evaluation: Evaluation, cuts: Mapping[int, Sequence[_Cut]]) -> dict[int, list[_Cut]]:
    """The cuts that narrow a decision, or anything it rests on, each tried alone; those that gain most come first,
    and as many together as make no more than `MOST_PARTS`.
    """
    trials = [(joint, cut) for joint, some in cuts.items() for cut in some]
    boxes = [(joint, ((cut, place),)) for joint, cut in trials for place in range(cut.segments)]
    wanted = [decision.id for decision in evaluation.knowledge.decisions]
    outcome, members = _evaluated(evaluation, boxes, wanted)
    of_trial: Ints = np.repeat(np.arange(len(trials)), [cut.segments for _, cut in trials])
    joints: Ints = np.array([joint for joint, _ in trials])
    whole, whole_members = evaluation.facts.repeated(joints, evaluation.knowledge.quantities)
    shift = np.searchsorted(whole.joint_of, np.arange(len(trials))) - evaluation.views["member"].starts[joints]
    of_member: Ints = members + shift[of_trial[outcome.facts.joint_of]]
    gain = np.zeros(len(trials))
    for name in sorted(evaluation.graph.rules_for(tuple(wanted))):
        for quantity in evaluation.graph.rules[name].gives:
            after, before = outcome.columns[quantity.id], evaluation.columns[quantity.id]
            if quantity.of == "joint":
                before = before.take(joints)
                gone = _gain(before, _joined(before, after, of_trial))
                gain += gone * (_OF_DECISION if quantity.decision else 1.0)
            else:
                before = before.take(whole_members)
                gain += np.bincount(whole.joint_of, _gain(before, _joined(before, after, of_member)), len(trials))
    found: dict[int, list[_Cut]] = {}
    for trial in np.argsort(-np.round(gain, 9), kind="stable").tolist():
        joint, cut = trials[trial]
        some = found.get(joint, [])
        if gain[trial] > _GAIN and np.prod([other.segments for other in (*some, cut)]) <= MOST_PARTS:
            found.setdefault(joint, []).append(cut)
    return {joint: found[joint] for joint in sorted(found)}


def _gain(before: Column, after: Column) -> Floats:
    """What share of each set is gone; doubt whether there is a value counts as a set of two."""
    sure: Floats = ((before.presence != after.presence) & (before.presence != ABSENT)).astype(np.float64)
    if isinstance(before, Levels) and isinstance(after, Levels):
        changed: Floats = sure + (before.mask != after.mask)
        return changed
    assert isinstance(before, Numbers)
    assert isinstance(after, Numbers)
    width = before.high - before.low
    with np.errstate(invalid="ignore", divide="ignore"):
        gone = np.where(width > 0, 1 - (after.high - after.low) / width, 0.0)
    total: Floats = sure + np.nan_to_num(gone)
    return total


def _evaluated(
    evaluation: Evaluation,
    boxes: Sequence[tuple[int, tuple[tuple[_Cut, int], ...]]],
    wanted: Sequence[str] | None,
) -> tuple[Evaluation, Ints]:
    """Each part of a box as a joint of its own, worked out; and the member rows they come from."""
    quantities = evaluation.knowledge.quantities
    rows: Ints = np.array([joint for joint, _ in boxes])
    facts, members = evaluation.facts.repeated(rows, quantities)
    starts = np.searchsorted(facts.joint_of, np.arange(len(boxes)))
    pins: dict[str, list[tuple[int, _Cut, int]]] = {}
    for number, (joint, some) in enumerate(boxes):
        first = int(evaluation.views["member"].starts[joint])
        for cut, place in some:
            at = number if quantities[cut.quantity].of == "joint" else int(starts[number]) + cut.row - first
            pins.setdefault(cut.quantity, []).append((at, cut, place))
    given = {name: _held(column, pins[name]) if name in pins else column for name, column in facts.given.items()}
    return evaluate(evaluation.knowledge, replace(facts, given=given), evaluation.graph, wanted), members


def _held(column: Column, pins: Sequence[tuple[int, _Cut, int]]) -> Column:
    """The column with each of the rows named held to one segment of its cut."""
    rows = np.array([row for row, _, _ in pins])
    if isinstance(column, Levels):
        mask = column.mask.copy()
        mask[rows] = np.array([cut.bits[place] for _, cut, place in pins], np.uint64)
        return replace(column, mask=mask)
    low, high = column.low.copy(), column.high.copy()
    low[rows] = np.array([cut.low[place] for _, cut, place in pins])
    high[rows] = np.array([cut.high[place] for _, cut, place in pins])
    return Numbers(low, high, column.presence, column.flags)


def _joined(whole: Column, parts: Column, row_of: Ints) -> Column:
    """The whole's sets cut down to what its parts give together; rows without parts as they are."""
    some = np.unique(row_of)
    presence = np.zeros(len(whole), np.uint8)
    np.bitwise_or.at(presence, row_of, parts.presence)
    presence[some] &= whole.presence[some]
    there = (parts.presence & PRESENT) != 0
    kept = whole.presence.copy()
    kept[some] = presence[some]
    changed = kept != whole.presence
    if isinstance(whole, Levels) and isinstance(parts, Levels):
        bits: Bits = np.zeros(len(whole), np.uint64)
        np.bitwise_or.at(bits, row_of[there], parts.mask[there])
        mask = whole.mask.copy()
        mask[some] &= bits[some]
        return Levels(mask, kept, _marked(whole.flags, changed | (mask != whole.mask)))
    assert isinstance(whole, Numbers)
    assert isinstance(parts, Numbers)
    least, most = np.full(len(whole), np.inf), np.full(len(whole), -np.inf)
    np.minimum.at(least, row_of[there], parts.low[there])
    np.maximum.at(most, row_of[there], parts.high[there])
    low, high = whole.low.copy(), whole.high.copy()
    gone = some[kept[some] == ABSENT]
    low[some], high[some] = np.maximum(low[some], least[some]), np.minimum(high[some], most[some])
    low[gone] = high[gone] = np.nan
    with np.errstate(invalid="ignore"):
        changed |= (kept != ABSENT) & ((low > whole.low) | (high < whole.high))
    flags = _marked(whole.flags, changed)
    return Numbers(low, low if np.array_equal(low, high, equal_nan=True) else high, kept, flags)


def _marked(flags: Bytes, changed: Bools) -> Bytes:
    marked: Bytes = np.where(changed, flags | NARROWED, flags).astype(np.uint8)
    return marked


def _truth(whole: Truth, parts: Truth, row_of: Ints) -> Truth:
    may, surely = np.zeros(len(whole.may), np.bool_), np.ones(len(whole.may), np.bool_)
    np.logical_or.at(may, row_of, parts.may)
    np.logical_and.at(surely, row_of, parts.surely)
    some = np.unique(row_of)
    kept_may, kept_surely = whole.may.copy(), whole.surely.copy()
    kept_may[some] &= may[some]
    kept_surely[some] |= surely[some]
    return Truth(kept_may, kept_surely)
