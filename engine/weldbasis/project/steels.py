"""What is known of a steel, by member: composition, caps, strength and family, each with its origin.

A certificate counts before samples, samples before an era or a grade; an element that none of them names is
left to the vocabulary, which says what may be assumed and marks it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from weldbasis.facts import Origin, OriginKind
from weldbasis.knowledge import Consumable, Era, Grade
from weldbasis.project.entries import SteelEntry
from weldbasis.project.grades import limits_in
from weldbasis.ranges import Range
from weldbasis.units import read_number

ELEMENTS: Mapping[str, str] = {
    "C": "carbon",
    "Si": "silicon",
    "Mn": "manganese",
    "P": "phosphorus",
    "S": "sulphur",
    "Cr": "chromium",
    "Mo": "molybdenum",
    "Ni": "nickel",
    "Cu": "copper",
    "V": "vanadium",
    "Nb": "niobium",
    "Ti": "titanium",
    "B": "boron",
    "Al": "aluminium",
    "N": "nitrogen",
}


# The elements of each carbon equivalent that a grade may cap.
_CAPPED: Mapping[str, frozenset[str]] = {
    "ce_iiw_limit": frozenset({"C", "Mn", "Cr", "Mo", "V", "Ni", "Cu"}),
    "pcm_limit": frozenset({"C", "Si", "Mn", "Cu", "Cr", "Ni", "Mo", "V", "B"}),
    "cet_limit": frozenset({"C", "Mn", "Mo", "Cr", "Cu", "Ni"}),
}


@dataclass(frozen=True)
class Fact:
    """One given value: a closed range, or levels, and its origin."""

    value: Range | tuple[str, ...]
    origin: Origin
    assumed: bool = False


@dataclass(frozen=True)
class Steel:
    """A steel of the project with its records looked up."""

    id: str
    written: Mapping[str, Any]
    grade: Grade | None
    era: Era | None
    place: str


def member_facts(steel: Steel, thickness: Range) -> dict[str, Fact]:
    """Facts of a part made of a steel in a thickness, by quantity id. ValueError where a value cannot be read."""
    found: dict[str, Fact] = {}
    if steel.grade:
        found |= _from_grade(steel.grade, thickness)
    if steel.era:
        found |= _from_era(steel, steel.era)
    if samples := steel.written.get("samples"):
        found |= _from_samples(steel, samples)
    if composition := steel.written.get("composition"):
        origin = paper_of(steel)
        found |= {ELEMENTS[e]: Fact(read_number(v, "%"), origin) for e, v in composition.items() if e in ELEMENTS}
        for cap, elements in _CAPPED.items():
            if elements <= set(composition):
                found.pop(cap, None)  # a cap bounds what is not analysed; it never trims an analysis
    return found | _own_words(steel)


def _own_words(steel: Steel) -> dict[str, Fact]:
    origin = paper_of(steel)
    assumed = "because" in steel.written and "origin" not in steel.written
    found: dict[str, Fact] = {}
    if "yield_strength" in steel.written:
        found["yield_strength"] = Fact(read_number(steel.written["yield_strength"], "MPa"), origin, assumed)
    for field, quantity in (("delivery", "delivery"), ("family", "steel_family"), ("sample_place", "sample_place")):
        if field in steel.written:
            value = steel.written[field]
            levels = tuple(value) if isinstance(value, list | tuple) else (str(value),)
            found[quantity] = Fact(levels, origin, assumed)
    return found


def paper_of(steel: Steel) -> Origin:
    """The paper behind a steel's own values."""
    origin = steel.written.get("origin", {})
    if "certificate" in origin or "certificate" in steel.written:
        number = origin.get("certificate", steel.written.get("certificate"))
        heat = f", heat {origin['heat']}" if "heat" in origin else ""
        return Origin("certificate", f"certificate {number}{heat}", steel.place)
    if "laboratory" in origin:
        return Origin("samples", f"laboratory report {origin['laboratory']}", steel.place)
    if "drawing" in origin:
        return Origin("drawing", f"drawing {origin['drawing']}", steel.place)
    if "because" in steel.written:
        return Origin("assumption", f"assumed: {steel.written['because']}", steel.place)
    return Origin("project", str(origin.get("note", "as the project says, without a paper")), steel.place)


def _from_grade(grade: Grade, thickness: Range) -> dict[str, Fact]:
    origin = Origin("grade-limit", f"limits of {grade.designation}, {grade.standard}")
    found = {"steel_family": Fact((grade.family,), origin)}
    if grade.delivery:
        found["delivery"] = Fact(grade.delivery, origin)
    if grade.group:
        found["group_15608"] = Fact((grade.group,), origin)
    if grade.p_number:
        found["p_number"] = Fact((grade.p_number,), origin)
    limits = limits_in(grade, thickness)
    if limits is None:
        return found
    for element, (low, high) in limits.composition.items():
        if element in ELEMENTS and high != float("inf"):
            found[ELEMENTS[element]] = Fact(Range(low, high), origin)
    for quantity, number in (
        ("ce_iiw_limit", limits.ce_iiw),
        ("ce_iiw_cap", limits.ce_iiw),
        ("pcm_cap", limits.pcm),
        ("pcm_limit", limits.pcm),
        ("cet_limit", limits.cet),
        ("yield_strength", limits.yield_min),
        ("tensile_strength", limits.tensile_min),
    ):
        if number is not None:
            found[quantity] = Fact(Range(number, number), origin)
    return found


def _from_era(steel: Steel, era: Era) -> dict[str, Fact]:
    origin = Origin("era-envelope", f"envelope of {era.title}, {era.years}", steel.place)
    found = {"steel_family": Fact((era.family,), origin), "steel_era": Fact((era.id,), origin)}
    for element, quantity in ELEMENTS.items():
        typical, ceiling = era.typical.get(element), era.ceilings.get(element)
        if typical or ceiling is not None:
            low = typical.low if typical else 0.0
            high = max(typical.high if typical else 0.0, ceiling or 0.0)
            found[quantity] = Fact(Range(low, high), origin)
    return found


def _from_samples(steel: Steel, samples: Sequence[Mapping[str, Any]]) -> dict[str, Fact]:
    """Envelope of the samples; with fewer than three it is joined with the era's typical range."""
    few = len(samples) < 3 and steel.era is not None
    text = f"{len(samples)} sample{'s' if len(samples) > 1 else ''}"
    text += ", joined with the era's typical range" if few else ", least to greatest"
    origin = Origin("samples", text, steel.place)
    found: dict[str, Fact] = {"sample_count": Fact(Range(float(len(samples)), float(len(samples))), origin)}
    for element, quantity in ELEMENTS.items():
        values = [read_number(sample[element], "%") for sample in samples if element in sample]
        if not values:
            continue
        low, high = min(v.low for v in values), max(v.high for v in values)
        typical = steel.era.typical.get(element) if few and steel.era else None
        if typical:
            low, high = min(low, typical.low), max(high, typical.high)
        found[quantity] = Fact(Range(low, high), origin)
    return found


def weld_metal_facts(written: Mapping[str, Any], consumable: Consumable | None, place: str) -> dict[str, Fact]:
    """Facts of a joint's weld metal from its own analysis or its consumable's class; empty where neither is there."""
    found: dict[str, Fact] = {}
    if consumable:
        origin = Origin("consumable", f"classification {consumable.id}", place)
        found |= {ELEMENTS[e]: Fact(r, origin) for e, r in consumable.composition.items() if e in ELEMENTS}
        if consumable.tensile:
            found["tensile_strength"] = Fact(Range(consumable.tensile.low, consumable.tensile.low), origin)
        if consumable.yield_min:
            found["yield_strength"] = Fact(Range(consumable.yield_min, consumable.yield_min), origin)
    origin = Origin(
        "project", str(written.get("origin", {}).get("note", "analysis of the weld metal in the project")), place
    )
    if "certificate" in written.get("origin", {}):
        origin = Origin("certificate", f"certificate {written['origin']['certificate']}", place)
    found |= {
        ELEMENTS[e]: Fact(read_number(v, "%"), origin)
        for e, v in written.get("composition", {}).items()
        if e in ELEMENTS
    }
    for field, unit in (("tensile_strength", "MPa"), ("yield_strength", "MPa")):
        if field in written:
            found[field] = Fact(read_number(written[field], unit), origin)
    return found


def steel_entry(steel: Steel) -> SteelEntry:
    """The steel as a page lists it, with its composition as ranges in a usual thickness."""
    facts = member_facts(steel, Range(0.0, float("inf")))
    by_quantity = {quantity: element for element, quantity in ELEMENTS.items()}
    composition = {
        by_quantity[name]: (fact.value.low, fact.value.high)
        for name, fact in facts.items()
        if name in by_quantity and isinstance(fact.value, Range)
    }
    origin = paper_of(steel)
    kind: OriginKind = origin.kind
    if not steel.written.get("composition"):
        kind = "samples" if steel.written.get("samples") else "grade-limit" if steel.grade else "era-envelope"
    written = steel.written.get("origin", {})
    title = steel.written.get("title") or (
        steel.grade.designation if steel.grade else steel.era.title if steel.era else steel.id
    )
    return SteelEntry(
        steel.id,
        str(title),
        steel.grade.id if steel.grade else "",
        steel.era.id if steel.era else "",
        str(written.get("certificate", steel.written.get("certificate", ""))),
        str(written.get("heat", "")),
        kind,
        dict(sorted(composition.items())),
        len(steel.written.get("samples", ())),
        origin,
    )
