"""Mistakes in knowledge and projects, planted one at a time into a copy: caught with file, line and what to do."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.problem import Refused
from weldbasis.vet import vet

# file, text to replace, replacement, line of the finding (0: any), words of the finding
PLANTED = [
    ("rules/preheat/preheat-cet-member.yaml", "kind: formula", "kind: formulae", 4, "'formulae' is no kind of rule"),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "for_each: member",
        "for_every: member",
        5,
        "'for_every' is not known here",
    ),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "d: thickness",
        "d: thicknes",
        0,
        "'thicknes' is no quantity of the vocabulary",
    ),
    ("rules/preheat/preheat-cet-member.yaml", "160*tanh(d/35)", "160*tahn(d/35)", 0, "there is no function 'tahn'"),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "160*tanh(d/35)",
        "160*tanh(dd/35)",
        0,
        "the formula names 'dd', which reads does not bind",
    ),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "hydrogen: up",
        "hydrogen: down",
        0,
        "says that the result goes down with hydrogen",
    ),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "source: en-1011-2",
        "source: en-1011-3",
        0,
        "cites 'en-1011-3', which is no source",
    ),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "checked: from-memory",
        "checked: believed",
        0,
        "'believed' is not one of the words known here",
    ),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "version: 1\ntitle",
        "version: 2\ntitle",
        0,
        "is version 2, its last changes entry is of 1",
    ),
    ("rules/preheat/preheat-cet-member.yaml", "697*CET", "700*CET", 0, "expected 77"),
    ("rules/preheat/preheat-cet-member.yaml", '"[10, 90]"', '"[90, 10]"', 0, "holds no number"),
    (
        "rules/preheat/preheat-cet-member.yaml",
        'say: "CET {CET}',
        'say: "CET {CEQ}',
        0,
        "names {CEQ}, which the rule does not read",
    ),
    (
        "rules/preheat/preheat-cet-member.yaml",
        "id: preheat-cet-member",
        "id: preheat-cet-members",
        0,
        "the file is called preheat-cet-member.yaml",
    ),
    (
        "rules/restraint/restraint-factor.yaml",
        "restraint: medium",
        "restraint: middling",
        0,
        "'middling' is no level of restraint",
    ),
    ("rules/restraint/restraint-factor.yaml", "restraint: medium}", "restraint: low}", 0, "rows 1 and 2 both match"),
    (
        "rules/restraint/restraint-factor.yaml",
        "read_as: the-one-row",
        "read_as: first-row",
        0,
        "'first-row' is not one of the words known here",
    ),
    ("rules/hydrogen/hydrogen-scale.yaml", '"(10, 15]"', '"(11, 15]"', 0, "no row covers hydrogen is (10, 11)"),
    ("rules/hydrogen/hydrogen.yaml", "take: first", "take: frist", 0, "'frist' is not one of the words known here"),
    (
        "rules/thickness/combined-thickness.yaml",
        "of: heat_path_thickness",
        "of: thickness",
        0,
        "it must go from members to the joint",
    ),
    (
        "rules/interpass/interpass-below-preheat.yaml",
        "level: stop",
        "level: halt",
        0,
        "'halt' is not one of the words known here",
    ),
    (
        "rules/hydrogen-release/hydrogen-release-hours-mean.yaml",
        "model: plate-diffusion-time",
        "model: plate-difusion-time",
        0,
        "there is no model 'plate-difusion-time'",
    ),
    (
        "rules/hydrogen-release/hydrogen-release-hours-mean.yaml",
        "d0_low_cm2_s: 0.12, ",
        "",
        0,
        "needs d0_low_cm2_s among its constants",
    ),
    ("quantities/joint.yaml", "id: restraint_length", "id: restraint_intensity", 0, "stands here a second time"),
    (
        "quantities/joint.yaml",
        "worse: last}\n    given: may\n    if_not_given: unknown",
        "worse: lowest}\n    given: may\n    if_not_given: unknown",
        0,
        "'lowest' is not one of the words known here",
    ),
    ("quantities/heat.yaml", "", "quantities: []\n", 1, "this is empty, or holds too little"),
    ("sources/iso-3690.yaml", "kind: standard", "kind: norm", 0, "'norm' is not one of the words known here"),
    ("cases/restraint.yaml", "rule: restraint-factor", "rule: restraint-facto", 0, "which is no rule"),
    ("kb.yaml", "custodian:", "keeper:", 0, "'custodian' is missing here"),
    ("steels/en-10025-2.yaml", "family: carbon", "family: carbo", 0, "'carbo' is no level of steel_family"),
    ("rules/preheat/min-preheat.yaml", "T: preheat_required", "T: hv_max", 0, "the rules close a circle"),
    (
        "rules/preheat/min-preheat.yaml",
        "reads: {T: preheat_required",
        "reads: {T: cet",
        0,
        "works for each joint and reads cet, which each member has",
    ),
]


@pytest.fixture(scope="module")
def pristine(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("kb") / "kb"
    shutil.copytree(kb_folder(), folder)
    return folder


@pytest.mark.parametrize(("file", "old", "new", "line", "words"), PLANTED, ids=[f"{p[0]}:{p[4][:40]}" for p in PLANTED])
def test_planted_fault_is_caught_at_its_place(
    pristine: Path, file: str, old: str, new: str, line: int, words: str
) -> None:
    path = pristine / file
    before = path.read_text(encoding="utf-8") if path.exists() else None
    if before is not None:
        assert old in before, f"{file} no longer holds {old!r}"
        path.write_text(before.replace(old, new, 1), encoding="utf-8")
    else:
        path.write_text(new, encoding="utf-8")
    try:
        texts = findings(pristine)
    finally:
        if before is None:
            path.unlink()
        else:
            path.write_text(before, encoding="utf-8")
    hits = [text for text in texts if words in text]
    assert hits, "\n".join(texts[:10])
    name = Path(file).name
    assert any(name in hit or "cases/" in hit or "rules/" in hit for hit in hits)
    if line:
        assert any(f"{name}:{line}:" in hit for hit in hits)


def findings(folder: Path) -> list[str]:
    """All that loading and vetting say of a folder."""
    try:
        return [str(finding) for finding in vet(load_knowledge(folder)).findings]
    except Refused as refused:
        return [str(problem) for problem in refused.problems]
