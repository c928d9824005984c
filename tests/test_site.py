"""The published site: complete, offline, small enough, the same bytes twice, every link leads somewhere."""

from __future__ import annotations

import filecmp
import json
import re
from collections.abc import Iterator
from pathlib import Path
from urllib.parse import unquote, urldefrag

import pytest

from weldbasis.knowledge import Knowledge
from weldbasis.places import site_folder
from weldbasis.site.content import file_names
from weldbasis.site.publish import Published, publish


@pytest.fixture(scope="session")
def site(tmp_path_factory: pytest.TempPathFactory, knowledge: Knowledge, examples: tuple[Path, ...]) -> Published:
    return publish(examples, tmp_path_factory.mktemp("site") / "out", knowledge, lambda *_: None)


def pages(site: Published) -> Iterator[tuple[Path, str]]:
    for path in sorted(site.folder.rglob("*.html")):
        yield path, path.read_text(encoding="utf-8")


def test_nothing_is_loaded_from_outside(site: Published) -> None:
    for path, text in pages(site):
        for match in re.finditer(
            r"<(?:script|img|link|iframe|source)[^>]*?(?:src|href)=\"((?:https?:)?//[^\"]*)\"", text
        ):
            assert 'rel="canonical"' in match.group(0), f"{path}: {match.group(1)}"


def test_every_link_inside_leads_to_a_page_and_a_place(site: Published) -> None:
    ids: dict[Path, set[str]] = {path.resolve(): set(re.findall(r'\bid="([^"]+)"', text)) for path, text in pages(site)}
    broken = []
    for path, text in pages(site):
        if path.name == "404.html":
            continue
        for address in re.findall(r'href="([^"#][^"]*|#[^"]+)"', text):
            if re.match(r"[a-z]+:", address):
                continue
            target, place = urldefrag(unquote(address))
            file = (path.parent / target).resolve() if target else path.resolve()
            if file.is_dir():
                file /= "index.html"
            if not file.exists() or (
                place and file.suffix == ".html" and place not in ids[file] and not place.startswith("__")
            ):
                broken.append(f"{path.relative_to(site.folder)} → {address}")
    assert broken == []


def test_every_joint_answers_why_one_click_a_step(site: Published, knowledge: Knowledge) -> None:
    text = (site.folder / "projects/tideway-gates/joints/G5.html").read_text(encoding="utf-8")
    assert 'href="../../../rules/preheat-cet-member.html"' in text
    assert 'href="../../../sources/index.html#en-1011-2"' in text
    rule = (site.folder / "rules/preheat-cet-member.html").read_text(encoding="utf-8")
    assert "697 × CET + 160 × tanh(d / 35)" in rule
    assert 'href="../sources/index.html#en-1011-2"' in rule
    assert "from memory" in rule
    assert f"{len(knowledge.rules)} rules" in (site.folder / "index.html").read_text(encoding="utf-8")


def test_open_points_say_what_to_measure_and_give_a_sampling_order(site: Published) -> None:
    text = (site.folder / "projects/millrace-footbridge/open-points.html").read_text(encoding="utf-8")
    plan = text[text.index('id="plan"') :]
    assert plan.index("web-1908") < plan.index("flange-1908")  # two joints for one sample before one
    assert "from 1.32 kJ/mm 50 °C, below that 60 °C" in text
    order = text[text.index('id="order"') :]
    assert "old web plate, never sampled" in order
    assert "C, Si, Mn" in order
    assert "wb-screen" not in order
    assert '<a href="open-points.html">' in (site.folder / "projects/millrace-footbridge/index.html").read_text("utf-8")


def test_joint_pages_show_levers(site: Published) -> None:
    text = (site.folder / "projects/tideway-gates/joints/G3.html").read_text(encoding="utf-8")
    section = text[text.index('id="levers"') : text.index('id="inputs"')]
    assert "from 1.65 kJ/mm: minimum preheat and interpass temperature 60 °C" in section
    assert "is on the edge: carbon of j2-15 is 0.17 % as printed" in section
    assert "<th>H5 (now)</th>" in section
    assert "1.2 (now)" in section


def test_every_page_carries_the_caution(site: Published) -> None:
    for path, text in pages(site):
        assert "responsible welding coordinator (ISO 14731) take precedence" in text, path


def test_pages_and_index_stay_small(site: Published) -> None:
    joints = [path.stat().st_size for path in site.folder.glob("projects/*/joints/*.html")]
    assert max(joints) < 260_000
    assert (site.folder / "search/search_index.json").stat().st_size < 2_000_000


def test_search_knows_joints_rules_and_steels(site: Published) -> None:
    index = json.loads((site.folder / "search/search_index.json").read_text(encoding="utf-8"))
    places = {doc["location"] for doc in index["docs"]}
    assert {"projects/millrace-footbridge/joints/N6.html", "rules/preheat-cet.html", "steels/en-10025-2.html"} <= places
    assert not any("_frame" in place for place in places)
    assert (site.folder / "search/search_index.js").read_text(encoding="utf-8").count("N6.html") >= 1


def test_two_builds_are_the_same_bytes(
    site: Published, tmp_path: Path, knowledge: Knowledge, examples: tuple[Path, ...]
) -> None:
    again = publish(examples, tmp_path / "again", knowledge, lambda *_: None)
    one = sorted(path.relative_to(site.folder) for path in site.folder.rglob("*") if path.is_file())
    other = sorted(path.relative_to(again.folder) for path in again.folder.rglob("*") if path.is_file())
    assert one == other
    _, mismatch, errors = filecmp.cmpfiles(site.folder, again.folder, [str(path) for path in one], shallow=False)
    assert (mismatch, errors) == ([], [])


def test_publishing_again_replaces_and_writes_nothing_into_the_sources(
    site: Published, knowledge: Knowledge, examples: tuple[Path, ...]
) -> None:
    before = sorted(path for path in site_folder().rglob("*") if path.is_file())
    stray = site.folder / "stray.txt"
    stray.write_text("x", encoding="utf-8")
    publish(examples[:1], site.folder, knowledge, lambda *_: None)
    assert not stray.exists()
    publish(examples, site.folder, knowledge, lambda *_: None)
    assert sorted(path for path in site_folder().rglob("*") if path.is_file()) == before
    assert not [path for path in site.folder.parent.iterdir() if path.name.startswith(".")]


def test_joint_names_become_safe_and_different_files() -> None:
    assert file_names(["J1", "j1", "A/B", "A B", "…"]) == {
        "J1": "J1.html",
        "j1": "j1-2.html",
        "A/B": "A-B.html",
        "A B": "A-B-2.html",
        "…": "joint.html",
    }
