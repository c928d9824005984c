"""The meaning of records: what decides, apart from where and how it is written; its canonical form and digest."""

from __future__ import annotations

import dataclasses
import hashlib
from collections.abc import Mapping
from typing import Any

import rfc8785

# Fields that say where a record stands, not what it means.
_NOT_MEANING = frozenset({"place", "places", "layer", "topic"})


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
