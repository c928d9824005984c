"""Levers: what the engineer can choose, how far each is from changing a decision, and a small table of two of them.

Which inputs are levers, with their steps or settings, is data of the vocabulary. All joints are tried together.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from weldbasis.evaluate import Evaluation
from weldbasis.graph import quantity_node
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.settling.settle import steels_of
from weldbasis.settling.trials import Trial, alike, demands_of, outcomes, pin_to
from weldbasis.settling.walks import Asked, Walk, first_easier, first_other, not_harder, steps_between
from weldbasis.state import UNCOVERED, demand_of
from weldbasis.trace import Ref, Value
from weldbasis.values import may_be_at

_OLD = frozenset({"era-envelope", "samples", "unknown"})  # where the composition of standing steel comes from


@dataclass(frozen=True)
class Hold:
    """A lever of one joint: its quantity, the rows that are set together, and what stands there now."""

    joint: int
    quantity: Quantity
    ref: Ref
    rows: tuple[int, ...]
    now: Value


@dataclass(frozen=True)
class Change:
    """The nearest setting on one side at which a decision asks for something else, and for what.

    `easier` says whether the shop is asked for less; `share` is how much the lever is changed, against its present
    value or, of levels, against all of them.
    """

    decision: str
    setting: float | str
    becomes: Value
    easier: bool
    share: float


@dataclass(frozen=True)
class Margin:
    """How far a lever can go without any change of the first decision, and the nearest changes of all decisions.

    `start` is the present value, of a range the end that asks more; `low` and `high` bound what changes nothing;
    all three are none for a lever without numbers.
    """

    hold: Hold
    changes: tuple[Change, ...]
    start: float | None = None
    low: float | None = None
    high: float | None = None


@dataclass(frozen=True)
class Table:
    """The first decision over values of one lever (rows) and named settings of another (columns).

    `row` and `column` tell where the joint stands now, -1 where no column covers it.
    """

    down: Hold
    across: Hold
    rows: tuple[Value, ...]
    columns: tuple[str, ...]
    cells: tuple[tuple[Value, ...], ...]
    row: int
    column: int


@dataclass(frozen=True)
class JointLevers:
    """All levers of one joint."""

    margins: tuple[Margin, ...]
    table: Table | None


def levers(evaluation: Evaluation, joints: Sequence[int]) -> Mapping[int, JointLevers]:
    """The margins and the small table of every joint, of the decisions of the first rank."""
    same = alike(evaluation, joints)
    holds = {joint: holds_of(evaluation, joint) for joint in same}
    margins = _margins(evaluation, holds)
    tables = _tables(evaluation, holds)
    found = {joint: JointLevers(tuple(margins.get(joint, ())), tables.get(joint)) for joint in same}
    return {joint: found[first] for first, group in same.items() for joint in group}


def holds_of(evaluation: Evaluation, joint: int) -> list[Hold]:
    """The levers of a joint that have a value now, in the order of the vocabulary."""
    found = []
    for quantity in evaluation.knowledge.quantities.values():
        if quantity.lever is None:
            continue
        column = evaluation.columns[quantity.id]
        places = [(0, (joint,))] if quantity.of == "joint" else _parts(evaluation, joint, quantity)
        for member, rows in places:
            if may_be_at(column, rows[0]):
                now = value_of(column, quantity, rows[0])
                found.append(Hold(joint, quantity, Ref(quantity.id, member), rows, now))
    return found


def _parts(evaluation: Evaluation, joint: int, quantity: Quantity) -> list[tuple[int, tuple[int, ...]]]:
    """Parts that are set together: those of one steel and one value; standing steel only where old parts count too."""
    assert quantity.lever is not None
    column = evaluation.columns[quantity.id]
    found: dict[tuple[str, Value], tuple[int, list[int]]] = {}
    for rows, member in steels_of(evaluation, joint):
        if quantity.lever.new_parts_only and not _is_new(evaluation, rows[0]):
            continue
        for row in rows:
            key = (evaluation.facts.members[row], value_of(column, quantity, row))
            found.setdefault(key, (member + row - rows[0], []))[1].append(row)
    return [(member, tuple(rows)) for member, rows in found.values()]


def _is_new(evaluation: Evaluation, row: int) -> bool:
    """Whether a part's composition comes from papers of new steel."""
    facts, quantities = evaluation.facts, evaluation.knowledge.quantities
    kinds = {
        facts.origin_list[int(places[row])].kind
        for name, places in facts.origins.items()
        if quantities[name].topic == "composition" and may_be_at(facts.given[name], row)
    }
    return bool(kinds) and not kinds & _OLD


def _bears_on(evaluation: Evaluation, quantity: Quantity) -> list[Quantity]:
    """The decisions of the first rank that rest on a quantity, in their order."""
    below = {node.id for node in evaluation.graph.bears_on(quantity_node(quantity.id)) if node.sort == "quantity"}
    return [d for d in evaluation.knowledge.decisions if not d.part_of and d.id in below]


def _margins(evaluation: Evaluation, holds: Mapping[int, Sequence[Hold]]) -> dict[int, list[Margin]]:
    every = [hold for some in holds.values() for hold in some]
    decisions = {
        name: _bears_on(evaluation, quantity) for name, quantity in {h.quantity.id: h.quantity for h in every}.items()
    }
    stepped = [hold for hold in every if hold.quantity.lever and hold.quantity.lever.step]
    others = [hold for hold in every if not (hold.quantity.lever and hold.quantity.lever.step)]
    found = {id(margin.hold): margin for margin in _stepped(evaluation, stepped, decisions)}
    found |= {id(margin.hold): margin for margin in _picked(evaluation, others, decisions)}
    return {joint: [found[id(hold)] for hold in some] for joint, some in holds.items()}


def _stepped(
    evaluation: Evaluation, holds: Sequence[Hold], decisions: Mapping[str, Sequence[Quantity]]
) -> list[Margin]:
    """Margins of levers that are set in steps: a walk up and a walk down from the end that asks more."""
    if not holds:
        return []
    starts = _starts(evaluation, holds)
    walks: list[Walk] = []
    for hold, start in zip(holds, starts, strict=True):
        lever = hold.quantity.lever
        assert lever is not None
        for end in (max(lever.within.high, start), min(lever.within.low, start)):
            walks.append(Walk(hold.joint, hold.quantity.id, hold.rows, steps_between(start, end, lever.step)))
    bearing = [decisions[hold.quantity.id] for hold in holds for _ in (0, 1)]
    wanted = list(dict.fromkeys(decision.id for some in bearing for decision in some))
    asked = Asked(evaluation, walks, wanted)
    kept = not_harder(asked, walks, bearing)
    nearest = first_easier(asked, kept)
    ends = [len(walk.values) - 1 for walk in walks]
    harder = {key: last + 1 for key, last in kept.items() if key not in nearest and last < ends[key[0]]}
    asked.ask((number, at, at) for (number, _), at in harder.items())
    # Where only the range as a whole may ask for more, the values beyond are looked at one by one.
    unsure = {key: at for key, at in harder.items() if asked[key[0], at, at, key[1]] == asked[key[0], 0, 0, key[1]]}
    nearest |= {key: at for key, at in harder.items() if key not in unsure}
    nearest |= first_other(asked, {key: (at, ends[key[0]]) for key, at in unsure.items()})
    turns = [(*key, at) for key, at in nearest.items() if asked[key[0], 0, 0, key[1]] != UNCOVERED]
    columns = outcomes(evaluation, [walks[number].trial(at, at) for number, _, at in turns], wanted)
    changes: dict[int, list[Change]] = {}
    for row, (number, name, at) in enumerate(turns):
        quantity = evaluation.knowledge.quantities[name]
        becomes = value_of(columns[name], quantity, row)
        start, value = walks[number].values[0], walks[number].values[at]
        share = abs(value - start) / abs(start) if start else float("inf")
        easier = asked[number, at, at, name] < asked[number, 0, 0, name]
        changes.setdefault(number, []).append(Change(name, value, becomes, easier, share))
    first = evaluation.knowledge.decisions[0].id
    found = []
    for place, (hold, start) in enumerate(zip(holds, starts, strict=True)):
        both = [*changes.get(2 * place, ()), *changes.get(2 * place + 1, ())]
        up, down = (walks[n].values[nearest.get((n, first), ends[n] + 1) - 1] for n in (2 * place, 2 * place + 1))
        found.append(Margin(hold, tuple(both), start, down, up))
    return found


def _starts(evaluation: Evaluation, holds: Sequence[Hold]) -> list[float]:
    """Where each lever stands; of a range the end at which the first decision asks more."""
    first = evaluation.knowledge.decisions[0]
    wide = [hold for hold in holds if hold.now.low != hold.now.high]
    trials = [
        Trial(hold.joint, (pin_to(hold.quantity, hold.rows, end),))
        for hold in wide
        for end in (hold.now.low or 0.0, hold.now.high or 0.0)
    ]
    if not trials:
        return [hold.now.low or 0.0 for hold in holds]
    asked = demands_of(evaluation, trials, [first])[:, 0]
    takes_high = {id(hold): bool(asked[2 * n + 1] > asked[2 * n]) for n, hold in enumerate(wide)}
    return [(hold.now.high if takes_high.get(id(hold)) else hold.now.low) or 0.0 for hold in holds]


def _picked(evaluation: Evaluation, holds: Sequence[Hold], decisions: Mapping[str, Sequence[Quantity]]) -> list[Margin]:
    """Margins of levers with named settings or levels: each is tried, the nearest that changes something is kept."""
    trials: list[Trial] = []
    spans: list[tuple[int, list[tuple[str, float | str]]]] = []
    for hold in holds:
        some = settings_of(hold)
        spans.append((len(trials), some))
        trials.append(Trial(hold.joint))
        trials += [Trial(hold.joint, (pin_to(hold.quantity, hold.rows, value),)) for _, value in some]
    wanted = list(dict.fromkeys(decision.id for some in decisions.values() for decision in some))
    columns = outcomes(evaluation, trials, wanted)
    demands = {name: demand_of(column, evaluation.knowledge.quantities[name]) for name, column in columns.items()}
    found = []
    for hold, (at, some) in zip(holds, spans, strict=True):
        changes = []
        for decision in decisions[hold.quantity.id]:
            asked, here = demands[decision.id], demands[decision.id][at]
            if here == UNCOVERED:
                continue
            for side in (1, -1):
                near = [(abs(d), n) for n, (name, _) in enumerate(some) if (d := distance(hold, name)) * side > 0]
                for far, n in sorted(near):
                    becomes = value_of(columns[decision.id], decision, at + 1 + n)
                    # A class that is chosen asks for itself; that is no news.
                    if asked[at + 1 + n] != here and becomes.any_of != (some[n][0],):
                        changes.append(Change(decision.id, some[n][0], becomes, bool(asked[at + 1 + n] < here), far))
                        break
        found.append(Margin(hold, tuple(changes)))
    return found


def settings_of(hold: Hold) -> list[tuple[str, float | str]]:
    """The named settings of a lever, or its levels, as a name and what to pin."""
    lever = hold.quantity.lever
    assert lever is not None
    if hold.quantity.levels:
        return [(level, level) for level in hold.quantity.order]
    return list(lever.settings.items())


def distance(hold: Hold, name: str) -> float:
    """How far a setting lies from what stands now, with its side: against the value, or against all levels."""
    lever = hold.quantity.lever
    assert lever is not None
    if hold.quantity.levels:
        order = hold.quantity.order
        places = [order.index(level) for level in hold.now.any_of]
        at = order.index(name)
        off = at - places[-1] if at > places[-1] else min(0, at - places[0])
        return off / (len(order) - 1)
    low, high = hold.now.low or 0.0, hold.now.high or 0.0
    value = lever.settings[name]
    return (value - high) / high if value > high else min(0.0, (value - low) / low)


def _tables(evaluation: Evaluation, holds: Mapping[int, Sequence[Hold]]) -> dict[int, Table]:
    """The small table of every joint that has both a lever with values to show and one with named settings."""
    first = evaluation.knowledge.decisions[0]
    shapes: list[tuple[Hold, Hold, list[Value], int]] = []
    trials: list[Trial] = []
    for some in holds.values():
        down = next((hold for hold in some if hold.quantity.lever and hold.quantity.lever.table), None)
        across = next((hold for hold in some if hold.quantity.lever and hold.quantity.lever.settings), None)
        if down is None or across is None:
            continue
        rows = [Value(value, value) for value in (down.quantity.lever.table if down.quantity.lever else ())]
        now = Value(down.now.low, down.now.high)
        rows = sorted({*rows, now}, key=lambda value: (value.low or 0.0, value.high or 0.0))
        shapes.append((down, across, rows, len(trials)))
        for row in rows:
            pin = () if row == now else (pin_to(down.quantity, down.rows, row.low or 0.0),)
            for _, value in settings_of(across):
                trials.append(Trial(down.joint, (*pin, pin_to(across.quantity, across.rows, value))))
    column = outcomes(evaluation, trials, [first.id]).get(first.id)
    found = {}
    for down, across, rows, at in shapes:
        assert column is not None
        names = [name for name, _ in settings_of(across)]
        cells = tuple(
            tuple(value_of(column, first, at + place * len(names) + n) for n in range(len(names)))
            for place in range(len(rows))
        )
        here = rows.index(Value(down.now.low, down.now.high))
        covers = [n for n, (_, value) in enumerate(settings_of(across)) if float(value) >= (across.now.high or 0.0)]
        found[down.joint] = Table(down, across, tuple(rows), tuple(names), cells, here, covers[0] if covers else -1)
    return found
