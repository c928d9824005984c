"""A folder into knowledge: what is read, what every wrong reference is told, and what the digest depends on."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

import weldbasis
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.problem import Problem, Refused
from weldbasis.ranges import Range

SMALL = Path(__file__).parent / "fixtures" / "kb_small"
TABLE = "rules/preheat/min-preheat.yaml"
FAMILY = "rules/preheat/thickness-family.yaml"
ARC = "rules/heat/heat-input-arc.yaml"
JOINT = "quantities/joint.yaml"

# file, text to replace, replacement, first line of the problem, what to do
PLANTED = [
    (TABLE, "{d: thickness,", "{d: thicknes,", "7:9: rule min-preheat: 'thicknes' is no quantity of the vocabulary",
     "Did you mean 'thickness'?"),
    (TABLE, "gives: min_preheat", "gives: min_preheet",
     "6:1: rule min-preheat: 'min_preheet' is no quantity of the vocabulary", "Did you mean 'min_preheat'?"),
    (TABLE, "valid_within: {thickness", "valid_within: {thick",
     "8:16: rule min-preheat: 'thick' is no quantity of the vocabulary", "Did you mean 'thickness'?"),
    (TABLE, '{thickness: "[1, 100]"}', "{thickness: thin}",
     "8:16: rule min-preheat, valid_within: 'thin' is no range; write one like '[0.40, 0.45)', '<= 20' or '> 38'", ""),
    (TABLE, '{thickness: "[1, 100]"}', '{restraint: "[1, 100]"}',
     "8:16: rule min-preheat, valid_within: '[1, 100]' is no level of restraint. Known: high, low, medium.", ""),
    (TABLE, "restraint: high}, give", "restraint: hgh}, give",
     "13:29: rule min-preheat: row 3, restraint: 'hgh' is no level of restraint. Did you mean 'high'?", ""),
    (TABLE, '{d: "(30, 100]", restraint: high}', '{d: "[100, 30]", restraint: high}',
     "13:13: rule min-preheat: row 3, d: the range '[100, 30]' holds no number; its lower end comes first", ""),
    (TABLE, '{d: "(30, 100]", restraint: high}', "{d: [thick], restraint: high}",
     "13:13: rule min-preheat: row 3, d: thickness is a number; a range is wanted, not a list", ""),
    (TABLE, "give: 120", "give: {min_preheet: 120}",
     "13:54: rule min-preheat: row 3 gives 'min_preheet', which the rule does not give",
     "Did you mean 'min_preheat'?"),
    (TABLE, "give: 120", "give: hot",
     "13:47: rule min-preheat: row 3 gives 'hot': "
     "'hot' is no range; write one like '[0.40, 0.45)', '<= 20' or '> 38'", ""),
    (TABLE, "small-handbook, at", "small-handbok, at",
     "16:6: min-preheat cites 'small-handbok', which is no source",
     "Did you mean 'small-handbook'? Sources lie in sources/."),
    (TABLE, "{result}", "{resul}", "14:1: say of rule min-preheat names {resul}, which the rule does not read",
     "Did you mean 'result'?"),
    (TABLE, "version: 2\n", "version: 3\n", "2:1: rule min-preheat is version 3, its last changes entry is of 2",
     "write a changes entry for this version"),
    (TABLE, '"2026-11-01"', '"2026-12-02"',
     "19:5: rule min-preheat: version 2 of 2026-12-01 stands after version 1 of 2026-12-02",
     "put the entries in order"),
    (TABLE, "id: min-preheat", "id: least-preheat", "1:1: the file is called min-preheat.yaml, its rule least-preheat",
     "call the file least-preheat.yaml"),
    (FAMILY, "gives: thickness", "gives: min_preheat",
     "2:5: rules min-preheat and thickness both give min_preheat",
     "let each give a quantity of its own and bring them together in a governing rule"),
    (FAMILY, "of: member_thickness", "of: member_thicknes",
     "8:5: rule thickness: 'member_thicknes' is no quantity of the vocabulary", "Did you mean 'member_thickness'?"),
    (FAMILY, "{member_role: parent}", "{member_role: parnt}",
     "10:13: rule thickness, where: 'parnt' is no level of member_role. Did you mean 'parent'?", ""),
    (FAMILY, "{restraint: high}]", "{restraint: hihg}]",
     "22:68: rule outdoors-cold, applies_when: 'hihg' is no level of restraint. Did you mean 'high'?", ""),
    (FAMILY, "{restraint: high}]", "{delivery: as-rolled}]",
     "22:68: rule outdoors-cold works for each joint and reads delivery, which each member has",
     "gather it to the joint first, or write for_each: member"),
    (FAMILY, "id: outdoors-cold", "id: thickness", "16:5: rules 'thickness' stands here a second time",
     "give one of them another id"),
    (FAMILY, "rules:\n", "note: x\nrules:\n", "1:1: 'note' cannot stand beside rules",
     "a family of rules holds only the list rules"),
    (FAMILY, "    kind: gather\n", "", "2:5: 'kind' is missing here", "add 'kind: …'"),
    (ARC, "kind: formula", "kind: formel", "4:1: 'formel' is no kind of rule", "Did you mean 'formula'?"),
    ("sources/small-handbook.yaml", "id: small-handbook", "id: small-handbok",
     "1:1: the file is called small-handbook.yaml, its source small-handbok", "call the file small-handbok.yaml"),
    ("cases/small.yaml", "rule: min-preheat", "rule: min-prehat",
     "2:5: case thick-and-stiff is for 'min-prehat', which is no rule", "Did you mean 'min-preheat'?"),
    ("cases/small.yaml", "{thickness: 40", "{thicknes: 40",
     "2:5: case thick-and-stiff: 'thicknes' is no quantity of the vocabulary", "Did you mean 'thickness'?"),
    ("consumables/plain.yaml", "covering: basic", "covering: basik", "2:5: t-basic: 'basik' is no level of covering",
     "Did you mean 'basic'?"),
    ("consumables/plain.yaml", '"111"', '"112"', "2:5: t-basic: '112' is no level of process", "Did you mean '111'?"),
    ("steels/plain.yaml", "delivery: [as-rolled]", "delivery: [rolled]", "5:5: t1-a: 'rolled' is no level of delivery",
     "Did you mean 'as-rolled'?"),
    ("steels/eras.yaml", "family: carbon", "family: carbn", "2:5: test-1910: 'carbn' is no level of steel_family",
     "Did you mean 'carbon'?"),
    ("steels/plain.yaml", '"<= 0.20"', '"=< 0.20"',
     "10:46: '=< 0.20' is no range; write one like '[0.40, 0.45)', '<= 20' or '> 38'", ""),
    (JOINT, "unit: kJ/mm", "unit: kJoule/mn", "20:5: heat_input is measured in 'kJoule/mn', which is no unit",
     "write one like mm, kJ/mm, degC, mL/100g, MPa or %"),
    (JOINT, "{high: stiff", "{hihg: stiff", "35:64: 'hihg' is no level of restraint. Did you mean 'high'?", ""),
    (JOINT, "if_not_given: medium", "if_not_given: midium",
     "32:5: if_not_given of restraint: 'midium' is no level of restraint. Did you mean 'medium'?", ""),
    (JOINT, "    given: may\n    says: Measured", "    part_of: heat_input\n    says: Measured",
     "2:5: voltage is part of heat_input, which is no decision", "Known: min_preheat."),
    (JOINT, "    given: may\n    says: Measured", "    decision: 1\n    says: Measured",
     "2:5: min_preheat and voltage are both decision 1", "give one of them another place"),
    (JOINT, "of: joint\n    levels: {order: [low, medium", "of: member\n    levels: {order: [low, medium",
     "7:23: rule min-preheat works for each joint and reads restraint, which each member has",
     "gather it to the joint first, or write for_each: member"),
]  # fmt: skip


@pytest.fixture(scope="module")
def small() -> Knowledge:
    return load_knowledge(SMALL)


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A copy to spoil; files are named from it in messages."""
    shutil.copytree(SMALL, tmp_path / "kb")
    monkeypatch.chdir(tmp_path / "kb")
    return tmp_path / "kb"


def change(folder: Path, file: str, old: str, new: str) -> None:
    text = (folder / file).read_text(encoding="utf-8")
    assert old in text
    (folder / file).write_text(text.replace(old, new, 1), encoding="utf-8")


def problems_of(folder: Path) -> tuple[Problem, ...]:
    with pytest.raises(Refused) as caught:
        load_knowledge(folder)
    return caught.value.problems


@pytest.mark.parametrize(("file", "old", "new", "said", "do"), PLANTED, ids=[p[3][:60] for p in PLANTED])
def test_wrong_reference_is_told_with_place_line_and_remedy(
    folder: Path, file: str, old: str, new: str, said: str, do: str
) -> None:
    change(folder, file, old, new)
    found = {str(p).split("\n")[0].partition(".yaml:")[2]: p for p in problems_of(folder)}
    assert said in found
    problem = found[said]
    lines = (folder / problem.place.file).read_text(encoding="utf-8").split("\n")
    assert problem.do == do
    assert problem.line_text == lines[problem.place.line - 1]


def test_two_records_of_one_id_are_told_with_both_places(folder: Path) -> None:
    change(folder, FAMILY, "id: outdoors-cold", "id: thickness")
    problem = next(p for p in problems_of(folder) if "second time" in p.what)
    assert (str(problem.place), problem.why) == (f"{FAMILY}:16:5", f"first in {FAMILY}:2:5")


def test_all_files_are_looked_at_before_anything_is_refused(folder: Path) -> None:
    change(folder, TABLE, "read_as: the-one-row", "read_as: no")
    change(folder, ARC, "for_each: joint", "for_each: weld")
    change(folder, JOINT, '"[5, 60]"', '"[60, 5]"')
    change(folder, "sources/small-handbook.yaml", "year: 2026", "year: 2026\nyear: 2027")
    assert [p.place.file for p in problems_of(folder)] == [JOINT, ARC, TABLE, "sources/small-handbook.yaml"]


@pytest.mark.parametrize("text", ["rules: 5", "rules: {a: 1}", "rules: []", "rules: [5]", "kind: [formula]", "a: 1"])
def test_odd_shapes_of_a_rule_file_are_problems(folder: Path, text: str) -> None:
    (folder / "rules/preheat/odd.yaml").write_text(text, encoding="utf-8")
    assert {p.place.file for p in problems_of(folder)} == {"rules/preheat/odd.yaml"}


def test_what_is_read(small: Knowledge) -> None:
    rule = small.rules["min-preheat"]
    assert (rule.topic, rule.layer, rule.version, rule.gives) == ("preheat", "published", 2, ("min_preheat",))
    assert [(read.name, read.quantity) for read in rule.reads] == [("d", "thickness"), ("restraint", "restraint")]
    assert set(rule.body) == {"read_as", "rows"}
    assert rule.place_of("rows", 2, "when", "restraint").line == 13
    inner = small.rules["outdoors-cold"]
    assert (inner.place.line, inner.place_of("applies_when", "outdoors").line) == (16, 22)
    restraint = small.quantities["restraint"]
    assert [level.title for level in restraint.levels] == ["low", "medium", "stiff on all sides"]
    assert small.grades["t1-a"].bands[0].thickness == Range(0.0, 40.0, low_open=True)
    assert small.grades["t1-a"].cites[0].source == "small-handbook"
    assert (small.grades["t1-a"].standard, small.eras["test-1910"].ceilings) == ("Test standard 1", {"C": 0.35})
    assert [decision.id for decision in small.decisions] == ["min_preheat"]


def test_layout_comments_and_cases_do_not_touch_the_digest(folder: Path, small: Knowledge) -> None:
    change(folder, TABLE, "kind: table\n", "kind:   table   # a comment\n\n")
    change(folder, TABLE, 'valid_within: {thickness: "[1, 100]"}\n', "")
    change(folder, TABLE, "id: min", 'valid_within: {thickness: "[1, 100]"}\nid: min')
    change(folder, "cases/small.yaml", "id: thick-and-stiff", "id: stiff-and-thick")
    (folder / "quantities/member.yaml").rename(folder / "quantities/a-first.yaml")
    (folder / "rules/heat").rename(folder / "rules/zeal")
    assert load_knowledge(folder).digest == small.digest


@pytest.mark.parametrize(
    ("file", "old", "new"),
    [
        (TABLE, "give: 120", "give: 121"),
        (TABLE, '"(30, 100]", restraint: high', '"[30, 100]", restraint: high'),
        (JOINT, "worse: last", "worse: first"),
        (JOINT, "order: [low, medium, high]", "order: [medium, low, high]"),
        ("steels/plain.yaml", "<= 0.20", "< 0.20"),
        ("consumables/plain.yaml", "hydrogen_max: 5", "hydrogen_max: 10"),
        ("sources/small-handbook.yaml", "year: 2026", "year: 2025"),
    ],
)
def test_every_figure_touches_the_digest(folder: Path, small: Knowledge, file: str, old: str, new: str) -> None:
    change(folder, file, old, new)
    assert load_knowledge(folder).digest != small.digest


def test_units_of_the_trade_need_no_unit_library() -> None:
    """The library is slow to load; the published rules and their units must start without it."""
    program = (
        "import sys; from weldbasis.graph import build_graph; from weldbasis.load.knowledge import load_knowledge; "
        "from weldbasis.places import kb_folder; build_graph(load_knowledge(kb_folder())); print('pint' in sys.modules)"
    )
    environment = {**os.environ, "PYTHONPATH": str(Path(weldbasis.__file__).parents[1])}
    ended = subprocess.run([sys.executable, "-c", program], env=environment, capture_output=True, text=True, check=True)
    assert ended.stdout == "False\n"


def test_a_folder_without_its_head(tmp_path: Path) -> None:
    problem = problems_of(tmp_path)[0]
    assert (problem.what, problem.do) == ("there is no such file", "name a folder that holds one")
