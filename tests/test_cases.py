"""The published, tabled and worked cases of the knowledge base, one test each, and the health of their papers."""

from __future__ import annotations

import dataclasses
from collections import Counter

import pytest

from weldbasis.cases import CaseResult, run_cases
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Case, Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder

CASES = load_knowledge(kb_folder()).cases


@pytest.fixture(scope="module")
def results(knowledge: Knowledge, graph: KnowledgeGraph) -> dict[str, CaseResult]:
    return {result.case.id: result for result in run_cases(knowledge, graph)}


@pytest.mark.parametrize("case", CASES, ids=[case.id for case in CASES])
def test_rule_reproduces_its_case(case: Case, results: dict[str, CaseResult]) -> None:
    assert not results[case.id].faults


def test_every_rule_has_a_case(knowledge: Knowledge) -> None:
    cased = {case.rule for case in knowledge.cases}
    assert sorted(set(knowledge.rules) - cased) == []


def test_hand_worked_cases_of_formulas_show_their_arithmetic(knowledge: Knowledge) -> None:
    bare = [
        case.id
        for case in knowledge.cases
        if case.nature == "hand-worked"
        and knowledge.rules[case.rule].kind == "formula"
        and not case.arithmetic
        and "absent" not in case.expect.values()
    ]
    assert bare == []


def test_outside_cases_are_many(knowledge: Knowledge) -> None:
    natures = Counter(case.nature for case in knowledge.cases)
    assert natures["published"] + natures["table"] >= 100


def test_a_wrong_figure_is_noticed(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    """The runner itself can fail: a case with a changed expectation does."""
    case = next(case for case in knowledge.cases if case.rule == "preheat-cet-member")
    wrong = dataclasses.replace(case, expect={"preheat_cet_member": 500})
    broken = dataclasses.replace(knowledge, cases=(wrong,))
    assert "expected 500" in run_cases(broken, graph)[0].faults[0]
