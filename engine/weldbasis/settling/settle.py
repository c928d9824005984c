"""What would settle an open decision: uncertain inputs pinned in turn, singly and in pairs, and where it turns.

All trials of all joints are evaluated together as so many more joints. Joints given the very same are tried once.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations, product

import numpy as np

from weldbasis.evaluate import Evaluation
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.settling.narrowing import ANALYSIS, Case, Narrowing, left_in_words, share_left
from weldbasis.settling.trials import Pin, Trial, alike, demands_of, member_rows, outcomes
from weldbasis.settling.walks import Asked, Walk, not_harder, steps_between
from weldbasis.state import open_rows, state_of
from weldbasis.trace import Ref, Value
from weldbasis.values import Column, Numbers, levels_of, may_be_at

__all__ = [
    "ANALYSIS",
    "Case",
    "Narrowing",
    "Question",
    "open_decisions",
    "open_inputs",
    "questions_of",
    "settle",
    "steels_of",
]

_MOST_LEVELS = 12  # a category wider than this is tried as a whole family of answers too large to be useful
_FEWEST_ELEMENTS = 2  # an analysis that would tell one element only is that element itself
_LOOKED_INTO = 4  # of each decision, the best so many are tried inside their range too, and joined in pairs
_INSIDE = (0.17, 0.33, 0.5, 0.67, 0.83)  # where in a range, beside its ends

Found = Mapping[tuple[int, str], tuple[Narrowing, ...]]


@dataclass(frozen=True)
class Question:
    """Something that could be found out of one joint: what it is, and the possible answers as pins."""

    joint: int
    refs: tuple[Ref, ...]
    answers: tuple[tuple[Pin, ...], ...]


def settle(evaluation: Evaluation, rows: Sequence[int]) -> Found:
    """For every open decision of the joints at `rows`, the inputs that would narrow it, best first.

    Only decisions of the first rank count, not their parts. An input that narrows nothing is left out. A pair is
    named where no single input settles. The best are tried at seven values of their range, and say at which value
    the decision turns.
    """
    same = alike(evaluation, rows)
    undecided = open_decisions(evaluation, list(same))
    ends = [q for row in undecided for q in questions_of(evaluation, row, undecided[row])]
    rough = _asked(evaluation, ends, undecided)
    best = {key: [n.refs for n in some[:_LOOKED_INTO]] for key, some in rough.items()}
    looked = {(row, refs) for (row, _), some in best.items() for refs in some}
    closer = [_closer(evaluation, q) for q in ends if (q.joint, q.refs) in looked]
    fine = _asked(evaluation, closer, undecided)
    pairs = _best_pairs(evaluation, closer, fine, undecided)
    found: dict[tuple[int, str], tuple[Narrowing, ...]] = {}
    for key, some in rough.items():
        kept = [n for n in some if (key[0], n.refs) not in looked]
        found[key] = tuple(sorted([*fine.get(key, ()), *pairs.get(key, ()), *kept], key=_best_first))
    for key in pairs.keys() - found.keys():
        found[key] = pairs[key]
    turned = _with_turns(evaluation, found, closer)
    return {(row, name): some for (first, name), some in turned.items() for row in same[first]}


def _best_first(narrowing: Narrowing) -> tuple[bool, float, int, tuple[Ref, ...]]:
    return (not narrowing.settles, narrowing.share, len(narrowing.refs), narrowing.refs)


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


def open_decisions(evaluation: Evaluation, rows: Sequence[int]) -> dict[int, list[Quantity]]:
    """The open decisions of the first rank, joint by joint."""
    found: dict[int, list[Quantity]] = {}
    for quantity in evaluation.knowledge.decisions:
        if not quantity.part_of:
            still_open = open_rows(evaluation.columns[quantity.id], quantity)
            for row in rows:
                if still_open[row]:
                    found.setdefault(row, []).append(quantity)
    return found


def questions_of(evaluation: Evaluation, row: int, decisions: Sequence[Quantity]) -> list[Question]:
    """All that could be found out of one joint, each answered by both ends of its set, or by each of its levels."""
    given, quantities = evaluation.facts.given, evaluation.knowledge.quantities
    names = _bearing_on(evaluation, decisions)
    found = []
    for name in names:
        places = [((row,), 0)] if quantities[name].of == "joint" else steels_of(evaluation, row)
        for rows, member in places:
            answers: tuple[tuple[Pin, ...], ...] = tuple((pin,) for pin in _ends(given[name], quantities[name], rows))
            if answers:
                found.append(Question(row, (Ref(name, member),), answers))
    for _, member, ends in open_analyses(evaluation, row, decisions):
        if len(ends) >= _FEWEST_ELEMENTS:
            found.append(Question(row, (Ref(ANALYSIS, member),), tuple(zip(*ends, strict=True))))
    return found


def open_analyses(
    evaluation: Evaluation, row: int, decisions: Sequence[Quantity]
) -> list[tuple[tuple[int, ...], int, list[tuple[Pin, Pin]]]]:
    """For every steel of a joint its member rows, the first one's number, and the ends of each element not known.

    Only elements on which one of the decisions may rest.
    """
    names = _bearing_on(evaluation, decisions)
    given, quantities = evaluation.facts.given, evaluation.knowledge.quantities
    elements = [name for name in names if quantities[name].topic == "composition"]
    found = []
    for rows, member in steels_of(evaluation, row):
        ends = [_ends(given[name], quantities[name], rows) for name in elements]
        found.append((rows, member, [(some[0], some[1]) for some in ends if some]))
    return found


def _bearing_on(evaluation: Evaluation, decisions: Sequence[Quantity]) -> list[str]:
    """What is given and may bear on the decisions: inputs, then what is given in place of what a rule would give."""
    given = evaluation.facts.given
    relevant = sorted({name for decision in decisions for name in evaluation.graph.given_inputs(decision.id)})
    names = [name for name in relevant if name in given]
    return names + [name for name in sorted(given) if name not in relevant and name in evaluation.graph.giving]


def steels_of(evaluation: Evaluation, joint: int) -> list[tuple[tuple[int, ...], int]]:
    """Member rows of a joint by steel, with the number of the first: parts of one steel are known, or not, together."""
    rows = member_rows(evaluation, joint)
    by_name: dict[str, list[int]] = {}
    for row in rows:
        by_name.setdefault(evaluation.facts.members[row], []).append(row)
    return [(tuple(some), some[0] - rows.start + 1) for some in by_name.values()]


def _ends(column: Column, quantity: Quantity, rows: tuple[int, ...]) -> list[Pin]:
    row = rows[0]
    if isinstance(column, Numbers):
        low, high = float(column.low[row]), float(column.high[row])
        return [Pin(quantity.id, rows, low, low), Pin(quantity.id, rows, high, high)] if low < high else []
    levels = levels_of(int(column.mask[row]), quantity.order)
    if not 2 <= len(levels) <= _MOST_LEVELS:
        return []
    return [Pin(quantity.id, rows, mask=1 << quantity.order.index(level)) for level in levels]


def _closer(evaluation: Evaluation, question: Question) -> Question:
    """The same question with answers inside the range too; levels are all answers already."""
    first, last = question.answers[0], question.answers[-1]
    if not evaluation.knowledge.quantities[first[0].quantity].is_number:
        return question
    inside = tuple(
        tuple(_between(one, other, share) for one, other in zip(first, last, strict=True)) for share in _INSIDE
    )
    return Question(question.joint, question.refs, (first, *inside, last))


def _between(one: Pin, other: Pin, share: float) -> Pin:
    value = one.low + share * (other.low - one.low)
    return Pin(one.quantity, one.rows, value, value)


def _asked(
    evaluation: Evaluation, questions: Sequence[Question], undecided: Mapping[int, Sequence[Quantity]]
) -> dict[tuple[int, str], list[Narrowing]]:
    """Put every question with all its answers, and keep those that narrow a decision, best first."""
    trials = [Trial(question.joint, answer) for question in questions for answer in question.answers]
    wanted = list(dict.fromkeys(d.id for decisions in undecided.values() for d in decisions))
    columns = outcomes(evaluation, trials, wanted)
    found: dict[tuple[int, str], list[Narrowing]] = {}
    at = 0
    for question in questions:
        rows = range(at, at + len(question.answers))
        at = rows.stop
        for decision in undecided[question.joint]:
            outcome = [value_of(columns[decision.id], decision, row) for row in rows]
            if narrowing := _narrowing(evaluation, question, decision, outcome):
                found.setdefault((question.joint, decision.id), []).append(narrowing)
    return {key: sorted(some, key=_best_first) for key, some in found.items()}


def _narrowing(
    evaluation: Evaluation, question: Question, decision: Quantity, outcome: Sequence[Value]
) -> Narrowing | None:
    now = value_of(evaluation.columns[decision.id], decision, question.joint)
    share = max(share_left(value, now) for value in outcome)
    if share >= 1.0 and any(state_of(value, decision) == "open" for value in outcome):
        return None
    settles = all(state_of(value, decision) == "settled" for value in outcome)
    known = tuple(_known(evaluation, question.joint, ref) for ref in question.refs)
    cases: tuple[Case, ...] = ()
    first = question.answers[0]
    if len(first) == 1 and not evaluation.knowledge.quantities[first[0].quantity].is_number:
        cases = tuple(
            Case(_known_level(evaluation, answer[0]), value)
            for answer, value in zip(question.answers, outcome, strict=True)
        )
    return Narrowing(question.refs, known, left_in_words(decision, outcome), settles, share, cases)


def _known(evaluation: Evaluation, joint: int, ref: Ref) -> Value:
    if ref.quantity == ANALYSIS:
        return Value()
    row = member_rows(evaluation, joint)[ref.member - 1] if ref.member else joint
    return value_of(evaluation.facts.given[ref.quantity], evaluation.knowledge.quantities[ref.quantity], row)


def _known_level(evaluation: Evaluation, pin: Pin) -> Value:
    quantity = evaluation.knowledge.quantities[pin.quantity]
    return Value(any_of=levels_of(pin.mask, quantity.order))


def _best_pairs(
    evaluation: Evaluation,
    questions: Sequence[Question],
    singles: Mapping[tuple[int, str], Sequence[Narrowing]],
    undecided: Mapping[int, Sequence[Quantity]],
) -> dict[tuple[int, str], tuple[Narrowing, ...]]:
    """The best pair of inputs for every decision that no single input settles, where it beats the best of them."""
    asked = {(question.joint, question.refs): question for question in questions}
    wanted = {key for key, some in singles.items() if not any(n.settles for n in some)}
    rough: dict[tuple[int, tuple[Ref, ...]], Question] = {}
    for row, name in sorted(wanted):
        refs = [n.refs for n in singles[row, name]]
        for one, other in combinations(sorted(refs), 2):
            if not _overlap(evaluation, one[0], other[0]):
                first, second = asked[row, one], asked[row, other]
                both = _joined(first, second, (0, -1))
                rough[row, both.refs] = both
    found = _asked(evaluation, list(rough.values()), undecided)
    best = {key: found[key][0].refs for key in wanted if key in found}
    fine: dict[tuple[int, tuple[Ref, ...]], Question] = {}
    for (row, _), pair in sorted(best.items()):
        fine[row, pair] = _joined(asked[row, pair[:1]], asked[row, pair[1:]], (0, 2, 3, 4, -1))
    checked = _asked(evaluation, list(fine.values()), undecided)
    pairs = {key: tuple(n for n in checked.get(key, ()) if n.refs == refs) for key, refs in best.items()}
    return {key: some for key, some in pairs.items() if some and some[0].share < singles[key][0].share - 1e-9}


def _overlap(evaluation: Evaluation, one: Ref, other: Ref) -> bool:
    """Whether one of them is a whole analysis that tells the other."""
    quantities = evaluation.knowledge.quantities
    names = {one.quantity, other.quantity}
    topics = {quantities[name].topic for name in names - {ANALYSIS}}
    return ANALYSIS in names and one.member == other.member and topics == {"composition"}


def _joined(first: Question, second: Question, places: Iterable[int]) -> Question:
    def some(question: Question) -> list[tuple[Pin, ...]]:
        count = len(question.answers)
        if count <= _MOST_LEVELS and len({len(a) for a in question.answers}) == 1 and question.answers[0][0].mask:
            return list(question.answers)
        return [question.answers[place] for place in places if -count <= place < count]

    answers = tuple((*one, *other) for one, other in product(some(first), some(second)))
    return Question(first.joint, (*first.refs, *second.refs), answers)


def _with_turns(evaluation: Evaluation, found: Found, questions: Sequence[Question]) -> Found:
    """The best narrowings by one number each, with the value at which the decision turns."""
    asked = {(question.joint, question.refs): question for question in questions}
    walks: dict[tuple[int, tuple[Ref, ...]], list[str]] = {}
    for (row, name), some in found.items():
        for narrowing in some[:_LOOKED_INTO]:
            question = asked.get((row, narrowing.refs))
            if question and len(question.refs) == 1 and len(question.answers[0]) == 1 and not narrowing.cases:
                walks.setdefault((row, narrowing.refs), []).append(name)
    cases = _turns(evaluation, {key: (asked[key], names) for key, names in walks.items()})
    return {
        (row, name): tuple(dataclasses.replace(n, cases=cases.get((row, n.refs, name), n.cases)) for n in some)
        for (row, name), some in found.items()
    }


def _turns(
    evaluation: Evaluation, wanted: Mapping[tuple[int, tuple[Ref, ...]], tuple[Question, Sequence[str]]]
) -> dict[tuple[int, tuple[Ref, ...], str], tuple[Case, ...]]:
    """For every input and decision the part of the range that asks least, and the rest.

    The walk starts at the end that asks less. Its values are those with the quantity's decimals, so the value named
    is on the safe side: all of the range up to it asks no more than that end.
    """
    quantities = evaluation.knowledge.quantities
    decisions = [quantities[name] for name in dict.fromkeys(n for _, names in wanted.values() for n in names)]
    if not wanted:
        return {}
    ends = [Trial(q.joint, answer) for q, _ in wanted.values() for answer in (q.answers[0], q.answers[-1])]
    demands = demands_of(evaluation, ends, decisions)
    walks: list[Walk] = []
    keys: list[tuple[int, tuple[Ref, ...], str]] = []
    for number, (question, names) in enumerate(wanted.values()):
        low, high = question.answers[0][0], question.answers[-1][0]
        step = 10.0 ** -quantities[low.quantity].decimals
        for name in names:
            place = [decision.id for decision in decisions].index(name)
            at_low, at_high = demands[2 * number, place], demands[2 * number + 1, place]
            if at_low != at_high:
                start, end = (low.low, high.low) if at_low < at_high else (high.low, low.low)
                walks.append(Walk(question.joint, low.quantity, low.rows, steps_between(start, end, step)))
                keys.append((question.joint, question.refs, name))
    if not walks:
        return {}
    asked = Asked(evaluation, walks, [decision.id for decision in decisions])
    reached = not_harder(asked, walks, [[quantities[name]] for _, _, name in keys])
    places = [reached[number, name] for number, (_, _, name) in enumerate(keys)]
    parts = [
        walk.trial(first, last)
        for walk, at in zip(walks, places, strict=True)
        for first, last in ((0, at), (min(at + 1, len(walk.values) - 1), len(walk.values) - 1))
    ]
    columns = outcomes(evaluation, parts, [decision.id for decision in decisions])
    found = {}
    for number, (key, walk, at) in enumerate(zip(keys, walks, places, strict=True)):
        if at < len(walk.values) - 1:
            shown = [value_of(columns[key[2]], quantities[key[2]], 2 * number + part) for part in (0, 1)]
            spans = [sorted((walk.values[0], walk.values[at])), sorted((walk.values[at + 1], walk.values[-1]))]
            found[key] = tuple(Case(Value(span[0], span[1]), v) for span, v in zip(spans, shown, strict=True))
    return found
