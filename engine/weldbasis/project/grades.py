"""Find a grade by any usual spelling, and what its standard allows in a thickness."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from functools import lru_cache

from weldbasis.knowledge import Grade, GradeBand, Knowledge
from weldbasis.ranges import Range

# Words that spellings of one designation differ in; no letter may stand before them, digits may follow.
_NOISE = re.compile(
    r"(?<![a-z])(?:grade|gr|type|class|cl|astm|asme|aisi|sae|jis|din|en|bs|api|spec)(?![a-z]{2})\.?", re.IGNORECASE
)
# The number of a standard put before a designation, as in "EN 10025-2:2004 S355J2", and a number in brackets behind it.
_STANDARD_BEFORE = re.compile(
    r"^\s*(?:(?:DIN\s+)?EN|ISO|JIS|GB/T|DIN|BS)\s*[A-Z]?\d[\d-]*(?::\d{4})?\s+(?=\S)", re.IGNORECASE
)
_NUMBER_BEHIND = re.compile(r"\s*[(/,]?\s*\b1\.\d{4}\b\s*\)?\s*$")
_DELIVERY = re.compile(r"\+\s*(AR|NT|QT|N|M|A)\s*$", re.IGNORECASE)
_MANY, _SHORTEST = 8, 3


class NoSuchGrade(ValueError):
    """No grade, or more than one, goes by a name; the message lists those it may be, or the nearest."""


@dataclass(frozen=True)
class GradeLimits:
    """What a grade allows in a thickness: element ranges and caps; None where it sets none.

    `partly` names the elements that only some of the thickness is limited in. A range without an upper end stays so.
    """

    composition: Mapping[str, Range]
    partly: frozenset[str]
    ce_iiw: float | None
    pcm: float | None
    cet: float | None
    yield_min: float | None
    tensile_min: float | None


def squeezed(text: str) -> str:
    """A designation without the words, blanks and signs that spellings differ in; "-" is kept between two digits."""
    plain = _NOISE.sub(" ", text.replace("/", " ").lower())
    plain = re.sub(r"(?<=\d)[^a-z0-9+]+(?=\d)", "-", plain.strip())
    plain = re.sub(r"[^a-z0-9+-]|(?<!\d)-|-(?!\d)", "", plain)
    return re.sub(r"^sa(?=\d)", "a", plain)


def delivery_in(text: str) -> str:
    """The delivery condition that a designation ends in ("S355J2+N" gives N), or nothing."""
    match = _DELIVERY.search(text)
    return match.group(1).upper() if match else ""


@lru_cache(maxsize=4)
def _spellings(knowledge: Knowledge) -> Mapping[str, tuple[str, ...]]:
    found: dict[str, dict[str, None]] = {}
    for grade in knowledge.grades.values():
        for name in (grade.id, grade.designation, *grade.aliases, *([grade.number] if grade.number else [])):
            found.setdefault(squeezed(name), {})[grade.id] = None
    return {name: tuple(ids) for name, ids in found.items()}


@lru_cache(maxsize=4)
def _without_dashes(knowledge: Knowledge) -> Mapping[str, tuple[str, ...]]:
    """The same without the dashes between digits, for "13CrMo45" and the like."""
    found: dict[str, dict[str, None]] = {}
    for name, ids in _spellings(knowledge).items():
        found.setdefault(name.replace("-", ""), {}).update(dict.fromkeys(ids))
    return {name: tuple(ids) for name, ids in found.items()}


def find_grade(text: str, knowledge: Knowledge) -> Grade:
    """The grade that goes by a name. Raises NoSuchGrade with the nearest names where there is none or more than one."""
    if text in knowledge.grades:
        return knowledge.grades[text]
    exact = [grade for grade in knowledge.grades.values() if text in (grade.designation, *grade.aliases)]
    if len(exact) == 1:
        return exact[0]
    for name in _readings(text):
        for table in (_spellings(knowledge), _without_dashes(knowledge)):
            ids = table.get(name, ())
            if len(ids) == 1:
                return knowledge.grades[ids[0]]
            if ids:
                raise NoSuchGrade(_may_be(text, ids, knowledge))
    word = squeezed(_bare(text))
    if ids := _beginning(word, knowledge):
        raise NoSuchGrade(_may_be(text, ids, knowledge))
    near = _nearest(word, knowledge)
    raise NoSuchGrade(f"no grade goes by {text!r}" + (f"; nearest are {', '.join(near)}" if near else ""))


def _bare(text: str) -> str:
    return _DELIVERY.sub("", _NUMBER_BEHIND.sub("", _STANDARD_BEFORE.sub("", text)))


def _readings(text: str) -> tuple[str, ...]:
    """The text squeezed as it stands, and without standard, number and delivery condition, the fullest first."""
    number = _NUMBER_BEHIND.sub("", text)
    forms = (text, number, _STANDARD_BEFORE.sub("", number), _DELIVERY.sub("", number), _bare(text))
    return tuple(word for word in dict.fromkeys(squeezed(form) for form in forms) if word)


def _beginning(word: str, knowledge: Knowledge) -> tuple[str, ...]:
    """The grades whose names begin with a word and go on with another part, as "A36" begins "A36 plate"."""
    ids: dict[str, None] = {}
    for name, found in _spellings(knowledge).items():
        if len(word) >= _SHORTEST and name.startswith(word) and not (word[-1].isdigit() and name[len(word)].isdigit()):
            ids.update(dict.fromkeys(found))
    return tuple(ids)


def _may_be(text: str, ids: Iterable[str], knowledge: Knowledge) -> str:
    names = sorted(_name_to_write(knowledge.grades[name], knowledge) for name in ids)
    more = f" and {len(names) - _MANY} more" if len(names) > _MANY else ""
    return f"{text!r} may be any of {', '.join(names[:_MANY])}{more}; write one of these"


def _name_to_write(grade: Grade, knowledge: Knowledge) -> str:
    """The designation where it names this grade alone, else the id."""
    alone = sum(other.designation == grade.designation for other in knowledge.grades.values()) == 1
    return grade.designation if alone else grade.id


def _nearest(word: str, knowledge: Knowledge) -> list[str]:
    table = _spellings(knowledge)
    ids: dict[str, None] = {}
    holding = [name for name in table if len(word) >= _SHORTEST and word in name]
    for name in [*holding, *get_close_matches(word, table, n=6, cutoff=0.6)]:
        ids.update(dict.fromkeys(table[name]))
    return [_name_to_write(knowledge.grades[name], knowledge) for name in ids][:3]


def limits_in(grade: Grade, thickness: Range | None = None) -> GradeLimits | None:
    """What the grade allows anywhere in a range of thickness (mm), or in any thickness it is made in.

    Where several bands may hold, the loosest limit of them counts. None where the standard does not reach over
    the whole range: what lies outside is not limited by it.
    """
    if thickness is not None and not _covered(grade.bands, thickness):
        return None
    bands = [band for band in grade.bands if thickness is None or _meets(band.thickness, thickness)]
    elements = sorted({name for band in bands for name in band.composition})
    composition = {}
    for element in elements:
        ends = [band.composition[element] for band in bands if element in band.composition]
        composition[element] = Range(max(0.0, min(end.low for end in ends)), max(end.high for end in ends))
    return GradeLimits(
        composition,
        frozenset(name for name in elements if any(name not in band.composition for band in bands)),
        _loosest([band.ce_iiw_max for band in bands], max),
        _loosest([band.pcm_max for band in bands], max),
        _loosest([band.cet_max for band in bands], max),
        _loosest([band.yield_min for band in bands], min),
        _loosest([band.tensile.low if band.tensile else None for band in bands], min),
    )


def reach_of(grade: Grade) -> Range:
    """The thickness (mm) that the grade's standard reaches over."""
    first = min(grade.bands, key=lambda band: band.thickness.low).thickness
    last = max(grade.bands, key=lambda band: band.thickness.high).thickness
    return Range(max(0.0, first.low), last.high, first.low_open, last.high_open)


def _loosest(values: list[float | None], loose: Callable[[list[float]], float]) -> float | None:
    known = [value for value in values if value is not None]
    return loose(known) if known and len(known) == len(values) else None


def _meets(band: Range, wanted: Range) -> bool:
    below = band.high < wanted.low or (band.high == wanted.low and band.high_open)
    above = band.low > wanted.high or (band.low == wanted.high and band.low_open)
    return not below and not above


def _covered(bands: Iterable[GradeBand], wanted: Range) -> bool:
    """Whether bands together hold every number of a closed range."""
    reached, held = wanted.low, False  # `held`: whether the point reached is itself in a band
    for band in sorted((b.thickness for b in bands), key=lambda b: (b.low, b.low_open)):
        starts = band.low < reached or (band.low == reached and (held or not band.low_open))
        if not starts or (band.high, not band.high_open) < (reached, held):
            continue
        reached, held = band.high, not band.high_open
        if reached > wanted.high or (reached == wanted.high and held):
            return True
    return False
