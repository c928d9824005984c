"""A person's paths through the site in headless Chromium, from file://: no error, no request leaves the page."""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from playwright.sync_api import Browser, Page, sync_playwright

from weldbasis.knowledge import Knowledge
from weldbasis.site.publish import publish

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
pytestmark = [
    pytest.mark.browser,
    pytest.mark.skipif(
        CHROMIUM is None and not os.environ.get("CI"), reason="no Chromium on this machine and CI is not set"
    ),
]


@pytest.fixture(scope="module")
def home(tmp_path_factory: pytest.TempPathFactory, knowledge: Knowledge, examples: tuple[Path, ...]) -> str:
    made = publish(examples, tmp_path_factory.mktemp("browse") / "site", knowledge, lambda *_: None)
    return (made.folder / "index.html").resolve().as_uri()


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    assert CHROMIUM, "CI is set and no Chromium was found"
    with sync_playwright() as playwright:
        found = playwright.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox", "--disable-gpu"])
        yield found
        found.close()


@pytest.fixture
def page(browser: Browser) -> Iterator[Page]:
    context = browser.new_context(viewport={"width": 1280, "height": 900})
    opened = context.new_page()
    faults: list[str] = []
    opened.on("console", lambda message: faults.append(message.text) if message.type == "error" else None)
    opened.on("pageerror", lambda error: faults.append(str(error)))
    opened.on(
        "request",
        lambda r: None if r.url.startswith(("file:", "data:", "blob:")) else faults.append(f"request {r.url}"),
    )
    yield opened
    context.close()
    assert faults == []


def test_from_home_to_the_clause(page: Page, home: str) -> None:
    page.goto(home)
    page.get_by_role("link", name="Tideway gates, fabrication").first.click()
    page.get_by_role("link", name="G5", exact=True).first.click()
    assert page.get_by_role("heading", level=1).inner_text().startswith("G5")
    page.locator("#why-min_preheat a.wb-rule", has_text="preheat-cet-member").first.click()
    assert "697 × CET" in page.locator(".wb-formula").inner_text()
    page.locator("main a", has_text="EN 1011-2").first.click()
    assert page.url.endswith("sources/index.html#en-1011-2")
    page.locator("#en-1011-2").wait_for(state="visible")


def test_filter_and_sort_the_joints(page: Page, home: str) -> None:
    page.goto(home.replace("index.html", "projects/millrace-footbridge/index.html"))
    rows = page.locator("#joints ~ .wb-scroll table.wb-sortable").first.locator("tbody tr")
    everything = rows.count()
    page.get_by_label("Filter the joints").fill("crack repair")
    assert page.locator("table.wb-sortable tbody tr:visible", has_text="Crack repair").count() == 2
    page.get_by_label("Filter the joints").fill("")
    page.get_by_role("button", name="preheat").click()
    page.get_by_role("button", name="preheat").click()
    demands = [
        float(text or "-1")
        for text in rows.locator("td:nth-child(4)").evaluate_all(
            "cells => cells.map(cell => cell.getAttribute('data-sort'))"
        )
    ]
    assert demands == sorted(demands, reverse=True)
    assert len(demands) == everything


def test_search_finds_a_joint_offline(page: Page, home: str) -> None:
    page.goto(home)
    page.locator(".md-search__input").click()
    page.keyboard.type("heel post")
    hit = page.locator(".md-search-result__link").first
    hit.wait_for(timeout=15_000)
    assert "Heel post" in page.locator(".md-search-result").inner_text()


@pytest.mark.parametrize(
    "path",
    [
        "index.html",
        "projects/tideway-gates/index.html",
        "projects/tideway-gates/joints/G19.html",
        "rules/preheat-hydrogen-control.html",
        "vocabulary/index.html",
        "steels/index.html",
    ],
)
def test_phone_width_never_scrolls_sideways(browser: Browser, home: str, path: str) -> None:
    context = browser.new_context(viewport={"width": 390, "height": 844})
    page = context.new_page()
    page.goto(home.replace("index.html", path))
    assert page.evaluate("document.documentElement.scrollWidth") <= 390
    context.close()


def test_dark_pages_are_dark_and_readable(browser: Browser, home: str) -> None:
    context = browser.new_context(color_scheme="dark")
    page = context.new_page()
    page.goto(home.replace("index.html", "projects/tideway-gates/joints/G5.html"))
    assert page.locator("body").get_attribute("data-md-color-scheme") == "slate"
    paper, ink = (
        page.evaluate(f"getComputedStyle(document.querySelector('{where}')).{what}")
        for where, what in (("body", "backgroundColor"), (".wb-decision .wb-answer", "color"))
    )
    assert contrast(paper, ink) >= 4.5
    context.close()


def contrast(one: str, other: str) -> float:
    """WCAG contrast of two rgb() colours."""

    def luminance(colour: str) -> float:
        parts = [float(p) / 255 for p in colour[colour.index("(") + 1 : colour.index(")")].split(",")[:3]]
        linear = [p / 12.92 if p <= 0.03928 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    lights = sorted((luminance(one), luminance(other)))
    return (lights[1] + 0.05) / (lights[0] + 0.05)


def test_page_reads_without_script_and_prints(browser: Browser, home: str, tmp_path: Path) -> None:
    context = browser.new_context(java_script_enabled=False)
    page = context.new_page()
    page.goto(home.replace("index.html", "projects/tideway-gates/joints/G5.html"))
    assert page.locator("details#why-min_preheat").get_attribute("open") is not None
    assert page.get_by_text("The whole trace").is_visible()
    page.emulate_media(media="print")
    assert not page.locator(".md-header").is_visible()
    page.pdf(path=str(tmp_path / "g5.pdf"), format="A4")
    assert (tmp_path / "g5.pdf").stat().st_size > 10_000
    context.close()
