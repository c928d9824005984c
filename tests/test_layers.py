"""House rules on published rules: what counts, what is beneath, and what is refused."""

from __future__ import annotations

from pathlib import Path

import pytest

from house_folder import change, make_house
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.problem import Refused


@pytest.fixture
def house(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    return make_house(tmp_path)


def said(folder: Path) -> list[str]:
    with pytest.raises(Refused) as caught:
        load_knowledge(folder)
    return [str(problem) for problem in caught.value.problems]


def test_the_higher_layer_counts(house: Path) -> None:
    rules: Knowledge = load_knowledge(house)
    assert rules.layers == ("published", "yard")
    assert (rules.rules["min-preheat"].version, rules.rules["min-preheat"].layer) == (3, "yard")
    assert rules.rules["thickness"].layer == "published"
    assert "outdoors-cold" not in rules.rules
    assert rules.quantities["restraint"].if_not_given == "low"
    assert set(rules.beneath) == {("rule", "min-preheat"), ("rule", "outdoors-cold"), ("quantity", "restraint")}
    assert rules.beneath["rule", "min-preheat"].version == 2
    assert [a.how for a in rules.amendments] == ["tighten", "add", "withdraw", "relax"]


def test_cases_of_replaced_rules_go_with_them(house: Path) -> None:
    assert load_knowledge(house.parent / "kb").cases
    assert load_knowledge(house).cases == ()


def test_the_digest_is_that_of_the_stack(house: Path) -> None:
    assert load_knowledge(house).digest != load_knowledge(house.parent / "kb").digest
    before = load_knowledge(house).digest
    change(house / "amendments.yaml", "Two cracks", "Three cracks")
    assert load_knowledge(house).digest == before
    change(house.parent / "kb/rules/heat/heat-input-arc.yaml", "0.8*U", "0.9*U")
    assert load_knowledge(house).digest != before


BY = "approved_by: welding authority}\n"
SPOILED = [
    ("amendments.yaml", "  - {rule: min-preheat, how: tighten, why: Two cracks under thick lugs., " + BY, "",
     "house/rules/preheat/min-preheat.yaml:1:1: rule 'min-preheat' replaces the one beneath without a reason",
     "add to amendments.yaml: {rule: min-preheat, how: replace, why: …, approved_by: …}"),
    ("amendments.yaml", "  - {rule: yard-lamps, how: add, why: Lamps of the hall are weak., " + BY, "",
     "house/rules/yard/yard-lamps.yaml:1:1: rule 'yard-lamps' is added without a reason",
     "add to amendments.yaml: {rule: yard-lamps, how: add, why: …, approved_by: …}"),
    ("amendments.yaml", "rule: min-preheat, how: tighten", "rule: min-preheat, how: add",
     "house/amendments.yaml:2:6: rule 'min-preheat' stands in the layer beneath already",
     "write how: replace, tighten or relax; or give the new one another id"),
    ("amendments.yaml", "rule: yard-lamps, how: add", "rule: yard-lamps, how: tighten",
     "house/amendments.yaml:3:6: there is no rule 'yard-lamps' beneath to tighten",
     "Known: heat-input-arc, min-preheat"),
    ("amendments.yaml", "rule: outdoors-cold", "rule: outdoor-cold",
     "house/amendments.yaml:4:6: there is no rule 'outdoor-cold' beneath to withdraw", "Did you mean 'outdoors-cold'?"),
    ("amendments.yaml", "rule: outdoors-cold, how: withdraw", "rule: outdoors-cold, how: replace",
     "house/amendments.yaml:4:6: this layer holds no rule 'outdoors-cold'", "write the rule, or take the entry out"),
    ("amendments.yaml", "rule: min-preheat, how: tighten", "rule: min-preheat, how: withdraw",
     "house/amendments.yaml:2:6: rule 'min-preheat' is withdrawn and written anew", "take the entry out, or the rule"),
    ("amendments.yaml", ",\n     justified_by: survey of 40 frames", "",
     "house/amendments.yaml:5:6: quantity 'restraint' is relaxed without one", "add justified_by: …"),
    ("amendments.yaml", "rule: yard-lamps", "rule: min-preheat",
     "house/amendments.yaml:3:6: rule 'min-preheat' is amended here a second time", "say everything in one entry"),
    ("amendments.yaml", "how: tighten", "how: stiffen", "house/amendments.yaml:2:25: 'stiffen'", "tighten"),
    ("amendments.yaml", "why: Lamps of the hall are weak., ", "", "house/amendments.yaml:3:5: 'why' is missing here",
     "add 'why: …'"),
    ("kb.yaml", "layers: [published, yard]", "layers: [yard]",
     "house/kb.yaml:4:1: the layers here are published, yard", "write layers: [published, yard]"),
    ("kb.yaml", "stands_on: ../kb\n", "", "house/kb.yaml:4:1: the layers here are yard", "write layers: [yard]"),
    ("kb.yaml", "stands_on: ../kb", "stands_on: ../base",
     "house/kb.yaml:5:1: '../base' is no set of rules", "write published, or a folder that holds a kb.yaml"),
    ("kb.yaml", "stands_on: ../kb", "stands_on: ../house", "house/kb.yaml:5:1: '../house' leads back to this set",
     "name the set beneath it"),
    ("kb.yaml", "stands_on: ../kb", "stands_on: ../kb\nstands_on_release: \"2026.1\"",
     "kb/releases/2026.1.json:1:1: there is no release '2026.1'", "there is none yet"),
]  # fmt: skip


@pytest.mark.parametrize(("file", "old", "new", "what", "do"), SPOILED, ids=[s[3][:70] for s in SPOILED])
def test_what_does_not_fit_is_told_with_its_place_and_remedy(
    house: Path, file: str, old: str, new: str, what: str, do: str
) -> None:
    change(house / file, old, new)
    found = [text for text in said(house) if what in text]
    assert found, said(house)
    assert do in found[0]


def test_a_source_of_a_lower_layer_is_not_written_over(house: Path) -> None:
    (house / "sources").mkdir()
    text = (house.parent / "kb/sources/small-handbook.yaml").read_text(encoding="utf-8")
    (house / "sources/small-handbook.yaml").write_text(text.replace("small", "Small", 1), encoding="utf-8")
    change(house / "sources/small-handbook.yaml", "id: Small-handbook", "id: small-handbook")
    assert "source 'small-handbook' stands in the layer beneath too" in said(house)[0]


def test_three_layers(house: Path) -> None:
    """A shop's layer on the house's: what the house withdrew stays so, what the shop replaces counts."""
    shop = house.parent / "shop"
    (shop / "rules/yard").mkdir(parents=True)
    (shop / "kb.yaml").write_text(
        "title: Shop\ncustodian: foreman\nrelease: working\nlayers: [published, yard, shop]\nstands_on: ../house\n",
        encoding="utf-8",
    )
    (shop / "amendments.yaml").write_text(
        "amendments:\n  - {rule: yard-lamps, how: withdraw, why: New lamps., approved_by: welding authority}\n",
        encoding="utf-8",
    )
    rules = load_knowledge(shop)
    assert set(rules.rules) == {"heat-input-arc", "min-preheat", "thickness"}
    assert rules.rules["min-preheat"].layer == "yard"
