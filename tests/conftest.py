"""Shared fixtures: the published knowledge base and what is made of it, once a run."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import settings

from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder, site_folder

settings.register_profile("default", deadline=None, max_examples=60, derandomize=True, print_blob=True)
settings.load_profile("default")


@pytest.fixture(scope="session")
def knowledge() -> Knowledge:
    return load_knowledge(kb_folder())


@pytest.fixture(scope="session")
def graph(knowledge: Knowledge) -> KnowledgeGraph:
    return build_graph(knowledge)


@pytest.fixture(scope="session")
def examples() -> tuple[Path, ...]:
    """The example projects that are decided with the published rules as they stand."""
    files = sorted((site_folder() / "projects").glob("*/project.yaml"))
    return tuple(file.parent for file in files if "rules: working" in file.read_text(encoding="utf-8"))


@pytest.fixture(autouse=True)
def quiet_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("FORCE_COLOR", "COLUMNS"):
        monkeypatch.delenv(name, raising=False)
    assert os.environ.get("HOME")
