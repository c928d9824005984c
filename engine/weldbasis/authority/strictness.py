"""A rule against the rule it replaces: stricter, looser or mixed over their common domain, with the worst examples.

Both are evaluated at the same points. Where every point of a lattice cut at all bounds of both rules fits, tables and
conditions are compared exactly, since nothing changes between two cuts; else points are drawn from that lattice.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, Literal, TypeAlias

import numpy as np

from weldbasis.kinds import KINDS, Compiled, View, compile_rule
from weldbasis.kinds.condition import Condition, Test
from weldbasis.kinds.limit import violated
from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.problem import Refused
from weldbasis.ranges import parse_range
from weldbasis.reading import value_of
from weldbasis.state import demand
from weldbasis.trace import Value
from weldbasis.values import Bools, Column, Floats, Ints, Levels, Numbers, exact_numbers, level_sets
from weldbasis.words import levels_text, range_text, with_unit

Verdict = Literal["stricter", "looser", "mixed", "same", "no direction", "not comparable"]
Pool: TypeAlias = Mapping[str, Floats]

_MOST_POINTS = 200_000
_INNER = (0.25, 0.5, 0.75)  # shares of the domain looked at beside the bounds, for formulas
_SEED = 1
_CONSTANT = re.compile(r"(?<![\w.])\d+\.?\d*")
_MEMBERS = 2  # parts of a joint where members are gathered


@dataclass(frozen=True)
class Example:
    """One point: what was given, and what the rule beneath and the one above it make of it."""

    given: Mapping[str, str]
    before: str
    after: str


@dataclass(frozen=True)
class Strictness:
    """How a rule stands to the one it replaces; `whole` says whether every cell of their domain was looked at."""

    verdict: Verdict
    points: int = 0
    whole: bool = False
    stricter: Example | None = None
    looser: Example | None = None
    why: str = ""


def strictness_of(before: Rule, after: Rule, knowledge: Knowledge) -> Strictness:
    """Compare two rules of one id. `knowledge` holds the vocabulary that both are read with."""
    try:
        old, new = compile_rule(before, knowledge), compile_rule(after, knowledge)
    except (Refused, KeyError) as fault:
        return Strictness("not comparable", why=f"the rule beneath does not fit the vocabulary any more: {fault}")
    if (before.kind == "limit") != (after.kind == "limit") or (old.gives != new.gives and before.kind != "limit"):
        return Strictness("not comparable", why="the two rules give different things")
    if before.for_each != after.for_each:
        return Strictness("not comparable", why="one is for each joint, the other for each member")
    names = tuple(dict.fromkeys([*old.inputs, *new.inputs]))
    pool = {name: _candidates(knowledge.quantities[name], (old, new)) for name in names}
    inside = {name: _inside(knowledge.quantities[name], numbers, (old, new)) for name, numbers in pool.items()}
    places, whole = _points(pool, inside)
    members = _MEMBERS if "gather" in (before.kind, after.kind) else 1
    if members > 1:
        whole = False
    view = _view(knowledge, pool, places, members, before.for_each)
    with np.errstate(all="ignore"):
        one, other = _outcome(old, view), _outcome(new, view)
    return _judged(old, one, other, view, names, whole and before.kind not in ("formula", "model"))


def _candidates(quantity: Quantity, rules: tuple[Compiled, ...]) -> Floats:
    """Numbers, or bits of one level each, at which to look; nan for no value where a rule asks for that."""
    conditions = [condition for rule in rules for condition in _conditions(rule)]
    asked = any(test.there for condition in conditions for test in condition.tests if test.quantity.id == quantity.id)
    nothing = [float("nan")] if asked else []
    if not quantity.is_number:
        return np.array([*(float(1 << place) for place in range(len(quantity.order))), *nothing])
    low, high = quantity.range.low, quantity.range.high
    ends = {low, high, *(low + share * (high - low) for share in _INNER)}
    for condition in conditions:
        ends |= {
            end
            for test in condition.tests
            if test.quantity.id == quantity.id
            for end in (test.range.low, test.range.high)
        }
    for rule in rules:
        ends |= set(_cell_ends(rule, quantity))
    inside = sorted(end for end in ends if low <= end <= high)
    between = [(one + other) / 2 for one, other in pairwise(inside)]
    return np.array([*sorted({*inside, *between}), *nothing])


def _conditions(rule: Compiled) -> Iterator[Condition]:
    queue = [rule.applies, rule.valid]
    queue += [choice.when for choice in getattr(rule.body, "choices", ())]
    while queue:
        condition = queue.pop()
        yield condition
        queue += condition.any_of


def _cell_ends(rule: Compiled, quantity: Quantity) -> Iterator[float]:
    """The ends of a table's ranges, and the constants that a check compares with, in the vocabulary's unit."""
    reads = {read.name: read for read in rule.reads if read.quantity.id == quantity.id}
    for constant in map(float, _CONSTANT.findall(str(rule.rule.body.get("must_hold", "")))):
        yield from ((constant - read.offset) / read.factor for read in reads.values())
    for row in rule.rule.body.get("rows", ()):
        for name, wanted in row.get("when", {}).items():
            if name in reads and wanted not in ("present", "absent"):
                cell = parse_range(wanted)
                yield from ((end - reads[name].offset) / reads[name].factor for end in (cell.low, cell.high))


def _points(pool: Pool, inside: Mapping[str, Bools]) -> tuple[dict[str, Ints], bool]:
    """Places in the candidates of every quantity, a point each; whether they are all there are.

    Where they are too many to look at all, most are drawn from within the plain limits of either rule, since a
    rule with many limits is silent nearly everywhere else.
    """
    sizes = [len(candidates) for candidates in pool.values()]
    if np.prod(sizes, dtype=float) <= _MOST_POINTS:
        grid = np.indices(sizes).reshape(len(sizes), -1)
        return dict(zip(pool, grid, strict=True)), True
    random = np.random.default_rng(_SEED)
    found: dict[str, Ints] = {}
    for name, size in zip(pool, sizes, strict=True):
        anywhere = random.integers(0, size, _MOST_POINTS)
        within = random.choice(np.flatnonzero(inside[name]), _MOST_POINTS) if inside[name].any() else anywhere
        found[name] = np.where(random.random(_MOST_POINTS) < 1 / len(pool), anywhere, within)
    return found, False


def _inside(quantity: Quantity, candidates: Floats, rules: tuple[Compiled, ...]) -> Bools:
    """Which candidates meet all plain demands that one of the rules makes on the quantity."""
    found = np.zeros(len(candidates), np.bool_)
    for rule in rules:
        tests = [t for c in (rule.applies, rule.valid) for t in c.tests if t.quantity.id == quantity.id]
        found |= np.array([all(_meets(test, float(number)) for test in tests) for number in candidates])
    return found


def _meets(test: Test, number: float) -> bool:
    if test.there or np.isnan(number):
        return bool(np.isnan(number)) == (test.there == "absent")
    return test.range.holds(number) if test.quantity.is_number else bool(test.mask & int(number))


def _view(knowledge: Knowledge, pool: Pool, places: Mapping[str, Ints], members: int, scope: str) -> View:
    joints = len(next(iter(places.values()))) if places else 1
    random = np.random.default_rng(_SEED)
    columns: dict[str, Column] = {}
    for name, candidates in pool.items():
        at = places[name]
        if knowledge.quantities[name].of == "member" and members > 1:
            at = np.stack([at, *(random.permutation(at) for _ in range(members - 1))], axis=1).reshape(-1)
        columns[name] = _column(knowledge.quantities[name], candidates[at])
    joint_of = np.repeat(np.arange(joints), members)
    joint = View(knowledge, "joint", joints, joint_of, columns)
    return joint if scope == "joint" else joint.members


def _column(quantity: Quantity, values: Floats) -> Column:
    if quantity.is_number:
        return exact_numbers(values)
    return level_sets(np.nan_to_num(values, nan=0.0).astype(np.uint64))


def _outcome(rule: Compiled, view: View) -> Mapping[str, Any]:
    if rule.rule.kind == "limit":
        rank = ["none", "note", "caution", "hold", "stop"].index(rule.body.level)
        return {"finding": np.where(violated(rule, view).surely, float(rank), 0.0)}
    return KINDS[rule.rule.kind].evaluate(rule, view)


def _asks(column: Any, quantity: Quantity | None) -> Floats | None:
    """How much each row asks for; a finding asks by its level."""
    if quantity is None:
        found: Floats = column
        return found
    return demand(column, quantity)


def _judged(
    rule: Compiled,
    one: Mapping[str, Any],
    other: Mapping[str, Any],
    view: View,
    names: tuple[str, ...],
    whole: bool,
) -> Strictness:
    more: tuple[float, str, int] | None = None
    less: tuple[float, str, int] | None = None
    directed = False
    for name, before in one.items():
        quantity = view.knowledge.quantities.get(name)
        old, new = _asks(before, quantity), _asks(other[name], quantity)
        if old is None or new is None:
            continue
        directed = True
        with np.errstate(invalid="ignore"):  # where both ask for nothing the difference is no number
            gain = np.where(old == new, 0.0, new - old)
        top, bottom = int(np.argmax(gain)), int(np.argmin(gain))
        more = max(filter(None, [more, (float(gain[top]), name, top)]), default=None)
        less = min(filter(None, [less, (float(gain[bottom]), name, bottom)]), default=None)
    if not directed:
        same = all(_alike(one[name], other[name]) for name in one)
        return Strictness("same" if same else "no direction", view.rows, whole)
    assert more is not None
    assert less is not None
    stricter = _example(rule, one, other, view, names, more) if more[0] > 0 else None
    looser = _example(rule, one, other, view, names, less) if less[0] < 0 else None
    verdict: Verdict = "mixed" if stricter and looser else "stricter" if stricter else "looser" if looser else "same"
    return Strictness(verdict, view.rows, whole, stricter, looser)


def _alike(one: Column, other: Column) -> bool:
    if isinstance(one, Numbers) and isinstance(other, Numbers):
        return bool(np.array_equal(one.low, other.low, equal_nan=True))
    return isinstance(one, Levels) and isinstance(other, Levels) and bool(np.array_equal(one.mask, other.mask))


def _example(
    rule: Compiled,
    one: Mapping[str, Any],
    other: Mapping[str, Any],
    view: View,
    names: tuple[str, ...],
    at: tuple[float, str, int],
) -> Example:
    _, name, row = at
    quantities = view.knowledge.quantities
    if rule.rule.for_each == "joint":
        rows = {n: row if quantities[n].of == "joint" else int(view.starts[row]) for n in names}
    else:
        rows = dict.fromkeys(names, row)
    given = {quantities[n].title: _text(view.column(n), quantities[n], rows[n]) for n in names}
    if name == "finding":
        levels = ["no finding", "note", "caution", "hold", "stop"]
        return Example(given, levels[int(one[name][row])], levels[int(other[name][row])])
    return Example(given, _text(one[name], quantities[name], row), _text(other[name], quantities[name], row))


def _text(column: Column, quantity: Quantity, row: int) -> str:
    value: Value = value_of(column, quantity, row)
    if value.presence == "absent":
        return "nothing"
    if value.low is None or value.high is None:
        return levels_text(quantity, value.any_of)
    return with_unit(range_text(value.low, value.high, max(quantity.decimals, 2)), quantity.unit)
