"""The steels of a project file, each with its certificate, grade and era looked up and its values checked."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from weldbasis.facts import Origin
from weldbasis.knowledge import Era, Grade
from weldbasis.problem import Place, nearest
from weldbasis.project.given import Fact, assumption, fact_of, origin_of, value_of
from weldbasis.project.grades import NoSuchGrade, delivery_in, find_grade
from weldbasis.project.reading import Reading, Written
from weldbasis.project.steels import ELEMENTS, Steel
from weldbasis.ranges import Range

_SAID = {
    "yield_strength": "yield_strength",
    "delivery": "delivery",
    "family": "steel_family",
    "sample_place": "sample_place",
}


def read_steels(reading: Reading, steels: Mapping[str, Any], certificates: Mapping[str, Written] | None) -> None:
    """Put every steel of the project file into the reading; mistakes are noted, and what can be read is kept.

    `certificates` is None where their list could not be read, which was noted already.
    """
    for name, data in steels.items():
        written = reading.written("steels", name, data=data)
        paper = _certificate(reading, written, certificates)
        reading.steels[name] = _steel(reading, name, _joined(written, paper) if paper else written)


def _certificate(reading: Reading, written: Written, certificates: Mapping[str, Written] | None) -> Written | None:
    if "certificate" not in written.data or certificates is None:
        return None
    number = str(written.data["certificate"])
    if number in certificates:
        return certificates[number]
    do = nearest(number, certificates) or "name the list of certificates: certificates: {csv: …}"
    if "composition" in written.data:
        do = f"where the analysis stands here, write origin: {{certificate: {number}}}"
    reading.fault(written.place_of("certificate"), f"certificate {number!r} is in no list of this project", do=do)
    return None


def _joined(written: Written, paper: Written) -> Written:
    """What a project says of a steel on top of what its certificate says, each with its own place."""
    data: dict[str, Any] = {**paper.data, **written.data}
    for part in ("composition", "origin"):
        data[part] = {**paper.data.get(part, {}), **written.data.get(part, {})}

    def place_of(*path: str | int) -> Place:
        inside: Any = written.data
        for step in path:
            if not isinstance(inside, Mapping) or step not in inside:
                return paper.place_of(*path) if path else written.place_of()
            inside = inside[step]
        return written.place_of(*path)

    return Written(data, place_of)


def _steel(reading: Reading, name: str, written: Written) -> Steel:
    said = written.data
    place = written.place_of()
    paper = _paper(reading, name, written, f"{place.file}:{place.line}")
    grade, era = _grade(reading, written), _era(reading, written)
    if not any(said.get(key) for key in ("composition", "samples", "grade", "era")) and "certificate" not in said:
        reading.fault(
            place,
            f"nothing is said of steel {name!r}",
            "a steel needs a composition, samples, a grade or an era",
            "say what is known; for undocumented steel name its era",
        )
    if "grade" in said and "era" in said:
        reading.fault(
            written.place_of("era"),
            f"steel {name!r} has a grade and an era",
            "a grade limits a composition, an era says what may be met without one",
            "keep the one that the papers support",
        )
    values = _said(reading, name, written, paper)
    samples = _samples(reading, name, written)
    composition = _elements(reading, name, written.part("composition", data=said.get("composition", {})))
    return Steel(
        id=name,
        title=str(said.get("title", "")),
        grade=grade,
        era=era,
        analysed={ELEMENTS[e]: Fact(value, paper, paper.kind == "assumption") for e, value in composition.items()},
        said=values,
        samples=samples,
        paper=paper,
        certificate=str(said.get("origin", {}).get("certificate", said.get("certificate", ""))),
        heat=str(said.get("origin", {}).get("heat", "")),
        delivery=delivery_in(str(said.get("grade", ""))),
        place=f"{place.file}:{place.line}",
        sampling=reading.knowledge.sampling,
        uncertainty={e: float(value) for e, value in said.get("sample_uncertainty", {}).items() if e in ELEMENTS},
    )


def _paper(reading: Reading, name: str, written: Written, place: str) -> Origin:
    """The paper behind a steel's own values."""
    said = written.data
    origin = dict(said.get("origin", {}))
    if "certificate" in said:
        origin.setdefault("certificate", said["certificate"])
    if not origin and "because" in said:
        return assumption(str(said["because"]), place)
    try:
        return origin_of(origin, Origin("project", "as the project says, without a paper", place))
    except ValueError as fault:
        reading.fault(written.place_of("origin"), f"steel {name!r}: {fault}")
        return Origin("project", "as the project says, without a paper", place)


def _grade(reading: Reading, written: Written) -> Grade | None:
    if "grade" not in written.data:
        return None
    try:
        return find_grade(str(written.data["grade"]), reading.knowledge)
    except NoSuchGrade as fault:
        reading.fault(written.place_of("grade"), str(fault))
        return None


def _era(reading: Reading, written: Written) -> Era | None:
    if "era" not in written.data:
        return None
    name = str(written.data["era"])
    if name not in reading.knowledge.eras:
        do = nearest(name, reading.knowledge.eras)
        reading.fault(written.place_of("era"), f"{name!r} is no era known here", do=do)
    return reading.knowledge.eras.get(name)


def _samples(reading: Reading, name: str, written: Written) -> tuple[dict[str, Range], ...]:
    found = []
    for number, sample in enumerate(written.data.get("samples", ())):
        part = written.part("samples", number, data=sample)
        if not any(element in ELEMENTS for element in sample):
            reading.fault(part.place_of(), f"steel {name!r}: a sample without any element is none", do="take it out")
        found.append(_elements(reading, name, part))
    return tuple(found)


def _elements(reading: Reading, name: str, written: Written) -> dict[str, Range]:
    """Elements by symbol, within what the vocabulary allows; those that no rule reads are left out."""
    found: dict[str, Range] = {}
    for symbol, said in written.data.items():
        if symbol not in ELEMENTS:
            continue
        try:
            value = value_of(reading.knowledge.quantities[ELEMENTS[symbol]], said)
        except ValueError as fault:
            reading.fault(written.place_of(symbol), f"steel {name!r}, {symbol}: {fault}")
            continue
        assert isinstance(value, Range)
        found[symbol] = value
    return found


def _said(reading: Reading, name: str, written: Written, paper: Origin) -> dict[str, Fact]:
    """Strength, delivery, family and place of samples as the project or the certificate gives them."""
    found: dict[str, Fact] = {}
    for field, quantity in _SAID.items():
        if field not in written.data:
            continue
        try:
            fact = fact_of(reading.knowledge.quantities[quantity], written.data[field], paper)
        except ValueError as fault:
            reading.fault(written.place_of(field), f"steel {name!r}, {field}: {fault}")
            continue
        found[quantity] = replace(fact, assumed=fact.assumed or paper.kind == "assumption")
    return found
