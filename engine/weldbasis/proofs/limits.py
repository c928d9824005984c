"""Is a rule wider than its source? Limits that sources state, against what the rules held to them let in."""

from __future__ import annotations

from collections.abc import Iterator

from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds.compiled import Compiled
from weldbasis.knowledge import Cite, Knowledge, Limits, Source
from weldbasis.problem import nearest
from weldbasis.proofs.cells import number_in
from weldbasis.proofs.domain import domain_of
from weldbasis.proofs.finding import VetFinding, point_text
from weldbasis.ranges import EVERYTHING, Range, common, within


def limit_findings(knowledge: Knowledge, graph: KnowledgeGraph) -> Iterator[VetFinding]:
    """Rules wider than the limits they are held to, limits that nobody is held to, names that lead nowhere."""
    used: set[tuple[str, str]] = set()
    for rule in graph.rules.values():
        for place, cite in enumerate(rule.rule.cites):
            source = knowledge.sources.get(cite.source)
            if cite.holds_to and source:
                used.add((source.id, cite.holds_to))
                yield from _held(rule, place, cite, source, knowledge)
    for source in knowledge.sources.values():
        for limits in source.limits:
            yield from _stated(source, limits, knowledge, (source.id, limits.id) in used)


def _stated(source: Source, limits: Limits, knowledge: Knowledge, used: bool) -> Iterator[VetFinding]:
    """What a source says of quantities must be in the vocabulary, and some rule should be held to it."""
    for name in limits.within:
        quantity = knowledge.quantities.get(name)
        if quantity is None or not quantity.is_number:
            what = "no quantity of the vocabulary" if quantity is None else "a level and has no range"
            known = [q.id for q in knowledge.quantities.values() if q.is_number]
            yield VetFinding(
                limits.places.get(name, limits.place),
                "stop",
                "limits",
                f"limits {limits.id} of {source.id}: {name!r} is {what}",
                nearest(name, known),
            )
    if not used:
        yield VetFinding(
            limits.place,
            "caution",
            "limits",
            f"no rule is held to the limits {limits.id} of {source.id}",
            f"write holds_to: {limits.id} in the cite of the rule that uses the method",
        )


def _held(rule: Compiled, place: int, cite: Cite, source: Source, knowledge: Knowledge) -> Iterator[VetFinding]:
    limits = next((limits for limits in source.limits if limits.id == cite.holds_to), None)
    if limits is None:
        yield VetFinding(
            rule.rule.place_of("cites", place, "holds_to"),
            "stop",
            "limits",
            f"rule {rule.rule.id} is held to {cite.holds_to!r}, and {source.id} states no such limits",
            nearest(cite.holds_to, [known.id for known in source.limits]) or f"state them under limits: in {source.id}",
        )
        return
    boxes = domain_of(rule)
    for name, allowed in limits.within.items():
        quantity = knowledge.quantities.get(name)
        if quantity is None or not quantity.is_number or (rule.rule.for_each == "joint" and quantity.of == "member"):
            continue
        spans = [box.range_of(quantity) for box in boxes if name not in box.absent]
        wider = next((span for span in spans if not within(span, allowed)), None)
        if wider is not None and name not in cite.beyond:
            yield _wider(rule, name, wider, allowed, limits, source)
        elif wider is None and name in cite.beyond:
            yield _needless(rule, place, name, f"which it holds to {allowed} anyway")
    for name in cite.beyond:
        if name not in limits.within:
            yield _needless(rule, place, name, f"which {source.id} does not limit")


def _wider(rule: Compiled, name: str, span: Range, allowed: Range, limits: Limits, source: Source) -> VetFinding:
    path = ("valid_within", name) if name in rule.rule.valid_within else ("valid_within",)
    return VetFinding(
        rule.rule.place_of(*path) if rule.rule.valid_within else rule.rule.place_of("cites"),
        "stop",
        "limits",
        f"rule {rule.rule.id} lets in {name} {span}, and {source.id} ({limits.at}) holds for {allowed} only",
        f"narrow valid_within, or say in the cite why: beyond: {{{name}: …}}",
        point_text({name: _outside(span, allowed)}),
    )


def _outside(span: Range, allowed: Range) -> float:
    """A number of `span` that `allowed` leaves out."""
    below = Range(EVERYTHING.low, allowed.low, True, not allowed.low_open)
    above = Range(allowed.high, EVERYTHING.high, not allowed.high_open, True)
    return next(number_in(left) for left in (common(span, above), common(span, below)) if left is not None)


def _needless(rule: Compiled, place: int, name: str, why: str) -> VetFinding:
    return VetFinding(
        rule.rule.place_of("cites", place, "beyond", name),
        "caution",
        "limits",
        f"rule {rule.rule.id} may go beyond its source in {name}, {why}",
        f"take {name} out of beyond",
    )
