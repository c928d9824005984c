"""What a change of the rules moves: against deciding twice by hand, change by change."""

from __future__ import annotations

import dataclasses
import json
import random
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from weldbasis.authority.changes import differences_between
from weldbasis.authority.impact import impact, moves_between
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import build_graph
from weldbasis.knowledge import Change, Knowledge, Rule
from weldbasis.narrow import narrowed
from weldbasis.places import kb_folder, site_folder
from weldbasis.project import read_project
from weldbasis.reasons import trace_joint
from weldbasis.record import joint_record
from weldbasis.settling.settle import settle


def with_rules(knowledge: Knowledge, *rules: Rule, without: tuple[str, ...] = ()) -> Knowledge:
    kept = {name: rule for name, rule in knowledge.rules.items() if name not in without}
    return dataclasses.replace(knowledge, rules={**kept, **{rule.id: rule for rule in rules}})


def moved(rule: Rule, old: str, new: str) -> Rule:
    assert old in rule.body["formula"]
    body = {**rule.body, "formula": rule.body["formula"].replace(old, new)}
    entry = Change(rule.version + 1, "2027-01-15", "New figure.", "Trials.", "welding authority")
    return dataclasses.replace(rule, body=body, version=rule.version + 1, changes=(*rule.changes, entry))


@pytest.fixture(scope="module")
def changed(knowledge: Knowledge) -> Knowledge:
    cet = moved(knowledge.rules["preheat-cet-member"], "697", "720")
    step = moved(knowledge.rules["heat-input"], "k", "0.9*k")
    return with_rules(knowledge, cet, step, without=("interpass-window-narrow",))


def records(evaluation: Evaluation) -> list[dict[str, object]]:
    rows = range(len(evaluation.facts.joints))
    narrowings = settle(evaluation, rows)
    return [joint_record(evaluation, row, trace_joint(evaluation, row, narrowings)) for row in rows]


def test_joints_that_move_are_those_whose_records_differ(
    knowledge: Knowledge, changed: Knowledge, examples: tuple[Path, ...]
) -> None:
    for found, folder in zip(impact(knowledge, changed, examples), examples, strict=True):
        facts = read_project(folder, knowledge).facts
        old, new = narrowed(evaluate(knowledge, facts)), narrowed(evaluate(changed, facts))
        differs = set()
        for one, other in zip(records(old), records(new), strict=True):
            levels = [
                sorted((f["rule"], f["level"]) for f in record["findings"] if f["rule"] in old.findings)  # type: ignore[attr-defined]
                for record in (one, other)
            ]
            if one["decisions"] != other["decisions"] or levels[0] != levels[1]:
                differs.add(one["joint"])
        assert set(found.joints) == differs
        assert found.together == ()


def test_each_move_is_put_down_to_the_change_that_brings_it(
    knowledge: Knowledge, changed: Knowledge, examples: tuple[Path, ...]
) -> None:
    for found, folder in zip(impact(knowledge, changed, examples), examples, strict=True):
        facts = read_project(folder, knowledge).facts
        old = narrowed(evaluate(knowledge, facts))
        assert {cause.name for cause in found.causes} == {
            "rule preheat-cet-member", "rule heat-input", "rule interpass-window-narrow"
        }  # fmt: skip
        for cause in found.causes:
            name = cause.differences[0].id
            alone = (
                with_rules(knowledge, without=(name,))
                if name == "interpass-window-narrow"
                else with_rules(knowledge, changed.rules[name])
            )
            assert cause.moves == moves_between(old, narrowed(evaluate(alone, facts)))
            if name == "interpass-window-narrow":
                assert {move.way for move in cause.moves} <= {"looser"}


def test_nothing_moves_between_equal_sets(knowledge: Knowledge, examples: tuple[Path, ...]) -> None:
    assert differences_between(knowledge, knowledge) == ()
    for found in impact(knowledge, with_rules(knowledge), examples):
        assert (found.moves, found.causes, found.together) == ((), (), ())


def test_rules_that_change_places_are_switched_together(knowledge: Knowledge, examples: tuple[Path, ...]) -> None:
    """A rule is withdrawn and another gives the same quantity: neither stands alone."""
    old = knowledge.rules["heat-input"]
    new = dataclasses.replace(moved(old, "k", "0.9*k"), id="heat-input-new", version=1)
    found = impact(knowledge, with_rules(knowledge, new, without=("heat-input",)), examples[:1])[0]
    assert [cause.name for cause in found.causes] == ["rule heat-input, rule heat-input-new"]
    assert found.causes[0].moves == found.moves


def test_joints_alike_are_decided_once_and_all_told(knowledge: Knowledge, changed: Knowledge, tmp_path: Path) -> None:
    """A project with every joint three times moves three times as much, and names every joint."""
    source = site_folder() / "projects" / "tideway-gates"
    shutil.copytree(source, tmp_path / "gates")
    head, *lines = (source / "welds.csv").read_text(encoding="utf-8").splitlines()
    again = [line.replace(",", f"x{number},", 1) for number in range(3) for line in lines]
    (tmp_path / "gates/welds.csv").write_text("\n".join([head, *again]) + "\n", encoding="utf-8")
    once = impact(knowledge, changed, [source])[0]
    thrice = impact(knowledge, changed, [tmp_path / "gates"])[0]
    assert len(thrice.old.facts.joints) == len(set(thrice.stands_for.values())) <= len(lines)
    assert [m.joint for m in thrice.moves] == [f"{m.joint}x{n}" for n in range(3) for m in once.moves]
    assert [m.after for m in thrice.moves] == [m.after for m in once.moves] * 3
    assert [len(c.moves) for c in thrice.causes] == [3 * len(c.moves) for c in once.causes]


def test_keeping_what_no_change_touches_gives_the_same(knowledge: Knowledge, examples: tuple[Path, ...]) -> None:
    """One formula after another is changed: columns taken over from before are those of a whole evaluation."""
    facts = read_project(examples[1], knowledge).facts
    old = evaluate(knowledge, facts)
    draw = random.Random(3)
    formulas = [rule for rule in knowledge.rules.values() if rule.kind == "formula"]
    for rule in draw.sample(formulas, 4):
        body = {**rule.body, "formula": f"1.07*({rule.body['formula']})"}
        rules = with_rules(knowledge, dataclasses.replace(rule, body=body))
        graph = build_graph(rules)
        whole, quick = evaluate(rules, facts, graph), evaluate(rules, facts, graph, kept=old)
        assert records(whole) == records(quick), rule.id


def test_the_command_says_it_in_words_and_in_json(tmp_path: Path, examples: tuple[Path, ...]) -> None:
    shutil.copytree(kb_folder(), tmp_path / "new")
    file = tmp_path / "new/rules/preheat/preheat-cet-member.yaml"
    file.write_text(file.read_text(encoding="utf-8").replace("697*CET", "720*CET"), encoding="utf-8")
    words = [sys.executable, "-m", "weldbasis.cli.main", "impact", "working", "new", str(examples[0])]
    done = subprocess.run(words, cwd=tmp_path, capture_output=True, text=True, check=False, encoding="utf-8")
    assert done.returncode == 0, done.stderr
    assert "rule preheat-cet-member: " in done.stdout
    assert "50 °C → 60 °C" in done.stdout
    done = subprocess.run([*words, "--json"], cwd=tmp_path, capture_output=True, text=True, check=False)
    data = json.loads(done.stdout)
    assert data["format"] == "weldbasis-impact/1"
    assert data["projects"][0]["causes"][0]["changes"][0]["id"] == "preheat-cet-member"
    done = subprocess.run([*words[:4], "2031.1", *words[5:]], cwd=tmp_path, capture_output=True, text=True, check=False)
    assert done.returncode == 2
    assert "there is no release '2031.1'" in done.stderr
