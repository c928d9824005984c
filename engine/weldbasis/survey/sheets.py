"""A sheet for each steel: what the rules in force ask of a plain joint, over thickness, hydrogen and restraint.

The steel is known by its standard's limits (or its time and product) alone, so every cell is a set: its demanding end
is what the shop would have to do, its easy end what the kindest heat of that steel would ask.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Era, Grade, Knowledge
from weldbasis.nearest import nearest_text
from weldbasis.project.grades import limits_in, reach_of
from weldbasis.ranges import Range
from weldbasis.reading import value_of
from weldbasis.state import demanding_end
from weldbasis.survey.lattice import Lattice, lattice, steel_of_era, steel_of_grade
from weldbasis.trace import Value
from weldbasis.values import ABSENT

PREHEAT = "min_preheat"
# What a sheet says beside the preheat, one column each.
BESIDE = ("max_interpass", "pwht", "peening")


@dataclass(frozen=True)
class Line:
    """A line of a sheet: one thickness under one or more restraints that come out alike.

    `preheat` holds the set for each hydrogen in the order of the conditions, `beside` those of the other decisions,
    each the most demanding over all hydrogens.
    """

    thickness_mm: float
    restraint: tuple[str, ...]
    preheat: tuple[Value, ...]
    beside: tuple[Value, ...]
    made: bool


@dataclass(frozen=True)
class Sheet:
    """The sheet of one steel. `gaps` say, once a decision, where a cell has no value and which rule comes nearest."""

    steel: Grade | Era
    lines: tuple[Line, ...]
    gaps: tuple[str, ...]

    @cached_property
    def worst(self) -> Mapping[float, tuple[Value, ...]]:
        """The preheat for each hydrogen under the highest restraint, by thickness (mm) that the steel is made in."""
        return {line.thickness_mm: line.preheat for line in self.lines if line.made}


@dataclass(frozen=True)
class Sheets:
    """What all sheets are read from: the conditions, and one evaluation over all steels."""

    conditions: Mapping[str, Any]
    steels: tuple[Grade | Era, ...]
    lattice: Lattice
    evaluation: Evaluation


def decide_sheets(knowledge: Knowledge, graph: KnowledgeGraph, conditions: Mapping[str, Any]) -> Sheets:
    """Decide the plain joint of every grade and era under all conditions. Raises Refused where a condition is wrong."""
    grades, eras = list(knowledge.grades.values()), list(knowledge.eras.values())
    steels = [*map(steel_of_grade, grades), *map(steel_of_era, eras)]
    varied = [[h["fields"] for h in conditions["hydrogen"]], [{"restraint": r} for r in conditions["restraint"]]]
    found = lattice(knowledge, steels, conditions["joint"], conditions["thickness_mm"], varied)
    evaluation = evaluate(knowledge, found.facts, graph, (PREHEAT, *BESIDE))
    return Sheets(conditions, (*grades, *eras), found, evaluation)


def sheet(sheets: Sheets, number: int) -> Sheet:
    """The sheet of one steel, by its place among them."""
    steel, conditions = sheets.steels[number], sheets.conditions
    hydrogens, restraints = len(conditions["hydrogen"]), conditions["restraint"]
    lines: list[Line] = []
    gaps: dict[str, str] = {}
    for thickness, t_mm in enumerate(sheets.lattice.thickness_mm):
        made = not isinstance(steel, Grade) or limits_in(steel, Range(t_mm, t_mm)) is not None
        for place, restraint in enumerate(restraints):
            rows = [sheets.lattice.row(number, thickness, h * len(restraints) + place) for h in range(hydrogens)]
            line = _line(sheets, rows, t_mm, restraint, made)
            if made:
                for name, text in _gaps(sheets, rows, line, gaps):
                    gaps[name] = text
            last = lines[-1] if lines else None
            if last and (last.thickness_mm, last.preheat, last.beside) == (t_mm, line.preheat, line.beside):
                lines[-1] = Line(t_mm, (*last.restraint, restraint), line.preheat, line.beside, made)
            else:
                lines.append(line)
    return Sheet(steel, tuple(lines), tuple(gaps.values()))


def _line(sheets: Sheets, rows: Sequence[int], t_mm: float, restraint: str, made: bool) -> Line:
    evaluation = sheets.evaluation
    quantity = evaluation.knowledge.quantities[PREHEAT]
    preheat = tuple(value_of(evaluation.columns[PREHEAT], quantity, row) for row in rows)
    beside = tuple(_most_demanding(evaluation, name, rows) for name in BESIDE)
    return Line(t_mm, (restraint,), preheat, beside, made)


def _most_demanding(evaluation: Evaluation, name: str, rows: Sequence[int]) -> Value:
    quantity = evaluation.knowledge.quantities[name]
    values = [value_of(evaluation.columns[name], quantity, row) for row in rows]

    def rank(value: Value) -> float:
        end = demanding_end(value, quantity)
        if end is None:
            return float("-inf")
        number = float(quantity.order.index(end)) if isinstance(end, str) else end
        return number if quantity.worse in ("higher", "last") else -number

    return max(values, key=rank)


def _gaps(sheets: Sheets, rows: Sequence[int], line: Line, known: Mapping[str, str]) -> Iterator[tuple[str, str]]:
    """For every decision without a value that has no example yet: where that is, and which rule comes nearest."""
    columns = sheets.evaluation.columns
    for name in (PREHEAT, *BESIDE):
        row = next((row for row in rows if columns[name].presence[row] == ABSENT), None)
        if row is None or name in known:
            continue
        title = sheets.evaluation.knowledge.quantities[name].title
        where = f"{line.thickness_mm:g} mm, restraint {line.restraint[0]}"
        yield name, f"{title}, for example at {where}: {nearest_text(sheets.evaluation, name, row)}"


def reach_text(steel: Grade | Era) -> str:
    """The thickness (mm) that a grade's standard reaches over, in words; empty for an envelope."""
    if not isinstance(steel, Grade):
        return ""
    reach = reach_of(steel)
    if reach.high == float("inf"):
        return f"from {reach.low:g} mm" if reach.low else "in any thickness"
    return f"up to {reach.high:g} mm" if not reach.low else f"from {reach.low:g} to {reach.high:g} mm"
