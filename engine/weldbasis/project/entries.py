"""What a project is once read: its joints, its steels, its facts, and the plain data whose digest names its inputs."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any

from weldbasis.facts import Facts, Origin
from weldbasis.problem import Place


@dataclass(frozen=True)
class JointEntry:
    """A joint as a page heads it."""

    id: str
    title: str
    form: str
    members: tuple[str, ...]
    place: str
    note: str = ""


@dataclass(frozen=True)
class SteelEntry:
    """A steel of the project as pages list it: what is known of it and from what paper."""

    id: str
    title: str
    grade: str
    era: str
    certificate: str
    heat: str
    kind: str
    composition: Mapping[str, tuple[float, float]]
    samples: int
    origin: Origin
    # What the samples come to, a sentence each: how far each element is taken, and which value stands apart.
    said: tuple[str, ...] = ()


@dataclass(frozen=True)
class Concession:
    """Leave for some joints: `quantity` is taken as given, or the finding of the limit rule `finding` is set aside."""

    joints: tuple[str, ...]
    quantity: str
    finding: str
    why: str
    approved_by: str
    until: str
    place: Place

    @property
    def origin(self) -> Origin:
        """Where a conceded value comes from, as traces show it."""
        return Origin("concession", f"concession by {self.approved_by} until {self.until}: {self.why}", str(self.place))


@dataclass(frozen=True)
class Project:
    """A project, read and checked."""

    id: str
    title: str
    rules: str
    contract: tuple[str, ...]
    folder: Path
    joints: tuple[JointEntry, ...]
    steels: Mapping[str, SteelEntry]
    facts: Facts
    plain: Callable[[], Mapping[str, Any]] = field(compare=False, repr=False)
    description: str = ""
    concessions: tuple[Concession, ...] = ()

    @cached_property
    def meaning(self) -> Mapping[str, Any]:
        """All inputs as plain data, whose digest names them."""
        return self.plain()
