"""Methods against each other: the lattice is what it says, comparisons are right, the page says nothing by hand."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge
from weldbasis.load.yaml_text import read_yaml
from weldbasis.places import site_folder
from weldbasis.project.given import Fact
from weldbasis.ranges import Range
from weldbasis.site.content import Content
from weldbasis.site.method_curves import Curve, Point, method_curves
from weldbasis.site.methods_page import methods_body, plan_of, printed_points
from weldbasis.survey.agreement import (
    Lattice,
    compare,
    effect,
    limits_left,
    share_inside,
    spreads,
    walk_lattice,
    widest,
)
from weldbasis.survey.typical import typical_analysis
from weldbasis.values import Numbers

DATA = read_yaml(Path(site_folder()) / "measured" / "methods.yaml").data
PLAN = plan_of(DATA)


@pytest.fixture(scope="module")
def lattice(knowledge: Knowledge, graph: KnowledgeGraph) -> Lattice:
    return walk_lattice(PLAN, knowledge, graph)


@pytest.fixture(scope="module")
def body(knowledge: Knowledge, graph: KnowledgeGraph) -> str:
    return methods_body(Content(knowledge, graph, ()))


def test_every_method_and_steel_of_the_plan_is_known(knowledge: Knowledge) -> None:
    assert set(PLAN.methods) <= set(knowledge.quantities)
    assert set(PLAN.steels) <= set(knowledge.grades)


def number(found: dict[str, Fact], name: str) -> float:
    value = found[name].value
    assert isinstance(value, Range)
    assert value.low == value.high
    return value.low


def test_typical_analysis_follows_the_stated_shares(knowledge: Knowledge) -> None:
    found = typical_analysis(knowledge, knowledge.grades["A572-50"], 20.0, PLAN.shares, PLAN.residual_share)
    assert found
    assert number(found, "carbon") == pytest.approx(PLAN.shares["C"] * 0.23)
    assert number(found, "manganese") == pytest.approx(PLAN.shares["Mn"] * 1.35)
    assert number(found, "chromium") == pytest.approx(PLAN.residual_share * 0.30)  # the vocabulary's residual level
    assert all(fact.assumed for fact in found.values())
    creep = typical_analysis(knowledge, knowledge.grades["EN-13CrMo4-5"], 20.0, PLAN.shares, PLAN.residual_share)
    assert creep
    assert number(creep, "chromium") == pytest.approx(0.925, abs=0.03)  # the middle of 0.70 to 1.15 %


def test_no_analysis_beyond_its_standard(knowledge: Knowledge) -> None:
    grade = knowledge.grades["EN-S690QL"]
    assert typical_analysis(knowledge, grade, 390.0, PLAN.shares, PLAN.residual_share) is None


def test_analyses_stay_under_the_caps_of_their_grades(knowledge: Knowledge, lattice: Lattice) -> None:
    evaluation = lattice.evaluation
    ce = evaluation.columns["ce_iiw"]
    assert isinstance(ce, Numbers)
    for row, joint in enumerate(evaluation.facts.joints):
        name, thickness = joint.split(" ")[:2]
        for band in knowledge.grades[name].bands:
            if band.ce_iiw_max is not None and band.thickness.low < float(thickness) <= band.thickness.high:
                assert ce.high[evaluation.views["member"].starts[row]] <= band.ce_iiw_max + 0.005, joint


def test_the_lattice_holds_the_columns_at_their_places(lattice: Lattice) -> None:
    """Each value stands where its joint says: thickness, hydrogen, heat input and restraint are read back."""
    evaluation = lattice.evaluation
    column = evaluation.columns["preheat_cet"]
    thickness = evaluation.columns["thickness"]
    hydrogen = evaluation.columns["hydrogen"]
    heat_input = evaluation.columns["heat_input"]
    assert isinstance(column, Numbers)
    assert isinstance(thickness, Numbers)
    assert isinstance(hydrogen, Numbers)
    assert isinstance(heat_input, Numbers)
    steels = list(PLAN.steels)
    for row in range(0, len(evaluation.facts.joints), 97):
        steel = steels.index(evaluation.facts.joints[row].split(" ")[0])
        at = PLAN.thickness_mm.index(thickness.low[row])
        h, q = (PLAN.axes[axis].index(c.low[row]) for axis, c in (("hydrogen", hydrogen), ("heat_input", heat_input)))
        here = lattice.values[0, steel, at, h, q, row % len(PLAN.axes["restraint"])]
        expected = column.high[row]
        assert here == max(expected, 15.0) or (np.isnan(here) and np.isnan(expected))


def test_values_are_points_and_never_below_the_metal(lattice: Lattice) -> None:
    for method in PLAN.methods:
        column = lattice.evaluation.columns[method]
        assert isinstance(column, Numbers)
        np.testing.assert_allclose(column.low, column.high, atol=1e-6, equal_nan=True)
    assert np.nanmin(lattice.values) == DATA["joint"]["ambient"]


def test_comparisons_say_what_a_plain_loop_says(lattice: Lattice) -> None:
    first, second = lattice.flat(0), lattice.flat(1)
    both = [(a, b) for a, b in zip(first, second, strict=True) if np.isfinite(a) and np.isfinite(b)]
    pair = compare(lattice, 0, 1)
    assert pair
    assert pair.joints == len(both)
    assert pair.agree == pytest.approx(sum(abs(a - b) <= 25 for a, b in both) / len(both))
    assert pair.low <= pair.middle <= pair.high
    mirror = compare(lattice, 1, 0)
    assert mirror
    assert (mirror.agree, mirror.middle) == pytest.approx((pair.agree, -pair.middle))


def test_steelmaker_and_table_never_meet(lattice: Lattice) -> None:
    table, maker = PLAN.methods.index("preheat_prequalified"), PLAN.methods.index("preheat_steelmaker")
    assert compare(lattice, table, maker) is None


def test_the_widest_place_is_a_spread_of_its_steel(lattice: Lattice) -> None:
    for steel in range(len(PLAN.steels)):
        found = widest(lattice, steel)
        assert found
        apart, high, low, place = found
        assert apart == pytest.approx(spreads(lattice, steel).max())
        here = lattice.values[:, steel, place[0], place[1], place[2], place[3]]
        assert here[high] - here[low] == pytest.approx(apart)


def test_effects_have_the_sign_that_the_rules_state(lattice: Lattice) -> None:
    cet = PLAN.methods.index("preheat_cet")
    assert (effect(lattice, cet, "thickness").mean or 0) > 0
    assert (effect(lattice, cet, "hydrogen").mean or 0) > 0
    assert (effect(lattice, cet, "heat_input").mean or 0) < 0
    assert effect(lattice, cet, "restraint").mean == pytest.approx(0, abs=1e-9)
    assert effect(lattice, PLAN.methods.index("preheat_ito_bessyo"), "heat_input").mean is None


def test_limits_left_are_those_of_the_rule(lattice: Lattice, graph: KnowledgeGraph) -> None:
    left = {(entry.quantity.id, entry.limit): entry.share for entry in limits_left(lattice, graph, "preheat_cet")}
    thick = np.array(PLAN.thickness_mm)
    assert set(left) == {("thickness", "[10, 90]")}
    outside = 1 - share_inside(lattice, 0)
    assert left["thickness", "[10, 90]"] == pytest.approx(outside)
    assert outside == pytest.approx(((thick < 10) | (thick > 90)).mean(), abs=0.03)


def test_printed_points_are_the_seen_ones_of_a_category(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    points = printed_points(Content(knowledge, graph, ()), "B")
    assert {(point.thickness_mm, point.celsius) for point in points} >= {(20.0, 0.0), (38.0, 10.0), (65.0, 65.0)}
    assert printed_points(Content(knowledge, graph, ()), "") == []


def test_a_picture_breaks_its_line_where_a_method_stops_and_says_all_in_words() -> None:
    values = np.array([20.0, 30.0, np.nan, 50.0, 60.0])
    svg = method_curves("A & B", (5, 10, 15, 20, 25), [Curve("one", 0, values)], [Point(10, 25, "C")], 20.0, 100.0)
    assert svg.count("<polyline") == 2
    assert "<title>A &amp; B</title>" in svg
    assert "<desc>one: 20 °C at 5 mm to 60 °C at 25 mm.</desc>" in svg
    assert svg.count('class="wb-published"') == 2, "one point, and one in the key"


def test_a_lone_value_is_drawn() -> None:
    values = np.array([np.nan, 30.0, np.nan])
    svg = method_curves("A", (5, 10, 15), [Curve("one", 0, values)], [], None, 100.0)
    ends = [points.split() for points in re.findall(r'<polyline[^>]*points="([^"]*)"', svg)]
    assert all(len(run) > 1 for run in ends), "a line of one point shows nothing"


def test_the_page_holds_every_method_steel_and_picture(body: str, knowledge: Knowledge) -> None:
    for method in DATA["methods"]:
        assert method["short"].replace("'", "&#39;") in body
    for steel in DATA["steels"]:
        assert knowledge.grades[steel["grade"]].designation in body
    drawn = sum(bool(steel.get("drawn")) for steel in DATA["steels"])
    assert body.count("<svg") == body.count("<desc>") == drawn
    assert "nan" not in re.sub(r"[a-z]*nan[a-z]+|[a-z]+nan", "", body.lower())


def test_the_template_has_no_figures_of_its_own() -> None:
    """Every figure comes from the rules or the plan; names of standards and of methods apart."""
    text = (site_folder() / "templates" / "methods.html").read_text(encoding="utf-8")
    words = re.sub(r"\{[{%].*?[%}]\}|<[^>]*>", "", text, flags=re.DOTALL)
    words = words.replace("EN 1011-2", "")
    assert re.findall(r"\d+", words) == ["100", "20", "50", "0"], "mL/100 g; 20 to 50 mm is the step of `effect`; 0"
