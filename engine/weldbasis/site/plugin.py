"""The mkdocs plugin that feeds generated pages in memory and fills the many pages of joints and rules from one frame.

Pages that stand in the navigation go through mkdocs. Joint, rule and steel pages would each cost a run of the whole
theme; instead the theme renders one empty frame per folder, and their bodies are put into copies of it.
"""

from __future__ import annotations

import json
from html import escape
from pathlib import Path

from mkdocs.config.defaults import MkDocsConfig
from mkdocs.plugins import BasePlugin, event_priority
from mkdocs.structure.files import File, Files

from weldbasis.knowledge import Knowledge
from weldbasis.reasons import trace_joint
from weldbasis.record import canonical_bytes
from weldbasis.site.content import Content, Decided, Progress, joints_csv
from weldbasis.site.guard_page import guard_body
from weldbasis.site.house_page import house_body, impact_body
from weldbasis.site.joint_page import joint_body
from weldbasis.site.levers_section import levers_html
from weldbasis.site.methods_page import methods_body
from weldbasis.site.open_points_page import open_points_body
from weldbasis.site.pages import (
    home_body,
    project_body,
    rule_body,
    rules_body,
    sheet_files,
    sources_body,
    standard_body,
    standards_of,
    steels_body,
    vocabulary_body,
)
from weldbasis.site.past import past_html
from weldbasis.site.sheet_page import sheet_body, sheets_of, title_of
from weldbasis.site.workers import each_row
from weldbasis.trace import JointTrace
from weldbasis.views import decision_text

_TITLE, _BODY = "WBTITLEWB", "WBBODYWB"
_FRAMES = {"rules": "rules/_frame.md", "steels": "steels/_frame.md", "joints": "projects/_frame/joints/_frame.md"}
_SEARCH = "search/search_index.json"
_WRITTEN = 2  # pages that stand as they were written: how to read a trace, cautions


class WeldbasisPlugin(BasePlugin):  # type: ignore[type-arg, no-untyped-call]  # mkdocs' base is untyped
    """Generated pages in memory; `content` is set by publish before the build."""

    content: Content
    assets: Path
    progress: Progress
    pages: int

    def on_files(self, files: Files, *, config: MkDocsConfig) -> Files:
        """Add generated pages, downloads, assets and the empty frames."""
        for uri, title, body in self._navigated():
            files.append(File.generated(config, uri, content=_markdown(title, body, exclude=uri.startswith("vocab"))))
        for decided in self.content.projects:
            folder = f"projects/{decided.project.id}"
            files.append(File.generated(config, f"{folder}/record.json", content=canonical_bytes(decided.record)))
            files.append(
                File.generated(config, f"{folder}/joints.csv", content=joints_csv(self.content.knowledge, decided))
            )
        for path in sorted(p for p in self.assets.rglob("*") if p.is_file()):
            files.append(
                File.generated(config, f"assets/{path.relative_to(self.assets).as_posix()}", content=path.read_bytes())
            )
        for uri in _FRAMES.values():
            files.append(File.generated(config, uri, content=_markdown(_TITLE, f"<p>{_BODY}</p>", exclude=True)))
        return files

    def _navigated(self) -> list[tuple[str, str, str]]:
        content = self.content
        pages = [("index.md", "Projects", home_body(content))]
        pages += [
            (f"projects/{d.project.id}/index.md", d.project.title, project_body(content, d)) for d in content.projects
        ]
        pages += [
            (f"projects/{d.project.id}/open-points.md", f"Open points, {d.project.title}", open_points_body(d))
            for d in content.projects
        ]
        pages += [
            (f"projects/{d.project.id}/changes.md", f"What changes move, {d.project.title}", _impact_page(d))
            for d in content.projects
            if d.impacts
        ]
        if content.knowledge.amendments:
            pages.append(("rules/house.md", "House rules", house_body(content.knowledge)))
        pages += [
            ("rules/index.md", "Rules", rules_body(content)),
            ("rules/guarded.md", "How well guarded", guard_body(content.knowledge)),
            ("methods/index.md", "Methods against each other", methods_body(content)),
            ("steels/index.md", "Steels", steels_body(content)),
            ("sources/index.md", "Sources", sources_body(content)),
            ("vocabulary/index.md", "Vocabulary", vocabulary_body(content)),
        ]
        return pages

    @event_priority(-50)  # after search has written its index, before offline copies it
    def on_post_build(self, *, config: MkDocsConfig) -> None:
        """Fill the frames, add the pages' titles to the search index, take the frames away."""
        site = Path(config.site_dir)
        frames = {folder: (site / uri).with_suffix(".html") for folder, uri in _FRAMES.items()}
        texts = {folder: path.read_text(encoding="utf-8") for folder, path in frames.items()}
        found = [self._rule_pages(site, texts["rules"])]
        found += [part(site, texts["steels"]) for part in (self._steel_pages, self._sheet_pages)]
        found += [self._joint_pages(site, texts["joints"], decided) for decided in self.content.projects]
        for path in frames.values():
            path.unlink()
        frames["joints"].parent.rmdir()
        frames["joints"].parent.parent.rmdir()
        self.pages = len(self._navigated()) + _WRITTEN + sum(len(entries) for entries in found)
        index = site / _SEARCH
        data = json.loads(index.read_text(encoding="utf-8"))
        data["docs"] = [doc for doc in data["docs"] if "_frame" not in doc["location"]]
        data["docs"] += [entry for entries in found for entry in entries]
        index.write_text(json.dumps(data, ensure_ascii=False, separators=(",", ":")), encoding="utf-8")

    def _rule_pages(self, site: Path, frame: str) -> list[dict[str, str]]:
        governed = self._governed()
        entries = []
        for rule in self.content.knowledge.rules.values():
            body = rule_body(self.content, rule, governed.get(rule.id, []))
            entries.append(
                _write(site, f"rules/{rule.id}.html", frame, rule.title, body, f"rule {rule.id}, {rule.topic}")
            )
        return entries

    def _governed(self) -> dict[str, list[tuple[str, list[tuple[str, str]]]]]:
        found: dict[str, dict[str, list[tuple[str, str]]]] = {}
        for decided in self.content.projects:
            for trace in decided.traces:
                address = f"../projects/{decided.project.id}/joints/{decided.files[trace.joint]}"
                for rule in dict.fromkeys(r for d in trace.decisions for r in d.governing):
                    found.setdefault(rule, {}).setdefault(decided.project.title, []).append((trace.joint, address))
        return {rule: list(projects.items()) for rule, projects in found.items()}

    def _steel_pages(self, site: Path, frame: str) -> list[dict[str, str]]:
        entries = []
        for title, file, grades in standards_of(self.content):
            words = ", ".join(grade.designation for grade in grades)
            entries.append(
                _write(
                    site,
                    f"steels/{file}",
                    frame,
                    title,
                    standard_body(title, grades, sheet_files(self.content.knowledge)),
                    words,
                )
            )
        return entries

    def _sheet_pages(self, site: Path, frame: str) -> list[dict[str, str]]:
        """A sheet for every grade and envelope, in the folder of the steels."""
        knowledge = self.content.knowledge
        sheets = sheets_of(knowledge, self.content.graph)
        names = sheet_files(knowledge)
        titles = {grade.id: file for _, file, grades in standards_of(self.content) for grade in grades}

        def write(number: int) -> dict[str, str]:
            steel = sheets.steels[number]
            body = sheet_body(sheets, number, titles.get(steel.id, "index.html"))
            title = title_of(steel)
            return _write(site, f"steels/{names[steel.id]}", frame, title, body, f"{title}, preheat by thickness")

        return each_row(write, len(sheets.steels), lambda _: None)

    def _joint_pages(self, site: Path, frame: str, decided: Decided) -> list[dict[str, str]]:
        digests = [joint["digest"] for joint in decided.record["joints"]]
        knowledge, count = self.content.knowledge, len(decided.traces)

        def write(row: int) -> dict[str, str]:
            entry = decided.project.joints[row]
            trace = trace_joint(decided.evaluation, row, decided.narrowings)
            choices = levers_html(decided.evaluation, row, decided.levers[row], decided.edges.get(row, ()))
            past = past_html(decided, entry.id)
            body = joint_body(decided.project, entry, knowledge, trace, digests[row], choices, past)
            uri = f"projects/{decided.project.id}/joints/{decided.files[entry.id]}"
            words = f"{', '.join(trace.members[:-1])}. {_summary(knowledge, trace)}"
            return _write(site, uri, frame, f"{entry.id} {entry.title}".strip(), body, words)

        return each_row(write, count, lambda done: self.progress(count + done, 2 * count))


def _impact_page(decided: Decided) -> str:
    return impact_body(decided.project.title, decided.impacts, decided.files)


def _summary(knowledge: Knowledge, trace: JointTrace) -> str:
    """The first decisions in one line, for the search."""
    shown = [(knowledge.quantities[d.ref.quantity], d) for d in trace.decisions[:2]]
    return "; ".join(f"{quantity.title} {decision_text(quantity, decision)}" for quantity, decision in shown)


def _markdown(title: str, body: str, exclude: bool) -> str:
    """A page whose body is finished HTML; the heading stays Markdown so that the theme knows it."""
    search = "search:\n  exclude: true\n" if exclude else ""
    heading = "" if body.lstrip().startswith("<p>" + _BODY) else f"# {title}\n\n"
    head = f"title: {json.dumps(title, ensure_ascii=False)}\nhide: [navigation, toc]\n{search}"
    return f"---\n{head}---\n\n{heading}{body}\n"


def _write(site: Path, uri: str, frame: str, title: str, body: str, words: str) -> dict[str, str]:
    """Put a body into the frame and write the page; its entry for the search index is returned."""
    head, _, tail = frame.partition(f"<p>{_BODY}</p>")
    plain = escape(title)
    before = head.replace(f"<h1>{_TITLE}</h1>", "").replace(_TITLE, plain)
    path = site / uri
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(f"{before}{body}{tail.replace(_TITLE, plain)}", encoding="utf-8")
    return {"location": uri, "title": plain, "text": escape(words)}
