"""What differs between two sets of rules, record by record, on meaning and not on spelling."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Literal

from weldbasis.knowledge import Amendment, Change, Knowledge
from weldbasis.meaning import bearing_of, meaning_of

ChangedKind = Literal["rule", "quantity", "grade", "era", "consumable", "source"]
KEPT_IN: dict[ChangedKind, str] = {
    "rule": "rules",
    "quantity": "quantities",
    "grade": "grades",
    "era": "eras",
    "consumable": "consumables",
    "source": "sources",
}


@dataclass(frozen=True)
class Difference:
    """One record that differs. `results` says whether results may move; `parts` are the parts that differ, in words.

    `why` holds the entries of a rule's history that are new, `amendment` what the layer that changed it says.
    """

    of: ChangedKind
    id: str
    how: Literal["added", "withdrawn", "changed"]
    results: bool
    parts: tuple[str, ...] = ()
    why: tuple[Change, ...] = ()
    amendment: Amendment | None = None


def differences_between(before: Knowledge, after: Knowledge) -> tuple[Difference, ...]:
    """Every record that differs between two sets of rules, by kind and id."""
    if before.digest == after.digest:
        return ()
    amended = {(amendment.of, amendment.id): amendment for amendment in after.amendments}
    found: list[Difference] = []
    for kind, kept in KEPT_IN.items():
        old, new = getattr(before, kept), getattr(after, kept)
        for name in sorted({*old, *new}):
            amendment = amended.get((kind, name)) if kind != "source" else None
            difference = _difference(kind, old.get(name), new.get(name))
            if difference:
                how, results, parts = difference
                why = _new_entries(old.get(name), new.get(name)) if kind == "rule" else ()
                found.append(Difference(kind, name, how, results, parts, why, amendment))
    return tuple(found)


def _difference(
    kind: ChangedKind, old: Any, new: Any
) -> tuple[Literal["added", "withdrawn", "changed"], bool, tuple[str, ...]] | None:
    if old is None:
        return "added", kind != "source", ()
    if new is None:
        return "withdrawn", kind != "source", ()
    if old is new or old == new or meaning_of(old) == meaning_of(new):
        return None
    moved = tuple(_moved(bearing_of(old), bearing_of(new)))
    if moved and kind != "source":
        return "changed", True, moved
    words = tuple(_moved(meaning_of(old), meaning_of(new)))
    return "changed", False, words


def _new_entries(old: Any, new: Any) -> tuple[Change, ...]:
    known = set(old.changes) if old is not None else set()
    return tuple(entry for entry in new.changes if entry not in known) if new is not None else ()


def _moved(old: Any, new: Any, path: str = "") -> Iterator[str]:
    """The parts that differ: where, and from what to what."""
    if isinstance(old, dict) and isinstance(new, dict):
        for key in sorted({*old, *new}):
            yield from _moved(old.get(key), new.get(key), f"{path}.{key}" if path else key)
    elif isinstance(old, list) and isinstance(new, list) and len(old) == len(new):
        for place, (one, other) in enumerate(zip(old, new, strict=True), start=1):
            yield from _moved(one, other, f"{path} {place}")
    elif old != new:
        yield f"{path}: {_short(old)} → {_short(new)}"


def _short(value: Any) -> str:
    if value is None:
        return "nothing"
    text = value if isinstance(value, str) else json.dumps(value, ensure_ascii=False)
    return text if len(text) <= 80 else text[:77] + "…"
