"""A rule against the one it replaces: verdicts that are plain to see, and against brute force over drawn tables."""

from __future__ import annotations

import dataclasses
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from house_folder import SMALL, change, make_house
from weldbasis.authority.house import amended_records, house_problems
from weldbasis.authority.strictness import strictness_of
from weldbasis.knowledge import Knowledge, Rule
from weldbasis.load.knowledge import load_knowledge


@pytest.fixture(scope="module")
def small() -> Knowledge:
    return load_knowledge(SMALL)


def with_body(rule: Rule, **parts: Any) -> Rule:
    return dataclasses.replace(rule, body={**rule.body, **parts})


def table(rule: Rule, gives: list[Any], cuts: tuple[float, float] = (30, 60)) -> Rule:
    """Six cells: three ranges of thickness, two of restraint."""
    low, high = cuts
    ranges = [f"[1, {low:g}]", f"({low:g}, {high:g}]", f"({high:g}, 100]"]
    rows = [
        {"when": {"d": ranges[place // 2], "restraint": ["low", "medium"] if place % 2 else "high"}, "give": give}
        for place, give in enumerate(gives)
    ]
    return with_body(rule, rows=rows)


def brute(one: Rule, other: Rule) -> str:
    """Every whole and half millimetre under every restraint, cell by cell as written."""

    def value(rule: Rule, d: float, restraint: str) -> float:
        for row in rule.body["rows"]:
            low, high = (float(part) for part in row["when"]["d"][1:-1].split(","))
            inside = (low <= d if row["when"]["d"][0] == "[" else low < d) and d <= high
            if inside and restraint in row["when"]["restraint"]:
                return float("-inf") if row["give"] == "absent" else float(row["give"])
        return float("-inf")

    points = [(d / 2, r) for d in range(2, 201) for r in ("low", "medium", "high")]
    more = any(value(other, *p) > value(one, *p) for p in points)
    less = any(value(other, *p) < value(one, *p) for p in points)
    return "mixed" if more and less else "stricter" if more else "looser" if less else "same"


_GIVES = st.lists(st.sampled_from([20, 75, 120, "absent"]), min_size=6, max_size=6)
_CUTS = st.sampled_from([(30, 60), (20, 60), (30, 45.5)])


@given(_GIVES, _GIVES, _CUTS, _CUTS)
def test_tables_are_compared_whole(
    small: Knowledge, old: list[Any], new: list[Any], one: tuple[float, float], other: tuple[float, float]
) -> None:
    rule = small.rules["min-preheat"]
    before, after = table(rule, old, one), table(rule, new, other)
    found = strictness_of(before, after, small)
    assert found.whole
    assert found.verdict == brute(before, after)
    assert (found.stricter is not None) == (found.verdict in ("stricter", "mixed"))
    assert (found.looser is not None) == (found.verdict in ("looser", "mixed"))


def test_the_worst_example_is_the_worst(small: Knowledge) -> None:
    rule = small.rules["min-preheat"]
    found = strictness_of(table(rule, [20, 20, 75, 75, 120, 75]), table(rule, [20, 20, 20, 75, 20, 120]), small)
    assert found.verdict == "mixed"
    assert found.looser is not None
    assert (found.looser.before, found.looser.after) == ("120 °C", "20 °C")
    assert found.looser.given["Restraint"] == "stiff on all sides"
    assert found.stricter is not None
    assert (found.stricter.before, found.stricter.after) == ("75 °C", "120 °C")


def test_formulas_limits_and_conditions(knowledge: Knowledge) -> None:
    cet = knowledge.rules["preheat-cet-member"]
    text = cet.body["formula"]
    stricter = with_body(cet, formula=text.replace("697", "700"))
    assert strictness_of(cet, stricter, knowledge).verdict == "stricter"
    assert strictness_of(stricter, cet, knowledge).verdict == "looser"
    assert strictness_of(cet, with_body(cet, formula=text.replace("53*CET", "60*CET")), knowledge).verdict == "stricter"
    narrow = dataclasses.replace(cet, valid_within={**cet.valid_within, "thickness": "[10, 40]"})
    assert strictness_of(cet, narrow, knowledge).verdict == "looser"
    window = knowledge.rules["interpass-window-narrow"]
    wider = with_body(window, must_hold=window.body["must_hold"].replace("20", "30"))
    assert wider.body != window.body
    assert strictness_of(window, wider, knowledge).verdict == "stricter"
    stop = with_body(window, level="stop")
    assert strictness_of(window, stop, knowledge).verdict == "stricter"


def test_every_rule_is_as_strict_as_itself(knowledge: Knowledge) -> None:
    for rule in list(knowledge.rules.values())[::5]:
        assert strictness_of(rule, rule, knowledge).verdict in ("same", "no direction")


def test_what_cannot_be_compared_says_why(knowledge: Knowledge) -> None:
    one, other = knowledge.rules["preheat-cet-member"], knowledge.rules["interpass-window-narrow"]
    found = strictness_of(one, other, knowledge)
    assert (found.verdict, found.why) == ("not comparable", "the two rules give different things")
    gone = dataclasses.replace(knowledge, quantities={q: v for q, v in knowledge.quantities.items() if q != "hydrogen"})
    assert "does not fit the vocabulary any more" in strictness_of(one, one, gone).why


def problems(house: Path) -> list[str]:
    return [str(problem) for problem in house_problems(amended_records(load_knowledge(house)))]


def test_amendments_must_be_what_they_say(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    house = make_house(tmp_path)
    verdicts = {one.amendment.id: one.strictness.verdict for one in amended_records(load_knowledge(house))}
    assert verdicts == {
        "min-preheat": "stricter", "yard-lamps": "stricter", "outdoors-cold": "looser", "restraint": "looser"
    }  # fmt: skip
    assert problems(house) == [
        "house/amendments.yaml:4:6: rule 'outdoors-cold' asks for less than the layer beneath\n"
        "    a whole rule\n    name what allows it under justified_by, or ask for no less"
    ]
    change(
        house / "amendments.yaml",
        "withdraw, why: The yard welds in a hall.",
        "withdraw, justified_by: hall 3, why: A hall.",
    )
    assert problems(house) == []
    change(house / "rules/preheat/min-preheat.yaml", "give: 90", "give: 60")
    assert problems(house) == [
        "house/amendments.yaml:2:6: rule 'min-preheat' is said to tighten, and asks for less somewhere\n"
        "    for example 60 °C instead of 75 °C at Governing thickness 65 mm, Restraint low\n"
        "    write how: replace or relax, and name the justification under justified_by"
    ]
    change(house / "amendments.yaml", "min-preheat, how: tighten", "min-preheat, justified_by: trials, how: relax")
    assert problems(house) == []
    change(house / "rules/preheat/min-preheat.yaml", "give: 60", "give: 75")
    assert "is said to relax, and asks for no less anywhere" in problems(house)[0]
