"""Sheets of steels: every cell is what an ordinary project of that steel, thickness, hydrogen and restraint decides."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml

from weldbasis.evaluate import evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Grade, Knowledge
from weldbasis.project import read_project
from weldbasis.reading import value_of
from weldbasis.site.sheet_page import cell_html, conditions, preheat_picture, sheet_body
from weldbasis.state import demanding_end
from weldbasis.survey.sheets import BESIDE, PREHEAT, Sheets, decide_sheets, sheet
from weldbasis.trace import Value
from weldbasis.values import Numbers


@pytest.fixture(scope="module")
def sheets(knowledge: Knowledge, graph: KnowledgeGraph) -> Sheets:
    return decide_sheets(knowledge, graph, conditions())


def test_cells_are_what_a_project_decides(
    sheets: Sheets, knowledge: Knowledge, graph: KnowledgeGraph, tmp_path: Path
) -> None:
    said, draw = sheets.conditions, random.Random(5)
    sizes = [len(sheets.steels), *(len(said[axis]) for axis in ("thickness_mm", "hydrogen", "restraint"))]
    cells = [tuple(map(draw.randrange, sizes)) for _ in range(120)]
    steels: dict[str, Any] = {}
    joints = []
    for number, (steel, t, h, r) in enumerate(cells):
        one = sheets.steels[steel]
        steels[f"s{steel}"] = {"grade": one.id} if isinstance(one, Grade) else {"era": one.id}
        parts = [{"steel": f"s{steel}", "thickness": said["thickness_mm"][t]} for _ in range(2)]
        fields = {**said["joint"], **said["hydrogen"][h]["fields"], "restraint": said["restraint"][r]}
        joints.append({"joint": f"J{number}", "members": parts, **fields})
    project = {"project": "cells", "title": "Cells", "rules": "working", "steels": steels, "joints": joints}
    (tmp_path / "project.yaml").write_text(yaml.safe_dump(project, allow_unicode=True), encoding="utf-8")
    plain = evaluate(knowledge, read_project(tmp_path, knowledge).facts, graph)
    restraints = len(said["restraint"])
    for number, (steel, t, h, r) in enumerate(cells):
        row = sheets.lattice.row(steel, t, h * restraints + r)
        for name in (PREHEAT, *BESIDE):
            quantity = knowledge.quantities[name]
            wanted = value_of(plain.columns[name], quantity, number)
            assert value_of(sheets.evaluation.columns[name], quantity, row) == wanted, (joints[number], name)


def test_every_grade_and_envelope_has_a_sheet_that_leaves_nothing_silent(sheets: Sheets, knowledge: Knowledge) -> None:
    assert {steel.id for steel in sheets.steels} == {*knowledge.grades, *knowledge.eras}
    for number in range(0, len(sheets.steels), 9):
        found = sheet(sheets, number)
        made = [line for line in found.lines if line.made]
        assert {line.thickness_mm for line in found.lines} == set(sheets.conditions["thickness_mm"])
        for line in made:
            assert len(line.preheat) == len(sheets.conditions["hydrogen"])
        if any(value.presence == "absent" for line in made for value in line.preheat):
            assert found.gaps, found.steel.id
            assert all("The nearest rule is " in gap or "No rule gives it" in gap for gap in found.gaps)


def test_the_picture_shows_no_more_than_the_table(sheets: Sheets) -> None:
    """No point where the steel is not made or nothing is covered, and no line across such a place."""
    gaps = 0
    for number in range(0, len(sheets.steels), 3):
        found = sheet(sheets, number)
        made = {line.thickness_mm for line in found.lines if line.made}
        assert set(found.worst) == made
        shown = sum(value.high is not None for values in found.worst.values() for value in values)
        assert preheat_picture(found, sheets.conditions).count("<circle") == shown, found.steel.id
        gaps += len(made) < len(sheets.conditions["thickness_mm"])
    assert gaps > 5


def test_more_hydrogen_and_restraint_never_ask_for_less(sheets: Sheets) -> None:
    """The demanding end, over the whole lattice: along hydrogen and along restraint it never falls."""
    column = sheets.evaluation.columns[PREHEAT]
    assert isinstance(column, Numbers)
    said = sheets.conditions
    shape = (len(said["hydrogen"]), len(said["restraint"]), len(sheets.steels), len(said["thickness_mm"]))
    top = column.high.reshape(shape)
    for axis in (0, 1):
        step = np.diff(top, axis=axis)
        falls = np.argwhere(step < -1e-9)
        assert len(falls) == 0, [(sheets.steels[at[2]].id, said["thickness_mm"][at[3]]) for at in falls[:5]]


def test_cells_show_the_demanding_end_first(knowledge: Knowledge) -> None:
    preheat, interpass, pwht = (knowledge.quantities[q] for q in (PREHEAT, "max_interpass", "pwht"))
    assert cell_html(Value(20, 110), preheat) == '<b>110</b> <span class="wb-easy">20</span>'
    assert cell_html(Value(200, 250), interpass) == '<b>200</b> <span class="wb-easy">250</span>'
    assert cell_html(Value(110, 110), preheat) == "<b>110</b>"
    assert cell_html(Value(20, 110, presence="maybe"), preheat).startswith("<b>110</b>†")
    assert "not covered" in cell_html(Value(presence="absent"), preheat)
    both = Value(any_of=("not-needed", "required"))
    assert cell_html(both, pwht) == '<b>required</b> <span class="wb-easy">not needed</span>'
    assert demanding_end(both, pwht) == "required"


def test_pages_are_small_and_the_same_twice(sheets: Sheets) -> None:
    for number in (0, 100, 200, len(sheets.steels) - 1):
        body = sheet_body(sheets, number, "index.html")
        assert body == sheet_body(sheets, number, "index.html")
        assert len(body.encode()) < 30_000
        assert "Decisions support qualified judgement" in body
