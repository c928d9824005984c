"""A project's kept records over time: when each joint's decisions moved, and because of which input or rules."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from weldbasis.facts import Facts
from weldbasis.knowledge import Knowledge
from weldbasis.record import canonical_bytes, digest_of, read_record, write_aside
from weldbasis.values import is_there

RECORDS = "records"


@dataclass(frozen=True)
class Kept:
    """A record kept under a name that begins with its day."""

    name: str
    record: Mapping[str, Any]


@dataclass(frozen=True)
class Moved:
    """One move of a joint between two kept records: what moved, and what else differs between them."""

    day: str
    decisions: tuple[str, ...]
    inputs: tuple[str, ...]
    rules: str


def keep_record(folder: Path, record: Mapping[str, Any], day: str) -> Path:
    """Keep a record beside its project under its day; the same record twice is kept once."""
    base = folder / RECORDS
    data = canonical_bytes(record)
    kept = kept_records(folder)
    if kept and digest_of(kept[-1].record) == digest_of(record):
        return base / f"{kept[-1].name}.json"
    name, number = day, 2
    while (base / f"{name}.json").exists():
        name, number = f"{day}-{number}", number + 1
    path = base / f"{name}.json"
    write_aside(path, data)
    return path


def kept_records(folder: Path) -> tuple[Kept, ...]:
    """The records kept beside a project, the oldest first. Raises Refused where one is no record."""
    paths = sorted((folder / RECORDS).glob("*.json"), key=_in_time)
    return tuple(Kept(path.stem, read_record(path, path.read_bytes())) for path in paths)


def _in_time(path: Path) -> tuple[str, int]:
    day, _, number = path.stem[:10], path.stem[10:11], path.stem[11:]
    return day, int(number) if number.isdigit() else 1


def history_of(joint: str, records: Sequence[Kept], inputs: frozenset[str]) -> tuple[Moved, ...]:
    """When the decisions of a joint moved, the newest first. `inputs` names the quantities that are given."""
    found: list[Moved] = []
    before: Mapping[str, Any] | None = None
    rules: Mapping[str, Any] = {}
    for kept in records:
        now = next((one for one in kept.record["joints"] if one["joint"] == joint), None)
        if now is None:
            continue
        if before is None:
            found.append(Moved(kept.name, ("first decided",), (), _rules_text(kept.record["rules"])))
        elif moved := decisions_moved(before["decisions"], now["decisions"]):
            changed = inputs_moved(before, now, inputs)
            same = rules == kept.record["rules"]
            text = "" if same else f"{_rules_text(rules)} → {_rules_text(kept.record['rules'])}"
            found.append(Moved(kept.name, moved, changed, text))
        before, rules = now, kept.record["rules"]
    return tuple(reversed(found))


def given_in(facts: Facts, knowledge: Knowledge, joint: str) -> frozenset[str]:
    """The quantities that the project gives for a joint or for one of its parts."""
    row = facts.joints.index(joint)
    members = facts.joint_of == row
    there = {name: is_there(column).may for name, column in facts.given.items()}
    of = {name: knowledge.quantities[name].of for name in there}
    return frozenset(n for n, may in there.items() if (may[row] if of[n] == "joint" else may[members].any()))


def _rules_text(rules: Mapping[str, Any]) -> str:
    return f"rules {rules['release']}, {rules['digest'][:15]}…"


def decisions_moved(before: Mapping[str, Any], now: Mapping[str, Any]) -> tuple[str, ...]:
    """The decisions that differ between two records of a joint, each with both values."""
    pairs = [(name, before.get(name), now.get(name)) for name in sorted({*before, *now})]
    return tuple(f"{name}: {_short(old)} → {_short(new)}" for name, old, new in pairs if old != new)


def inputs_moved(before: Mapping[str, Any], now: Mapping[str, Any], inputs: frozenset[str]) -> tuple[str, ...]:
    """The given quantities that differ between two records of a joint, of the joint and of its parts."""
    found = _differing("", before["quantities"], now["quantities"], inputs)
    for old, new in zip(before["members"], now["members"], strict=False):
        who = f"{new['member']}: {new['steel']}, "
        found += _differing(who, old["quantities"], new["quantities"], inputs)
    if len(before["members"]) != len(now["members"]):
        found.append(f"{len(before['members'])} parts → {len(now['members'])}")
    return tuple(found)


def _differing(who: str, old: Mapping[str, Any], new: Mapping[str, Any], inputs: frozenset[str]) -> list[str]:
    names = [name for name in sorted({*old, *new}) if name in inputs and old.get(name) != new.get(name)]
    return [f"{who}{name}: {_short(old.get(name))} → {_short(new.get(name))}" for name in names]


def _short(entry: Mapping[str, Any] | None) -> str:
    """A set of the record in a few words."""
    if entry is None:
        return "none"
    if "any_of" in entry:
        return " or ".join(entry["any_of"])
    if "low" not in entry:
        return "not covered" if entry.get("state") == "uncovered" else "none"
    low, high, unit = entry["low"], entry["high"], entry.get("unit", "")
    text = f"{low:g}" if low == high else f"{low:g} to {high:g}"
    return f"{text} {unit}".rstrip()
