"""The parts of a joint into facts: every parent part with its steel, and last the weld metal."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import lru_cache
from typing import Any

from weldbasis.facts import Origin
from weldbasis.knowledge import Consumable, Knowledge
from weldbasis.problem import nearest
from weldbasis.project.columns import MemberRow
from weldbasis.project.given import Fact, fact_of, origin_of, within
from weldbasis.project.reading import Reading, Written
from weldbasis.project.steels import ELEMENTS
from weldbasis.ranges import Range

# Where a part stands in its joint is known from the list, never given.
_PLACES = ("member_role", "member_number")
_WELD_METAL = ("composition", "origin", "tensile_strength", "yield_strength")


@lru_cache(maxsize=4)
def member_fields(knowledge: Knowledge) -> tuple[str, ...]:
    """Everything that a part may say, by name; `thickness` is short for `member_thickness`."""
    quantities = knowledge.quantities.values()
    given = (q.id for q in quantities if q.of == "member" and q.given != "never" and q.id not in _PLACES)
    return ("steel", "thickness", *given)


def parent_rows(reading: Reading, joint: str, written: Written) -> tuple[MemberRow, ...]:
    """The parent parts of a joint in the order of the project file; mistakes are noted."""
    parts = written.data["members"]
    most = int(reading.knowledge.quantities["member_number"].range.high) - 1
    if not isinstance(parts, list) or not 0 < len(parts) <= most:
        what = (
            f"has {len(parts)} members, at most {most} can be"
            if isinstance(parts, list) and parts
            else "has no members"
        )
        why, do = "a joint is made of one or more parts", "add members: [{steel: …, thickness: …}, …]"
        reading.fault(written.place_of("members"), f"joint {joint} {what}", why, do)
        return ()
    rows = []
    for number, part in enumerate(parts, start=1):
        at = written.part("members", number - 1, data=part if isinstance(part, dict) else {})
        row = _parent_row(reading, f"joint {joint}, member {number}", number, at)
        rows += [row] if row else []
    return tuple(rows)


def _parent_row(reading: Reading, whose: str, number: int, written: Written) -> MemberRow | None:
    said, place = written.data, written.place_of()
    sized = [key for key in ("thickness", "member_thickness") if key in said]
    if "steel" not in said or not sized:
        reading.fault(place, f"{whose} needs a steel and a thickness", do="write {steel: plate, thickness: 20 mm}")
        return None
    if len(sized) > 1:
        reading.fault(written.place_of("thickness"), f"{whose} has its thickness twice", do="keep thickness alone")
        return None
    own = _own_facts(reading, whose, written)
    name = str(said["steel"])
    if name not in reading.steels:
        do = nearest(name, reading.steels)
        reading.fault(written.place_of("steel"), f"{whose}: {name!r} is no steel of this project", do=do)
        return None
    thickness = own.get("member_thickness")
    if thickness is None or not isinstance(thickness.value, Range):
        return None
    facts = {**reading.facts_of_steel(name, thickness.value), **own}
    return MemberRow(
        name, facts | _place_in_joint("parent", number, Origin("project", f"project, {whose}", str(place)))
    )


def _own_facts(reading: Reading, whose: str, written: Written) -> dict[str, Fact]:
    """What a part says of itself beside its steel."""
    known = member_fields(reading.knowledge)
    found: dict[str, Fact] = {}
    for key, said in written.data.items():
        if key == "steel":
            continue
        at = written.place_of(key)
        quantity = reading.knowledge.quantities.get("member_thickness" if key == "thickness" else key)
        if quantity is None or key not in known:
            why = "it is worked out, never given" if quantity and quantity.of == "member" else ""
            why = "the joint has it, not each part" if quantity and quantity.of == "joint" else why
            reading.fault(at, f"{whose}: {key!r} is no field of a member", why, nearest(key, known))
            continue
        try:
            found[quantity.id] = fact_of(quantity, said, Origin("project", f"project, {whose}", str(at)))
        except ValueError as fault:
            reading.fault(at, f"{whose}, {quantity.id}: {fault}")
    return found


def _place_in_joint(role: str, number: int, origin: Origin) -> dict[str, Fact]:
    number_fact = Fact(Range(float(number), float(number)), origin)
    return {"member_role": Fact((role,), origin), "member_number": number_fact}


def weld_metal_row(
    reading: Reading, whose: str, written: Written, consumable: Consumable | None, number: int, place: str
) -> MemberRow:
    """The weld metal: what its consumable's class says, and over that its own analysis; absent where neither is."""
    facts = _class_facts(reading.knowledge, consumable, place) if consumable else {}
    if isinstance(written.data, Mapping):
        facts |= _analysed(reading, whose, written)
    else:
        do = "write weld_metal: {composition: {C: …, Mn: …}}"
        reading.fault(written.place_of(), f"{whose}: a mapping (key: value) is wanted", do=do)
    origin = Origin("project", "the weld metal of the joint", place)
    return MemberRow("weld metal", facts | _place_in_joint("weld-metal", number, origin), weld_metal=True)


def _class_facts(knowledge: Knowledge, consumable: Consumable, place: str) -> dict[str, Fact]:
    origin = Origin("consumable", f"classification {consumable.id}", place)
    limits = {ELEMENTS[e]: limit for e, limit in consumable.composition.items() if e in ELEMENTS}
    found = {q: Fact(within(knowledge.quantities[q], limit), origin) for q, limit in limits.items()}
    if consumable.tensile:
        found["tensile_strength"] = Fact(Range(consumable.tensile.low, consumable.tensile.low), origin)
    if consumable.yield_min:
        found["yield_strength"] = Fact(Range(consumable.yield_min, consumable.yield_min), origin)
    return found


def _analysed(reading: Reading, whose: str, written: Written) -> dict[str, Fact]:
    """The analysis and strength of the weld metal as the project gives them."""
    place = written.place_of()
    for key in written.data:
        if key not in _WELD_METAL:
            reading.fault(written.place_of(key), f"{whose}: {key!r} is not known here", do=nearest(key, _WELD_METAL))
    origin = Origin("project", "analysis of the weld metal in the project", str(place))
    try:
        origin = origin_of(written.data.get("origin"), origin)
    except ValueError as fault:
        reading.fault(written.place_of("origin"), f"{whose}: {fault}")
    composition = written.data.get("composition", {})
    if not isinstance(composition, Mapping):
        reading.fault(written.place_of("composition"), f"{whose}: elements and their mass % are wanted")
        composition = {}
    values: dict[str, tuple[tuple[str, ...], Any]] = {}
    for element, said in composition.items():
        if element not in ELEMENTS:
            at = written.place_of("composition", element)
            reading.fault(at, f"{whose}: {element!r} is no element read here", do=nearest(element, ELEMENTS))
            continue
        values[ELEMENTS[element]] = ("composition", element), said
    for key in ("tensile_strength", "yield_strength"):
        if key in written.data:
            values[key] = (key,), written.data[key]
    found: dict[str, Fact] = {}
    for key, (path, said) in values.items():
        at = written.place_of(*path)
        try:
            found[key] = fact_of(reading.knowledge.quantities[key], said, replace(origin, place=str(at)))
        except ValueError as fault:
            reading.fault(at, f"{whose}, {path[-1]}: {fault}")
    return found
