"""Projects: what is read, where it comes from, and what is refused with file, line and the nearest word."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml
from hypothesis import given
from hypothesis import strategies as st

from weldbasis.facts import Origin
from weldbasis.knowledge import Knowledge
from weldbasis.problem import Refused
from weldbasis.project import Project, read_project
from weldbasis.project.given import Fact
from weldbasis.project.steels import ELEMENTS, Steel, member_facts
from weldbasis.ranges import Range
from weldbasis.record import canonical_bytes
from weldbasis.values import ABSENT, ASSUMED, UNKNOWN, Levels, Numbers, levels_of

BASE = """project: test
title: Test
rules: working
contract: []
steels:
  plate: {grade: S355J2, composition: {C: 0.17, Mn: 1.45}, origin: {certificate: Z1, heat: H1}}
joints:
  - {joint: J1, form: butt, process: "136", hydrogen: 5 mL/100g, heat_input: 1.5 kJ/mm, restraint: medium,
     members: [{steel: plate, thickness: 30 mm}, {steel: plate, thickness: 1.25 in}]}
"""


def project_of(folder: Path, knowledge: Knowledge, text: str = BASE) -> Project:
    (folder / "project.yaml").write_text(text, encoding="utf-8")
    return read_project(folder, knowledge)


def test_values_come_in_vocabulary_units_with_their_origin(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge)
    facts = project.facts
    thickness = facts.given["member_thickness"]
    assert isinstance(thickness, Numbers)
    np.testing.assert_allclose(thickness.low, [30, 31.75, np.nan])
    carbon = facts.origin_list[facts.origins["carbon"][0]]
    assert (carbon.kind, carbon.text) == ("certificate", "certificate Z1, heat H1")
    assert facts.members == ("plate", "plate", "weld metal")


def test_element_not_reported_is_not_zero(tmp_path: Path, knowledge: Knowledge) -> None:
    facts = project_of(tmp_path, knowledge).facts
    chromium = facts.given["chromium"]
    assert isinstance(chromium, Numbers)
    assert (chromium.low[0], chromium.high[0]) == (0.0, 0.3)
    assert chromium.flags[0] & ASSUMED
    assert chromium.presence[2] == ABSENT, "nothing is known of the weld metal"


def test_what_is_not_said_is_unknown(tmp_path: Path, knowledge: Knowledge) -> None:
    facts = project_of(tmp_path, knowledge).facts
    ambient = facts.given["ambient"]
    assert isinstance(ambient, Numbers)
    assert (ambient.low[0], ambient.high[0]) == (-40.0, 50.0)
    assert ambient.flags[0] & UNKNOWN


REFUSALS = [
    ("grade: S355J2", "grade: S355J9", "no grade goes by 'S355J9'; nearest are"),
    ("hydrogen: 5", "hydrogn: 5", "'hydrogn' is no field of a joint"),
    ("restraint: medium", "restraint: midium", "'midium' is no level of restraint. Did you mean 'medium'?"),
    ("1.5 kJ/mm", "1.5 kg", "'kg' is a mass; an energy per length in kJ/mm is wanted"),
    ("1.5 kJ/mm", "99 kJ/mm", "lies outside what heat_input can be"),
    ("{steel: plate, thickness: 30 mm}", "{steel: plat, thickness: 30 mm}", "'plat' is no steel of this project"),
    ("contract: []", "contract: [en-1011]", "'en-1011' is no requirement set known here"),
    ('process: "136"', 'process: "137"', "'137' is no level of process"),
    ('process: "136", ', "", "says nothing of process"),
    ("form: butt, ", "", "says nothing of form"),
    ("heat_input: 1.5", "min_preheat: 100, heat_input: 1.5", "it is worked out, never given"),
    ("heat_input: 1.5", "carbon: 0.2, heat_input: 1.5", "each member has it, not the joint"),
    ("heat_input: 1.5", "consumable: E7018, heat_input: 1.5", "is no consumable classification known here"),
    ("C: 0.17", "C: 0.1.7", "'.7' is no unit"),
    ("C: 0.17", "Cc: 0.17", "'Cc' is not known here"),
    ("grade: S355J2, composition: {C: 0.17, Mn: 1.45}, ", "", "nothing is said of steel 'plate'"),
    ("[{steel: plate, thickness: 30 mm}, {steel: plate, thickness: 1.25 in}]", "[]", "has no members"),
    ("title: Test", "titel: Test", "'title' is missing here"),
    ("joints:\n", "joints: {csv: none.csv}\nother:\n", "'other' is not known here"),
]


@pytest.mark.parametrize(("old", "new", "words"), REFUSALS, ids=[r[2][:40] for r in REFUSALS])
def test_refused_with_place_and_reason(old: str, new: str, words: str, tmp_path: Path, knowledge: Knowledge) -> None:
    assert old in BASE
    with pytest.raises(Refused) as caught:
        project_of(tmp_path, knowledge, BASE.replace(old, new, 1))
    hits = [problem for problem in caught.value.problems if words in str(problem)]
    assert hits, str(caught.value)
    assert hits[0].place.line >= 1
    assert "project.yaml" in hits[0].place.file


def test_all_mistakes_come_at_once(tmp_path: Path, knowledge: Knowledge) -> None:
    text = (
        BASE.replace("restraint: medium", "restraint: midium")
        .replace("1.5 kJ/mm", "1.5 kg")
        .replace("S355J2", "S355J9")
    )
    with pytest.raises(Refused) as caught:
        project_of(tmp_path, knowledge, text)
    assert len(caught.value.problems) == 3


INVALID = sorted(Path(__file__).with_name("invalid_projects").iterdir())


def refusal_of(folder: Path, knowledge: Knowledge) -> str:
    """Every problem of a project: place, what, why and what to do; without lists of what the vocabulary knows today."""
    with pytest.raises(Refused) as caught:
        read_project(folder, knowledge)
    lines = []
    for problem in caught.value.problems:
        lines.append(f"{problem.place}: {problem.what}".split(" Known: ")[0])
        lines += [f"    {text}" for text in (problem.why, problem.do) if text and not text.startswith("Known: ")]
    return "\n".join(lines) + "\n"


@pytest.mark.parametrize("folder", INVALID, ids=[folder.name for folder in INVALID])
def test_a_wrong_project_is_refused_with_all_its_mistakes(
    folder: Path, knowledge: Knowledge, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(folder)
    assert refusal_of(Path(), knowledge) == (folder / "expected.txt").read_text(encoding="utf-8")


# --- where values come from ---


def with_fields(fields: str) -> str:
    """The base project whose joint says something more."""
    return BASE.replace("restraint: medium", f"restraint: medium, {fields}")


def with_steel(steel: str) -> str:
    """The base project of another steel."""
    return BASE.replace(
        "{grade: S355J2, composition: {C: 0.17, Mn: 1.45}, origin: {certificate: Z1, heat: H1}}", f"{{{steel}}}"
    )


def number(project: Project, name: str, row: int = 0) -> tuple[float, float]:
    column = project.facts.given[name]
    assert isinstance(column, Numbers)
    return float(column.low[row]), float(column.high[row])


def levels(project: Project, knowledge: Knowledge, name: str, row: int = 0) -> tuple[str, ...]:
    column = project.facts.given[name]
    assert isinstance(column, Levels)
    return levels_of(int(column.mask[row]), knowledge.quantities[name].order)


def origin(project: Project, name: str, row: int = 0) -> Origin:
    return project.facts.origin_list[int(project.facts.origins[name][row])]


def flags(project: Project, name: str, row: int = 0) -> int:
    return int(project.facts.given[name].flags[row])


ORIGINS = [
    ("ambient: 5 °C", "project", "project, joint J1", 0),
    ("ambient: {value: 5 °C}", "project", "project, joint J1", 0),
    ("ambient: {value: 5 °C, because: a cold month}", "assumption", "assumed: a cold month", int(ASSUMED)),
    (
        "ambient: {value: 5 °C, because: a cold month, origin: assumption}",
        "assumption",
        "assumed: a cold month",
        int(ASSUMED),
    ),
    ("ambient: 5 °C, assumptions: {ambient: a cold month}", "assumption", "assumed: a cold month", int(ASSUMED)),
    ("ambient: {value: 5 °C, origin: {procedure: P 7}}", "procedure", "procedure P 7", 0),
    ("ambient: {value: 5 °C, origin: {drawing: S 12}, because: note 3}", "drawing", "drawing S 12: note 3", 0),
    ("ambient: {value: 5 °C, origin: drawing}", "drawing", "drawing, number not given", 0),
    ("ambient: {value: 5 °C, origin: {laboratory: L 3}}", "samples", "laboratory report L 3", 0),
]


@pytest.mark.parametrize(("fields", "kind", "text", "flag"), ORIGINS)
def test_origins_of_a_value(fields: str, kind: str, text: str, flag: int, tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge, with_fields(fields))
    assert number(project, "ambient") == (5.0, 5.0)
    assert (origin(project, "ambient").kind, origin(project, "ambient").text) == (kind, text)
    assert flags(project, "ambient") == flag
    assert "project.yaml:8:" in origin(project, "ambient").place


def test_a_joint_counts_before_a_default_and_a_default_before_the_vocabulary(
    tmp_path: Path, knowledge: Knowledge
) -> None:
    text = BASE.replace("joints:", "defaults: {restraint: high, ambient: 3 °C, humidity: damp}\njoints:")
    project = project_of(tmp_path, knowledge, text.replace("members:", "humidity: dry, members:"))
    assert levels(project, knowledge, "restraint") == ("medium",)
    assert levels(project, knowledge, "humidity") == ("dry",)
    assert (number(project, "ambient"), origin(project, "ambient").kind) == ((3.0, 3.0), "default")
    assert origin(project, "preheat_step").kind == "default"
    assert origin(project, "preheat_step").text == knowledge.quantities["preheat_step"].if_not_given_because


def test_the_reason_of_a_default_goes_with_the_default_only(tmp_path: Path, knowledge: Knowledge) -> None:
    text = BASE.replace(
        "joints:",
        "defaults: {restraint: high, ambient: 3 °C, assumptions: {restraint: a guess, ambient: a cold month}}\njoints:",
    )
    project = project_of(tmp_path, knowledge, text)
    assert (origin(project, "restraint").kind, flags(project, "restraint")) == ("project", 0)
    assert (origin(project, "ambient").text, flags(project, "ambient")) == ("assumed: a cold month", int(ASSUMED))


@pytest.mark.parametrize(
    ("default", "own", "gone"),
    [
        ("heat_input: 1.0", "voltage: 24 V, current: 160 A, travel_speed: 160 mm/min", "heat_input"),
        ("hydrogen: 3", "consumable: ISO 17632-A T 46 4 P M21 1 H10", "hydrogen"),
        ("hydrogen: 3", "hydrogen_measured: 7", "hydrogen"),
    ],
)
def test_a_default_gives_way_to_what_the_joint_works_it_out_from(
    default: str, own: str, gone: str, tmp_path: Path, knowledge: Knowledge
) -> None:
    text = BASE.replace("joints:", f"defaults: {{{default}}}\njoints:")
    bare = text.replace("hydrogen: 5 mL/100g, heat_input: 1.5 kJ/mm, ", "")
    assert number(project_of(tmp_path, knowledge, bare), gone)
    project = project_of(tmp_path, knowledge, bare.replace("restraint:", f"{own}, restraint:"))
    assert gone not in project.facts.given


def test_levels_and_bounds_are_sets(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(
        tmp_path, knowledge, BASE.replace("medium", "[high, medium]").replace("5 mL/100g", '"<= 5 mL/100g"')
    )
    assert levels(project, knowledge, "restraint") == ("medium", "high")
    assert number(project, "hydrogen") == (knowledge.quantities["hydrogen"].range.low, 5.0)


def test_a_contract_binds_all_joints_unless_one_says_otherwise(tmp_path: Path, knowledge: Knowledge) -> None:
    text = BASE.replace("contract: []", "contract: [aws-d1-1, en-1011-2]")
    text = text.replace("members:", 'contract_en_1011_2: "no", members:')
    project = project_of(tmp_path, knowledge, text)
    found = {name: levels(project, knowledge, name) for name in project.facts.given if name.startswith("contract_")}
    bound = [name for name, word in found.items() if word == ("yes",)]
    assert bound == ["contract_aws_d1_1"]
    assert project.contract == ("aws-d1-1", "en-1011-2")


def test_a_default_consumable_is_for_its_own_process_only(tmp_path: Path, knowledge: Knowledge) -> None:
    text = BASE.replace("joints:", "defaults: {consumable: ISO 2560-A E 42 4 B 42 H5}\njoints:")
    assert origin(project_of(tmp_path, knowledge, text), "covering").kind == "unknown"
    by_hand = project_of(tmp_path, knowledge, text.replace('"136"', '"111"'))
    assert (levels(by_hand, knowledge, "covering"), origin(by_hand, "covering").kind) == (("basic",), "consumable")
    assert number(by_hand, "consumable_hydrogen_max") == (5.0, 5.0)


def test_weld_metal_has_its_class_and_over_it_its_own_analysis(tmp_path: Path, knowledge: Knowledge) -> None:
    name = next(c.id for c in knowledge.consumables.values() if c.process == "136" and "C" in c.composition)
    own = "weld_metal: {composition: {Mn: 1.31, Ni: 0.4 to 0.5}, origin: {certificate: D 4}}"
    project = project_of(tmp_path, knowledge, with_fields(f"consumable: {name}, {own}"))
    assert (number(project, "manganese", 2), number(project, "nickel", 2)) == ((1.31, 1.31), (0.4, 0.5))
    assert origin(project, "manganese", 2).text == "certificate D 4"
    limit = knowledge.consumables[name].composition["C"]
    assert number(project, "carbon", 2) == (max(limit.low, 0.0), limit.high)
    assert origin(project, "carbon", 2).kind == "consumable"
    assert levels(project, knowledge, "member_role", 2) == ("weld-metal",)


def test_a_part_counts_before_its_steel(tmp_path: Path, knowledge: Knowledge) -> None:
    part = "{steel: plate, thickness: 30 mm, carbon: {value: 0.16, origin: {laboratory: L 9}}, delivery: QT}"
    text = BASE.replace("{steel: plate, thickness: 30 mm}", part)
    project = project_of(tmp_path, knowledge, text)
    assert (number(project, "carbon", 0), number(project, "carbon", 1)) == ((0.16, 0.16), (0.17, 0.17))
    assert origin(project, "carbon").text == "laboratory report L 9"
    assert levels(project, knowledge, "delivery") == ("QT",)


# --- what is known of a steel ---


def test_a_grade_allows_what_its_standard_does(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge, with_steel("grade: S355J2+N"))
    assert (number(project, "carbon"), number(project, "manganese")) == ((0.0, 0.2), (0.0, 1.6))
    assert number(project, "yield_strength") == (345.0, 345.0)
    assert number(project, "ce_iiw_limit") == (0.45, 0.45)
    assert (levels(project, knowledge, "delivery"), origin(project, "delivery").kind) == (("N",), "grade-limit")
    assert origin(project, "carbon").kind == "grade-limit"
    assert flags(project, "chromium") == int(ASSUMED), (
        "the standard does not limit it: residual, and said to be assumed"
    )


def test_a_certificate_counts_before_the_grade_and_the_cap_stays(tmp_path: Path, knowledge: Knowledge) -> None:
    steel = "grade: S355J2, composition: {C: 0.15}, yield_strength: 402, origin: {certificate: Z1}"
    project = project_of(tmp_path, knowledge, with_steel(steel))
    assert (number(project, "carbon"), number(project, "manganese")) == ((0.15, 0.15), (0.0, 1.6))
    assert (number(project, "yield_strength"), origin(project, "yield_strength").kind) == (
        (402.0, 402.0),
        "certificate",
    )
    assert number(project, "ce_iiw_limit") == (0.45, 0.45)


def test_a_whole_analysis_is_not_trimmed_by_the_cap(tmp_path: Path, knowledge: Knowledge) -> None:
    steel = "grade: S355J2, composition: {C: 0.19, Mn: 1.6, Cr: 0.1, Mo: 0.02, V: 0.05, Ni: 0.1, Cu: 0.1}"
    project = project_of(tmp_path, knowledge, with_steel(steel))
    assert "ce_iiw_limit" not in project.facts.given
    assert number(project, "ce_iiw_cap") == (0.45, 0.45)


def test_beyond_its_standard_a_grade_says_nothing(tmp_path: Path, knowledge: Knowledge) -> None:
    text = with_steel("grade: S690QL").replace("30 mm", "300 mm")
    project = project_of(tmp_path, knowledge, text)
    for element in ("carbon", "chromium", "molybdenum", "nickel"):
        allowed = knowledge.quantities[element].range
        assert number(project, element) == (allowed.low, allowed.high)
        assert flags(project, element) == int(UNKNOWN)
        assert "has S690QL for" in origin(project, element).text
    assert number(project, "nickel", 1) == (0.0, 2.0), "the other part is within the standard"
    assert levels(project, knowledge, "steel_family") == ("quenched-tempered",)


def test_a_least_content_is_not_taken_for_a_residual(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge, with_steel("grade: A242-1"))
    assert number(project, "copper") == (0.2, knowledge.quantities["copper"].range.high)
    assert origin(project, "copper").text.endswith("sets no upper limit here")


SAMPLES = [
    ("era: open-hearth-early, samples: [{C: 0.31}]", "carbon", (0.12, 0.31), "1 sample, joined with the era's typical"),
    (
        "era: open-hearth-early, samples: [{C: 0.31}, {C: 0.1}]",
        "carbon",
        (0.1, 0.31),
        "2 samples, joined with the era's",
    ),
    (
        "era: open-hearth-early, samples: [{C: 0.2}, {C: 0.18}, {C: 0.19}]",
        "carbon",
        (0.113, 0.267),
        "3 samples 0.18 to 0.2 %; with",
    ),
    (
        "era: open-hearth-early, samples: [{C: 0.2, Cr: 0.02}, {C: 0.18}, {C: 0.19}]",
        "chromium",
        (0.0, 0.1),
        "1 sample, ",
    ),
    ("era: open-hearth-early, samples: [{C: 0.2}]", "manganese", (0.3, 1.0), "envelope of open-hearth"),
    ("grade: S355J2, samples: [{C: 0.21}]", "carbon", (0.0, 0.21), "1 sample, joined with the grade's limits"),
    ("samples: [{C: 0.21}]", "carbon", (0.21, 0.21), "1 sample, too few to show a spread"),
]


@pytest.mark.parametrize(("steel", "element", "ends", "text"), SAMPLES)
def test_samples(
    steel: str, element: str, ends: tuple[float, float], text: str, tmp_path: Path, knowledge: Knowledge
) -> None:
    project = project_of(tmp_path, knowledge, with_steel(steel))
    assert number(project, element) == ends
    assert origin(project, element).text.startswith(text)
    assert (flags(project, element) == int(ASSUMED)) is ("too few" in text)


def steel_of(knowledge: Knowledge, **said: Any) -> Steel:
    paper = Origin("project", "test")
    found: dict[str, Any] = {"grade": None, "era": None, "analysed": {}, "said": {}, "samples": ()} | said
    found.setdefault("sampling", knowledge.sampling)
    return Steel("s", "", paper=paper, certificate="", heat="", delivery="", place="", **found)


@given(data=st.data())
def test_more_knowledge_never_lets_an_element_out_of_what_it_may_be(data: st.DataObject, knowledge: Knowledge) -> None:
    """Whatever samples say, every sample lies in the set; every grade's and era's set lies in the vocabulary's."""
    grade = data.draw(st.sampled_from([None, *knowledge.grades.values()]))
    era = None if grade else data.draw(st.sampled_from([None, *knowledge.eras.values()]))
    content = st.floats(0.0, 0.01).map(lambda share: Range(share, share))
    samples = tuple(data.draw(st.lists(st.dictionaries(st.sampled_from(list(ELEMENTS)), content), max_size=5)))
    thickness = data.draw(st.floats(0.5, 400.0))
    steel = steel_of(knowledge, grade=grade, era=era, samples=samples)
    facts = member_facts(steel, Range(thickness, thickness), knowledge.quantities)
    for element, quantity in ELEMENTS.items():
        fact = facts.get(quantity)
        if fact is None:
            assert not any(element in sample for sample in samples)
            continue
        allowed = knowledge.quantities[quantity].range
        assert isinstance(fact.value, Range)
        assert allowed.low <= fact.value.low <= fact.value.high <= allowed.high
        assert all(
            fact.value.low <= s[element].low and s[element].high <= fact.value.high for s in samples if element in s
        )


@given(data=st.data())
def test_an_analysis_counts_before_everything(data: st.DataObject, knowledge: Knowledge) -> None:
    grade = data.draw(st.sampled_from(list(knowledge.grades.values())))
    carbon = data.draw(st.floats(0.0, 1.2))
    analysed = {"carbon": Fact(Range(carbon, carbon), Origin("certificate", "Z"))}
    facts = member_facts(steel_of(knowledge, grade=grade, analysed=analysed), Range(20, 20), knowledge.quantities)
    assert facts["carbon"].value == Range(carbon, carbon)


# --- columns ---


def test_columns_of_points_share_their_ends(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge)
    thickness, chromium = project.facts.given["member_thickness"], project.facts.given["chromium"]
    assert isinstance(thickness, Numbers)
    assert isinstance(chromium, Numbers)
    assert thickness.high is thickness.low, "so that the engine computes them once"
    assert chromium.high is not chromium.low


def test_the_meaning_is_in_the_inputs_not_in_how_they_are_written(tmp_path: Path, knowledge: Knowledge) -> None:
    plain = project_of(tmp_path, knowledge)
    text = BASE.replace("30 mm", "3 cm").replace("1.25 in", "31.75").replace("hydrogen: 5 mL/100g, ", "")
    text = "# a comment\n" + text.replace("restraint: medium", "restraint: medium, hydrogen: 5.0")
    same = project_of(tmp_path, knowledge, text)
    assert canonical_bytes(dict(same.meaning)) == canonical_bytes(dict(plain.meaning))
    for one, two in (
        ("[low, high]", "[high, low]"),
        ("{value: low, because: so}", "low, assumptions: {restraint: so}"),
    ):
        texts = [BASE.replace("medium", word) for word in (one, two)]
        first, second = (canonical_bytes(dict(project_of(tmp_path, knowledge, text).meaning)) for text in texts)
        assert first == second
    other = project_of(tmp_path, knowledge, BASE.replace("30 mm", "31 mm"))
    assert canonical_bytes(dict(other.meaning)) != canonical_bytes(dict(plain.meaning))


def test_example_projects_are_read(examples: tuple[Path, ...], knowledge: Knowledge) -> None:
    assert len(examples) >= 2
    for folder in examples:
        project = read_project(folder, knowledge)
        assert 15 <= len(project.joints) <= 40
        kinds = {steel.kind for steel in project.steels.values()}
        assert "certificate" in kinds
        assert all(entry.title for entry in project.joints)


def test_certificates_of_the_examples_keep_to_their_grades(examples: tuple[Path, ...], knowledge: Knowledge) -> None:
    """An example shows real material: no analysis lies outside what the grade allows in that thickness."""
    faults = []
    for folder in examples:
        project = read_project(folder, knowledge)
        facts = project.facts
        for row, name in enumerate(facts.members):
            steel = project.steels.get(name)
            if steel is None or steel.kind != "certificate" or not steel.grade:
                continue
            low, high = number(project, "member_thickness", row)
            grade = steel_of(knowledge, grade=knowledge.grades[steel.grade])
            limits = member_facts(grade, Range(low, high), knowledge.quantities)
            for element, (least, most) in steel.composition.items():
                allowed = limits.get(ELEMENTS[element])
                if (
                    allowed
                    and isinstance(allowed.value, Range)
                    and not allowed.value.low <= least <= most <= allowed.value.high
                ):
                    faults.append(f"{folder.name} {name} {element}")
    assert faults == []


# --- whatever stands where ---

EVERYTHING = """project: test
title: Test
description: All that a project may say
rules: working
contract: [en-1011-2]
certificates: {csv: c.csv}
defaults: {ambient: 5 °C, consumable: ISO 17632-A T 46 4 P M21 1 H5, assumptions: {ambient: a cold month}}
steels:
  plate: {grade: S355J2, composition: {C: 0.17, Mn: 1.45}, origin: {certificate: Z1, heat: H1}, delivery: AR}
  listed: {title: from the list, certificate: C1, grade: S355N, yield_strength: 380 MPa}
  old: {era: open-hearth-early, samples: [{C: 0.2}, {C: 0.18}], sample_place: centre, origin: {laboratory: L 1}}
joints:
  - {joint: J1, title: A joint, note: nothing, form: butt, process: "136", hydrogen: 5 mL/100g, heat_input: 0.9 to 1.4,
     restraint: {value: [low, medium], because: so, origin: {drawing: S 1}}, assumptions: {hydrogen: so},
     weld_metal: {composition: {C: 0.08}, origin: {certificate: D 1}, yield_strength: 500},
     members: [{steel: plate, thickness: 30 mm, continuous: "no"}, {steel: listed, thickness: 1.25 in}, {steel: old,
     thickness: 12}]}
  - {csv: w.csv}
"""
ODD = [
    '""',
    "0",
    "-1",
    "true",
    "1.0e+300",
    "[]",
    "{}",
    "[[1], {a: 1}]",
    "{a: {b: 1}}",
    '"\\u00e4 to \\u00f6"',
    '"< "',
    "[1, 2]",
]


def leaves(data: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    """The path of every part of plain data, from the top down."""
    inside = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ()
    return [path, *(found for key, part in inside for found in leaves(part, (*path, key)))]


def put(data: Any, path: tuple[Any, ...], value: Any) -> Any:
    """Plain data with another value at a path."""
    if not path:
        return value
    copy = dict(data) if isinstance(data, dict) else list(data)
    copy[path[0]] = put(data[path[0]], path[1:], value)
    return copy


def test_whatever_stands_where_a_project_is_read_or_refused(tmp_path: Path, knowledge: Knowledge) -> None:
    (tmp_path / "c.csv").write_text("certificate,heat,C,Mn\nC1,H1,0.16,1.4\n", encoding="utf-8")
    (tmp_path / "w.csv").write_text(
        "joint,form,process,steel 1,thickness 1,steel 2,thickness 2\nW1,tee,136,plate,20,old,12\n", encoding="utf-8"
    )
    assert len(project_of(tmp_path, knowledge, EVERYTHING).joints) == 2
    data = yaml.safe_load(EVERYTHING)
    refused = 0
    for path in leaves(data):
        for odd in ODD:
            text = json.dumps(put(data, path, yaml.safe_load(odd)))
            try:
                project_of(tmp_path, knowledge, text)
            except Refused as fault:
                assert all(problem.what for problem in fault.problems)  # noqa: PT017
                refused += 1
    assert refused > 500
