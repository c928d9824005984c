"""What a knowledge base holds once read: frozen records, no files and no behaviour.

Rules keep their body as plain data; the module of their kind gives it meaning.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, Literal

from weldbasis.meaning import digest_of_meaning
from weldbasis.problem import Place
from weldbasis.ranges import Range

Scope = Literal["joint", "member"]
Checked = Literal["seen", "quoted", "from-memory", "derived", "common-practice"]


@dataclass(frozen=True)
class Level:
    """One level of a category, with the words a page shows for it."""

    id: str
    title: str


@dataclass(frozen=True)
class Lever:
    """What the engineer can choose for a quantity, and how: a range in steps, or a few named settings.

    Of a category all levels can be chosen. `table` holds the values shown in a joint's small table.
    """

    how: str
    within: Range = Range(0.0, 0.0)
    step: float = 0.0
    settings: Mapping[str, float] = field(default_factory=dict)
    table: tuple[float, ...] = ()
    new_parts_only: bool = False


@dataclass(frozen=True)
class Quantity:
    """One fact a rule may read or give.

    Exactly one of `number range` and `levels` is used: `levels` is empty for a number.
    `worse` is "higher", "lower", "last", "first" (place in the order of levels) or "neither".
    """

    id: str
    title: str
    of: Scope
    says: str
    symbol: str = ""
    unit: str = ""
    range: Range = Range(0.0, 0.0)
    decimals: int = 3
    levels: tuple[Level, ...] = ()
    worse: str = "neither"
    given: Literal["must", "may", "never"] = "never"
    # What stands where a project gives nothing: "unknown", "absent", or a value with its reason.
    if_not_given: Any = "absent"
    if_not_given_because: str = ""
    # Place among the decisions, 0 for a quantity that is none; parts belong to a decision.
    decision: int = 0
    part_of: str = ""
    # The step to which papers print a reading, 0 where that is not said.
    read_to: float = 0.0
    lever: Lever | None = None
    topic: str = ""
    place: Place = Place("")

    @property
    def is_number(self) -> bool:
        """Whether its values are numbers rather than levels."""
        return not self.levels

    @cached_property
    def order(self) -> tuple[str, ...]:
        """The ids of its levels in their order."""
        return tuple(level.id for level in self.levels)


@dataclass(frozen=True)
class Cite:
    """Where a rule's figures come from and how they were checked; `covers` names the figures meant."""

    source: str
    at: str
    checked: Checked
    covers: str = ""
    # The limits of the source that the rule is held to, and where it may go beyond them, with the reason.
    holds_to: str = ""
    beyond: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True)
class Change:
    """One entry of a rule's history."""

    version: int
    date: str
    what: str
    why: str
    approved_by: str


@dataclass(frozen=True)
class Read:
    """A name used in a rule's body: the quantity it stands for and the unit the body takes it in."""

    name: str
    quantity: str
    unit: str = ""


@dataclass(frozen=True)
class Rule:
    """One rule as written. Conditions map quantity ids to ranges or levels, as in the file."""

    id: str
    version: int
    title: str
    kind: str
    for_each: Scope
    gives: tuple[str, ...]
    reads: tuple[Read, ...]
    body: Mapping[str, Any]
    say: str
    cites: tuple[Cite, ...]
    changes: tuple[Change, ...]
    applies_when: Mapping[str, Any] = field(default_factory=dict)
    valid_within: Mapping[str, Any] = field(default_factory=dict)
    direction: Mapping[str, str] = field(default_factory=dict)
    gives_unit: str = ""
    note: str = ""
    topic: str = ""
    layer: str = ""
    place: Place = Place("")
    # Places of the parts of the file, by path such as ("rows", 3, "when"), for messages.
    places: Mapping[tuple[str | int, ...], Place] = field(default_factory=dict, compare=False, repr=False)

    def place_of(self, *path: str | int) -> Place:
        """The place of the nearest recorded part of the rule's file."""
        while path:
            if path in self.places:
                return self.places[path]
            path = path[:-1]
        return self.place


@dataclass(frozen=True)
class Limits:
    """Ranges, by quantity id, that a source states for one of its methods."""

    id: str
    at: str
    checked: Checked
    within: Mapping[str, Range]
    note: str = ""
    place: Place = Place("")
    places: Mapping[str, Place] = field(default_factory=dict, compare=False, repr=False)


@dataclass(frozen=True)
class Source:
    """What a rule cites."""

    id: str
    title: str
    kind: str
    edition: str = ""
    year: int = 0
    how_checked: str = ""
    note: str = ""
    limits: tuple[Limits, ...] = ()
    place: Place = Place("")


@dataclass(frozen=True)
class GradeBand:
    """Limits of a grade over a band of thickness, mm. Elements that are not named have no limit here."""

    thickness: Range
    composition: Mapping[str, Range]
    ce_iiw_max: float | None = None
    pcm_max: float | None = None
    cet_max: float | None = None
    yield_min: float | None = None
    tensile: Range | None = None


@dataclass(frozen=True)
class Grade:
    """A steel grade of a standard."""

    id: str
    designation: str
    standard: str
    family: str
    delivery: tuple[str, ...]
    group: str
    bands: tuple[GradeBand, ...]
    product: str = ""
    number: str = ""
    p_number: str = ""
    aliases: tuple[str, ...] = ()
    checked: Mapping[str, Checked] = field(default_factory=dict)
    cites: tuple[Cite, ...] = ()
    note: str = ""
    place: Place = Place("")


@dataclass(frozen=True)
class Era:
    """What an undocumented steel of a time and product may hold: typical ranges and cautious ceilings."""

    id: str
    title: str
    years: str
    region: str
    family: str
    typical: Mapping[str, Range]
    ceilings: Mapping[str, float]
    checked: Checked
    cites: tuple[Cite, ...] = ()
    note: str = ""
    place: Place = Place("")


@dataclass(frozen=True)
class Sampling:
    """How analyses of a few samples become what a steel may hold.

    From `enough` values of an element on, bounds hold for the share `content` of the steel with `confidence`, by
    tolerance `factors` (count, factor); `critical_values` (count, figure) name outliers at `significance`.
    `last_figures` are what analyses are reported to, mass %; `centre` elements gather at mid-thickness, by a factor.
    """

    id: str
    enough: int
    content: float
    confidence: float
    factors: tuple[tuple[int, float], ...]
    significance: float
    critical_values: tuple[tuple[int, float], ...]
    last_figures: Mapping[str, float]
    centre: tuple[str, ...]
    centre_factor: float
    cites: tuple[Cite, ...] = ()
    note: str = ""
    place: Place = Place("")

    def factor(self, count: int) -> float:
        """The tolerance factor of the greatest listed count that is no more than `count`, which is the safe one."""
        return max((n, k) for n, k in self.factors if n <= count or n == self.factors[0][0])[1]

    def critical(self, count: int) -> float | None:
        """The critical value of the outlier test, likewise; None for fewer values than are tested."""
        return max(((n, g) for n, g in self.critical_values if n <= count), default=(0, None))[1]


@dataclass(frozen=True)
class Consumable:
    """A consumable classification of an open standard, without trade names."""

    id: str
    standard: str
    process: str
    covering: str
    hydrogen_max: float | None
    yield_min: float | None = None
    tensile: Range | None = None
    composition: Mapping[str, Range] = field(default_factory=dict)
    checked: Checked = "from-memory"
    cites: tuple[Cite, ...] = ()
    note: str = ""
    place: Place = Place("")


@dataclass(frozen=True)
class Case:
    """A worked example that a rule must reproduce. `nature` says whether it proves anything outside."""

    id: str
    rule: str
    given: Mapping[str, Any]
    expect: Mapping[str, Any]
    nature: Literal["published", "table", "hand-worked", "recalled"]
    source: str
    at: str
    tolerance: float = 0.0
    arithmetic: str = ""
    note: str = ""
    place: Place = Place("")


AmendedKind = Literal["rule", "quantity", "grade", "era", "consumable"]
AmendmentHow = Literal["add", "replace", "tighten", "relax", "withdraw"]


@dataclass(frozen=True)
class Amendment:
    """What a layer does to a record of the layers beneath it, and by whose leave.

    `justified_by` names what allows asking for less than the layer beneath.
    """

    of: AmendedKind
    id: str
    how: AmendmentHow
    why: str
    approved_by: str
    justified_by: str = ""
    layer: str = ""
    place: Place = Place("")


@dataclass(frozen=True, eq=False)
class Knowledge:
    """A whole knowledge base, each kind of record by its id; two are the same when their digests are.

    `beneath` holds what the amendments replaced or withdrew, by kind and id, as it stood in the layer below.
    `frozen` is the digest of the release it was read from, empty for a working set.
    """

    title: str
    custodian: str
    release: str
    quantities: Mapping[str, Quantity]
    rules: Mapping[str, Rule]
    sources: Mapping[str, Source]
    grades: Mapping[str, Grade]
    eras: Mapping[str, Era]
    consumables: Mapping[str, Consumable]
    cases: tuple[Case, ...]
    layers: tuple[str, ...] = ()
    amendments: tuple[Amendment, ...] = ()
    beneath: Mapping[tuple[str, str], Any] = field(default_factory=dict)
    frozen: str = ""
    sampling: Sampling | None = None

    @cached_property
    def digest(self) -> str:
        """The digest of all that decides, cases do not; of a release, the one that is written in it."""
        if self.frozen:
            return self.frozen
        kinds = ("quantities", "rules", "sources", "grades", "eras", "consumables")
        parts = {kind: getattr(self, kind) for kind in kinds}
        return digest_of_meaning(parts | {"sampling": {self.sampling.id: self.sampling} if self.sampling else {}})

    @cached_property
    def decisions(self) -> tuple[Quantity, ...]:
        """The decisions, in the order pages and tables show them."""
        found = [q for q in self.quantities.values() if q.decision]
        return tuple(sorted(found, key=lambda q: q.decision))

    @cached_property
    def rule_giving(self) -> Mapping[str, Rule]:
        """The rule that gives a quantity, by the quantity's id."""
        return {quantity: rule for rule in self.rules.values() for quantity in rule.gives}
