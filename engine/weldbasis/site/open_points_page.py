"""The open points of a project: what to measure and where, what it settles, and the order for the laboratory."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from weldbasis.evaluate import Evaluation
from weldbasis.findings import cases_text
from weldbasis.kinds.condition import Condition
from weldbasis.knowledge import Quantity
from weldbasis.project.steels import ELEMENTS
from weldbasis.settling.sampling import Plan, Steel
from weldbasis.settling.settle import ANALYSIS, open_analyses, open_decisions, steels_of
from weldbasis.site.content import Decided
from weldbasis.site.range_pictures import RangeRow, Tick, composition_ranges
from weldbasis.site.render import page
from weldbasis.words import places

_SYMBOLS = {name: symbol for symbol, name in ELEMENTS.items()}


@dataclass(frozen=True)
class Sample:
    """A steel to analyse: its names, where it stands, and the elements that are not known and count."""

    name: str
    title: str
    joints: tuple[str, ...]
    elements: tuple[str, ...]
    picture: str


@dataclass(frozen=True)
class Line:
    """A step of the plan: samples to take together, joints and further decisions that they settle."""

    number: int
    samples: tuple[Sample, ...]
    joints: tuple[str, ...]
    further: tuple[str, ...]
    each: str
    surely: bool


@dataclass(frozen=True)
class Other:
    """What else would settle decisions by itself: an input, and the joints with the decision and where it turns."""

    title: str
    joints: tuple[tuple[str, str, str], ...]


def open_points_body(decided: Decided) -> str:
    """The page's HTML."""
    evaluation, plan = decided.evaluation, decided.plan
    names = evaluation.facts.joints
    undecided = open_decisions(evaluation, range(len(names)))
    titles = {q.id: q.title for q in evaluation.knowledge.decisions}
    samples = {steel: _sample(decided, steel, undecided) for step in plan.steps for steel in step.steels}
    lines = []
    for number, step in enumerate(plan.steps, 1):
        further = [f"{names[row]} ({titles[name].lower()})" for row, name in step.decisions if row not in step.joints]
        each = len(step.joints) / len(step.steels)
        lines.append(
            Line(
                number,
                tuple(samples[steel] for steel in step.steels),
                tuple(names[row] for row in step.joints),
                tuple(further),
                f"{each:.0f}" if each == int(each) else f"{each:.1f}",
                step.surely,
            )
        )
    return page(
        "open_points.html",
        project=decided.project,
        files=decided.files,
        count=places(sum(map(len, undecided.values())), "decision"),
        joints=places(len(undecided), "joint"),
        lines=lines,
        others=list(_others(decided)),
        left=_left(decided, plan, titles),
    )


def _sample(decided: Decided, steel: Steel, undecided: Mapping[int, Sequence[Quantity]]) -> Sample:
    evaluation, members = decided.evaluation, decided.plan.members[steel]
    joints = tuple(evaluation.facts.joints[row] for row in members)
    entry = decided.project.steels.get(steel[0])
    ends: dict[str, tuple[float, float]] = {}
    for row, rows in members.items():
        for mine, _, some in open_analyses(evaluation, row, undecided[row]):
            if mine == rows:
                for low, high in some:
                    before = ends.get(low.quantity, (low.low, high.low))
                    ends[low.quantity] = (min(before[0], low.low), max(before[1], high.low))
    ordered = [name for name in ELEMENTS.values() if name in ends]
    name = steel[0] if entry else f"{steel[0]} of {', '.join(joints)}"
    turns = _turning_ticks(decided, steel)
    wanted = frozenset(q.id for row in members for q in undecided[row])
    rows_shown = [
        RangeRow(
            _SYMBOLS[element],
            *ends[element],
            evaluation.knowledge.quantities[element].decimals,
            (*turns.get(element, ()), *_limit_ticks(evaluation, element, ends[element], wanted)),
        )
        for element in ordered
    ]
    shown = [row for row in rows_shown if row.ticks] or rows_shown[:3]
    picture = composition_ranges(f"What {name} may hold", shown)
    return Sample(name, entry.title if entry else "", joints, tuple(_SYMBOLS[e] for e in ordered), picture)


def _turning_ticks(decided: Decided, steel: Steel) -> dict[str, list[Tick]]:
    """By element the values at which a decision of a joint turns, where only that element is found out."""
    evaluation = decided.evaluation
    quantities = evaluation.knowledge.quantities
    by_value: dict[tuple[str, float], list[str]] = {}
    for (row, name), some in sorted(decided.narrowings.items()):
        rows = decided.plan.members[steel].get(row)
        member = next((m for r, m in steels_of(evaluation, row) if r == rows), 0) if rows else 0
        for narrowing in some:
            if len(narrowing.refs) == 1 and narrowing.ref.member == member and member and narrowing.cases:
                easy, rest = (case.found for case in narrowing.cases[:2])
                if easy.low is not None and easy.high is not None and rest.low is not None:
                    edge = easy.high if rest.low > easy.low else easy.low
                    words = f"{evaluation.facts.joints[row]}: {cases_text(evaluation, quantities[name], narrowing)}"
                    by_value.setdefault((narrowing.ref.quantity, edge), []).append(words)
    found: dict[str, list[Tick]] = {}
    for (element, value), said in sorted(by_value.items()):
        found.setdefault(element, []).append(Tick(value, "; ".join(said), turns=True))
    return found


def _limit_ticks(
    evaluation: Evaluation, element: str, span: tuple[float, float], decisions: frozenset[str]
) -> list[Tick]:
    """The limits on an element, inside what it may be, of the methods on which the open decisions rest."""
    found: dict[float, list[str]] = {}
    for name in sorted(evaluation.graph.rules_for(tuple(sorted(decisions)))):
        rule = evaluation.graph.rules[name]
        for limit in _bounds(rule.valid, element):
            if span[0] < limit < span[1]:
                found.setdefault(limit, []).append(rule.rule.title)
    return [Tick(value, f"limit of {', '.join(titles)}", turns=False) for value, titles in sorted(found.items())]


def _bounds(condition: Condition, element: str) -> Iterator[float]:
    for test in condition.tests:
        if test.quantity.id == element and not test.there:
            yield from (test.range.low, test.range.high)
    for part in condition.any_of:
        yield from _bounds(part, element)


def _others(decided: Decided) -> Iterator[Other]:
    """Inputs of joints, not of steels, that settle a decision by themselves, most joints first."""
    evaluation = decided.evaluation
    quantities = evaluation.knowledge.quantities
    found: dict[str, list[tuple[str, str, str]]] = {}
    for (row, name), some in sorted(decided.narrowings.items()):
        for narrowing in some:
            quantity = narrowing.ref.quantity
            if len(narrowing.refs) > 1 or quantity == ANALYSIS or not narrowing.settles:
                continue
            if quantities[quantity].topic == "composition":
                continue
            words = cases_text(evaluation, quantities[name], narrowing)
            found.setdefault(quantity, []).append((evaluation.facts.joints[row], quantities[name].title, words))
    for quantity, joints in sorted(found.items(), key=lambda item: (-len(item[1]), item[0])):
        yield Other(quantities[quantity].title, tuple(joints))


def _left(decided: Decided, plan: Plan, titles: Mapping[str, str]) -> list[tuple[str, str]]:
    """Open decisions that neither an analysis nor any other single input settles."""
    names = decided.evaluation.facts.joints
    alone = {key for key, some in decided.narrowings.items() if any(n.settles for n in some)}
    return [(names[row], titles[name]) for row, name in plan.left if (row, name) not in alone]
