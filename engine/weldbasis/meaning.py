"""The meaning of records: what decides, apart from where and how it is written; its canonical form and digest."""

from __future__ import annotations

import ast
import dataclasses
import hashlib
from collections.abc import Mapping
from typing import Any

import rfc8785

from weldbasis.ranges import Range, parse_range

# Fields that say where a record stands, not what it means; and what can be chosen, or how finely it is read.
_NOT_MEANING = frozenset({"place", "places", "layer", "topic", "lever", "read_to"})
# Words for readers: they are part of the meaning, and bear on no result.
_WORDS = frozenset(
    {
        "version",
        "changes",
        "title",
        "say",
        "says",
        "symbol",
        "note",
        "cites",
        "checked",
        "how_checked",
        "years",
        "region",
        "product",
        "number",
        "if_not_given_because",
    }
)
_FORMULAS = frozenset({"formula", "must_hold"})


def digest_of_meaning(parts: Mapping[str, Mapping[str, Any]]) -> str:
    """The digest of records by kind and id: comments, layout and order of files do not count."""
    plain = {kind: {name: meaning_of(record) for name, record in records.items()} for kind, records in parts.items()}
    return "sha256:" + hashlib.sha256(rfc8785.dumps(plain)).hexdigest()


def meaning_of(record: Any) -> Any:
    """A record as plain data without the fields that only say where it stands."""
    if dataclasses.is_dataclass(record) and not isinstance(record, type):
        fields = {field.name: getattr(record, field.name) for field in dataclasses.fields(record)}
        return {name: meaning_of(value) for name, value in fields.items() if name not in _NOT_MEANING}
    if isinstance(record, dict):
        return {str(key): meaning_of(value) for key, value in record.items()}
    if isinstance(record, list | tuple):
        return [meaning_of(value) for value in record]
    if isinstance(record, float) and record in (float("inf"), float("-inf")):
        return str(record)
    return record


def bearing_of(record: Any) -> Any:
    """What of a record bears on results, in one spelling: words, layout and ways to write a number are left out."""
    if isinstance(record, Range):
        return str(record)
    if dataclasses.is_dataclass(record) and not isinstance(record, type):
        record = {field.name: getattr(record, field.name) for field in dataclasses.fields(record)}
    if isinstance(record, Mapping):
        kept = {str(key): value for key, value in record.items() if key not in _NOT_MEANING | _WORDS}
        return {key: _one_spelling(key, value) for key, value in sorted(kept.items())}
    if isinstance(record, list | tuple):
        return [bearing_of(value) for value in record]
    if isinstance(record, str):
        return _as_range(record)
    return float(record) if isinstance(record, int) and not isinstance(record, bool) else record


def _one_spelling(key: str, value: Any) -> Any:
    if key in _FORMULAS and isinstance(value, str):
        tree = ast.parse(value.strip(), mode="eval")
        for node in ast.walk(tree):
            if isinstance(node, ast.Constant) and isinstance(node.value, int):
                node.value = float(node.value)
        return ast.unparse(tree)
    return bearing_of(value)


def _as_range(text: str) -> Any:
    try:
        found = parse_range(text)
    except ValueError:
        return text
    return found.low if found.low == found.high else str(found)
