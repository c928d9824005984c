"""What comes nearest where no rule covers a case: the rule with the fewest limits left, and by how much."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from weldbasis.kinds.gather import NOT_GATHERED
from weldbasis.knowledge import Knowledge
from weldbasis.trace import Ref, Step
from weldbasis.words import levels_text, range_text, with_unit

_NO_VALUE = ("has no value here", "may have no value", "is not known here")


def nearest_text(steps: Mapping[Ref, Step], ref: Ref, knowledge: Knowledge) -> str:
    """The nearest rule and what keeps it from giving a value, as a sentence; empty where none is near."""
    found = [(step, _own(step, steps, knowledge)) for step in _silent(steps, ref, set())]
    near = min((one for one in found if one[1]), key=lambda one: len(one[1]), default=None)
    if near is None:
        return ""
    return f"Nearest comes {knowledge.rules[near[0].rule].title}: {'; '.join(near[1])}."


def _own(step: Step, steps: Mapping[Ref, Step], knowledge: Knowledge) -> tuple[str, ...]:
    """What a rule asks that is not met, apart from reads without a value; of a table, what it has no row for."""
    own = tuple(reason for reason in step.reasons if not reason.endswith(_NO_VALUE))
    if own or step.reasons or step.state != "withheld" or knowledge.rules[step.rule].kind != "table":
        return own
    words = [_said(steps[read], knowledge) for read in step.reads if read in steps]
    return (f"it has no row for {', '.join(words)}",)


def _said(step: Step, knowledge: Knowledge) -> str:
    quantity, value = knowledge.quantities[step.ref.quantity], step.value
    if value.presence == "absent":
        return f"{quantity.title} none"
    if value.low is None or value.high is None:
        return f"{quantity.title} {levels_text(quantity, value.any_of)}"
    return f"{quantity.title} {with_unit(range_text(value.low, value.high, quantity.decimals), quantity.unit)}"


def _silent(steps: Mapping[Ref, Step], ref: Ref, seen: set[Ref]) -> Iterator[Step]:
    """The steps without a value from a quantity upwards, nearest first."""
    if ref in seen or ref not in steps:
        return
    seen.add(ref)
    step = steps[ref]
    if step.value.presence == "absent" and step.rule:
        yield step
        chosen = [candidate.ref for candidate in step.candidates if candidate.remark != NOT_GATHERED]
        # What is gathered stands among the candidates, member by member; the read itself names no member.
        reads = [] if any(candidate.remark == NOT_GATHERED for candidate in step.candidates) else list(step.reads)
        for above in dict.fromkeys([*chosen, *reads]):
            yield from _silent(steps, above, seen)
