"""How tight the sets of the preheat decision are: the set of every joint against points drawn inside its box.

Run: python tests/bench/tightness.py [points]. For every joint of the example projects whose preheat is a range, at
least so many points (20,000) are drawn, one composition a part feeding every method; every generation of points
starts from the best at either end, a few inputs drawn anew. Prints the slack at both ends: how far the set reaches
beyond any point. It is an upper bound of what is wide: points may miss an end that is real.
"""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass

import numpy as np

from weldbasis.evaluate import evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.narrow import narrowed
from weldbasis.places import kb_folder, site_folder
from weldbasis.project import read_project
from weldbasis.survey.draw import points_in
from weldbasis.turning import turning_figures
from weldbasis.values import PRESENT, Column, Floats, Numbers, chosen

WANTED = ("preheat_required", "min_preheat")
GENERATIONS, KEPT, REDRAWN = 20, 25, 0.15


@dataclass(frozen=True)
class Slack:
    """A quantity of a joint: its set, and the least and greatest value met at a point (nan where none had one)."""

    joint: str
    quantity: str
    low: float
    high: float
    least: float
    most: float

    @property
    def worst(self) -> float:
        """The greater slack of both ends."""
        return max(self.least - self.low, self.high - self.most)


def slacks(
    knowledge: Knowledge, graph: KnowledgeGraph, facts: Facts, points: int = 20_000, narrow: bool = True
) -> list[Slack]:
    """The slack of every joint of a project whose preheat is a range; `narrow` cuts boxes as decisions do."""
    sets = evaluate(knowledge, facts, graph)
    sets = narrowed(sets) if narrow else sets
    found = []
    for row, joint in enumerate(facts.joints):
        columns = {name: sets.columns[name] for name in WANTED}
        if any(c.low[row] < c.high[row] for c in columns.values() if isinstance(c, Numbers)):
            for name, (least, most) in reach(knowledge, graph, facts, row, points).items():
                column = columns[name]
                assert isinstance(column, Numbers)
                found.append(Slack(joint, name, float(column.low[row]), float(column.high[row]), least, most))
    return found


def reach(
    knowledge: Knowledge, graph: KnowledgeGraph, facts: Facts, row: int, points: int
) -> dict[str, tuple[float, float]]:
    """Least and greatest value met at points inside one joint's box."""
    rng = np.random.default_rng(row)
    figures = turning_figures(graph.rules.values())
    each = -(-points // GENERATIONS)
    found = dict.fromkeys(WANTED, (np.inf, -np.inf))
    best: Facts | None = None
    for _ in range(GENERATIONS):
        fresh, _rows = points_in(facts, knowledge, figures, np.full(each, row), rng)
        if best is not None:
            fresh = _children(best, fresh, knowledge, rng)
        outcome = evaluate(knowledge, fresh, graph, WANTED)
        for name in WANTED:
            values = _values(outcome.columns[name])
            if np.isfinite(values).any():
                low, high = found[name]
                found[name] = min(low, float(np.nanmin(values))), max(high, float(np.nanmax(values)))
        order = np.argsort(_values(outcome.columns[WANTED[0]]))
        order = order[np.isfinite(_values(outcome.columns[WANTED[0]])[order])]
        if len(order):
            best, _rows = fresh.repeated(np.concatenate([order[:KEPT], order[-KEPT:]]), knowledge.quantities)
    return found


def _values(column: Column) -> Floats:
    assert isinstance(column, Numbers)
    return np.where(column.presence == PRESENT, column.low, np.nan)


def _children(best: Facts, fresh: Facts, knowledge: Knowledge, rng: np.random.Generator) -> Facts:
    """Two thirds of the fresh points replaced by the best ones with a few inputs drawn anew."""
    parents = rng.integers(0, len(best.joints), len(fresh.joints))
    kept = rng.random(len(fresh.joints)) < 2 / 3
    old, _rows = best.repeated(parents, knowledge.quantities)
    given = {}
    for name, column in fresh.given.items():
        here = kept if knowledge.quantities[name].of == "joint" else kept[fresh.joint_of]
        given[name] = chosen(here & (rng.random(len(here)) > REDRAWN), old.given[name], column)
    return Facts(fresh.joints, fresh.members, fresh.joint_of, given)


def main(points: int) -> None:
    """Print the slack of every joint of the examples."""
    knowledge = load_knowledge(kb_folder(), with_cases=False)
    graph = build_graph(knowledge)
    start = time.perf_counter()
    worst, joints = 0.0, 0
    for folder in sorted(path.parent for path in (site_folder() / "projects").glob("*/project.yaml")):
        print(folder.name)
        for slack in slacks(knowledge, graph, read_project(folder, knowledge).facts, points):
            ends = f"slack {slack.least - slack.low:6.2f} below, {slack.high - slack.most:6.2f} above"
            print(f"  {slack.joint:5} {slack.quantity:18} {slack.low:7.2f} to {slack.high:7.2f} °C   {ends}")
            worst, joints = max(worst, slack.worst), joints + (slack.quantity == WANTED[0])
    seconds = time.perf_counter() - start
    print(f"{joints} joints, {points:,} points each, {seconds:.0f} s; greatest slack {worst:.2f} °C")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 20_000)
