"""JSON Schema checks with messages for people: place, what was expected in plain words, the nearest valid word."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Iterator
from functools import cache
from typing import TYPE_CHECKING, Any

import jsonschema_rs

from weldbasis.load.yaml_text import Document, Path_
from weldbasis.places import schema_folder
from weldbasis.problem import Problem, nearest

if TYPE_CHECKING:
    from jsonschema import Draft202012Validator
    from jsonschema.exceptions import ValidationError

_TYPES = {
    "object": "a mapping (key: value)",
    "array": "a list",
    "string": "a text",
    "number": "a number",
    "integer": "a whole number",
    "boolean": "true or false",
}
# What the patterns of the schemas ask for, in words.
_PATTERNS = {
    "^[A-Za-z][A-Za-z0-9_]*$": "use letters, digits and '_', a letter first",
    "^[a-z][a-z0-9-]*$": "use small letters, digits and '-', a letter first",
    "^[a-z0-9][a-z0-9-]*$": "use small letters, digits and '-'",
    "^[A-Za-z0-9][A-Za-z0-9 ._:+/()-]*$": "use letters, digits and . _ : + / ( ) -, a letter or digit first",
    r"^\d{4}-\d{2}-\d{2}$": 'write year-month-day in quotes, for example "2026-12-01"',
    "^sha256:[0-9a-f]{64}$": "a digest is sha256: and 64 digits or letters a to f",
}
_FEW = 7
RULE_KINDS = ("formula", "table", "gather", "governing", "model", "limit")


def schema_problems(document: Document, kind: str, path: Path_ = ()) -> list[Problem]:
    """Everything that does not fit the schema `kind`, each problem once, in the order of the file.

    `path` leads to the part of the document that is looked at.
    """
    part = document.data
    for step in path:
        part = part[step]
    if _quick(kind).is_valid(part):
        return []
    errors = validator(kind).iter_errors(part)
    problems = [problem for error in errors for problem in _explained(error, document, path)]
    return sorted(dict.fromkeys(problems))


@cache
def _schemas() -> dict[str, Any]:
    files = sorted(schema_folder().glob("*.json"))
    schemas = [json.loads(file.read_text(encoding="utf-8")) for file in files]
    return {schema["$id"]: schema for schema in schemas}


@cache
def _quick(kind: str) -> jsonschema_rs.Draft202012Validator:
    """The fast check, which only says yes or no."""
    registry = jsonschema_rs.Registry(resources=list(_schemas().items()))
    return jsonschema_rs.Draft202012Validator(_schemas()[f"urn:weldbasis:schema:1:{kind}"], registry=registry)


@cache
def validator(kind: str) -> Draft202012Validator:
    """The check that can say what is wrong; references are resolved among our own schemas only."""
    from jsonschema import Draft202012Validator  # noqa: PLC0415  (needed only where something is wrong)
    from referencing import Registry, Resource  # noqa: PLC0415

    registry: Registry[Any] = Registry().with_resources(
        (name, Resource.from_contents(schema)) for name, schema in _schemas().items()
    )
    return Draft202012Validator(_schemas()[f"urn:weldbasis:schema:1:{kind}"], registry=registry)


def _explained(error: ValidationError, document: Document, path: Path_) -> Iterator[Problem]:
    where: Path_ = (*path, *error.absolute_path)
    if error.validator in ("oneOf", "anyOf") and error.context:
        yield from _best_branch(error, document, path)
    elif error.validator == "oneOf":
        yield from _both_ways(error, document, where)
    elif error.validator == "additionalProperties":
        yield from _unknown_keys(error, document, where)
    elif error.validator == "required":
        wanted: Any = error.validator_value
        present: Any = error.instance
        missing = [name for name in wanted if name not in present]
        for name in missing:
            yield document.problem(where, f"{name!r} is missing here", _description(error, name), f"add '{name}: …'")
    else:
        what, do = _plain(error)
        yield document.problem(where, what, _own_description(error), do)


def _both_ways(error: ValidationError, document: Document, where: Path_) -> Iterator[Problem]:
    """Two ways to write a thing that stand beside each other; what is no mapping is spoken of elsewhere."""
    branches: Any = error.validator_value
    written: Any = error.instance
    if isinstance(written, dict):
        names = [name for branch in branches for name in branch.get("required", ()) if name in written]
        words = " and ".join(map(repr, names)) or "two ways to write it"
        yield document.problem(where, f"{words} cannot stand together here", do="keep the one that fits")


def _best_branch(error: ValidationError, document: Document, path: Path_) -> Iterator[Problem]:
    """Of several alternatives, speak of the one that got furthest; else say what sorts of value fit."""
    branches: dict[int, list[ValidationError]] = {}
    for inner in error.context or ():
        branches.setdefault(int(inner.schema_path[0]), []).append(inner)
    shallow = len(error.absolute_path)
    deep = [
        b
        for b in branches.values()
        if all(len(e.absolute_path) > shallow or e.validator not in ("type", "required") for e in b)
    ]
    if len(deep) >= 1:
        best = min(deep, key=len)
        for inner in best:
            yield from _explained(inner, document, path)
        return
    where: Path_ = (*path, *error.absolute_path)
    needed: list[Any] = [e.validator_value for b in branches.values() for e in b if e.validator == "required"]
    if needed:
        words = " or ".join(repr(names[0]) for names in needed)
        yield document.problem(where, f"one of {words} is missing here", do="add the one that fits")
        return
    types: list[Any] = [e.validator_value for b in branches.values() for e in b if e.validator == "type"]
    kinds = dict.fromkeys(_type_words(wanted) for wanted in types)
    what = f"{_seen(error.instance)} cannot stand here; {' or '.join(kinds) or 'another value'} is wanted"
    yield document.problem(where, what, _own_description(error))


def _unknown_keys(error: ValidationError, document: Document, where: Path_) -> Iterator[Problem]:
    schema = error.schema
    assert isinstance(schema, dict)
    known = [*schema.get("properties", {})]
    patterns = schema.get("patternProperties", {})
    for pattern in patterns:
        known += [word for word in pattern.strip("^$()").split("|") if word.isalnum()]
    instance: Any = error.instance
    for key in instance:
        if key not in known and not any(re.search(pattern, str(key)) for pattern in patterns):
            yield document.problem((*where, key), f"{key!r} is not known here", "", nearest(str(key), known))


def _plain(error: ValidationError) -> tuple[str, str]:
    value = _seen(error.instance)
    wanted: Any = error.validator_value
    match error.validator:
        case "type":
            return f"{value} stands where {_type_words(wanted)} is wanted", _quoting(error.instance, wanted)
        case "enum":
            return f"{value} is not one of the words known here", _choices(str(error.instance), wanted)
        case "const":
            return f"{value} stands where {wanted!r} is wanted", f"write {wanted}"
        case "pattern":
            words = _PATTERNS.get(wanted, f"it must fit the pattern {wanted}")
            return f"{value} is not written as expected here", words
        case "minLength" | "minItems" | "minProperties":
            return "this is empty, or holds too little", f"at least {wanted} wanted"
        case "maxItems":
            return f"this holds more than {wanted} entries", ""
        case "uniqueItems":
            return "an entry stands here twice", "keep one of them"
        case "minimum":
            return f"{value} is below the least value {wanted}", ""
        case "maximum":
            return f"{value} is above the greatest value {wanted}", ""
        case _:
            return f"{value} does not fit here", ""


def _quoting(value: Any, wanted: str | list[str]) -> str:
    """What to do where quotes alone make the difference between a text and a number."""
    number = isinstance(value, int | float) and not isinstance(value, bool)
    if number and "string" in wanted:
        return f'write "{value}" in quotes'
    if isinstance(value, str) and wanted in ("number", "integer") and re.fullmatch(r"-?[0-9.]+", value):
        return f"write {value} without quotes"
    return ""


def _choices(word: str, known: list[str]) -> str:
    """The nearest of the words, and all of them where they are few."""
    found = nearest(word, known)
    few = len(known) <= _FEW and found.startswith("Did")
    return f"{found} Known: {', '.join(known)}." if few else found


def _type_words(wanted: str | Iterable[str]) -> str:
    names = [wanted] if isinstance(wanted, str) else list(wanted)
    return " or ".join(_TYPES.get(name, name) for name in names)


def _seen(value: Any) -> str:
    if isinstance(value, dict):
        return "a mapping"
    if isinstance(value, list):
        return "a list"
    text = repr(value) if not isinstance(value, bool) else str(value).lower()
    return text if len(text) <= 60 else text[:57] + "…'"


def _own_description(error: ValidationError) -> str:
    schema = error.schema
    return str(schema.get("description", "")) if isinstance(schema, dict) else ""


def _description(error: ValidationError, name: str) -> str:
    schema = error.schema
    part = schema.get("properties", {}).get(name, {}) if isinstance(schema, dict) else {}
    return str(part.get("description", "")) if isinstance(part, dict) else ""
