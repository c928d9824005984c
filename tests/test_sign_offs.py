"""Sign-offs and the history of records: what stands, what lapses and why, what is false."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

from weldbasis.authority.history import given_in, history_of, keep_record, kept_records
from weldbasis.authority.sign_offs import (
    SIGN_OFFS,
    SignOff,
    Standing,
    add_sign_off,
    read_sign_offs,
    signed_part,
    standing_of,
)
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge
from weldbasis.problem import Place, Refused
from weldbasis.project import read_project
from weldbasis.record import digest_of, record_of

BASE = """project: test
title: Test
rules: working
contract: []
defaults: {ambient: 15 °C, process: "136", hydrogen: 5 mL/100g, restraint: medium}
steels:
  plate: {grade: S355J2, composition: {C: 0.17, Si: 0.35, Mn: 1.45, Cr: 0.03, Mo: 0.01, Ni: 0.02, Cu: 0.02, V: 0.002,
          Nb: 0.002, Ti: 0.002, B: 0.0002, P: 0.01, S: 0.005, Al: 0.03, N: 0.005}, origin: {certificate: Z1}}
joints:
  - {joint: J1, form: butt, heat_input: 1.5, members: [{steel: plate, thickness: 30}, {steel: plate, thickness: 30}]}
  - {joint: J2, form: butt, heat_input: 1.5, members: [{steel: plate, thickness: 12}, {steel: plate, thickness: 12}]}
"""


class Work:
    """A project that is decided, signed and changed."""

    def __init__(self, folder: Path, knowledge: Knowledge, graph: KnowledgeGraph) -> None:
        self.folder, self.knowledge, self.graph = folder, knowledge, graph

    def decide(self, text: str) -> dict[str, Any]:
        (self.folder / "project.yaml").write_text(text, encoding="utf-8")
        project = read_project(self.folder, self.knowledge)
        self.evaluation: Evaluation = evaluate(self.knowledge, project.facts, self.graph)
        return record_of(project, self.evaluation)

    def sign(
        self, record: dict[str, Any], joint: str, decision: str = "", key: Ed25519PrivateKey | None = None
    ) -> None:
        part = signed_part(next(j for j in record["joints"] if j["joint"] == joint), decision, self.graph)
        entry = SignOff(joint, decision, digest_of(part), "coordinator", "A. R.", "2026-12-02", "", None, Place(""))
        add_sign_off(self.folder, entry, part, key)

    def stand(self, record: dict[str, Any]) -> tuple[Standing, ...]:
        found = read_sign_offs(self.folder, ["J1", "J2"], SIGN_OFFS)
        return standing_of(found, record, self.evaluation, self.folder)


@pytest.fixture
def work(tmp_path: Path, knowledge: Knowledge, graph: KnowledgeGraph) -> Work:
    return Work(tmp_path, knowledge, graph)


def test_a_sign_off_stands_until_something_that_bears_on_it_changes(work: Work) -> None:
    record = work.decide(BASE)
    work.sign(record, "J1")
    work.sign(record, "J2", key=Ed25519PrivateKey.generate())
    work.sign(record, "J1", "min_preheat")
    work.sign(record, "J1", "z_quality")
    assert [one.state for one in work.stand(record)] == ["signed"] * 4
    after = work.decide(BASE.replace("thickness: 30}, {", "thickness: 40}, {"))
    one, two, preheat, through = work.stand(after)
    assert (one.state, two.state, preheat.state) == ("lapsed", "signed", "lapsed")
    assert "1: plate, member_thickness: 30 mm → 40 mm" in one.changes
    assert any(line.startswith("min_preheat: 100 degC → ") for line in preheat.changes)
    assert through.state in ("signed", "lapsed")
    carbon = work.decide(BASE.replace("C: 0.17", "C: 0.171"))
    assert [s.state for s in work.stand(carbon)][:2] == ["lapsed", "lapsed"]
    assert "1: plate, carbon: 0.17 % → 0.171 %" in work.stand(carbon)[0].changes


def test_what_does_not_bear_on_a_decision_lets_its_sign_off_stand(work: Work) -> None:
    record = work.decide(BASE)
    work.sign(record, "J1", "min_preheat")
    assert work.stand(work.decide(BASE.replace("thickness: 12}", "thickness: 14}")))[0].state == "signed"
    assert work.stand(work.decide(BASE.replace("P: 0.01,", "P: 0.02,")))[0].state == "signed"
    assert work.stand(work.decide(BASE.replace("title: Test", "title: Other")))[0].state == "signed"


def test_a_forged_entry_is_false_and_a_lost_snapshot_is_said(work: Work) -> None:
    record = work.decide(BASE)
    work.sign(record, "J1", key=Ed25519PrivateKey.generate())
    file = work.folder / SIGN_OFFS
    text = file.read_text(encoding="utf-8")
    file.write_text(text.replace("A. R.", "B. R."), encoding="utf-8")
    assert [(one.state, one.fault) for one in work.stand(record)] == [
        ("false", "the sign-off carries a signature of something else")
    ]
    file.write_text(text, encoding="utf-8")
    snapshot = next((work.folder / "signed").iterdir())
    kept = snapshot.read_bytes()
    after = work.decide(BASE.replace("C: 0.17", "C: 0.18"))
    snapshot.write_bytes(kept.replace(b"0.17", b"0.16"))
    assert work.stand(after)[0].changes == (f"{snapshot.name} was edited: it is not what was signed",)
    snapshot.unlink()
    assert "is not kept beside the project" in work.stand(after)[0].changes[0]


def test_a_sign_off_for_a_joint_that_is_gone_is_refused(work: Work) -> None:
    work.sign(work.decide(BASE), "J1")
    with pytest.raises(Refused) as caught:
        read_sign_offs(work.folder, ["J2", "J11"], SIGN_OFFS)
    assert "a sign-off names joint 'J1', which is not in the project" in str(caught.value)
    assert caught.value.problems[0].place.line == 3


def test_history_says_when_a_joint_moved_and_because_of_what(work: Work) -> None:
    first = work.decide(BASE)
    keep_record(work.folder, first, "2026-12-01")
    assert keep_record(work.folder, first, "2026-12-02").name == "2026-12-01.json"
    keep_record(work.folder, work.decide(BASE.replace("C: 0.17", "C: 0.20")), "2026-12-03")
    last = {**work.decide(BASE.replace("C: 0.17", "C: 0.20").replace("thickness: 12}", "thickness: 45}"))}
    last["rules"] = {"release": "2027.1", "digest": "sha256:" + "1" * 64}
    keep_record(work.folder, last, "2026-12-03")
    records = kept_records(work.folder)
    assert [kept.name for kept in records] == ["2026-12-01", "2026-12-03", "2026-12-03-2"]
    facts = work.evaluation.facts
    one = history_of("J1", records, given_in(facts, work.knowledge, "J1"))
    assert [moved.day for moved in one] == ["2026-12-03", "2026-12-01"]
    assert any(line.startswith("min_preheat: 100 degC → ") for line in one[0].decisions)
    assert one[0].inputs == ("1: plate, carbon: 0.17 % → 0.2 %", "2: plate, carbon: 0.17 % → 0.2 %")
    assert one[0].rules == ""
    two = history_of("J2", records, given_in(facts, work.knowledge, "J2"))
    assert two[0].day == "2026-12-03-2"
    assert "rules 2027.1, sha256:11111111…" in two[0].rules
    assert "1: plate, member_thickness: 12 mm → 45 mm" in two[0].inputs
    assert two[-1].decisions == ("first decided",)


def test_records_kept_are_whole(work: Work) -> None:
    record = work.decide(BASE)
    path = keep_record(work.folder, record, "2026-12-01")
    assert json.loads(path.read_bytes()) == json.loads(json.dumps(record))
