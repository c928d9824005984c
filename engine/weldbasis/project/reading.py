"""A project file being read: what is known so far, what is written where, and the problems found on the way."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeAlias

from weldbasis.knowledge import Knowledge
from weldbasis.load.yaml_text import Document
from weldbasis.problem import Place, Problem
from weldbasis.project.given import Fact
from weldbasis.project.steels import Steel, member_facts
from weldbasis.ranges import Range

Path_: TypeAlias = tuple[str | int, ...]


@dataclass(frozen=True)
class Written:
    """A joint, a steel or a part of one as written in a file, and the place of each of its parts by path."""

    data: Mapping[str, Any]
    place_of: Callable[..., Place]

    def part(self, *path: str | int, data: Mapping[str, Any]) -> Written:
        """A part of it with its places."""
        return Written(data, lambda *rest: self.place_of(*path, *rest))


@dataclass
class Reading:
    """A project file being read."""

    knowledge: Knowledge
    document: Document
    shown: str
    folder: Path
    problems: list[Problem] = field(default_factory=list)
    steels: dict[str, Steel] = field(default_factory=dict)
    _parts: dict[tuple[str, Range], Mapping[str, Fact]] = field(default_factory=dict)

    def fault(self, place: Place, what: str, why: str = "", do: str = "") -> None:
        """Note a problem; its line is shown where it stands in the project file."""
        inside = place.file == self.document.file
        self.problems.append(
            self.document.problem_at(place, what, why, do) if inside else Problem(place, what, why, do)
        )

    def facts_of_steel(self, name: str, thickness: Range) -> Mapping[str, Fact]:
        """Facts of a part made of one of the steels in a thickness (mm), worked out once for parts alike."""
        part = name, thickness
        if part not in self._parts:
            self._parts[part] = member_facts(self.steels[name], thickness, self.knowledge.quantities)
        return self._parts[part]

    def written(self, *path: str | int, data: Mapping[str, Any]) -> Written:
        """A part of the project file with its places."""
        return Written(data, lambda *rest: self.document.place(*path, *rest))


def shown_path(path: Path) -> str:
    """A file's name in messages: from where the user stands, if it lies there."""
    try:
        return str(path.resolve().relative_to(Path.cwd()))
    except ValueError:
        return str(path)
