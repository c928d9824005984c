"""Concessions of a project: what stands in the place of the rules, what the trace says, when they stop the work."""

from __future__ import annotations

import datetime
from pathlib import Path

import pytest

from weldbasis.evaluate import evaluate
from weldbasis.knowledge import Knowledge
from weldbasis.problem import Refused
from weldbasis.project import Project, read_project
from weldbasis.project.concessions import expired
from weldbasis.reasons import trace_joint
from weldbasis.record import canonical_bytes, record_of
from weldbasis.trace import JointTrace, Ref

BASE = """project: test
title: Test
rules: working
contract: []
defaults: {ambient: 15 °C}
steels:
  q: {grade: S690QL, certificate: no, composition: {C: 0.16, Si: 0.3, Mn: 1.3, P: 0.01, S: 0.002, Cr: 0.3, Mo: 0.25,
      Ni: 0.1, Cu: 0.05, V: 0.03, Nb: 0.02, Ti: 0.01, B: 0.002, Al: 0.06, N: 0.004}, origin: {certificate: Z1}}
joints:
  - {joint: J1, form: butt, process: "136", hydrogen: 5 mL/100g, heat_input: 1.5 kJ/mm, restraint: medium,
     members: [{steel: q, thickness: 40 mm}, {steel: q, thickness: 40 mm}]}
  - {joint: J2, form: butt, process: "136", hydrogen: 5 mL/100g, heat_input: 1.5 kJ/mm, restraint: medium,
     members: [{steel: q, thickness: 40 mm}, {steel: q, thickness: 40 mm}]}
""".replace("certificate: no, ", "")
LEAVE = """concessions:
  - {joints: [J1], quantity: min_preheat, value: 100 °C, why: Trial T 12 stayed whole., approved_by: welding authority,
     until: "2027-06-30"}
"""


def project_of(folder: Path, knowledge: Knowledge, text: str) -> Project:
    (folder / "project.yaml").write_text(text, encoding="utf-8")
    return read_project(folder, knowledge)


def traces(project: Project, knowledge: Knowledge) -> list[JointTrace]:
    evaluation = evaluate(knowledge, project.facts)
    return [trace_joint(evaluation, row) for row in range(len(project.joints))]


def test_a_conceded_value_counts_in_its_joint_only_and_says_so(tmp_path: Path, knowledge: Knowledge) -> None:
    plain = traces(project_of(tmp_path, knowledge, BASE), knowledge)
    before = plain[0].steps[Ref("min_preheat")].value
    assert before.low is not None
    assert before.low > 100
    found = traces(project_of(tmp_path, knowledge, BASE + LEAVE), knowledge)
    step = found[0].steps[Ref("min_preheat")]
    assert (step.state, step.value.low, step.value.high) == ("given", 100, 100)
    assert step.origin is not None
    assert (step.origin.kind, step.origin.text) == (
        "concession", "concession by welding authority until 2027-06-30: Trial T 12 stayed whole."
    )  # fmt: skip
    assert found[1].decisions == plain[1].decisions
    said = [f.text for f in found[0].findings if "concession" in f.text]
    assert said == [
        f"Minimum preheat and interpass temperature 100 °C instead of {before.low:g} °C, which asks for less: "
        "concession by welding authority until 2027-06-30: Trial T 12 stayed whole."
    ]
    assert not [f for f in found[1].findings if "concession" in f.text]


def test_a_finding_is_set_aside_and_stays_to_be_read(tmp_path: Path, knowledge: Knowledge) -> None:
    base = BASE.replace("restraint: medium", "restraint: medium, hydrogen_measured: 5 mL/100g")
    plain = traces(project_of(tmp_path, knowledge, base), knowledge)
    limits = [f for f in plain[0].findings if knowledge.rules.get(f.rule) and knowledge.rules[f.rule].kind == "limit"]
    assert limits
    rule, text, level = limits[0].rule, limits[0].text, limits[0].level
    leave = LEAVE.replace("quantity: min_preheat, value: 100 °C", f"finding: {rule}")
    found = traces(project_of(tmp_path, knowledge, base + leave), knowledge)
    aside = next(f for f in found[0].findings if f.rule == rule)
    assert aside.level == "note"
    assert aside.text.startswith("Set aside (concession by welding authority until 2027-06-30")
    assert aside.text.endswith(text)
    assert next(f for f in found[1].findings if f.rule == rule).level == level


def test_a_concession_is_an_input_of_the_record(tmp_path: Path, knowledge: Knowledge) -> None:
    def record(text: str) -> bytes:
        project = project_of(tmp_path, knowledge, text)
        return canonical_bytes(record_of(project, evaluate(knowledge, project.facts)))

    finding = LEAVE.replace("quantity: min_preheat, value: 100 °C", "finding: interpass-window-narrow")
    assert len({record(BASE), record(BASE + LEAVE), record(BASE + finding)}) == 3
    assert record(BASE + LEAVE) == record(BASE + LEAVE)


def test_an_expired_concession_stops_the_work_and_not_the_auditor(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge, BASE + LEAVE)
    assert expired(project.concessions, datetime.date(2027, 6, 30)) == []
    problem = expired(project.concessions, datetime.date(2027, 7, 1))[0]
    assert problem.what == "the concession on min_preheat expired on 2027-06-30"
    assert problem.place.line == 15
    assert "take it out and let the rules decide" in problem.do


@pytest.mark.parametrize(
    ("old", "new", "what", "do"),
    [
        ("joints: [J1]", "joints: [J9]", "a concession names joint 'J9', which is not there", "Known: J1, J2."),
        ("quantity: min_preheat", "quantity: min_preheet",
         "'min_preheet' is nothing that a rule gives for a joint", "Did you mean 'min_preheat'?"),
        ("quantity: min_preheat", "quantity: carbon", "'carbon' is nothing that a rule gives for a joint", ""),
        ("value: 100 °C", "value: 100 mm", "concession on min_preheat: ", ""),
        ("value: 100 °C", "value: 5000 °C", "lies outside what min_preheat can be", ""),
        ("2027-06-30", "2027-06-31", "'2027-06-31' is no day of the calendar", "write year-month-day"),
        ("quantity: min_preheat, value: 100 °C", "finding: preheat-cet",
         "'preheat-cet' is no rule that raises a finding", ""),
        ("quantity: min_preheat, value: 100 °C", "quantity: min_preheat", "the concession on min_preheat has no value",
         "add value: …"),
        (', approved_by: welding authority,\n     until: "2027-06-30"', ', until: "2027-06-30"',
         "'approved_by' is missing here", "add 'approved_by: …'"),
    ],
)  # fmt: skip
def test_what_does_not_fit_is_told(
    tmp_path: Path, knowledge: Knowledge, old: str, new: str, what: str, do: str
) -> None:
    assert old in LEAVE
    with pytest.raises(Refused) as caught:
        project_of(tmp_path, knowledge, BASE + LEAVE.replace(old, new))
    assert what in str(caught.value)
    assert do in str(caught.value)


def test_one_quantity_is_conceded_once(tmp_path: Path, knowledge: Knowledge) -> None:
    again = LEAVE.removeprefix("concessions:\n").replace("100 °C", "110 °C")
    with pytest.raises(Refused) as caught:
        project_of(tmp_path, knowledge, BASE + LEAVE + again)
    assert "min_preheat of joint J1 is conceded twice" in str(caught.value)
