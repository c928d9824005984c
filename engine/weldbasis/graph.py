"""The graph of rules and quantities: the order of evaluation, and what depends on what in both directions."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import networkx as nx

from weldbasis.kinds import Compiled, compile_rule
from weldbasis.knowledge import Knowledge
from weldbasis.problem import Problem, Refused


class Node(NamedTuple):
    """A quantity or a rule in the graph."""

    sort: str
    id: str


def quantity_node(name: str) -> Node:
    """The node of a quantity."""
    return Node("quantity", name)


def rule_node(name: str) -> Node:
    """The node of a rule."""
    return Node("rule", name)


@dataclass(frozen=True)
class KnowledgeGraph:
    """Compiled rules in an order in which everything a rule reads is given before it."""

    rules: Mapping[str, Compiled]
    order: tuple[str, ...]
    graph: nx.DiGraph[Node]

    @cached_property
    def giving(self) -> Mapping[str, str]:
        """The id of the rule that gives a quantity."""
        return {quantity.id: name for name, rule in self.rules.items() for quantity in rule.gives}

    def rests_on(self, node: Node) -> tuple[Node, ...]:
        """Everything upstream, near or far, in the order of evaluation."""
        if node not in self._above:
            self._above[node] = self._sorted(nx.ancestors(self.graph, node))
        return self._above[node]

    def bears_on(self, node: Node) -> tuple[Node, ...]:
        """Everything downstream, near or far, in the order of evaluation."""
        if node not in self._below:
            self._below[node] = self._sorted(nx.descendants(self.graph, node))
        return self._below[node]

    def reads(self, node: Node) -> tuple[Node, ...]:
        """What stands directly above a node."""
        return self._sorted(set(self.graph.predecessors(node)))

    def feeds(self, node: Node) -> tuple[Node, ...]:
        """What stands directly below a node."""
        return self._sorted(set(self.graph.successors(node)))

    def rules_for(self, quantities: tuple[str, ...], known: Collection[str] = ()) -> frozenset[str]:
        """The rules that these quantities rest on, not counting what only known ones rest on."""
        found: set[str] = set()
        queue = [name for name in quantities if name not in known]
        while queue:
            for rule in self.graph.predecessors(quantity_node(queue.pop())):
                if rule.id not in found:
                    found.add(rule.id)
                    queue += [node.id for node in self.graph.predecessors(rule) if node.id not in known]
        return frozenset(found)

    def given_inputs(self, quantity: str) -> tuple[str, ...]:
        """The quantities at the roots above a quantity: what a project has to say for it."""
        above = [*self.rests_on(quantity_node(quantity)), quantity_node(quantity)]
        return tuple(node.id for node in above if node.sort == "quantity" and not self.graph.in_degree(node))

    @cached_property
    def _above(self) -> dict[Node, tuple[Node, ...]]:
        """What was found upstream of a node already; the graph never changes."""
        return {}

    @cached_property
    def _below(self) -> dict[Node, tuple[Node, ...]]:
        return {}

    @cached_property
    def _places(self) -> Mapping[Node, int]:
        return {node: place for place, node in enumerate(nx.lexicographical_topological_sort(self.graph))}

    def _sorted(self, nodes: set[Node]) -> tuple[Node, ...]:
        return tuple(sorted(nodes, key=self._places.__getitem__))


def build_graph(knowledge: Knowledge) -> KnowledgeGraph:
    """Compile every rule and order them. Raises Refused with every broken rule, or with the cycle that closes."""
    compiled: dict[str, Compiled] = {}
    problems: list[Problem] = []
    for name in sorted(knowledge.rules):
        try:
            compiled[name] = compile_rule(knowledge.rules[name], knowledge)
        except Refused as refused:
            problems += refused.problems
    if problems:
        raise Refused(problems)
    graph: nx.DiGraph[Node] = nx.DiGraph()
    graph.add_nodes_from(quantity_node(name) for name in sorted(knowledge.quantities))
    for name, rule in compiled.items():
        graph.add_node(rule_node(name))
        graph.add_edges_from((quantity_node(read), rule_node(name)) for read in rule.inputs)
        graph.add_edges_from((rule_node(name), quantity_node(given.id)) for given in rule.gives)
    _refuse_cycle(graph, knowledge)
    order = nx.lexicographical_topological_sort(graph)
    return KnowledgeGraph(compiled, tuple(node.id for node in order if node.sort == "rule"), graph)


def _refuse_cycle(graph: nx.DiGraph[Node], knowledge: Knowledge) -> None:
    if nx.is_directed_acyclic_graph(graph):
        return
    loop = [edge[0] for edge in nx.find_cycle(graph)]
    path = " → ".join(f"rule {node.id}" if node.sort == "rule" else node.id for node in [*loop, loop[0]])
    rule = knowledge.rules[min(node.id for node in loop if node.sort == "rule")]
    raise Refused(
        [
            Problem(
                rule.place,
                f"the rules close a circle: {path}",
                "nothing in a circle can be worked out before the rest of it",
                "let one of these rules read something that does not depend on it",
            )
        ]
    )
