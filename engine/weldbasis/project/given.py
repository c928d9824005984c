"""A value as a project writes it: a number, a range or levels, alone or with its reason or its paper."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from weldbasis.facts import Origin, OriginKind
from weldbasis.knowledge import Quantity
from weldbasis.problem import nearest
from weldbasis.ranges import Range, parse_range
from weldbasis.units import read_number
from weldbasis.words import unit_text

_BOUND = re.compile(r"(<=|>=|<|>|≤|≥)\s*(.+)", re.DOTALL)
# What a project may name as the paper behind a value, and the kind of origin each of them makes.
_PAPERS: Mapping[str, OriginKind] = {
    "certificate": "certificate",
    "drawing": "drawing",
    "laboratory": "samples",
    "note": "project",
    "procedure": "procedure",
}
_PAPER_WORDS: Mapping[str, str] = {"laboratory": "laboratory report", "note": ""}
_FORMS = ("value", "because", "origin")


@dataclass(frozen=True)
class Fact:
    """One given value: a closed range, or levels in the vocabulary's order, and its origin."""

    value: Range | tuple[str, ...]
    origin: Origin
    assumed: bool = False
    unknown: bool = False


def fact_of(quantity: Quantity, said: Any, origin: Origin) -> Fact:
    """A value as written, or as `{value: …, because: …, origin: …}`. ValueError with a message fit for a user.

    A reason without a paper makes the value an assumption; `origin` is where the value stands if it names none.
    """
    if not isinstance(said, Mapping):
        return Fact(value_of(quantity, said), origin)
    for key in said:
        if key not in _FORMS:
            raise ValueError(f"{key!r} cannot stand beside a value. {nearest(str(key), _FORMS)}")
    if "value" not in said:
        raise ValueError("no value stands here; write {value: …, because: …} or the value alone")
    value = value_of(quantity, said["value"])
    reason = text_of(said["because"], "because") if "because" in said else ""
    paper = said.get("origin", "assumption" if reason else None)
    if paper == "assumption":
        if not reason:
            raise ValueError("an assumption needs its reason; add because: …")
        return Fact(value, assumption(reason, origin.place), assumed=True)
    found = origin_of(paper, origin)
    return Fact(value, Origin(found.kind, f"{found.text}: {reason}", found.place) if reason else found)


def assumption(reason: str, place: str) -> Origin:
    """The origin of what is assumed for a reason."""
    return Origin("assumption", f"assumed: {reason}", place)


def origin_of(paper: Any, otherwise: Origin) -> Origin:
    """The paper that a project names: a word such as `drawing`, or `{drawing: R 12}`. ValueError where it is neither.

    Where several papers are named the first of certificate, drawing, laboratory, note, procedure counts.
    """
    if paper is None or paper == {}:
        return otherwise
    if isinstance(paper, str) and paper in _PAPERS and paper != "note":
        return Origin(_PAPERS[paper], f"{_PAPER_WORDS.get(paper, paper)}, number not given", otherwise.place)
    if not isinstance(paper, Mapping):
        known = ["assumption", *(word for word in _PAPERS if word != "note")]
        raise ValueError(f"{paper!r} is no origin. {nearest(str(paper), known)}")
    for key in paper:
        if key not in (*_PAPERS, "heat"):
            raise ValueError(f"{key!r} is no origin. {nearest(str(key), [*_PAPERS, 'heat'])}")
    for word, kind in _PAPERS.items():
        if word in paper:
            heat = f", heat {text_of(paper['heat'], 'heat')}" if word == "certificate" and "heat" in paper else ""
            text = f"{_PAPER_WORDS.get(word, word)} {text_of(paper[word], word)}".strip()
            return Origin(kind, text + heat, otherwise.place)
    raise ValueError("a heat needs its certificate; add certificate: …")


def value_of(quantity: Quantity, said: Any) -> Range | tuple[str, ...]:
    """A written value as a set within what the vocabulary allows. ValueError with a message fit for a user."""
    return _number_of(quantity, said) if quantity.is_number else _levels_of(quantity, said)


def _number_of(quantity: Quantity, said: Any) -> Range:
    if isinstance(said, bool) or not isinstance(said, str | int | float):
        sort = "a list" if isinstance(said, list) else "a mapping" if isinstance(said, Mapping) else repr(said)
        raise ValueError(f"a number or a range 'a to b' is wanted, not {sort}")
    bound = _BOUND.fullmatch(said.strip()) if isinstance(said, str) else None
    number = read_number(bound.group(2) if bound else said, quantity.unit)
    allowed = quantity.range
    if number.low < allowed.low or number.high > allowed.high:
        raise ValueError(
            f"{str(said)!r} lies outside what {quantity.id} can be, {allowed} {unit_text(quantity.unit)}".rstrip()
        )
    if bound is None:
        return number
    return Range(allowed.low, number.high) if bound.group(1)[0] in "<≤" else Range(number.low, allowed.high)


def _levels_of(quantity: Quantity, said: Any) -> tuple[str, ...]:
    words = said if isinstance(said, list) else [said]
    if not words:
        raise ValueError(f"the list of levels is empty; name the levels that {quantity.id} may have")
    for word in words:
        if isinstance(word, list | Mapping):
            raise ValueError(
                f"a level of {quantity.id} is wanted, not a {'list' if isinstance(word, list) else 'mapping'}"
            )
        if _level(word) not in quantity.order:
            raise ValueError(f"{_level(word)!r} is no level of {quantity.id}. {nearest(_level(word), quantity.order)}")
    named = {_level(word) for word in words}
    return tuple(level for level in quantity.order if level in named)


def _level(word: Any) -> str:
    return str(word).lower() if isinstance(word, bool) else str(word)


def text_of(said: Any, field: str) -> str:
    """A text that says something. ValueError where it is none."""
    if isinstance(said, list | Mapping | bool) or not str(said).strip():
        sort = "a list" if isinstance(said, list) else "a mapping" if isinstance(said, Mapping) else repr(said)
        raise ValueError(f"a text is wanted after {field}, not {sort}")
    return str(said)


def within(quantity: Quantity, limits: Range) -> Range:
    """Limits of a standard, cut to what the vocabulary allows, so that an open end becomes a number."""
    return Range(max(limits.low, quantity.range.low), min(limits.high, quantity.range.high))


def standing_in(quantity: Quantity) -> Fact | None:
    """What the vocabulary puts where nothing is given; None where that is nothing."""
    default = quantity.if_not_given
    if default == "absent":
        return None
    if default == "unknown":
        everything = quantity.range if quantity.is_number else quantity.order
        return Fact(everything, Origin("unknown", "not known"), unknown=True)
    if not quantity.is_number:
        return Fact((str(default),), Origin("default", quantity.if_not_given_because))
    return Fact(parse_range(default), Origin("default", quantity.if_not_given_because))
