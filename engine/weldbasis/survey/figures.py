"""Every figure of a rule: where it stands, and the rule with that one figure nudged."""

from __future__ import annotations

import ast
import dataclasses
import math
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.ranges import parse_range

Path_ = tuple[str | int, ...]
_FORMULAS = ("formula", "must_hold")
_NUMBER = re.compile(r"(?<![\w.])[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?")
_SHARE = 0.05


@dataclass(frozen=True)
class Figure:
    """One number of a rule: the path of its part, its place in the part's text, its spelling, and whether it bounds."""

    rule: str
    path: Path_
    start: int
    spelling: str
    bound: bool

    @property
    def where(self) -> str:
        """The place in words: "rows 3 give", "formula at 12"."""
        words = [str(step + 1) if isinstance(step, int) else step for step in self.path]
        return " ".join(words) + (f" at {self.start + 1}" if self.start >= 0 else "")


def figures_of(rule: Rule, knowledge: Knowledge) -> Iterator[Figure]:
    """The figures of a rule: in its formula, its rows, its conditions, its limits and its constants."""
    for part in ("applies_when", "valid_within"):
        yield from _in_condition(rule, (part,), getattr(rule, part), knowledge)
    reads = {read.name: knowledge.quantities[read.quantity] for read in rule.reads}
    for key, value in rule.body.items():
        if key in _FORMULAS:
            yield from _in_formula(rule, ("body", key), value)
        elif key == "rows":
            for place, row in enumerate(value):
                yield from _in_row(rule, ("body", key, place), row, reads, knowledge)
        elif key in ("where", "candidates"):
            yield from _in_conditions_below(rule, ("body", key), value, knowledge)
        else:
            yield from _in_plain(rule, ("body", key), value)


def _in_condition(rule: Rule, path: Path_, written: Mapping[str, Any], knowledge: Knowledge) -> Iterator[Figure]:
    for name, wanted in written.items():
        if name == "any_of":
            for place, part in enumerate(wanted):
                yield from _in_condition(rule, (*path, name, place), part, knowledge)
        elif knowledge.quantities[name].is_number:
            yield from _in_range(rule, (*path, name), wanted)


def _in_conditions_below(rule: Rule, path: Path_, written: Any, knowledge: Knowledge) -> Iterator[Figure]:
    """Conditions inside a gathering's `where` or a choice's `when`."""
    if isinstance(written, list):
        for place, item in enumerate(written):
            if isinstance(item, Mapping) and "when" in item:
                yield from _in_condition(rule, (*path, place, "when"), item["when"], knowledge)
    elif isinstance(written, Mapping):
        yield from _in_condition(rule, path, written, knowledge)


def _in_row(
    rule: Rule, path: Path_, row: Mapping[str, Any], reads: Mapping[str, Quantity], knowledge: Knowledge
) -> Iterator[Figure]:
    for name, wanted in row.get("when", {}).items():
        if reads[name].is_number:
            yield from _in_range(rule, (*path, "when", name), wanted)
    gives = row["give"] if isinstance(row["give"], Mapping) else {rule.gives[0]: row["give"]}
    for name, given in gives.items():
        inner = (*path, "give", name) if isinstance(row["give"], Mapping) else (*path, "give")
        if knowledge.quantities[name].is_number:
            yield from _in_plain(rule, inner, given)


def _in_range(rule: Rule, path: Path_, wanted: Any) -> Iterator[Figure]:
    if isinstance(wanted, int | float) and not isinstance(wanted, bool):
        yield Figure(rule.id, path, -1, f"{wanted:g}", True)
    elif isinstance(wanted, str) and wanted not in ("present", "absent"):
        for match in _NUMBER.finditer(wanted):
            yield Figure(rule.id, path, match.start(), match.group(), True)


def _in_formula(rule: Rule, path: Path_, text: str) -> Iterator[Figure]:
    for node in ast.walk(ast.parse(text.strip(), mode="eval")):
        if isinstance(node, ast.Constant) and isinstance(node.value, int | float):
            spelling = ast.get_source_segment(text.strip(), node) or f"{node.value:g}"
            yield Figure(rule.id, path, node.col_offset, spelling, False)


def _in_plain(rule: Rule, path: Path_, value: Any) -> Iterator[Figure]:
    if isinstance(value, bool):
        return
    if isinstance(value, int | float):
        yield Figure(rule.id, path, -1, f"{value:g}", False)
    elif isinstance(value, Mapping):
        for key, inner in value.items():
            yield from _in_plain(rule, (*path, key), inner)
    elif isinstance(value, list):
        for place, inner in enumerate(value):
            yield from _in_plain(rule, (*path, place), inner)
    elif isinstance(value, str) and _is_range(value):
        yield from _in_range(rule, path, value)


def _is_range(text: str) -> bool:
    try:
        parse_range(text)
    except ValueError:
        return False
    return True


def nudges(figure: Figure) -> tuple[str, str]:
    """The figure's spelling a little lower and a little higher: a bound by one of its last place, the rest by 5 %."""
    value = float(figure.spelling)
    step = _last_place(figure.spelling) if figure.bound or value == 0 else abs(value) * _SHARE
    return f"{value - step:.12g}", f"{value + step:.12g}"


def _last_place(spelling: str) -> float:
    mantissa, _, exponent = spelling.lower().partition("e")
    decimals = len(mantissa.partition(".")[2])
    return math.pow(10.0, int(exponent or 0) - decimals)


def nudged(rule: Rule, figure: Figure, spelling: str) -> Rule:
    """The rule with one figure spelled otherwise and nothing else changed."""
    part, *rest = figure.path
    if part == "body":
        return dataclasses.replace(rule, body=_changed(rule.body, tuple(rest), figure, spelling))
    return dataclasses.replace(rule, **{str(part): _changed(getattr(rule, str(part)), tuple(rest), figure, spelling)})


def _changed(data: Any, path: Path_, figure: Figure, spelling: str) -> Any:
    if path:
        first, rest = path[0], path[1:]
        if isinstance(data, list):
            return [_changed(v, rest, figure, spelling) if at == first else v for at, v in enumerate(data)]
        return {k: _changed(v, rest, figure, spelling) if k == first else v for k, v in data.items()}
    if figure.start < 0:
        return float(spelling)
    text = data.strip() if figure.path[-1] in _FORMULAS else data
    # A negative constant keeps its place in arithmetic by brackets.
    new = f"({spelling})" if figure.path[-1] in _FORMULAS and spelling.startswith("-") else spelling
    return text[: figure.start] + new + text[figure.start + len(figure.spelling) :]
