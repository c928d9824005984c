"""One joint of a project into facts: its fields, the project's defaults, its consumable, its parts."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

from weldbasis.facts import Origin
from weldbasis.knowledge import Consumable, Knowledge
from weldbasis.problem import nearest
from weldbasis.project.columns import JointRow
from weldbasis.project.given import Fact, assumption, fact_of, text_of
from weldbasis.project.members import member_fields, parent_rows, weld_metal_row
from weldbasis.project.reading import Reading, Written
from weldbasis.ranges import Range

# What a joint may say beside the quantities of the vocabulary.
_WORDS = ("joint", "title", "note", "members", "consumable", "weld_metal", "assumptions")
_NOT_FOR_ALL = ("joint", "title", "note", "members")
# A default gives way where a joint itself says what the value is worked out from.
_GIVES_WAY: Mapping[str, frozenset[str]] = {
    "heat_input": frozenset({"arc_energy", "voltage", "current", "travel_speed"}),
    "arc_energy": frozenset({"voltage", "current", "travel_speed"}),
    "hydrogen": frozenset({"consumable", "hydrogen_measured", "consumable_hydrogen_max"}),
    "hydrogen_measured": frozenset({"consumable"}),
    "consumable_hydrogen_max": frozenset({"consumable"}),
    "covering": frozenset({"consumable"}),
}


@dataclass(frozen=True)
class Defaults:
    """What a project says for all joints: facts by quantity id, and its other words."""

    facts: Mapping[str, Fact]
    written: Written


@lru_cache(maxsize=4)
def joint_fields(knowledge: Knowledge) -> tuple[str, ...]:
    """Everything that a joint may say, by name."""
    given = (q.id for q in knowledge.quantities.values() if q.of == "joint" and q.given != "never")
    return (*_WORDS, *given)


def read_defaults(reading: Reading, written: Written) -> Defaults:
    """The project's defaults, checked once; mistakes are noted at their own place."""
    for key in _NOT_FOR_ALL:
        if key in written.data:
            reading.fault(
                written.place_of(key), f"{key!r} cannot be a default", "each joint has its own", "take it out"
            )
    facts = _facts(reading, written, "the defaults", Origin("default", "default of the project", reading.shown))
    return Defaults(_with_reasons(reading, written, facts, "the defaults"), written)


def joint_row(reading: Reading, written: Written, defaults: Defaults, contract: tuple[str, ...]) -> JointRow | None:
    """One joint with the project's defaults, or None where it has no name; mistakes are noted."""
    said, place = written.data, written.place_of()
    name = said.get("joint", "")
    if name == "" or isinstance(name, list | dict):
        reading.fault(place, "a joint has no name", do="add joint: J1")
        return None
    name = str(name)
    for word in ("title", "note"):
        if isinstance(said.get(word, ""), list | dict):
            reading.fault(written.place_of(word), f"joint {name}: a text is wanted after {word}", do="put it in quotes")
    origin = Origin("project", f"project, joint {name}", str(place))
    own = _facts(reading, written, f"joint {name}", origin)
    kept = {key: fact for key, fact in defaults.facts.items() if key not in said and not _gives_way(key, said)}
    facts = _with_reasons(reading, written, kept | own, f"joint {name}")
    for quantity in reading.knowledge.quantities.values():
        missing = quantity.id not in said and quantity.id not in defaults.written.data
        if quantity.of == "joint" and quantity.given == "must" and missing:
            reading.fault(place, f"joint {name} says nothing of {quantity.id}", quantity.says, f"add {quantity.id}: …")
    facts = _contract_facts(reading.knowledge, contract, str(place)) | facts
    consumable = _consumable(reading, written, defaults, name, facts.get("process"))
    if consumable:
        facts = _consumable_facts(consumable, str(place)) | facts
    parts = written if "members" in said else written.part(data={**said, "members": []})
    rows = parent_rows(reading, name, parts)
    metal = written if "weld_metal" in said else defaults.written
    whose = f"joint {name}, weld metal" if metal is written else "the defaults, weld metal"
    analysis = metal.part("weld_metal", data=metal.data.get("weld_metal", {}))
    weld = weld_metal_row(reading, whose, analysis, consumable, len(rows) + 1, str(place))
    form = facts["form"].value if "form" in facts else ()
    assert not isinstance(form, Range)
    return JointRow(
        name, str(said.get("title", "")), " or ".join(form), str(said.get("note", "")), place, facts, (*rows, weld)
    )


def _gives_way(key: str, said: Mapping[str, Any]) -> bool:
    return not _GIVES_WAY.get(key, frozenset()).isdisjoint(said)


def _facts(reading: Reading, written: Written, whose: str, origin: Origin) -> dict[str, Fact]:
    """The quantities among the fields, each at its own place."""
    found: dict[str, Fact] = {}
    for key, said in written.data.items():
        if key in _WORDS:
            continue
        at = written.place_of(key)
        quantity = reading.knowledge.quantities.get(key)
        if quantity is None or quantity.of != "joint" or quantity.given == "never":
            reading.fault(at, f"{whose}: {key!r} is no field of a joint", *_why_no_field(reading.knowledge, key))
            continue
        try:
            found[key] = fact_of(quantity, said, replace(origin, place=str(at)))
        except ValueError as fault:
            reading.fault(at, f"{whose}, {key}: {fault}")
    return found


def _why_no_field(knowledge: Knowledge, key: str) -> tuple[str, str]:
    """Why a joint cannot say something, and what to do about it."""
    if key in member_fields(knowledge):
        return "each member has it, not the joint", f"write it in members: [{{{key}: …, …}}, …]"
    if key in knowledge.quantities:
        return "it is worked out, never given", "take it out"
    return "", nearest(key, [field for field in joint_fields(knowledge) if not field.startswith("contract_")])


def _with_reasons(reading: Reading, written: Written, facts: dict[str, Fact], whose: str) -> dict[str, Fact]:
    """Facts, of which those listed under `assumptions` are marked as assumed for their reasons."""
    reasons = written.data.get("assumptions", {})
    if not isinstance(reasons, Mapping):
        do = "write assumptions: {restraint: why it is taken to be so}"
        reading.fault(written.place_of("assumptions"), f"{whose}: assumptions are fields and their reasons", do=do)
        return facts
    found = dict(facts)
    for key, reason in reasons.items():
        at = written.place_of("assumptions", key)
        try:
            text = text_of(reason, str(key))
        except ValueError as fault:
            reading.fault(at, f"{whose}, assumptions: {fault}", do="say why it is taken to be so")
            continue
        if key in facts:
            found[key] = replace(facts[key], origin=assumption(text, str(at)), assumed=True)
        elif key not in written.data:  # a field that is there and cannot be read was noted
            reading.fault(at, f"{whose}: an assumption names {key!r}, which is not given", do=nearest(key, facts))
    return found


def _contract_facts(knowledge: Knowledge, contract: tuple[str, ...], place: str) -> dict[str, Fact]:
    """Which requirement sets bind the joint; a joint's own word counts before the project's list."""
    origin = Origin("project", "the project's contract list", place)
    return {q: Fact(("yes" if name in contract else "no",), origin) for q, name in _requirement_sets(knowledge)}


@lru_cache(maxsize=4)
def _requirement_sets(knowledge: Knowledge) -> tuple[tuple[str, str], ...]:
    names = [quantity for quantity in knowledge.quantities if quantity.startswith("contract_")]
    return tuple((name, name.removeprefix("contract_").replace("_", "-")) for name in names)


def _consumable(
    reading: Reading, written: Written, defaults: Defaults, joint: str, process: Fact | None
) -> Consumable | None:
    """The joint's own consumable, else the default one if it is made for the joint's process."""
    own = "consumable" in written.data
    source = written if own else defaults.written
    if "consumable" not in source.data:
        return None
    name, place = str(source.data["consumable"]), source.place_of("consumable")
    found = reading.knowledge.consumables.get(name)
    if found is None:
        whose = f"joint {joint}" if own else "the defaults"
        do = nearest(name, reading.knowledge.consumables)
        reading.fault(place, f"{whose}: {name!r} is no consumable classification known here", do=do)
        return None
    if process is None or isinstance(process.value, Range) or found.process in process.value:
        return found
    if own:
        what = f"joint {joint}: {name} is made for process {found.process}, the joint is welded with"
        do = "correct the process or name another consumable"
        reading.fault(place, f"{what} {' or '.join(process.value)}", do=do)
    return None


def _consumable_facts(consumable: Consumable, place: str) -> dict[str, Fact]:
    origin = Origin("consumable", f"classification {consumable.id}", place)
    found = {"covering": Fact((consumable.covering,), origin)}
    if consumable.hydrogen_max is not None:
        found["consumable_hydrogen_max"] = Fact(Range(consumable.hydrogen_max, consumable.hydrogen_max), origin)
    return found
