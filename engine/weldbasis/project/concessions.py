"""Concessions of a project, joint by joint: a value taken instead of the rules', or a finding set aside, by leave."""

from __future__ import annotations

import datetime
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from weldbasis.facts import Origin
from weldbasis.problem import Problem, nearest
from weldbasis.project.columns import JointRow
from weldbasis.project.entries import Concession
from weldbasis.project.given import Fact, value_of
from weldbasis.project.reading import Reading, Written


def with_concessions(reading: Reading, rows: Sequence[JointRow]) -> tuple[list[JointRow], tuple[Concession, ...]]:
    """The joints with what is conceded put in, and the concessions; mistakes are noted."""
    found: list[Concession] = []
    facts: dict[str, dict[str, Fact]] = {}
    names = [row.id for row in rows]
    for number, data in enumerate(reading.document.data.get("concessions", ())):
        written = reading.written("concessions", number, data=data)
        concession = _concession(reading, written, names)
        fact = _fact(reading, written, concession) if concession.quantity and "value" in data else None
        for name in concession.joints:
            if fact and concession.quantity in facts.setdefault(name, {}):
                what = f"{concession.quantity} of joint {name} is conceded twice"
                reading.fault(written.place_of("quantity"), what, do="keep the one that counts")
            elif fact:
                facts[name][concession.quantity] = fact
        found.append(concession)
    conceded = [replace(row, facts={**row.facts, **facts[row.id]}) if row.id in facts else row for row in rows]
    return conceded, tuple(found)


def _concession(reading: Reading, written: Written, names: Sequence[str]) -> Concession:
    said = written.data
    for number, name in enumerate(said["joints"]):
        if str(name) not in names:
            what = f"a concession names joint {name!r}, which is not there"
            reading.fault(written.place_of("joints", number), what, do=nearest(str(name), names))
    if not _is_day(said["until"]):
        do = "write year-month-day, for example 2027-06-30"
        reading.fault(written.place_of("until"), f"{said['until']!r} is no day of the calendar", do=do)
    if ("value" in said) != ("quantity" in said):
        named = said.get("quantity", said.get("finding"))
        what = (
            f"the concession on {named} has {'no value' if 'quantity' in said else 'a value, and sets a finding aside'}"
        )
        reading.fault(written.place_of(), what, do="add value: …" if "quantity" in said else "take the value out")
    rules = reading.knowledge.rules
    limits = [name for name, rule in rules.items() if rule.kind == "limit"]
    if "finding" in said and said["finding"] not in limits:
        what = f"{said['finding']!r} is no rule that raises a finding"
        reading.fault(written.place_of("finding"), what, do=nearest(said["finding"], limits))
    return Concession(
        tuple(map(str, said["joints"])),
        said.get("quantity", ""),
        said.get("finding", ""),
        said["why"],
        said["approved_by"],
        said["until"],
        written.place_of(),
    )


def _fact(reading: Reading, written: Written, concession: Concession) -> Fact | None:
    name, place = concession.quantity, written.place_of("quantity")
    quantity = reading.knowledge.quantities.get(name)
    given = {q for q in reading.knowledge.rule_giving if reading.knowledge.quantities[q].of == "joint"}
    if quantity is None or name not in given:
        why = "a concession stands in for what a rule works out for a joint"
        reading.fault(place, f"{name!r} is nothing that a rule gives for a joint", why, nearest(name, given))
        return None
    try:
        return Fact(value_of(quantity, written.data["value"]), concession.origin)
    except ValueError as fault:
        reading.fault(written.place_of("value"), f"concession on {name}: {fault}")
        return None


def _is_day(text: str) -> bool:
    try:
        return datetime.date.fromisoformat(text).isoformat() == text
    except ValueError:
        return False


def expired(concessions: Sequence[Concession], today: datetime.date) -> list[Problem]:
    """Concessions that ran out before today, as problems that stop the work."""
    return [
        Problem(
            concession.place,
            f"the concession on {concession.quantity or concession.finding} expired on {concession.until}",
            f"joints {', '.join(concession.joints)}; it was approved by {concession.approved_by}",
            "have it renewed, or take it out and let the rules decide",
        )
        for concession in concessions
        if datetime.date.fromisoformat(concession.until) < today
    ]


def set_aside(concessions: Sequence[Concession], names: Sequence[str]) -> dict[str, dict[int, Origin]]:
    """The findings set aside: by limit rule, the row of each joint with the leave for it."""
    rows = {name: row for row, name in enumerate(names)}
    found: dict[str, dict[int, Origin]] = {}
    for concession in concessions:
        if concession.finding:
            into = found.setdefault(concession.finding, {})
            into |= {rows[name]: concession.origin for name in concession.joints if name in rows}
    return found


def plain_concessions(concessions: Sequence[Concession]) -> list[Mapping[str, Any]]:
    """Findings set aside as plain data, for the digest of a project's inputs; conceded values are among its facts."""
    return [{"finding": c.finding, "joints": list(c.joints), "from": c.origin.text} for c in concessions if c.finding]
