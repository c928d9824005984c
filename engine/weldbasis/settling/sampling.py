"""Which few samples settle the most joints: a steel analysed once is known in every joint that uses it."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations, product

import numpy as np

from weldbasis.evaluate import Evaluation
from weldbasis.knowledge import Quantity
from weldbasis.settling.settle import open_analyses, open_decisions, steels_of
from weldbasis.settling.trials import Pin, Trial, alike, outcomes
from weldbasis.state import open_rows
from weldbasis.values import ABSENT, Numbers

_MOST_TOGETHER = 3  # steels of one joint that are sampled together
# Where in their ranges elements are tried that rise together, by the number of steels; and analyses of no pattern.
_RISING = {1: (0.0, 0.25, 0.5, 0.75, 1.0), 2: (0.0, 0.5, 1.0), 3: (0.0, 1.0)}
_SCATTERED = 6
_MOSTLY = 0.5  # a sample is worth taking where at least this share of what it may find settles a decision
_WELD_METAL = "weld metal"

Steel = tuple[str, int]  # its name and, of the weld metals of several consumables, a number
Open = tuple[int, str]  # a joint's row and an open decision
Cures = dict[Open, list[frozenset[Steel]]]  # what settles a decision, each a few steels together


@dataclass(frozen=True)
class Step:
    """Samples to take together, the joints that they and those before settle for good, and all such decisions.

    Where not `surely`, they are settled by most analyses that may be found but not by all: for some the rules may give
    no answer, or another input still counts.
    """

    steels: tuple[Steel, ...]
    joints: tuple[int, ...]
    decisions: tuple[Open, ...]
    surely: bool = True


@dataclass(frozen=True)
class Plan:
    """Steps in the order of joints settled for each sample taken.

    `members` holds, for a steel, its member rows
    in each joint that is open; `left` the open decisions that no analysis settles, surely or mostly.
    """

    steps: tuple[Step, ...]
    members: Mapping[Steel, Mapping[int, tuple[int, ...]]]
    left: tuple[Open, ...]


def plan_samples(evaluation: Evaluation, rows: Sequence[int]) -> Plan:
    """Choose samples step by step, each time those that settle the most joints for each sample taken.

    First those that surely settle are chosen, then of what is left those that most probably do.

    A joint is settled when all its open decisions are, whatever the analysis finds inside the ranges: tried at
    analyses that rise together and at some of no pattern, with every other input left as it is.
    """
    undecided = open_decisions(evaluation, rows)
    steels = _steels(evaluation, undecided)
    sure: Cures = {}
    likely: Cures = {}
    same = alike(evaluation, list(undecided))
    for row, places, shares in _cured(evaluation, {row: undecided[row] for row in same}):
        for joint in same[row]:
            known = frozenset(steels[joint][place] for place in places)
            for name, share in shares.items():
                if share == 1.0:
                    sure.setdefault((joint, name), []).append(known)
                if share >= _MOSTLY:
                    likely.setdefault((joint, name), []).append(known)
    members: dict[Steel, dict[int, tuple[int, ...]]] = {}
    for joint, some in steels.items():
        for steel, (rows_of, _) in zip(some, steels_of(evaluation, joint), strict=True):
            members.setdefault(steel, {})[joint] = rows_of
    every = [(row, decision.id) for row, some in undecided.items() for decision in some]
    steps = list(_greedy(sure, every, ()))
    steps += _greedy(likely, every, steps)
    # Those chosen, once more in the order of what each brings, whether surely or most probably.
    ordered = _greedy(likely | sure, every, (), [frozenset(step.steels) for step in steps])
    steps = [dataclasses.replace(step, surely=all(key in sure for key in step.decisions)) for step in ordered]
    return Plan(tuple(steps), members, tuple(key for key in every if key not in likely))


def _steels(evaluation: Evaluation, joints: Sequence[int] | Mapping[int, object]) -> dict[int, list[Steel]]:
    """The steels of each joint. Weld metals are one only where the very same is known of them."""
    quantities, given = evaluation.knowledge.quantities, evaluation.facts.given
    elements = [column for name, column in sorted(given.items()) if quantities[name].topic == "composition"]
    numbers: dict[tuple[bytes, ...], int] = {}
    found: dict[int, list[Steel]] = {}
    for joint in joints:
        for (row, *_), _ in steels_of(evaluation, joint):
            name, number = evaluation.facts.members[row], 0
            if name == _WELD_METAL:
                numbered = [column for column in elements if isinstance(column, Numbers)]
                known = tuple(column.low[row].tobytes() + column.high[row].tobytes() for column in numbered)
                number = numbers.setdefault(known, len(numbers) + 1)
            found.setdefault(joint, []).append((name, number))
    return found


def _cured(
    evaluation: Evaluation, undecided: Mapping[int, Sequence[Quantity]]
) -> Iterator[tuple[int, tuple[int, ...], dict[str, float]]]:
    """For every joint and every few of its steels (by place), what share of their analyses settles each decision."""
    rng = np.random.default_rng(7)
    asked: list[tuple[int, tuple[int, ...], range]] = []
    trials: list[Trial] = []
    for row, decisions in undecided.items():
        ends = [ends for _, _, ends in open_analyses(evaluation, row, decisions)]
        places = [place for place, some in enumerate(ends) if some]
        for count in range(1, min(_MOST_TOGETHER, len(places)) + 1):
            for some in combinations(places, count):
                answers = _analyses([ends[place] for place in some], rng)
                asked.append((row, some, range(len(trials), len(trials) + len(answers))))
                trials += [Trial(row, answer) for answer in answers]
    wanted = list(dict.fromkeys(decision.id for decisions in undecided.values() for decision in decisions))
    columns = outcomes(evaluation, trials, wanted)
    quantities = evaluation.knowledge.quantities
    unsettled = {n: open_rows(c, quantities[n]) | (c.presence == ABSENT) for n, c in columns.items()}
    for row, some, span in asked:
        yield row, some, {d.id: 1.0 - float(unsettled[d.id][span.start : span.stop].mean()) for d in undecided[row]}


def _analyses(steels: Sequence[Sequence[tuple[Pin, Pin]]], rng: np.random.Generator) -> list[tuple[Pin, ...]]:
    """Analyses that several steels may turn out to have."""
    found = []
    for shares in product(_RISING[len(steels)], repeat=len(steels)):
        found.append(tuple(_at(*ends, share) for some, share in zip(steels, shares, strict=True) for ends in some))
    for _ in range(_SCATTERED):
        found.append(tuple(_at(*ends, float(rng.random())) for some in steels for ends in some))
    return found


def _at(low: Pin, high: Pin, share: float) -> Pin:
    value = low.low + share * (high.low - low.low)
    return Pin(low.quantity, low.rows, value, value)


def _greedy(
    cures: Cures, every: Sequence[Open], before: Sequence[Step], only: Sequence[frozenset[Steel]] = ()
) -> Iterator[Step]:
    """Best first by joints settled for each sample, then by decisions settled, then by name; going on from `before`.

    `only` names the samples to choose from, else all that settle something and all that settle a whole joint.
    """
    known = frozenset(steel for step in before for steel in step.steels)
    done = {key for step in before for key in step.decisions}
    names: dict[int, set[Open]] = {}
    for key in every:
        names.setdefault(key[0], set()).add(key)
    options = set(only) or _options(cures, names)
    while True:
        best: tuple[tuple[float, float, int, list[Steel]], frozenset[Steel], set[Open], set[int]] | None = None
        for option in options:
            new = option - known
            if not new:
                continue
            held = known | new
            settled = {key for key, cured in cures.items() if key not in done and any(c <= held for c in cured)}
            if not settled:
                continue
            whole = {row for row, _ in settled if names[row] <= done | settled}
            rank = (-len(whole) / len(new), -len(settled) / len(new), len(new), sorted(new))
            if best is None or rank < best[0]:
                best = (rank, new, settled, whole)
        if best is None:
            return
        _, new, settled, whole = best
        known, done = known | new, done | settled
        yield Step(tuple(sorted(new)), tuple(sorted(whole)), tuple(sorted(settled)))


def _options(cures: Cures, names: Mapping[int, set[Open]]) -> set[frozenset[Steel]]:
    """Samples that settle a decision, and those that together settle all of a joint, which may need other steels."""
    found = {some for cured in cures.values() for some in cured}
    for keys in names.values():
        if all(key in cures for key in keys):
            found.add(frozenset(steel for key in keys for steel in min(cures[key], key=lambda c: (len(c), sorted(c)))))
    return found
