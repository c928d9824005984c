"""The guard of figures and the audit of directions: what they find, what they must find, and that they are fresh."""

from __future__ import annotations

import dataclasses
import json
from collections.abc import Mapping
from typing import Any

import pytest

from weldbasis.cases import run_cases
from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.yaml_text import read_yaml
from weldbasis.meaning import meaning_of
from weldbasis.places import site_folder
from weldbasis.survey.directions import audit
from weldbasis.survey.figures import figures_of, nudged, nudges
from weldbasis.survey.guard import guard, summary

MEASURED = site_folder() / "measured"


def flat(data: Any, path: str = "") -> dict[str, Any]:
    if isinstance(data, Mapping):
        return {k: v for key, value in data.items() for k, v in flat(value, f"{path}.{key}").items()}
    if isinstance(data, list):
        return {k: v for at, value in enumerate(data) for k, v in flat(value, f"{path}.{at}").items()}
    return {path: data}


def test_a_nudge_changes_one_figure_and_nothing_else(knowledge: Knowledge) -> None:
    looked_at = 0
    for rule in list(knowledge.rules.values())[::4]:
        plain = flat(meaning_of(rule))
        for figure in list(figures_of(rule, knowledge))[::3]:
            for spelling in nudges(figure):
                moved = flat(meaning_of(nudged(rule, figure, spelling)))
                different = [key for key in plain if plain[key] != moved[key]]
                assert len(different) == 1, (rule.id, figure)
                assert set(moved) == set(plain)
                assert spelling in str(moved[different[0]]) or float(spelling) == moved[different[0]]
                looked_at += 1
    assert looked_at > 150


def test_bounds_move_by_their_last_place_and_others_by_a_twentieth(knowledge: Knowledge) -> None:
    found = {f.where: f for f in figures_of(knowledge.rules["preheat-cet-member"], knowledge)}
    bound = next(f for where, f in found.items() if "cet_for_preheat" in where and f.spelling == "0.2")
    assert nudges(bound) == ("0.1", "0.3")
    factor = next(f for where, f in found.items() if "formula" in where and f.spelling == "697")
    assert [float(n) for n in nudges(factor)] == pytest.approx([662.15, 731.85])
    levels = {f.path for f in figures_of(knowledge.rules["process-efficiency"], knowledge)}
    assert all("when" not in path for path in levels), "a process number is a name, no figure"


def test_a_figure_without_a_case_is_reported_and_one_with_a_case_is_not(
    knowledge: Knowledge, graph: KnowledgeGraph
) -> None:
    guarded = guard(knowledge, graph, ["process-efficiency"])
    assert guarded
    assert all(one.both for one in guarded)
    caseless = dataclasses.replace(
        knowledge, cases=tuple(case for case in knowledge.cases if case.rule != "process-efficiency")
    )
    lone = guard(caseless, graph, ["process-efficiency"])
    bare = [one.figure.where for one in lone if not one.both]
    assert "body rows 2 give" in bare
    data = summary(caseless, lone)
    assert (data["figures"], data["guarded"]) == (len(lone), len(lone) - len(bare))
    assert [one["where"] for one in data["unguarded"]] == bare
    assert data["unguarded"][-1]["unnoticed"] in (["lower", "higher"], ["lower"], ["higher"])


@pytest.mark.parametrize(("file", "command"), [("figures.json", "--figures"), ("directions.json", "--directions")])
def test_what_was_measured_is_of_these_rules(knowledge: Knowledge, file: str, command: str) -> None:
    data = json.loads((MEASURED / file).read_bytes())
    assert data["rules"] == knowledge.digest, f"run: weldbasis vet {command} --write site_src/measured/{file}"


def test_nine_figures_in_ten_are_guarded() -> None:
    data = json.loads((MEASURED / "figures.json").read_bytes())
    assert data["guarded"] >= 0.9 * data["figures"]
    assert len(data["unguarded"]) == data["figures"] - data["guarded"]


def test_enough_pairs_and_every_exception_with_its_reason() -> None:
    data = json.loads((MEASURED / "directions.json").read_bytes())
    assert data["pairs"] >= 100_000
    reasons = {one["input"] for one in read_yaml(MEASURED / "reasons.yaml").data["directions"]}
    assert {one["input"] for one in data["directions"] if one["fell"]} <= reasons


def draw() -> dict[str, Any]:
    return dict(read_yaml(MEASURED / "directions-draw.yaml").data)


def test_without_a_contract_the_preheat_hardly_ever_falls(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    """A slice of the audit: falls stand only where one method hands over to another, three in a thousand at most."""
    plain = draw()
    plain["levels"] = {
        name: ["no"] if name.startswith("contract_") else levels for name, levels in plain["levels"].items()
    }
    found = {one.name: one for one in audit(knowledge, graph, 4000, plain)}
    assert sum(one.pairs for one in found.values()) > 15_000
    assert found["more restraint"].fell == 0
    assert all(one.fell <= 0.003 * one.pairs for one in found.values()), found


def test_a_rule_that_falls_with_carbon_is_caught_with_an_example(knowledge: Knowledge) -> None:
    rule = knowledge.rules["preheat-cet-member"]
    body = {**rule.body, "formula": f"600 - ({rule.body['formula']})"}
    wrong = dataclasses.replace(knowledge, rules={**knowledge.rules, rule.id: dataclasses.replace(rule, body=body)})
    found = {one.name: one for one in audit(wrong, build_graph(wrong), 1500, draw())}
    carbon = found["more carbon"]
    assert carbon.fell > 0.1 * carbon.pairs
    assert carbon.worst is not None
    assert carbon.worst.after < carbon.worst.before
    assert "→" in carbon.worst.given["Carbon"]


def test_cases_pass_as_they_stand(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    """What the guard rests on: before any nudge every case passes."""
    assert not [result.case.id for result in run_cases(knowledge, graph) if result.faults]
