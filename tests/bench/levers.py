"""Levers, edges, settling and sampling of a project of 500 joints, beside plain evaluation of the same joints.

Run: python tests/bench/levers.py [joints]. Prints seconds of each and the ratio of all together to plain evaluation;
the goal is at most 10 s together. Twice: the joints of both example projects repeated, many of them alike, and the same
with heat input, thickness and carbon of every joint a little different, so that no two are alike.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Sequence
from typing import TypeVar

import numpy as np

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder, site_folder
from weldbasis.project import read_project
from weldbasis.settling.edges import edges
from weldbasis.settling.levers import levers
from weldbasis.settling.sampling import plan_samples
from weldbasis.settling.settle import settle
from weldbasis.settling.trials import alike
from weldbasis.values import Column, Numbers

T = TypeVar("T")


def repeated(facts: Facts, joints: int) -> Facts:
    """The joints of a project again and again until there are as many."""
    count = -(-joints // len(facts.joints))
    rows = np.arange(joints) % len(facts.joints)
    keep = np.tile(facts.joint_of, count) + np.repeat(np.arange(count), len(facts.joint_of)) * len(facts.joints)
    members = np.tile(np.arange(len(facts.members)), count)[keep < joints]
    size = {len(facts.joints): rows, len(facts.members): members}
    return Facts(
        tuple(f"{facts.joints[row]}-{number}" for number, row in enumerate(rows)),
        tuple(facts.members[row] for row in members),
        keep[keep < joints],
        {name: column.take(size[len(column)]) for name, column in facts.given.items()},
        {name: places[size[len(places)]] for name, places in facts.origins.items()},
        facts.origin_list,
    )


def made_different(facts: Facts) -> Facts:
    """The same with heat input, thickness and carbon of every joint a little up or down."""
    rng = np.random.default_rng(4)

    def moved(column: Column) -> Column:
        assert isinstance(column, Numbers)
        factor = rng.uniform(0.97, 1.03, len(column))
        low = column.low * factor
        return Numbers(low, low if column.high is column.low else column.high * factor, column.presence, column.flags)

    changed = {name: moved(facts.given[name]) for name in ("heat_input", "member_thickness", "carbon")}
    return Facts(
        facts.joints, facts.members, facts.joint_of, {**facts.given, **changed}, facts.origins, facts.origin_list
    )


def timed(work: Callable[[], T]) -> tuple[T, float]:
    """What a piece of work gives, and its seconds of one processor, so that what else runs counts little."""
    start = time.process_time()
    found = work()
    return found, time.process_time() - start


def measure(title: str, knowledge: Knowledge, graph: KnowledgeGraph, facts: Facts) -> None:
    """Print the seconds of every part."""
    rows: Sequence[int] = range(len(facts.joints))
    evaluate(knowledge, facts, graph)
    evaluation, plain = timed(lambda: evaluate(knowledge, facts, graph))
    assert isinstance(evaluation, Evaluation)
    parts = {
        "levers": timed(lambda: levers(evaluation, rows))[1],
        "edges": timed(lambda: edges(evaluation, rows))[1],
        "settling": timed(lambda: settle(evaluation, rows))[1],
        "sampling": timed(lambda: plan_samples(evaluation, rows))[1],
    }
    total = sum(parts.values())
    words = ", ".join(f"{name} {seconds:.2f} s" for name, seconds in parts.items())
    print(f"{title}: {len(rows)} joints, {len(alike(evaluation, rows))} unlike; evaluation {plain:.2f} s; {words};")
    print(f"  together {total:.2f} s (goal at most 10), {total / plain:.0f} times plain evaluation")


def main() -> None:
    """Measure both examples, repeated and made different."""
    joints = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    knowledge = load_knowledge(kb_folder(), with_cases=False)
    graph = build_graph(knowledge)
    for name in ("millrace-footbridge", "tideway-gates"):
        facts = repeated(read_project(site_folder() / "projects" / name, knowledge).facts, joints)
        measure(f"{name}, repeated", knowledge, graph, facts)
        measure(f"{name}, all different", knowledge, graph, made_different(facts))


if __name__ == "__main__":
    main()
