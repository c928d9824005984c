"""Pages of the welding authority: what a house layer changes, and what a release moves in a project."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from weldbasis.authority.house import Amended, amended_records
from weldbasis.authority.impact import Cause, Move, ProjectImpact
from weldbasis.authority.strictness import Example
from weldbasis.knowledge import Knowledge, Rule
from weldbasis.reasons import governing_rules
from weldbasis.site.render import page
from weldbasis.steps import Steps
from weldbasis.trace import Ref

_MOST_TRACES = 24
_WAYS = {"stricter": "stricter", "looser": "looser", "otherwise": "other"}


def house_body(knowledge: Knowledge) -> str:
    """What the layers above the lowest change, each with its reason and the worst example in each direction."""
    found = amended_records(knowledge)
    return page(
        "house.html",
        knowledge=knowledge,
        amended=[_amended(one) for one in found],
        less=[_amended(one) for one in found if one.asks_for_less],
    )


def _amended(one: Amended) -> dict[str, Any]:
    record = one.after or one.before
    return {
        "amendment": one.amendment,
        "title": record.title if hasattr(record, "title") else one.amendment.id,
        "link": f"{one.after.id}.html" if isinstance(one.after, Rule) else "",
        "verdict": one.strictness.verdict,
        "why": one.strictness.why,
        "stricter": _example(one.strictness.stricter),
        "looser": _example(one.strictness.looser),
        "points": one.strictness.points,
        "whole": one.strictness.whole,
    }


def _example(example: Example | None) -> str:
    if example is None:
        return ""
    given = ", ".join(f"{name} {value}" for name, value in example.given.items())
    return f"{example.before} → {example.after}" + (f" at {given}" if given else "")


def impact_body(title: str, impacts: Sequence[tuple[str, str, ProjectImpact]], files: Mapping[str, str]) -> str:
    """What going from one set of rules to the next moves in a project."""
    return page("impact.html", title=title, impacts=[_impact(*one) for one in impacts], files=files, ways=_WAYS)


def _impact(before: str, after: str, found: ProjectImpact) -> dict[str, Any]:
    left = _MOST_TRACES
    causes = []
    for cause in sorted(found.causes, key=lambda cause: -len(cause.moves)):
        rows = []
        for move in cause.moves:
            traces = _side_by_side(found, move) if move.decision and left > 0 else None
            left -= traces is not None
            rows.append({"move": move, "what": _what(found, move), "traces": traces})
        causes.append({"name": cause.name, "reasons": _reasons(cause), "rows": rows})
    return {
        "before": before,
        "after": after,
        "joints": found.joints,
        "count": len(found.project.facts.joints),
        "causes": causes,
        "together": found.together,
        "totals": {way: sum(move.way == way for move in found.moves) for way in _WAYS},
    }


def _reasons(cause: Cause) -> list[str]:
    found = []
    for difference in cause.differences:
        found += [f"{d.what.rstrip('.')}. {d.why} ({d.approved_by})" for d in difference.why]
        if not difference.why and difference.amendment:
            found.append(f"{difference.amendment.why} ({difference.amendment.approved_by})")
        found += list(difference.parts[:4])
    return found


def _what(found: ProjectImpact, move: Move) -> str:
    if move.decision:
        return found.new.knowledge.quantities[move.decision].title
    rules = found.new.knowledge.rules if move.finding in found.new.knowledge.rules else found.old.knowledge.rules
    return rules[move.finding].title


def _side_by_side(found: ProjectImpact, move: Move) -> list[list[str]]:
    """The reasons of a decision under both sets of rules: its own sentence, then those of the rules that govern it."""
    row = found.old.facts.joints.index(found.stands_for[move.joint])
    sides = []
    for evaluation in (found.old, found.new):
        steps = Steps(evaluation, row)
        ref = Ref(move.decision)
        governing = set(governing_rules(steps, ref))
        told = [step.sentence for step in steps.values() if step.rule in governing and step.state == "gave"]
        own = steps[ref].sentence
        sides.append(list(dict.fromkeys([own, *told])))
    return sides
