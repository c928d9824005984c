"""Build the site beside its place and swap it in; never take away a folder that weldbasis did not make."""

from __future__ import annotations

import logging
import os
import shutil
import tempfile
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from weldbasis.knowledge import Knowledge
from weldbasis.places import site_folder
from weldbasis.problem import Place, Problem, Refused
from weldbasis.site.content import Beside, Content, Progress, decide_projects, file_names

_MARK = ".weldbasis-site"
_MARK_TEXT = "This folder was made by weldbasis publish, which may replace it as a whole.\n"
# Pages carry no dates; a fixed instant keeps compressed files the same, build after build.
_INSTANT = "1700000000"


@dataclass(frozen=True)
class Published:
    """What was written, and where."""

    folder: Path
    pages: int
    joints: int


class _Complaints(logging.Handler):
    """Collects what mkdocs has to complain of; a complaint stops the build."""

    def __init__(self) -> None:
        super().__init__(logging.WARNING)
        self.messages: list[str] = []

    def emit(self, record: logging.LogRecord) -> None:
        """Keep the message."""
        self.messages.append(record.getMessage())


def publish(
    projects: Sequence[Path],
    to: Path,
    knowledge: Knowledge,
    progress: Progress,
    others: Sequence[tuple[Knowledge, Sequence[Path]]] = (),
) -> Published:
    """Decide the projects and write their site to the folder `to`.

    `others` are projects decided with other rules: each set of rules gets a whole site of its own below. Raises
    Refused where a project is wrong, or where `to` holds anything that weldbasis did not make.
    """
    to = to.absolute()  # mkdocs would take a relative folder from where mkdocs.yml lies
    _refuse_foreign(to)
    below = [replace(decide_projects(folders, rules, progress), back="../index.html") for rules, folders in others]
    names = file_names([f"rules {content.knowledge.release}" for content in below])
    beside = tuple(
        Beside(file.removesuffix(".html"), content.knowledge.release, tuple(d.project.title for d in content.projects))
        for content, file in zip(below, names.values(), strict=True)
    )
    content = replace(decide_projects(projects, knowledge, progress), beside=beside)
    to.parent.mkdir(parents=True, exist_ok=True)
    aside = Path(tempfile.mkdtemp(prefix=f".{to.name}.", dir=to.parent))
    try:
        pages = _build(content, aside, progress)
        for one, where in zip(below, beside, strict=True):
            pages += _build(one, aside / where.folder, progress)
        (aside / _MARK).write_text(_MARK_TEXT, encoding="utf-8")
        aside.chmod(0o755)
        _swap(aside, to)
    finally:
        shutil.rmtree(aside, ignore_errors=True)
    return Published(to, pages, sum(len(decided.traces) for one in (content, *below) for decided in one.projects))


def _refuse_foreign(to: Path) -> None:
    if to.exists() and not (to / _MARK).is_file() and (not to.is_dir() or any(to.iterdir())):
        raise Refused(
            [
                Problem(
                    Place(str(to)),
                    "this holds something that weldbasis did not make",
                    "publishing replaces the whole folder",
                    "choose another folder with --to, or empty this one",
                )
            ]
        )


def _swap(aside: Path, to: Path) -> None:
    """Put the finished folder in place; the old one stands until the new one is complete."""
    if not to.exists():
        os.replace(aside, to)
        return
    old = aside.with_name(aside.name + ".old")
    os.replace(to, old)
    os.replace(aside, to)
    shutil.rmtree(old)


def _build(content: Content, folder: Path, progress: Progress) -> int:
    """Run mkdocs with our plugin into a folder; returns the number of pages."""
    os.environ.setdefault("NO_MKDOCS_2_WARNING", "1")
    os.environ.setdefault("DISABLE_MKDOCS_2_WARNING", "true")
    before = os.environ.get("SOURCE_DATE_EPOCH")
    os.environ["SOURCE_DATE_EPOCH"] = _INSTANT
    from mkdocs.commands.build import build  # noqa: PLC0415  (after the banner is switched off)
    from mkdocs.config import load_config  # noqa: PLC0415

    from weldbasis.site.plugin import WeldbasisPlugin  # noqa: PLC0415

    complaints = _Complaints()
    logger = logging.getLogger("mkdocs")
    logger.addHandler(complaints)
    logger.propagate = False
    try:
        source = site_folder()
        config = load_config(str(source / "mkdocs.yml"), site_dir=str(folder))
        config["nav"] = _navigation(content)
        plugin = config.plugins["weldbasis"]
        assert isinstance(plugin, WeldbasisPlugin)
        plugin.content, plugin.assets, plugin.progress = content, source / "assets", progress
        config.plugins.on_startup(command="build", dirty=False)
        build(config)
        config.plugins.on_shutdown()
    finally:
        logger.removeHandler(complaints)
        if before is None:
            del os.environ["SOURCE_DATE_EPOCH"]
        else:
            os.environ["SOURCE_DATE_EPOCH"] = before
    if complaints.messages:
        raise Refused([Problem(Place("site"), message, "the site was not replaced") for message in complaints.messages])
    return int(plugin.pages)


def _navigation(content: Content) -> list[dict[str, object]]:
    projects = [{d.project.title: f"projects/{d.project.id}/index.md"} for d in content.projects]
    house = [{"House rules": "rules/house.md"}] if content.knowledge.amendments else []
    return [
        {"Projects": ["index.md", *projects]},
        {"Rules": ["rules/index.md", *house, {"How well guarded": "rules/guarded.md"}]},
        {"Methods": "methods/index.md"},
        {"Steels": "steels/index.md"},
        {"Sources": "sources/index.md"},
        {"Vocabulary": "vocabulary/index.md"},
        {"Reading a trace": "how-to-read.md"},
        {"Cautions": "cautions.md"},
    ]
