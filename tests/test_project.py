"""Projects: what is read, where it comes from, and what is refused with file, line and the nearest word."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from weldbasis.knowledge import Knowledge
from weldbasis.problem import Refused
from weldbasis.project import Project, read_project
from weldbasis.project.grades import NoSuchGrade, find_grade, limits_in
from weldbasis.ranges import Range
from weldbasis.values import ABSENT, ASSUMED, UNKNOWN, Numbers

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


GRADES = [
    ("S355J2+N", "S355J2"),
    ("S355 J2+N", "S355J2"),
    ("s355j2", "S355J2"),
    ("A572-50", None),
    ("ASTM A572 Gr. 50", None),
    ("St 52-3", None),
    ("S460M", "S460M"),
    ("P355NH", "P355NH"),
]


@pytest.mark.parametrize(("text", "designation"), GRADES)
def test_grades_are_found_by_usual_spellings(text: str, designation: str | None, knowledge: Knowledge) -> None:
    grade = find_grade(text, knowledge)
    assert designation is None or grade.designation == designation


def test_unknown_grade_lists_the_nearest(knowledge: Knowledge) -> None:
    with pytest.raises(NoSuchGrade, match="nearest are"):
        find_grade("S356J2", knowledge)


def test_limits_follow_thickness(knowledge: Knowledge) -> None:
    grade = find_grade("S235JR", knowledge)
    thin, thick = limits_in(grade, Range(20, 20)), limits_in(grade, Range(60, 60))
    assert thin is not None
    assert thick is not None
    assert (thin.composition["C"][1], thick.composition["C"][1]) == (0.17, 0.2)
    both = limits_in(grade, Range(30, 60))
    assert both is not None
    assert both.composition["C"] == (0.0, 0.2)


def test_csv_joints_and_certificates(tmp_path: Path, knowledge: Knowledge) -> None:
    (tmp_path / "w.csv").write_text(
        "joint;form;process;hydrogen [mL/100g];heat_input [kJ/mm];steel 1;thickness 1 [mm];steel 2;thickness 2 [in]\n"
        "J1;butt;135;3;1.2;p;20;p;1\n",
        encoding="utf-8-sig",
    )
    (tmp_path / "c.csv").write_text("certificate,heat,C,Si,Mn\nC1,H1,0.16,0.3,1.4\n", encoding="utf-8")
    text = (
        "project: t\ntitle: t\nrules: working\ncertificates: {csv: c.csv}\n"
        'steels: {p: {grade: S355N, certificate: "C1"}}\njoints: {csv: w.csv}\n'
    )
    project = project_of(tmp_path, knowledge, text)
    thickness = project.facts.given["member_thickness"]
    assert isinstance(thickness, Numbers)
    np.testing.assert_allclose(thickness.low[:2], [20, 25.4])
    assert project.steels["p"].composition["C"] == (0.16, 0.16)


def test_csv_faults_name_their_cell(tmp_path: Path, knowledge: Knowledge) -> None:
    (tmp_path / "w.csv").write_text('joint,form,heat_input [kJ/mm]\nJ1,butt\nJ2,tee,"1,2"\n', encoding="utf-8")
    text = "project: t\ntitle: t\nrules: working\nsteels: {p: {grade: S355N}}\njoints: {csv: w.csv}\n"
    with pytest.raises(Refused) as caught:
        project_of(tmp_path, knowledge, text)
    places = [(problem.place.line, problem.place.column) for problem in caught.value.problems]
    assert places == [(2, 1), (3, 3)]


def test_every_grade_keeps_its_limits_in_order(knowledge: Knowledge) -> None:
    """Health of the grades: ranges in order, bands that do not overlap, caps that the composition can reach."""
    faults = []
    for grade in knowledge.grades.values():
        for band in grade.bands:
            faults += [
                f"{grade.id} {name}"
                for name, limit in band.composition.items()
                if limit.low > limit.high or 60 < limit.high < float("inf")
            ]
            least = sum(
                max(band.composition[e].low, 0) * f
                for e, f in (
                    ("C", 1),
                    ("Mn", 1 / 6),
                    ("Cr", 0.2),
                    ("Mo", 0.2),
                    ("V", 0.2),
                    ("Ni", 1 / 15),
                    ("Cu", 1 / 15),
                )
                if e in band.composition and band.composition[e].low > 0
            )
            if band.ce_iiw_max is not None and least > band.ce_iiw_max:
                faults.append(f"{grade.id}: least CE {least:.2f} above its cap {band.ce_iiw_max}")
        ends = [(band.thickness.low, band.thickness.high) for band in grade.bands]
        faults += [f"{grade.id}: bands overlap" for a, b in pairwise(ends) if b[0] < a[1]]
    assert faults == []
    assert len(knowledge.grades) >= 300
    assert len(knowledge.eras) >= 25
