"""How far one input can go before a decision asks for something else: found for many joints at once, on ranges.

Whether more is asked is judged on the whole range from where the input stands to where it goes, so that no value
between is missed; the farthest place is found by halving, which is sound because a wider range never asks for less.
Whether less is asked is judged at single values; to miss one of those is on the safe side.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass

from weldbasis.evaluate import Evaluation
from weldbasis.knowledge import Quantity
from weldbasis.settling.trials import Pin, Trial, outcomes
from weldbasis.state import demand_of


@dataclass(frozen=True)
class Walk:
    """One input of one joint walked from `values[0]` through values that only rise, or only fall."""

    joint: int
    quantity: str
    rows: tuple[int, ...]
    values: tuple[float, ...]

    def trial(self, first: int, last: int) -> Trial:
        """The joint with the input anywhere between two places of the walk."""
        low, high = sorted((self.values[first], self.values[last]))
        return Trial(self.joint, (Pin(self.quantity, self.rows, low, high),))


def steps_between(start: float, end: float, step: float) -> tuple[float, ...]:
    """`start`, the multiples of `step` strictly between, and `end`, in the order of walking.

    Multiples are rounded as people write them, so that 0.15 is 0.15.
    """
    decimals = max(0, -math.floor(math.log10(step)) + 1)
    low, high = sorted((start, end))
    first, last = math.floor(low / step) + 1, math.ceil(high / step) - 1
    grid = [round(number * step, decimals) for number in range(first, last + 1)]
    between = [value for value in grid if low < value < high]
    return (start, *(between if start <= end else reversed(between)), *([end] if end != start else []))


class Asked:
    """What walks ask of the shop between two of their places, by decision; each is evaluated once."""

    def __init__(self, evaluation: Evaluation, walks: Sequence[Walk], wanted: Sequence[str]) -> None:
        self._evaluation, self._walks, self._wanted = evaluation, walks, wanted
        self._known: dict[tuple[int, int, int], Mapping[str, float]] = {}

    def ask(self, places: Iterable[tuple[int, int, int]]) -> None:
        """Evaluate walks (number, first place, last place) together."""
        new = [place for place in dict.fromkeys(places) if place not in self._known]
        trials = [self._walks[walk].trial(first, last) for walk, first, last in new]
        columns = outcomes(self._evaluation, trials, self._wanted)
        quantities = self._evaluation.knowledge.quantities
        demands = {name: demand_of(column, quantities[name]).tolist() for name, column in columns.items()}
        for row, place in enumerate(new):
            self._known[place] = {name: demand[row] for name, demand in demands.items()}

    def __getitem__(self, key: tuple[int, int, int, str]) -> float:
        walk, first, last, name = key
        return self._known[walk, first, last][name]


Search = tuple[int, str]  # the number of a walk, and a decision
Holds = Callable[[Search, int], bool]
Part = Callable[[int], tuple[int, int]]


def halve(asked: Asked, searches: Mapping[Search, tuple[int, int]], holds: Holds, part: Part) -> dict[Search, int]:
    """For each search the last place that `holds`, between one that does and one that does not.

    `part` names the places of the walk that are asked for a place in question.
    """
    found: dict[Search, int] = {}
    left = dict(searches)
    while left:
        middles = {key: (kept + lost) // 2 for key, (kept, lost) in left.items() if lost - kept > 1}
        asked.ask((number, *part(at)) for (number, _), at in middles.items())
        for key, (kept, lost) in list(left.items()):
            if key not in middles:
                found[key] = kept
                del left[key]
            elif holds(key, middles[key]):
                left[key] = (middles[key], lost)
            else:
                left[key] = (kept, middles[key])
    return found


def not_harder(asked: Asked, walks: Sequence[Walk], decisions: Sequence[Sequence[Quantity]]) -> dict[Search, int]:
    """For every walk and each of its decisions the last place up to which nothing asks more than at the start."""
    ends = [len(walk.values) - 1 for walk in walks]
    asked.ask((number, 0, at) for number, end in enumerate(ends) for at in (0, end))
    searches = {(n, decision.id): (0, ends[n]) for n, some in enumerate(decisions) for decision in some}

    def same(key: Search, at: int) -> bool:
        return asked[key[0], 0, at, key[1]] <= asked[key[0], 0, 0, key[1]]

    found = {key: end for key, (_, end) in searches.items() if same(key, end)}
    return found | halve(asked, {k: v for k, v in searches.items() if k not in found}, same, lambda at: (0, at))


def first_easier(asked: Asked, searches: Mapping[Search, int]) -> dict[Search, int]:
    """For each search, up to the place given with it, the first place at which less is asked than at the start.

    Looked for at places farther and farther from the start, then by halving; a search that finds none is left out.
    """

    def as_before(key: Search, at: int) -> bool:
        return asked[key[0], at, at, key[1]] >= asked[key[0], 0, 0, key[1]]

    return _first_that_fails(asked, {key: (0, last) for key, last in searches.items()}, as_before)


def first_other(asked: Asked, searches: Mapping[Search, tuple[int, int]]) -> dict[Search, int]:
    """For each search, from one place to another, the first place at which anything else is asked than at the start.

    For where a whole range may ask for more though no value in it does: its values are looked at one by one.
    """

    def as_before(key: Search, at: int) -> bool:
        return asked[key[0], at, at, key[1]] == asked[key[0], 0, 0, key[1]]

    return _first_that_fails(asked, searches, as_before)


def _first_that_fails(asked: Asked, searches: Mapping[Search, tuple[int, int]], holds: Holds) -> dict[Search, int]:
    tried = {key: _farther_and_farther(*span) for key, span in searches.items()}
    asked.ask((number, at, at) for (number, _), places in tried.items() for at in places)
    between: dict[Search, tuple[int, int]] = {}
    for key, places in tried.items():
        for kept, at in zip((searches[key][0], *places), places, strict=False):
            if not holds(key, at):
                between[key] = (kept, at)
                break
    found = halve(asked, between, holds, lambda at: (at, at))
    return {key: at + 1 for key, at in found.items()}


def _farther_and_farther(first: int, last: int) -> tuple[int, ...]:
    places = [first + 4**power for power in range(1, 8) if first + 4**power < last]
    return (*places, last) if last > first else ()
