"""Parts that bear on nothing: rules that lead to no decision, quantities that nobody gives or reads."""

from __future__ import annotations

from collections.abc import Iterator

from weldbasis.graph import KnowledgeGraph, Node, quantity_node, rule_node
from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.proofs.finding import VetFinding


def unused_parts(knowledge: Knowledge, graph: KnowledgeGraph) -> Iterator[VetFinding]:
    """Rules that lead nowhere, quantities that nothing gives and no project may give, or that nothing reads."""
    ends = _shown(knowledge, graph)
    for rule in graph.rules.values():
        node = rule_node(rule.rule.id)
        if node not in ends and not ends.intersection(graph.bears_on(node)):
            gives = " and ".join(rule.rule.gives)
            yield VetFinding(
                rule.rule.place,
                "caution",
                "unused",
                f"rule {rule.rule.id} gives {gives}, on which no decision, finding or comparison rests",
                "read it in a rule, show it under compare, or take it out",
            )
    for quantity in knowledge.quantities.values():
        node = quantity_node(quantity.id)
        if quantity.given == "never" and quantity.id not in graph.giving:
            yield _orphaned(quantity, knowledge, graph) or VetFinding(
                quantity.place,
                "caution",
                "unused",
                f"no rule gives {quantity.id} and no project may",
                "let a rule give it, write given: may, or take it out",
            )
        elif node not in ends and quantity.id not in graph.giving and not graph.feeds(node):
            yield VetFinding(
                quantity.place,
                "caution",
                "unused",
                f"nothing reads {quantity.id}",
                "read it in a rule, show it under compare, or take it out",
            )


def _orphaned(quantity: Quantity, knowledge: Knowledge, graph: KnowledgeGraph) -> VetFinding | None:
    """A quantity whose rule a layer withdrew or replaced, while others still read it."""
    readers = [node.id for node in graph.feeds(quantity_node(quantity.id))]
    for amendment in knowledge.amendments:
        before = knowledge.beneath.get((amendment.of, amendment.id))
        if isinstance(before, Rule) and quantity.id in before.gives and readers:
            return VetFinding(
                amendment.place,
                "caution",
                "unused",
                f"without the rule {amendment.id} of the layer beneath nothing gives {quantity.id}, "
                f"which {readers[0]}{f' and {len(readers) - 1} more' if len(readers) > 1 else ''} read"
                f"{'' if len(readers) > 1 else 's'}",
                "let another rule give it, or withdraw what reads it too",
            )
    return None


def _shown(knowledge: Knowledge, graph: KnowledgeGraph) -> frozenset[Node]:
    """What people are shown: decisions and their parts, comparisons, findings."""
    found = {quantity_node(q.id) for q in knowledge.quantities.values() if q.decision or q.part_of}
    for name, rule in graph.rules.items():
        if rule.rule.kind == "limit":
            found.add(rule_node(name))
        found |= {quantity_node(other) for other in rule.rule.body.get("compare", ())}
    return frozenset(found)
