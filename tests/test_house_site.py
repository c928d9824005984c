"""The site of a project under house rules, below the first site: its house, what a release moved, who signed."""

from __future__ import annotations

import re
import shutil
from pathlib import Path
from urllib.parse import unquote, urldefrag

import pytest

from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import site_folder
from weldbasis.project.pinned import rules_for
from weldbasis.site.publish import publish
from weldbasis.vet import vet

YARD = site_folder() / "projects" / "slip-yard-hatches"
HOUSE = site_folder() / "houses" / "slip-yard"


@pytest.fixture(scope="module")
def site(tmp_path_factory: pytest.TempPathFactory, knowledge: Knowledge) -> Path:
    folder = tmp_path_factory.mktemp("house")
    shutil.copytree(site_folder() / "start", folder / "small")
    file = folder / "small" / "project.yaml"
    text = file.read_text(encoding="utf-8").replace("@id@", "small").replace("@title@", "Small")
    file.write_text(text, encoding="utf-8")
    others = [(rules_for(YARD, with_cases=True), [YARD])]
    return publish([folder / "small"], folder / "site", knowledge, lambda *_: None, others).folder


def text_of(path: Path) -> str:
    return " ".join(re.sub(r"<[^>]+>", " ", path.read_text(encoding="utf-8")).split())


def test_the_house_is_sound_and_both_releases_load() -> None:
    assert vet(load_knowledge(HOUSE)).stops == ()
    assert len(load_knowledge(HOUSE).amendments) == 12
    for release in ("2027.1", "2027.2"):
        assert load_knowledge(HOUSE, release=release).release == release


def test_each_set_of_rules_has_a_site_and_they_lead_to_each_other(site: Path) -> None:
    home = (site / "index.html").read_text(encoding="utf-8")
    assert 'href="rules-2027.2/index.html"' in home
    assert "Slip Yard, hatch coamings" in text_of(site / "index.html")
    assert 'href="../index.html"' in (site / "rules-2027.2/index.html").read_text(encoding="utf-8")
    assert not (site / "rules/house.html").exists()


def test_every_link_of_the_site_below_leads_somewhere(site: Path) -> None:
    broken = []
    for path in sorted((site / "rules-2027.2").rglob("*.html")):
        if path.name == "404.html":
            continue
        for address in re.findall(r'href="([^"#][^"]*)"', path.read_text(encoding="utf-8")):
            target, _ = urldefrag(unquote(address))
            if re.match(r"[a-z]+:", address) or not target:
                continue
            if not (path.parent / target).resolve().exists():
                broken.append(f"{path.relative_to(site)} → {address}")
    assert broken == []


def test_the_page_of_the_house_tells_where_less_is_asked(site: Path) -> None:
    text = text_of(site / "rules-2027.2/rules/house.html")
    head, less = text.split("Where we ask for less", 1)
    assert "interpass-window-narrow rule: Narrow window between preheat and interpass limit tighten stricter" in head
    assert "old-steel-few-samples caution → no finding" in less
    assert "method B binds in every contract of the yard" in less
    assert "interpass-window-narrow" not in less


def test_what_a_release_moved_stands_with_both_traces(site: Path) -> None:
    text = text_of(site / "rules-2027.2/projects/slip-yard-hatches/changes.html")
    assert "From 2027.1 to 2027.2" in text
    assert "quantity preheat_step" in text
    assert "Crayons of the yard come in steps of 25 °C." in text
    assert "rounded up to the shop's step of 10 °C" in text.replace("&#39;", "'")
    assert "rounded up to the shop's step of 25 °C" in text.replace("&#39;", "'")


def test_who_signed_what_lapsed_and_how_a_joint_moved(site: Path) -> None:
    project = text_of(site / "rules-2027.2/projects/slip-yard-hatches/index.html")
    assert "H3 max_interpass signed" in project
    assert "H5 unsigned" in project
    assert re.search(r"H1 lapsed L\. M\., welding coordinator, 2027-01-21 min_preheat: 90 degC → 100 degC", project)
    joint = text_of(site / "rules-2027.2/projects/slip-yard-hatches/joints/H2.html")
    assert "LAPSED" in joint
    assert "How it moved" in joint
    assert "1: coaming-30, member_thickness: 25 mm → 30 mm" in joint
    assert "rules 2027.1, sha256:" in joint
    one = text_of(site / "rules-2027.2/projects/slip-yard-hatches/joints/H1.html")
    assert "concession by welding authority until 2060-12-31" in one
