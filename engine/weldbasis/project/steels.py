"""What is known of a steel, by member: composition, caps, strength and family, each with its origin.

A certificate counts before samples, samples before an era or a grade; an element that none of them names is
left to the vocabulary, which says what may be assumed and marks it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from weldbasis.facts import Origin
from weldbasis.knowledge import Era, Grade, Quantity, Sampling
from weldbasis.project.entries import SteelEntry
from weldbasis.project.given import Fact, standing_in, within
from weldbasis.project.grades import limits_in, reach_of
from weldbasis.project.samples import Outlier, outlier_of, outward, tolerance_bounds
from weldbasis.ranges import Range
from weldbasis.words import number_text, range_text

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
# Where the rule set has no method for samples: so many make an envelope of their own.
_ENOUGH_SAMPLES = 3


@dataclass(frozen=True)
class Steel:
    """A steel of the project, read: its records looked up, its values with their origins.

    `analysed` holds the elements of a certificate or another whole analysis, `said` what else the project gives
    (strength, delivery, family, place of samples), both by quantity id; `samples` holds elements by symbol.
    `sampling` is the method that makes sets of samples, `uncertainty` the laboratory's own, mass % by symbol.
    """

    id: str
    title: str
    grade: Grade | None
    era: Era | None
    analysed: Mapping[str, Fact]
    said: Mapping[str, Fact]
    samples: tuple[Mapping[str, Range], ...]
    paper: Origin
    certificate: str
    heat: str
    delivery: str
    place: str
    sampling: Sampling | None = None
    uncertainty: Mapping[str, float] = field(default_factory=dict)


def member_facts(steel: Steel, thickness: Range | None, vocabulary: Mapping[str, Quantity]) -> dict[str, Fact]:
    """Facts of a part made of a steel, by quantity id; without a thickness (mm) those of any the grade is made in."""
    found: dict[str, Fact] = {}
    if steel.grade:
        found |= _from_grade(steel.grade, thickness, vocabulary)
    if steel.grade and steel.delivery in vocabulary["delivery"].order:
        origin = Origin("grade-limit", f"+{steel.delivery} in the designation of {steel.id}", steel.place)
        found["delivery"] = Fact((steel.delivery,), origin)
    if steel.era:
        found |= _from_era(steel.era, vocabulary, steel.place)
    if steel.samples:
        found |= _from_samples(steel, found, vocabulary)
    found |= steel.analysed
    for cap, elements in _CAPPED.items():
        if all(ELEMENTS[element] in steel.analysed for element in elements):
            found.pop(cap, None)  # a cap bounds what is not analysed; it never trims an analysis
    found |= steel.said
    return found


def _from_grade(grade: Grade, thickness: Range | None, vocabulary: Mapping[str, Quantity]) -> dict[str, Fact]:
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
        return found | _beyond(grade, vocabulary)
    for element, quantity in ELEMENTS.items():
        if limit := limits.composition.get(element):
            found[quantity] = _limited(vocabulary[quantity], limit, element in limits.partly, origin)
    for name, number in (
        ("ce_iiw_limit", limits.ce_iiw),
        ("ce_iiw_cap", limits.ce_iiw),
        ("pcm_cap", limits.pcm),
        ("pcm_limit", limits.pcm),
        ("cet_limit", limits.cet),
        ("yield_strength", limits.yield_min),
        ("tensile_strength", limits.tensile_min),
    ):
        if number is not None:
            found[name] = Fact(Range(number, number), origin)
    return found


def _limited(quantity: Quantity, limit: Range, partly: bool, origin: Origin) -> Fact:
    """What a standard allows of an element; where it leaves an end open, up to what the vocabulary allows."""
    found = within(quantity, limit)
    default = standing_in(quantity) if partly else None
    if default and isinstance(default.value, Range):
        found = Range(min(found.low, default.value.low), max(found.high, default.value.high))
    if limit.high > quantity.range.high:
        origin = Origin(origin.kind, f"{origin.text}, which sets no upper limit here", origin.place)
    return Fact(found, origin)


def _beyond(grade: Grade, vocabulary: Mapping[str, Quantity]) -> dict[str, Fact]:
    """Nothing is known of what a standard limits elsewhere, where it does not reach to a thickness."""
    everywhere = limits_in(grade)
    assert everywhere is not None
    text = f"not known: {grade.standard} has {grade.designation} for {_thickness_text(reach_of(grade))} only"
    origin = Origin("unknown", text)
    return {
        quantity: Fact(vocabulary[quantity].range, origin, unknown=True)
        for element, quantity in ELEMENTS.items()
        if element in everywhere.composition
    }


def _thickness_text(reach: Range) -> str:
    """A range of thickness in words of the trade: "3 to 150 mm"."""
    if reach.low <= 0:
        return f"up to {reach.high:g} mm"
    return f"above {reach.low:g} mm" if reach.high == float("inf") else f"{reach.low:g} to {reach.high:g} mm"


def _from_era(era: Era, vocabulary: Mapping[str, Quantity], place: str) -> dict[str, Fact]:
    """The era's envelope: from the least that is typical to the cautious ceiling."""
    origin = Origin("era-envelope", f"envelope of {era.title}, {era.years}", place)
    found = {"steel_family": Fact((era.family,), origin), "steel_era": Fact((era.id,), origin)}
    for element, quantity in ELEMENTS.items():
        typical, ceiling = era.typical.get(element), era.ceilings.get(element)
        if typical or ceiling is not None:
            low = typical.low if typical else 0.0
            high = max(typical.high if typical else 0.0, ceiling or 0.0)
            found[quantity] = Fact(within(vocabulary[quantity], Range(low, high)), origin)
    return found


def _from_samples(steel: Steel, known: Mapping[str, Fact], vocabulary: Mapping[str, Quantity]) -> dict[str, Fact]:
    """What the samples leave possible, element by element: bounds by their number, or, where they are few, their
    envelope joined with what is known otherwise.
    """
    count = float(len(steel.samples))
    found = {"sample_count": Fact(Range(count, count), Origin("samples", _samples_text(int(count)), steel.place))}
    apart = outliers(steel)
    if steel.sampling and "outlying_samples" in vocabulary and len(steel.samples) >= steel.sampling.enough:
        number = float(len({outlier.sample for outlier in apart.values()}))
        origin = Origin("samples", outlier_text(apart) or "no sample stands apart from the others", steel.place)
        found["outlying_samples"] = Fact(Range(number, number), origin)
    for element, quantity in ELEMENTS.items():
        values = [sample[element] for sample in steel.samples if element in sample]
        if values:
            found[quantity] = _sampled(steel, element, values, known.get(quantity), vocabulary[quantity])
    return found


def _sampled(steel: Steel, element: str, values: Sequence[Range], known: Fact | None, quantity: Quantity) -> Fact:
    envelope = Range(min(value.low for value in values), max(value.high for value in values))
    text, alone, bounds = _samples_text(len(values)), False, envelope
    method = steel.sampling
    if method and len(values) >= method.enough:
        bounds, text = _by_statistics(steel, element, values, known, quantity, method)
    elif len(values) >= _ENOUGH_SAMPLES:
        text += ", least to greatest"
    else:
        other, whose = _else_known(steel, element, known)
        if other:
            bounds = Range(min(envelope.low, other.low), max(envelope.high, other.high))
        text += f", {f'joined with {whose}' if other else 'too few to show a spread'}"
        alone = other is None
    if off := steel.uncertainty.get(element, 0.0):
        bounds = Range(min(bounds.low, envelope.low - off), max(bounds.high, envelope.high + off))
        text += f", the laboratory's ±{number_text(off, quantity.decimals + 1)} % allowed for"
    if method and element in method.centre and "centre" in _places(steel):
        bounds = Range(bounds.low / method.centre_factor, bounds.high)
        text += ", less outside the middle of the plate"
    value = within(quantity, bounds)
    if element in (outlier := outliers(steel)):
        text += f"; sample {outlier[element].sample} stands apart and counts"
    return Fact(value, Origin("samples", text, steel.place), assumed=alone)


def _by_statistics(
    steel: Steel, element: str, values: Sequence[Range], known: Fact | None, quantity: Quantity, method: Sampling
) -> tuple[Range, str]:
    """Tolerance bounds with the laboratory's uncertainty, held at the era's envelope or the grade's limits unless a
    sample lies beyond them.
    """
    least, most = min(value.low for value in values), max(value.high for value in values)
    off = steel.uncertainty.get(element, 0.0)
    bounds = tolerance_bounds(values, method.last_figures.get(element, 0.0), method)
    found = outward(within(quantity, Range(bounds.low - off, bounds.high + off)), quantity.decimals)
    held = ""
    if known and not known.unknown and isinstance(known.value, Range) and known.value.high < found.high:
        found = Range(found.low, max(known.value.high, most + off))
        held = ", held at the era's envelope" if steel.era else ", held at the grade's limits"
    samples = f"{_samples_text(len(values))} {range_text(least, most, quantity.decimals)} %"
    return found, (
        f"{samples}; with these {element} is taken up to {number_text(found.high, quantity.decimals)} %"
        f" ({100 * method.content:g} % of the steel, {100 * method.confidence:g} % confidence{held})"
    )


def _places(steel: Steel) -> tuple[str, ...]:
    """Where the samples were taken, as far as the project says it."""
    said = steel.said.get("sample_place")
    return said.value if said and not isinstance(said.value, Range) else ()


def outliers(steel: Steel) -> dict[str, Outlier]:
    """By element the value that stands apart from the other samples of the steel."""
    if steel.sampling is None:
        return {}
    found = {}
    for element in ELEMENTS:
        values = [(at, sample[element]) for at, sample in enumerate(steel.samples, start=1) if element in sample]
        if outlier := outlier_of(values, steel.sampling.last_figures.get(element, 0.0), steel.sampling):
            found[element] = outlier
    return found


def outlier_text(apart: Mapping[str, Outlier]) -> str:
    """Which samples stand apart, with which element and why; empty where none does."""
    return "; ".join(
        f"sample {outlier.sample} stands apart with {element} {outlier.value:g} %: {outlier.deviations:.2f} standard "
        f"deviations from the mean, where more than {outlier.critical:.2f} are unlikely in one steel"
        for element, outlier in apart.items()
    )


def _else_known(steel: Steel, element: str, known: Fact | None) -> tuple[Range | None, str]:
    """What few samples are joined with: the era's typical range, else its ceiling, else the grade's limits."""
    if steel.era and (typical := steel.era.typical.get(element)):
        return typical, "the era's typical range"
    if known and not known.unknown and isinstance(known.value, Range):
        return known.value, "the era's envelope" if steel.era else "the grade's limits"
    return None, ""


def _samples_text(count: int) -> str:
    return f"{count} sample{'s' if count > 1 else ''}"


def steel_entry(steel: Steel, vocabulary: Mapping[str, Quantity]) -> SteelEntry:
    """The steel as a page lists it, with its composition as ranges over any thickness its grade is made in."""
    facts = member_facts(steel, None, vocabulary)
    composition = {
        element: (fact.value.low, fact.value.high)
        for element, quantity in ELEMENTS.items()
        if (fact := facts.get(quantity)) and isinstance(fact.value, Range)
    }
    kind = steel.paper.kind
    if not steel.analysed:
        kind = "samples" if steel.samples else "grade-limit" if steel.grade else "era-envelope"
    title = steel.title or (steel.grade.designation if steel.grade else steel.era.title if steel.era else steel.id)
    return SteelEntry(
        steel.id,
        title,
        steel.grade.id if steel.grade else "",
        steel.era.id if steel.era else "",
        steel.certificate,
        steel.heat,
        kind,
        dict(sorted(composition.items())),
        len(steel.samples),
        steel.paper,
        _said_of(steel, facts, vocabulary),
    )


def _said_of(steel: Steel, facts: Mapping[str, Fact], vocabulary: Mapping[str, Quantity]) -> tuple[str, ...]:
    """What a list of steels says of the samples: how far each sampled element is taken, and what stands apart."""
    taken = [
        f"{element} {number_text(fact.value.high, vocabulary[quantity].decimals)} %"
        for element, quantity in ELEMENTS.items()
        if (fact := facts.get(quantity))
        and fact.origin.kind == "samples"
        and isinstance(fact.value, Range)
        and any(element in sample for sample in steel.samples)
        and quantity not in steel.analysed
    ]
    if not taken:
        return ()
    these = f"these {len(steel.samples)} samples" if len(steel.samples) > 1 else "this one sample"
    apart = outlier_text(outliers(steel))
    said = f"With {these} the steel is taken to hold up to {', '.join(taken)}."
    return (said, f"{apart[0].upper()}{apart[1:]}. It counts like the others.") if apart else (said,)
