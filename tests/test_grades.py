"""Grades: every usual spelling finds its grade, and limits hold whatever band a thickness falls in."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from weldbasis.knowledge import Grade, GradeBand, Knowledge
from weldbasis.project.grades import NoSuchGrade, delivery_in, find_grade, limits_in, reach_of, squeezed
from weldbasis.ranges import Range, parse_range

SPELLINGS = [
    ("S355J2", "EN-S355J2"),
    ("S355J2+N", "EN-S355J2"),
    ("S355 J2+N", "EN-S355J2"),
    ("S355J2 + AR", "EN-S355J2"),
    ("s355j2", "EN-S355J2"),
    ("EN-S355J2", "EN-S355J2"),
    ("1.0577", "EN-S355J2"),
    ("S355J2+N (1.0577)", "EN-S355J2"),
    ("EN 10025-2:2004 S355J2+N", "EN-S355J2"),
    ("EN10025-2 S355J2", "EN-S355J2"),
    ("A572-50", "A572-50"),
    ("ASTM A572 Gr. 50", "A572-50"),
    ("A572 gr50", "A572-50"),
    ("A572Gr50", "A572-50"),
    ("A 572 Grade 50", "A572-50"),
    ("SA-516 Gr.70", "A516-70"),
    ("SA516-70", "A516-70"),
    ("A106 Gr.B", "A106-B"),
    ("A387 Grade 2 Class 1", "A387-2"),
    ("A387-21", "A387-21"),
    ("St 52-3", "H-St52-3"),
    ("st52-3", "H-St52-3"),
    ("13CrMo45", "EN-13CrMo4-5"),
    ("13 CrMo 4-5", "EN-13CrMo4-5"),
    ("S460M", "EN-S460M"),
    ("P355NH", "EN-P355NH"),
    ("SS 400", "JIS-SS400"),
]


@pytest.mark.parametrize(("text", "name"), SPELLINGS)
def test_usual_spellings_find_their_grade(text: str, name: str, knowledge: Knowledge) -> None:
    assert find_grade(text, knowledge).id == name


def test_every_grade_is_found_by_its_id_and_by_every_name_it_has_alone(knowledge: Knowledge) -> None:
    names: dict[str, set[str]] = {}
    for grade in knowledge.grades.values():
        for name in (grade.designation, *grade.aliases):
            names.setdefault(name, set()).add(grade.id)
        assert find_grade(grade.id, knowledge) is grade
    lost = [name for name, ids in names.items() if len(ids) == 1 and find_grade(name, knowledge).id not in ids]
    assert lost == []


def test_blanks_case_and_dashes_do_not_matter(knowledge: Knowledge) -> None:
    """Every designation in small letters and with its blanks as dashes still finds its grade, or is told apart."""
    for grade in knowledge.grades.values():
        for text in (grade.designation.lower(), grade.designation.replace(" ", "-")):
            try:
                assert find_grade(text, knowledge).designation == grade.designation
            except NoSuchGrade as fault:
                assert grade.id in str(fault) or grade.designation in str(fault)  # noqa: PT017


REFUSED = [
    ("S355J9", "no grade goes by 'S355J9'; nearest are S355JR, S355J2, S355J0"),
    ("A36", "'A36' may be any of ASTM A36 bar, ASTM A36 plate, ASTM A36 shapes; write one of these"),
    ("S355J2H", "'S355J2H' may be any of EN10210-S355J2H, EN10219-S355J2H; write one of these"),
    ("API 5L X65", "may be any of API 5L X65 PSL1 seamless, API 5L X65M PSL2, API 5L X65Q PSL2"),
    ("X65", "no grade goes by 'X65'; nearest are API 5L X65 PSL1 seamless"),
    ("A514", "ASTM A514 Grade M and 2 more"),
    ("zzzz", "no grade goes by 'zzzz'"),
    ("", "no grade goes by ''"),
    ("+N", "no grade goes by '+N'"),
]


@pytest.mark.parametrize(("text", "words"), REFUSED)
def test_what_is_no_grade_or_several_is_said(text: str, words: str, knowledge: Knowledge) -> None:
    with pytest.raises(NoSuchGrade) as caught:
        find_grade(text, knowledge)
    assert words in str(caught.value)


def test_a_name_that_is_offered_can_be_written(knowledge: Knowledge) -> None:
    for text in ("A36", "S355J2H", "SM490", "St37", "S690QL1"):
        with pytest.raises(NoSuchGrade) as caught:
            find_grade(text, knowledge)
        offered = str(caught.value).split(" any of ")[-1].split("nearest are ")[-1].removesuffix("; write one of these")
        for name in offered.split(", "):
            assert find_grade(name, knowledge)


@given(st.text(max_size=30))
def test_any_text_gives_a_grade_or_a_message(knowledge: Knowledge, text: str) -> None:
    try:
        find_grade(text, knowledge)
    except NoSuchGrade as fault:
        assert str(fault)  # noqa: PT017


def test_dashes_count_between_digits_only() -> None:
    assert squeezed("A387 Grade 2 Class 1") == "a387-2-1"
    assert squeezed("A387 Grade 21") == "a387-21"
    assert squeezed("St 52-3") == "st52-3"


@pytest.mark.parametrize(
    ("text", "delivery"), [("S355J2+N", "N"), ("S355J2 + AR", "AR"), ("S690QL+QT", "QT"), ("S355J2", ""), ("S355N", "")]
)
def test_delivery_condition_in_a_designation(text: str, delivery: str) -> None:
    assert delivery_in(text) == delivery


def test_limits_follow_thickness(knowledge: Knowledge) -> None:
    grade = find_grade("S235JR", knowledge)
    thin, thick, both = (limits_in(grade, Range(*ends)) for ends in ((20, 20), (60, 60), (30, 60)))
    assert thin
    assert thick
    assert both
    assert (thin.composition["C"].high, thick.composition["C"].high, both.composition["C"].high) == (0.17, 0.2, 0.2)
    assert (thin.yield_min, both.yield_min) == (225, 215), "the least strength of any band that may hold"


BANDS = (
    GradeBand(parse_range("(0, 16]"), {"C": Range(0.0, 0.2), "Cr": Range(0.4, 0.6)}, ce_iiw_max=0.43, yield_min=355),
    GradeBand(parse_range("(16, 40]"), {"C": Range(0.0, 0.22), "Cu": Range(0.2, math.inf)}, ce_iiw_max=0.45),
    GradeBand(parse_range("(40, 63)"), {"C": Range(0.05, 0.22)}, pcm_max=0.24),
)


@pytest.fixture(scope="module")
def banded(knowledge: Knowledge) -> Grade:
    return replace(find_grade("S355J2", knowledge), bands=BANDS)


def test_a_range_of_thickness_takes_the_loosest_limits(banded: Grade) -> None:
    found = limits_in(banded, Range(10, 30))
    assert found
    assert found.composition["C"] == Range(0.0, 0.22)
    assert found.composition["Cu"].high == math.inf
    assert found.partly == {"Cr", "Cu"}
    assert (found.ce_iiw, found.yield_min) == (0.45, None), "a cap of one band only is no cap"


@pytest.mark.parametrize(
    ("ends", "inside"),
    [
        ((16, 16), True),
        ((10, 62.9), True),
        ((10, 63), False),
        ((63, 63), False),
        ((60, 80), False),
        ((0, 5), False),
        ((0.5, 5), True),
    ],
)
def test_beyond_its_bands_a_grade_limits_nothing(banded: Grade, ends: tuple[float, float], inside: bool) -> None:
    assert (limits_in(banded, Range(*ends)) is not None) is inside


def test_a_gap_between_bands_is_not_bridged(banded: Grade) -> None:
    holed = replace(banded, bands=(BANDS[0], BANDS[2]))
    assert limits_in(holed, Range(10, 50)) is None
    assert limits_in(holed, Range(45, 50)) is not None
    assert (reach_of(holed).low, reach_of(holed).high) == (0, 63)


def test_limits_of_a_range_hold_those_of_every_thickness_in_it(knowledge: Knowledge) -> None:
    for grade in knowledge.grades.values():
        reach = reach_of(grade)
        low, high = max(reach.low, 0.5) + 0.01, min(reach.high, 300.0) - 0.01
        whole = limits_in(grade, Range(low, high))
        if low >= high or whole is None:
            continue
        for share in (0.0, 0.3, 0.7, 1.0):
            at = low + share * (high - low)
            point = limits_in(grade, Range(at, at))
            assert point, grade.id
            for element, limit in point.composition.items():
                wide = whole.composition[element]
                assert wide.low <= limit.low <= limit.high <= wide.high, (grade.id, element)


def test_every_grade_keeps_its_limits_in_order(knowledge: Knowledge) -> None:
    """Health of the grades: ranges in order, bands that do not overlap, caps that the composition can reach."""
    faults = []
    shares = {"C": 1, "Mn": 1 / 6, "Cr": 0.2, "Mo": 0.2, "V": 0.2, "Ni": 1 / 15, "Cu": 1 / 15}
    for grade in knowledge.grades.values():
        for band in grade.bands:
            limits = band.composition
            faults += [
                f"{grade.id} {name}"
                for name, limit in limits.items()
                if limit.low > limit.high or 60 < limit.high < math.inf
            ]
            least = sum(max(limits[e].low, 0) * share for e, share in shares.items() if e in limits)
            if band.ce_iiw_max is not None and least > band.ce_iiw_max:
                faults.append(f"{grade.id}: least CE {least:.2f} above its cap {band.ce_iiw_max}")
        ends = [(band.thickness.low, band.thickness.high) for band in grade.bands]
        faults += [f"{grade.id}: bands overlap" for a, b in pairwise(ends) if b[0] < a[1]]
    assert faults == []
    assert len(knowledge.grades) >= 300
    assert len(knowledge.eras) >= 25
