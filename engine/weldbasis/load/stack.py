"""One layer put on those beneath it: what it adds, replaces and withdraws, each with its amendment, or a problem."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

from weldbasis.knowledge import Amendment
from weldbasis.problem import Problem, nearest

Records = dict[str, dict[str, Any]]
# The kinds of record whose change needs an amendment, and where records of that kind are kept.
_KEPT_IN = {
    "rule": "rules",
    "quantity": "quantities",
    "grade": "grades",
    "era": "eras",
    "consumable": "consumables",
}
_KINDS = {kept: kind for kind, kept in _KEPT_IN.items()}


@dataclass(frozen=True)
class Stacked:
    """Layers put on each other: the records that count, and beneath them those that no longer do."""

    records: Records
    amendments: tuple[Amendment, ...] = ()
    beneath: Mapping[tuple[str, str], Any] = field(default_factory=dict)


def put_on(lower: Stacked, layer: Records, amendments: tuple[Amendment, ...]) -> Stacked:
    """The layer's records over those beneath. Cases of a rule that is replaced or withdrawn go with it."""
    named = {(amendment.of, amendment.id): amendment for amendment in amendments}
    records = {kind: dict(lower.records.get(kind, {})) for kind in layer}
    beneath = dict(lower.beneath)
    gone = {name for kind, name in named if kind == "rule" and name in records["rules"]}
    records["cases"] = {name: case for name, case in records["cases"].items() if case.rule not in gone}
    for kind, name in named:
        if name in records[_KEPT_IN[kind]]:
            beneath[kind, name] = records[_KEPT_IN[kind]].pop(name)
    for kept, found in layer.items():
        records[kept] |= found
    return Stacked(records, (*lower.amendments, *amendments), beneath)


def stacking_problems(lower: Stacked, layer: Records, amendments: tuple[Amendment, ...]) -> Iterator[Problem]:
    """Changes without an amendment, and amendments that do not fit what the layer holds."""
    named: dict[tuple[str, str], Amendment] = {}
    for amendment in amendments:
        key = amendment.of, amendment.id
        if key in named:
            what = f"{amendment.of} {amendment.id!r} is amended here a second time"
            yield Problem(amendment.place, what, f"first in {named[key].place}", "say everything in one entry")
        named.setdefault(key, amendment)
        yield from _misfit(amendment, lower.records.get(_KEPT_IN[amendment.of], {}), layer[_KEPT_IN[amendment.of]])
    for kept, found in layer.items():
        below = lower.records.get(kept, {})
        for name, record in found.items():
            if kept in _KINDS and (_KINDS[kept], name) not in named:
                yield _unexplained(_KINDS[kept], name, record, below)
            elif kept not in _KINDS and name in below:
                what = f"{kept.removesuffix('s')} {name!r} stands in the layer beneath too"
                yield Problem(record.place, what, f"there in {below[name].place}", "give it another id")


def _unexplained(kind: str, name: str, record: Any, below: Mapping[str, Any]) -> Problem:
    how = "replace" if name in below else "add"
    what = f"{kind} {name!r} {'replaces the one beneath' if name in below else 'is added'} without a reason"
    do = f"add to amendments.yaml: {{{kind}: {name}, how: {how}, why: …, approved_by: …}}"
    return Problem(record.place, what, "every change of a lower layer says why, and who approved it", do)


def _misfit(amendment: Amendment, below: Mapping[str, Any], here: Mapping[str, Any]) -> Iterator[Problem]:
    kind, name, how, place = amendment.of, amendment.id, amendment.how, amendment.place
    if how == "add":
        if name in below:
            do = "write how: replace, tighten or relax; or give the new one another id"
            yield Problem(place, f"{kind} {name!r} stands in the layer beneath already", f"in {below[name].place}", do)
    elif name not in below:
        do = nearest(name, below) or "take the entry out"
        yield Problem(place, f"there is no {kind} {name!r} beneath to {how}", "only what is there can be changed", do)
    if how == "withdraw":
        if name in here:
            do = f"take the entry out, or the {kind}"
            yield Problem(place, f"{kind} {name!r} is withdrawn and written anew", f"in {here[name].place}", do)
    elif name not in here:
        why, do = f"the entry says how: {how}", f"write the {kind}, or take the entry out"
        yield Problem(place, f"this layer holds no {kind} {name!r}", why, do)
    if how == "relax" and not amendment.justified_by:
        why = "asking for less than the layer beneath needs a named justification"
        yield Problem(place, f"{kind} {name!r} is relaxed without one", why, "add justified_by: …")
