"""What a set of rules is before it is checked: layers of documents, the lowest first."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from weldbasis.load.yaml_text import Document
from weldbasis.problem import Problem

PARTS = ("quantities", "rules", "sources", "steels", "consumables", "cases")
AMENDMENTS = "amendments.yaml"


@dataclass(frozen=True)
class Layer:
    """One layer: its name, its head, its documents by path, and what could not be read of it."""

    name: str
    head: Mapping[str, Any]
    files: Mapping[str, Document]
    problems: tuple[Problem, ...] = ()

    def part(self, name: str) -> tuple[Document, ...]:
        """The documents below one of its folders, in the order of their paths."""
        return tuple(document for path, document in self.files.items() if path.split("/")[0] == name)


@dataclass(frozen=True)
class Layers:
    """Layers that make a set of rules; `release` names the release they were read from, `frozen` its digest."""

    layers: tuple[Layer, ...]
    release: str = "working"
    frozen: str = ""

    @property
    def head(self) -> Mapping[str, Any]:
        """What the highest layer says of the whole set."""
        return self.layers[-1].head
