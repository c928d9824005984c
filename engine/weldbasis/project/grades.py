"""Find a grade by any usual spelling, and what its standard allows in a thickness."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cache

from weldbasis.knowledge import Grade, Knowledge
from weldbasis.ranges import Range

_NOISE = re.compile(r"\b(?:grade|gr|type|class|cl|astm|sae|aisi|jis|din|en|bs|api|spec)\b\.?", re.IGNORECASE)


class NoSuchGrade(ValueError):
    """No grade, or more than one, goes by a name; the message lists the nearest."""


@dataclass(frozen=True)
class GradeLimits:
    """What a grade allows in a thickness: element ranges and caps; None where it sets none."""

    composition: Mapping[str, tuple[float, float]]
    ce_iiw: float | None
    pcm: float | None
    cet: float | None
    yield_min: float | None
    tensile_min: float | None


def squeezed(text: str) -> str:
    """A designation without the words, blanks and signs that spellings differ in."""
    plain = _NOISE.sub(" ", text.replace("/", " "))
    return re.sub(r"[^a-z0-9+]", "", plain.lower())


@cache
def _spellings(knowledge: Knowledge) -> Mapping[str, tuple[str, ...]]:
    found: dict[str, dict[str, None]] = {}
    for grade in knowledge.grades.values():
        for name in (grade.id, grade.designation, *grade.aliases):
            found.setdefault(squeezed(name), {})[grade.id] = None
    return {name: tuple(ids) for name, ids in found.items()}


def find_grade(text: str, knowledge: Knowledge) -> Grade:
    """The grade that goes by a name. Raises NoSuchGrade with the nearest names where there is none or more than one."""
    if text in knowledge.grades:
        return knowledge.grades[text]
    exact = [grade for grade in knowledge.grades.values() if text in (grade.designation, *grade.aliases)]
    if len(exact) == 1:
        return exact[0]
    table = _spellings(knowledge)
    word = squeezed(text)
    for candidate in (word, re.sub(r"\+(?:n|ar|m|qt|nt)$", "", word)):
        ids = table.get(candidate, ())
        if len(ids) == 1:
            return knowledge.grades[ids[0]]
        if ids:
            raise NoSuchGrade(f"{text!r} may be any of {', '.join(ids)}; write one of these")
    near = get_close_matches(word, table, n=3, cutoff=0.6)
    names = [knowledge.grades[table[name][0]].designation for name in near]
    raise NoSuchGrade(f"no grade goes by {text!r}" + (f"; nearest are {', '.join(names)}" if names else ""))


def limits_in(grade: Grade, thickness: Range) -> GradeLimits | None:
    """What the grade allows anywhere in a range of thickness (mm); None where the standard does not reach there.

    Where several bands may hold, the loosest limit of them counts.
    """
    bands = [band for band in grade.bands if _meets(band.thickness, thickness)]
    if not bands:
        return None
    composition = {}
    for element in {name for band in bands for name in band.composition}:
        if all(element in band.composition for band in bands):
            ends = [band.composition[element] for band in bands]
            composition[element] = (max(0.0, min(end.low for end in ends)), max(end.high for end in ends))

    def loosest(values: list[float | None]) -> float | None:
        known = [value for value in values if value is not None]
        return max(known) if len(known) == len(bands) else None

    def least(values: list[float | None]) -> float | None:
        known = [value for value in values if value is not None]
        return min(known) if len(known) == len(bands) else None

    return GradeLimits(
        dict(sorted(composition.items())),
        loosest([band.ce_iiw_max for band in bands]),
        loosest([band.pcm_max for band in bands]),
        loosest([band.cet_max for band in bands]),
        least([band.yield_min for band in bands]),
        least([band.tensile.low if band.tensile else None for band in bands]),
    )


def _meets(band: Range, wanted: Range) -> bool:
    below = band.high < wanted.low or (band.high == wanted.low and band.high_open)
    above = band.low > wanted.high or (band.low == wanted.high and band.low_open)
    return not below and not above
