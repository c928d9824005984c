"""One joint's reasons, read out of the columns: one structure, several views."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from weldbasis.facts import Origin

StepState = Literal["given", "gave", "withheld", "not-applicable", "input-missing"]
DecisionState = Literal["settled", "open", "uncovered"]
FindingLevel = Literal["stop", "hold", "caution", "note"]


@dataclass(frozen=True, order=True)
class Ref:
    """A quantity of one joint (member 0) or of its member 1, 2, …; the weld metal comes last."""

    quantity: str
    member: int = 0


@dataclass(frozen=True)
class Value:
    """One set as shown: a number's range in the vocabulary's unit, or the levels it may be."""

    low: float | None = None
    high: float | None = None
    any_of: tuple[str, ...] = ()
    unit: str = ""
    presence: Literal["present", "absent", "maybe"] = "present"
    unknown: bool = False
    assumed: bool = False
    wide: bool = False
    narrowed: bool = False


@dataclass(frozen=True)
class Candidate:
    """One of several values a rule chose from; `behind` is how far it stands from the one that governs."""

    ref: Ref
    value: Value
    governs: bool
    taken: bool
    behind: float | None = None
    remark: str = ""


@dataclass(frozen=True)
class Step:
    """How one quantity came about. `reasons` say which limit was left and by how much, where it was withheld."""

    ref: Ref
    value: Value
    state: StepState
    rule: str = ""
    sentence: str = ""
    figures: str = ""
    reads: tuple[Ref, ...] = ()
    reasons: tuple[str, ...] = ()
    candidates: tuple[Candidate, ...] = ()
    origin: Origin | None = None


@dataclass(frozen=True)
class Decision:
    """A decision with its demanding end, its state and the path of steps from it down to what governs."""

    ref: Ref
    value: Value
    state: DecisionState
    demanding: float | str | None
    governing: tuple[str, ...]
    chain: tuple[Ref, ...]


@dataclass(frozen=True)
class Finding:
    """What a limit rule, or an open or uncovered decision, has to say of the joint."""

    level: FindingLevel
    rule: str
    text: str
    sure: bool = True


@dataclass(frozen=True)
class JointTrace:
    """All reasons of one joint; `steps` in the order of the graph; `members` are the names of its parts.

    `given` and `gave` name the quantities that the project gave and that rules gave a value, in the same order.
    `in_parts` says into which parts the joint was cut to narrow its sets, where it was.
    """

    joint: str
    members: tuple[str, ...]
    decisions: tuple[Decision, ...]
    findings: tuple[Finding, ...]
    steps: Mapping[Ref, Step]
    given: tuple[Ref, ...] = ()
    gave: tuple[Ref, ...] = ()
    in_parts: str = ""
