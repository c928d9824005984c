"""A project file being read: what is known so far and the problems found on the way."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from weldbasis.knowledge import Knowledge
from weldbasis.load.yaml_text import Document
from weldbasis.problem import Place, Problem
from weldbasis.project.steels import Steel


@dataclass
class Reading:
    """A project file being read."""

    knowledge: Knowledge
    document: Document
    shown: str
    folder: Path
    problems: list[Problem] = field(default_factory=list)
    steels: dict[str, Steel] = field(default_factory=dict)

    def fault(self, place: Place, what: str, why: str = "", do: str = "") -> None:
        """Note a problem; its line is shown where it stands in the project file."""
        inside = place.file == self.document.file
        self.problems.append(
            self.document.problem_at(place, what, why, do) if inside else Problem(place, what, why, do)
        )
