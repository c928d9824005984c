"""Who governs, for all joints at once, against what is read joint by joint."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from weldbasis.authority.governors import governors
from weldbasis.evaluate import evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge
from weldbasis.project import read_project
from weldbasis.reasons import governing_rules
from weldbasis.steps import Steps
from weldbasis.trace import Ref


def test_the_rules_that_govern_are_those_of_the_traces(
    knowledge: Knowledge, graph: KnowledgeGraph, examples: tuple[Path, ...]
) -> None:
    for folder in examples:
        evaluation = evaluate(knowledge, read_project(folder, knowledge).facts, graph)
        steps = [Steps(evaluation, row) for row in range(len(evaluation.facts.joints))]
        for decision in knowledge.decisions:
            found = governors(evaluation, decision.id)
            for row, one in enumerate(steps):
                wanted = set(governing_rules(one, Ref(decision.id)))
                got = {rule for rule, mask in found.items() if mask[row]}
                assert got == wanted, (folder.name, decision.id, evaluation.facts.joints[row])
            assert all(np.any(mask) for mask in found.values())
