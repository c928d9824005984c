"""What would settle an open decision: every uncertain input pinned, in turn, at either end of its set.

All trials of all joints are evaluated together as so many more joints, so the cost is one evaluation.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.facts import Facts
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.state import open_rows, state_of
from weldbasis.trace import Ref, Value
from weldbasis.values import Column, Levels, Numbers, levels_of, may_be_at
from weldbasis.words import levels_text, range_text, with_unit

_MOST_LEVELS = 12  # a category wider than this is tried as a whole family of answers too large to be useful
_FEWEST_ELEMENTS = 2  # an analysis that would tell one element only is that element itself
ANALYSIS = "analysis"


@dataclass(frozen=True)
class Narrowing:
    """How far knowing one input would narrow a decision: what is left at worst, and whether that settles it.

    `ref` may name `ANALYSIS` in place of a quantity: all elements of a steel known together.
    """

    ref: Ref
    now: Value
    left: str
    settles: bool
    share: float


@dataclass(frozen=True)
class _Trial:
    joint: int
    ref: Ref
    rows: tuple[int, ...]
    pins: tuple[tuple[str, float | int], ...]


def settle(evaluation: Evaluation, rows: Sequence[int]) -> Mapping[tuple[int, str], tuple[Narrowing, ...]]:
    """For every open decision of the joints at `rows`, the inputs that would narrow it, best first.

    Only decisions of the first rank count, not their parts. An input that narrows nothing is left out.
    """
    undecided = _open_decisions(evaluation, rows)
    trials = [trial for row in undecided for trial in _trials(evaluation, row, undecided[row])]
    if not trials:
        return {}
    asked = dict.fromkeys(decision.id for decisions in undecided.values() for decision in decisions)
    outcome = evaluate(evaluation.knowledge, _repeated(evaluation, trials), evaluation.graph, asked)
    found: dict[tuple[int, str], list[Narrowing]] = {}
    at = 0
    while at < len(trials):
        last = at
        while last < len(trials) and (trials[last].joint, trials[last].ref) == (trials[at].joint, trials[at].ref):
            last += 1
        for decision in undecided[trials[at].joint]:
            narrowing = _narrowing(evaluation, outcome, decision, trials[at], range(at, last))
            if narrowing:
                found.setdefault((trials[at].joint, decision.id), []).append(narrowing)
        at = last
    return {key: tuple(sorted(some, key=lambda n: (not n.settles, n.share, n.ref))) for key, some in found.items()}


def open_inputs(evaluation: Evaluation, decision: Quantity, row: int) -> tuple[str, ...]:
    """Titles of the inputs of a decision that are given as a range or several levels for a joint or a part of it."""
    found = []
    for name in sorted(evaluation.graph.given_inputs(decision.id)):
        column = evaluation.facts.given.get(name)
        quantity = evaluation.knowledge.quantities[name]
        rows = [row] if quantity.of == "joint" else np.flatnonzero(evaluation.facts.joint_of == row).tolist()
        there = [] if column is None else [value_of(column, quantity, at) for at in rows if may_be_at(column, at)]
        if any(state_of(value, quantity) == "open" for value in there):
            found.append(quantity.title)
    return tuple(found)


def _open_decisions(evaluation: Evaluation, rows: Sequence[int]) -> dict[int, list[Quantity]]:
    found: dict[int, list[Quantity]] = {}
    for quantity in evaluation.knowledge.decisions:
        if not quantity.part_of:
            still_open = open_rows(evaluation.columns[quantity.id], quantity)
            for row in rows:
                if still_open[row]:
                    found.setdefault(row, []).append(quantity)
    return found


def _trials(evaluation: Evaluation, row: int, decisions: Sequence[Quantity]) -> list[_Trial]:
    relevant = sorted({name for decision in decisions for name in evaluation.graph.given_inputs(decision.id)})
    given = evaluation.facts.given
    names = [name for name in relevant if name in given]
    names += [name for name in sorted(given) if name not in relevant and name in evaluation.graph.giving]
    first = int(evaluation.views["member"].starts[row])
    count = int((evaluation.facts.joint_of == row).sum())
    found = []
    for name in names:
        quantity = evaluation.knowledge.quantities[name]
        places = [((row,), 0)] if quantity.of == "joint" else _steels(evaluation.facts, first, count)
        for rows, member in places:
            ends = _ends(given[name], quantity, rows[0])
            found += [_Trial(row, Ref(name, member), rows, ((name, end),)) for end in ends]
    elements = [name for name in names if evaluation.knowledge.quantities[name].topic == "composition"]
    for rows, member in _steels(evaluation.facts, first, count):
        found += _analysis(evaluation, row, elements, rows, member)
    return found


def _analysis(
    evaluation: Evaluation, row: int, elements: Sequence[str], rows: tuple[int, ...], member: int
) -> list[_Trial]:
    """Two trials of a whole analysis of a steel: every open element at its lower, then at its upper end."""
    quantities, given = evaluation.knowledge.quantities, evaluation.facts.given
    ends = {name: _ends(given[name], quantities[name], rows[0]) for name in elements}
    open_elements = [name for name in elements if ends[name]]
    if len(open_elements) < _FEWEST_ELEMENTS:
        return []
    return [
        _Trial(row, Ref(ANALYSIS, member), rows, tuple((n, ends[n][side]) for n in open_elements)) for side in (0, 1)
    ]


def _steels(facts: Facts, first: int, count: int) -> list[tuple[tuple[int, ...], int]]:
    """Member rows of a joint by steel: parts of one steel are known, or not, together."""
    by_name: dict[str, list[int]] = {}
    for row in range(first, first + count):
        by_name.setdefault(facts.members[row], []).append(row)
    return [(tuple(rows), rows[0] - first + 1) for rows in by_name.values()]


def _ends(column: Column, quantity: Quantity, row: int) -> list[float | int]:
    if isinstance(column, Numbers):
        low, high = float(column.low[row]), float(column.high[row])
        return [low, high] if low < high else []
    mask = int(column.mask[row])
    levels = levels_of(mask, quantity.order)
    if not 2 <= len(levels) <= _MOST_LEVELS:
        return []
    return [1 << quantity.order.index(level) for level in levels]


def _repeated(evaluation: Evaluation, trials: Sequence[_Trial]) -> Facts:
    """One joint a trial, with the trial's input pinned."""
    facts, quantities = evaluation.facts, evaluation.knowledge.quantities
    joints = np.array([trial.joint for trial in trials])
    starts = np.searchsorted(facts.joint_of, joints, side="left")
    sizes = np.searchsorted(facts.joint_of, joints, side="right") - starts
    offsets = np.cumsum(sizes) - sizes
    joint_of = np.repeat(np.arange(len(trials)), sizes)
    members = np.arange(len(joint_of)) - offsets[joint_of] + starts[joint_of]
    given = {
        name: column.take(joints if quantities[name].of == "joint" else members) for name, column in facts.given.items()
    }
    pins: dict[str, list[tuple[int, float | int]]] = {}
    for number, trial in enumerate(trials):
        for row in trial.rows:
            at = number if not trial.ref.member else int(offsets[number] + row - starts[number])
            for name, value in trial.pins:
                pins.setdefault(name, []).append((at, value))
    for name, pinned in pins.items():
        given[name] = _pinned(given[name], pinned)
    return Facts(tuple(facts.joints[j] for j in joints), tuple(facts.members[m] for m in members), joint_of, given)


def _pinned(column: Column, pins: Sequence[tuple[int, float | int]]) -> Column:
    rows = np.array([row for row, _ in pins])
    if isinstance(column, Levels):
        mask = column.mask.copy()
        mask[rows] = np.array([int(value) for _, value in pins], np.uint64)
        return Levels(mask, column.presence, column.flags)
    low, high = column.low.copy(), column.high.copy()
    low[rows] = high[rows] = np.array([float(value) for _, value in pins])
    return Numbers(low, high, column.presence, column.flags)


def _narrowing(
    evaluation: Evaluation, outcome: Evaluation, decision: Quantity, trial: _Trial, rows: range
) -> Narrowing | None:
    now = value_of(evaluation.columns[decision.id], decision, trial.joint)
    column = outcome.columns[decision.id]
    ends = [value_of(column, decision, row) for row in rows]
    share = max(_share(end, now) for end in ends)
    if share >= 1.0 and not all(state_of(end, decision) != "open" for end in ends):
        return None
    settles = all(state_of(end, decision) == "settled" for end in ends)
    known = Value()
    if trial.ref.quantity != ANALYSIS:
        asked = evaluation.knowledge.quantities[trial.ref.quantity]
        known = value_of(evaluation.facts.given[asked.id], asked, trial.rows[0])
    return Narrowing(trial.ref, known, _left(decision, ends), settles, share)


def _share(end: Value, now: Value) -> float:
    """How much of the set is left: width against width, or count against count; doubt of presence counts as a step."""
    doubt = 1.0 if end.presence == "maybe" else 0.0
    doubt_now = 1.0 if now.presence == "maybe" else 0.0
    if end.presence == "absent":
        return 0.0
    if end.low is None or end.high is None or now.low is None or now.high is None:
        return (len(end.any_of) - 1 + doubt) / max(len(now.any_of) - 1 + doubt_now, 1.0)
    width = now.high - now.low
    left = (end.high - end.low) / width if width > 0 else 0.0
    return (left + doubt) / (1.0 + doubt_now) if doubt_now or doubt else left


def _left(decision: Quantity, ends: Sequence[Value]) -> str:
    """The widest set that is left, in words."""
    widest = max(ends, key=lambda end: (end.presence == "maybe", len(end.any_of), (end.high or 0) - (end.low or 0)))
    if widest.presence == "absent":
        return "no rule that covers it"
    if widest.low is None or widest.high is None:
        return levels_text(decision, widest.any_of)
    return with_unit(range_text(widest.low, widest.high, decision.decimals), decision.unit)
