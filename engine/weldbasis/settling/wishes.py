"""A wished decision, "preheat <= 20 °C": read from text, and the cheapest way to reach it with one lever or two."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import combinations, product

import numpy as np

from weldbasis.evaluate import Evaluation
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.problem import nearest
from weldbasis.reading import value_of
from weldbasis.settling.levers import Hold, distance, holds_of, settings_of
from weldbasis.settling.trials import Pin, Trial, outcomes, pin_to
from weldbasis.settling.walks import steps_between
from weldbasis.trace import Value
from weldbasis.units import read_number
from weldbasis.values import PRESENT, Bools, Column, Numbers

_WISH = re.compile(r"\s*(.+?)\s*(<=|>=|≤|≥|<|>|==|=)\s*(.+?)\s*")


@dataclass(frozen=True)
class Wish:
    """A decision, a sign (<=, >=, <, > or =) and a value: a number in the decision's unit, or a level."""

    decision: Quantity
    sign: str
    value: float | str


@dataclass(frozen=True)
class Setting:
    """A lever set to another value; `share` is how much that changes it."""

    hold: Hold
    name: float | str
    share: float


@dataclass(frozen=True)
class Way:
    """One way to a wished decision, and what the decision then is."""

    settings: tuple[Setting, ...]
    becomes: Value


def read_wish(text: str, knowledge: Knowledge) -> Wish:
    """A wish from text: "min_preheat <= 20", "preheat 50 °C" (the same as =), "hydrogen class H10".

    Raises ValueError with a message fit for a user.
    """
    if match := _WISH.fullmatch(text):
        name, sign, value = match.groups()
    elif found := _split(text, knowledge):
        name, sign, value = found[0], "=", found[1]
    else:
        raise ValueError(f"{text!r} is no wish; write a decision and a value, for example 'min_preheat <= 20 °C'")
    decision = decision_named(name, knowledge)
    sign = {"≤": "<=", "≥": ">=", "==": "="}.get(sign, sign)
    if decision.is_number:
        span = read_number(value, decision.unit)
        if span.low != span.high:
            raise ValueError(f"{value!r} is a range; wish for one value of {decision.title.lower()}")
        return Wish(decision, sign, span.low)
    levels = {level.id.lower(): level.id for level in decision.levels}
    levels |= {level.title.lower(): level.id for level in decision.levels}
    if value.lower() not in levels:
        raise ValueError(
            f"{value!r} is no level of {decision.title.lower()}; its levels are {', '.join(decision.order)}"
        )
    return Wish(decision, sign, levels[value.lower()])


def _split(text: str, knowledge: Knowledge) -> tuple[str, str] | None:
    """A decision and a value with nothing between them: the longest start that names a decision."""
    words = text.split()
    for count in range(len(words) - 1, 0, -1):
        name = " ".join(words[:count])
        try:
            decision_named(name, knowledge)
        except ValueError:
            continue
        return name, " ".join(words[count:])
    return (words[0], " ".join(words[1:])) if len(words) > 1 else None


def decision_named(name: str, knowledge: Knowledge) -> Quantity:
    """A decision by its id, its title, or a part of its id that no other decision of the first rank has.

    Raises ValueError naming the decisions it may mean.
    """
    wanted = name.strip().lower().replace(" ", "_").replace("-", "_")
    decisions = knowledge.decisions
    for decision in decisions:
        if wanted in (decision.id, decision.title.lower().replace(" ", "_").replace("-", "_")):
            return decision
    for some in ([d for d in decisions if not d.part_of], [d for d in decisions if d.part_of]):
        by_id = [d for d in some if _has(d.id.split("_"), wanted.split("_"))]
        by_title = [d for d in some if _has(re.findall(r"[a-z]+", d.title.lower()), wanted.split("_"))]
        for found in (by_id, by_title):
            if len(found) == 1:
                return found[0]
            if found:
                raise ValueError(f"{name!r} may mean {' or '.join(d.id for d in found)}; write one of them")
    raise ValueError(f"no decision {name!r}. {nearest(wanted, [d.id for d in decisions])}")


def _has(words: Sequence[str], wanted: Sequence[str]) -> bool:
    return all(word in words for word in wanted)


def meets(wish: Wish, column: Column) -> Bools:
    """Where a decision surely is as wished, whatever is left in its set."""
    there = column.presence == PRESENT
    if isinstance(column, Numbers):
        decimals, value = wish.decision.decimals, float(wish.value)
        low, high = np.round(column.low, decimals), np.round(column.high, decimals)
        tests = {
            "<=": high <= value,
            "<": high < value,
            ">=": low >= value,
            ">": low > value,
            "=": (low == value) & (high == value),
        }
        found: Bools = there & tests[wish.sign]
        return found
    place = wish.decision.order.index(str(wish.value))
    allowed = [n for n in range(len(wish.decision.order)) if _in_order(n, place, wish.sign)]
    mask = np.uint64(sum(1 << n for n in allowed))
    inside: Bools = there & ((column.mask & ~mask) == 0)
    return inside


def _in_order(one: int, other: int, sign: str) -> bool:
    return {"<=": one <= other, "<": one < other, ">=": one >= other, ">": one > other, "=": one == other}[sign]


def cheapest(evaluation: Evaluation, joint: int, wish: Wish) -> list[Way]:
    """The ways to a wish with the fewest levers, the smallest change first: none, one of each lever, or the best pairs.

    A change counts against the lever's present value, of levels against all of them; of a pair both are added. Each
    lever of a way is changed no farther than needed: a step less, with the other as it is, does not reach the wish.
    An empty list says that no lever and no pair reaches it.
    """
    holds = holds_of(evaluation, joint)
    tried = _tried(evaluation, joint, wish, [()])
    if tried[0][0]:
        return [Way((), tried[0][1])]
    options = {id(hold): _options(hold) for hold in holds}
    ones = [(setting,) for hold in holds for setting in options[id(hold)]]
    found = _nearest_of_each(ones, _tried(evaluation, joint, wish, ones))
    if found:
        return found
    twos = [
        pair
        for one, other in combinations(holds, 2)
        for pair in product(_thinned(options[id(one)]), _thinned(options[id(other)]))
    ]
    ways = _nearest_of_each(twos, _tried(evaluation, joint, wish, twos))
    return _sorted(_refined(evaluation, joint, wish, way, options) for way in ways)


def _options(hold: Hold) -> list[Setting]:
    """Every other setting of a lever, nearest first."""
    lever = hold.quantity.lever
    assert lever is not None
    if not lever.step:
        some = [Setting(hold, name, abs(distance(hold, name))) for name, _ in settings_of(hold)]
        return sorted((s for s in some if s.share > 0), key=lambda s: s.share)
    found = []
    for start, end in ((hold.now.high, lever.within.high), (hold.now.low, lever.within.low)):
        if start and (end - start) * (1 if end == lever.within.high else -1) > 0:
            found += [Setting(hold, v, abs(v - start) / start) for v in steps_between(start, end, lever.step)[1:]]
    return sorted(found, key=lambda s: s.share)


def _thinned(settings: Sequence[Setting]) -> list[Setting]:
    """Of many settings those at growing distances, and the farthest both ways."""
    if len(settings) <= 12:
        return list(settings)
    found: list[Setting] = []
    for side in (1, -1):
        some = [s for s in settings if (float(s.name) - (s.hold.now.low or 0.0)) * side > 0]
        places = {int(1.5**power) - 1 for power in range(30)} | {len(some) - 1}
        found += [some[place] for place in sorted(places) if 0 <= place < len(some)]
    return found


def _tried(
    evaluation: Evaluation, joint: int, wish: Wish, ways: Sequence[tuple[Setting, ...]]
) -> list[tuple[bool, Value]]:
    trials = [trial_of(joint, way) for way in ways]
    column = outcomes(evaluation, trials, [wish.decision.id]).get(wish.decision.id)
    if column is None:
        return []
    met = meets(wish, column)
    return [(bool(met[row]), value_of(column, wish.decision, row)) for row in range(len(ways))]


def trial_of(joint: int, settings: Sequence[Setting]) -> Trial:
    """The joint with levers set."""
    return Trial(joint, tuple(_pin(setting) for setting in settings))


def _pin(setting: Setting) -> Pin:
    hold, value = setting.hold, setting.name
    settings = hold.quantity.lever.settings if hold.quantity.lever else {}
    return pin_to(hold.quantity, hold.rows, settings[value] if isinstance(value, str) and value in settings else value)


def _nearest_of_each(ways: Sequence[tuple[Setting, ...]], tried: Sequence[tuple[bool, Value]]) -> list[Way]:
    """Of the ways that reach the wish the smallest change for each choice of levers, smallest first."""
    best: dict[tuple[object, ...], Way] = {}
    for way, (met, becomes) in zip(ways, tried, strict=True):
        if met:
            key = tuple(setting.hold.ref for setting in way)
            if key not in best or _change(way) < _change(best[key].settings):
                best[key] = Way(way, becomes)
    return _sorted(best.values())


def _sorted(ways: Iterable[Way]) -> list[Way]:
    return sorted(ways, key=lambda way: (_change(way.settings), [setting.hold.ref for setting in way.settings]))


def _change(settings: Sequence[Setting]) -> float:
    return sum(setting.share for setting in settings)


def _refined(evaluation: Evaluation, joint: int, wish: Wish, way: Way, options: dict[int, list[Setting]]) -> Way:
    """The same pair with each lever, in turn, brought back as near to the present as the wish allows."""
    for place in range(len(way.settings)):
        mine = way.settings[place]
        nearer = [s for s in options[id(mine.hold)] if s.share <= mine.share]
        ways = [(*way.settings[:place], s, *way.settings[place + 1 :]) for s in nearer]
        for settings, (met, becomes) in zip(ways, _tried(evaluation, joint, wish, ways), strict=True):
            if met:
                way = Way(settings, becomes)
                break
    return way
