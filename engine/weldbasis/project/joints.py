"""One joint of a project file into facts: its fields, its consumable, its members and its weld metal."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from weldbasis.facts import Origin
from weldbasis.knowledge import Consumable, Quantity
from weldbasis.problem import Place, nearest
from weldbasis.project.columns import JointRow, MemberRow
from weldbasis.project.reading import Reading
from weldbasis.project.steels import Fact, member_facts, weld_metal_facts
from weldbasis.ranges import Range
from weldbasis.units import read_number

_JOINT_WORDS = frozenset({"joint", "title", "members", "note", "assumptions", "consumable", "weld_metal", "form"})


def joint_row(
    reading: Reading, written: Mapping[str, Any], place: Place, defaults: Mapping[str, Any], contract: tuple[str, ...]
) -> JointRow | None:
    """One joint as written, with the project's defaults, or None where it has no name; mistakes are noted."""
    name = str(written.get("joint", ""))
    if not name:
        reading.fault(place, "a joint has no name", do="add joint: J1")
        return None
    fields = {**defaults, **written}
    facts = _joint_facts(reading, name, written, fields, place)
    for quantity in reading.knowledge.quantities:
        if quantity.startswith("contract_") and quantity not in facts:
            bound = quantity.removeprefix("contract_").replace("_", "-") in contract
            facts[quantity] = Fact(
                ("yes",) if bound else ("no",), Origin("project", "the project's contract list", str(place))
            )
    consumable = _consumable(reading, fields, place)
    if consumable:
        origin = Origin("consumable", f"classification {consumable.id}", str(place))
        if consumable.hydrogen_max is not None:
            facts.setdefault(
                "consumable_hydrogen_max", Fact(Range(consumable.hydrogen_max, consumable.hydrogen_max), origin)
            )
        facts.setdefault("covering", Fact((consumable.covering,), origin))
    members = _members(reading, name, fields.get("members", []), place, consumable, fields.get("weld_metal", {}))
    form = str(fields.get("form", ""))
    return JointRow(name, str(fields.get("title", "")), form, str(fields.get("note", "")), place, facts, members)


def _consumable(reading: Reading, fields: Mapping[str, Any], place: Place) -> Consumable | None:
    name = fields.get("consumable")
    if name is None:
        return None
    found = reading.knowledge.consumables.get(str(name))
    if found is None:
        reading.fault(
            place,
            f"{name!r} is no consumable classification known here",
            do=nearest(str(name), reading.knowledge.consumables),
        )
    return found


def _joint_facts(
    reading: Reading, name: str, written: Mapping[str, Any], fields: Mapping[str, Any], place: Place
) -> dict[str, Fact]:
    reasons = {**fields.get("assumptions", {})}
    found: dict[str, Fact] = {}
    for key, said in fields.items():
        value = said
        if key in _JOINT_WORDS and key != "form":
            continue
        at = place if key not in written or place.file != reading.document.file else _inner(reading, place, key)
        quantity = reading.knowledge.quantities.get(key)
        if quantity is None or quantity.of != "joint" or quantity.given == "never":
            known = [q.id for q in reading.knowledge.quantities.values() if q.of == "joint" and q.given != "never"]
            why = "each member has it, not the joint" if quantity and quantity.of == "member" else ""
            why = "it is worked out, never given" if quantity and quantity.given == "never" else why
            reading.fault(
                at, f"joint {name}: {key!r} is no field of a joint", why, nearest(key, [*known, *sorted(_JOINT_WORDS)])
            )
            continue
        origin = (
            Origin("project", f"project, joint {name}", str(at))
            if key in written
            else Origin("default", "default of the project", reading.shown)
        )
        if isinstance(value, dict):
            reasons[key] = value.get("because", "")
            value = value.get("value")
        if reasons.get(key):
            origin = Origin("assumption", f"assumed: {reasons[key]}", str(at))
        fact = _fact(reading, quantity, value, origin, at, f"joint {name}", key in reasons)
        if fact:
            found[key] = fact
    for quantity in reading.knowledge.quantities.values():
        if quantity.of == "joint" and quantity.given == "must" and quantity.id not in fields:
            reading.fault(place, f"joint {name} says nothing of {quantity.id}", quantity.says, f"add {quantity.id}: …")
    return found


def _inner(reading: Reading, place: Place, key: str) -> Place:
    for path, at in reading.document.places.items():
        if len(path) == 3 and path[0] == "joints" and path[2] == key and reading.document.place(*path[:2]) == place:
            return at
    return place


def _fact(
    reading: Reading, quantity: Quantity, value: Any, origin: Origin, place: Place, whose: str, assumed: bool
) -> Fact | None:
    """A written value as a fact, or None with the problem noted."""
    try:
        if quantity.is_number:
            if isinstance(value, list):
                raise ValueError("a number or a range 'a to b' is wanted, not a list")
            number = read_number(value, quantity.unit)
            if number.low < quantity.range.low or number.high > quantity.range.high:
                raise ValueError(
                    f"{value!r} lies outside what {quantity.id} can be, {quantity.range} {quantity.unit}".rstrip()
                )
            return Fact(number, origin, assumed)
        levels = [str(level) for level in value] if isinstance(value, list) else [str(value)]
        for level in levels:
            if level not in quantity.order:
                raise ValueError(f"{level!r} is no level of {quantity.id}. {nearest(level, quantity.order)}")
        return Fact(tuple(levels), origin, assumed)
    except ValueError as fault:
        reading.fault(place, f"{whose}, {quantity.id}: {fault}")
        return None


def _members(
    reading: Reading,
    joint: str,
    written: Any,
    place: Place,
    consumable: Consumable | None,
    weld_metal: Mapping[str, Any],
) -> tuple[MemberRow, ...]:
    if not isinstance(written, list) or not written:
        reading.fault(
            place,
            f"joint {joint} has no members",
            "a joint is made of two or more parts",
            "add members: [{steel: …, thickness: …}, …]",
        )
        return ()
    rows = [
        row for number, part in enumerate(written, start=1) if (row := _member(reading, joint, number, part, place))
    ]
    project = Origin("project", f"project, joint {joint}", str(place))
    try:
        facts = weld_metal_facts(weld_metal, consumable, str(place))
    except ValueError as fault:
        reading.fault(place, f"joint {joint}, weld metal: {fault}")
        facts = {}
    facts["member_role"] = Fact(("weld-metal",), project)
    facts["member_number"] = Fact(Range(len(written) + 1.0, len(written) + 1.0), project)
    return (*rows, MemberRow("weld metal", facts, weld_metal=True))


def _member(reading: Reading, joint: str, number: int, part: Any, place: Place) -> MemberRow | None:
    whose = f"joint {joint}, member {number}"
    if not isinstance(part, dict) or "steel" not in part or "thickness" not in part:
        reading.fault(place, f"{whose} needs a steel and a thickness", do="write {steel: plate, thickness: 20 mm}")
        return None
    name = str(part["steel"])
    if name not in reading.steels:
        reading.fault(place, f"{whose}: {name!r} is no steel of this project", do=nearest(name, reading.steels))
        return None
    origin = Origin("project", f"project, {whose}", str(place))
    own: dict[str, Fact] = {}
    for key, value in part.items():
        if key == "steel":
            continue
        quantity = reading.knowledge.quantities.get("member_thickness" if key == "thickness" else str(key))
        if quantity is None or quantity.of != "member":
            known = [q.id for q in reading.knowledge.quantities.values() if q.of == "member" and q.given != "never"]
            reading.fault(
                place, f"{whose}: {key!r} is no field of a member", do=nearest(key, ["steel", "thickness", *known])
            )
            continue
        fact = _fact(reading, quantity, value, origin, place, whose, False)
        if fact:
            own[quantity.id] = fact
    thickness = own.get("member_thickness")
    if thickness is None or not isinstance(thickness.value, Range):
        return None
    try:
        facts = member_facts(reading.steels[name], thickness.value) | own
    except ValueError:  # what cannot be read in the steel's own entry was noted there
        return None
    facts["member_role"] = Fact(("parent",), origin)
    facts["member_number"] = Fact(Range(float(number), float(number)), origin)
    return MemberRow(name, facts)
