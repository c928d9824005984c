"""Files that must be refused, each with its whole message beside it, and the schemas themselves.

A file under tests/invalid/<kind>/ is a test; what must be said of it stands in the .txt of the same name.
"""

from __future__ import annotations

import copy
import json
import random
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from jsonschema import Draft202012Validator

from weldbasis.load.schema import _quick, schema_problems, validator
from weldbasis.load.yaml_text import read_yaml
from weldbasis.places import schema_folder
from weldbasis.problem import Problem, Refused

HERE = Path(__file__).parent
INVALID = sorted((HERE / "invalid").rglob("*.yaml"))
SMALL = HERE / "fixtures" / "kb_small"
SCHEMAS = {path.stem: json.loads(path.read_text(encoding="utf-8")) for path in sorted(schema_folder().glob("*.json"))}


def said_of(path: Path) -> list[Problem]:
    """All that reading and checking say of one file."""
    try:
        document = read_yaml(path, path.name)
    except Refused as refused:
        return list(refused.problems)
    if path.parent.name == "yaml":
        return []
    kind = path.parent.name
    return schema_problems(document, f"rule-{document.data['kind']}" if kind == "rule" else kind)


@pytest.mark.parametrize("path", INVALID, ids=[f"{path.parent.name}/{path.stem}" for path in INVALID])
def test_refused_with_its_whole_message(path: Path) -> None:
    assert "\n".join(map(str, said_of(path))) + "\n" == path.with_suffix(".txt").read_text(encoding="utf-8")


def test_every_message_has_its_file() -> None:
    messages = {path.with_suffix(".yaml") for path in (HERE / "invalid").rglob("*.txt")}
    assert messages == set(INVALID)


@pytest.mark.parametrize("name", SCHEMAS)
def test_schema_is_closed_and_says_what_everything_means(name: str) -> None:
    """Every mapping lists its keys or says what any key holds, and every property has a description."""
    Draft202012Validator.check_schema(SCHEMAS[name])
    free = {"/properties/defaults", "/properties/joints/oneOf/1/items"} if name == "project" else set()
    for path, part in parts(SCHEMAS[name]):
        if part.get("type") == "object" and path not in free:
            assert "additionalProperties" in part, path
        for key, inner in part.get("properties", {}).items() if isinstance(part.get("properties"), dict) else ():
            assert "description" in inner or "$ref" in inner, f"{path}/{key}"


def parts(schema: Any, path: str = "") -> Iterator[tuple[str, dict[str, Any]]]:
    """Every mapping of a schema with its path."""
    if isinstance(schema, dict):
        yield path, schema
    for key, inner in schema.items() if isinstance(schema, dict) else enumerate(schema):
        if isinstance(inner, dict | list):
            yield from parts(inner, f"{path}/{key}")


SOUND = [
    ("kb", "kb.yaml"),
    ("quantities", "quantities/joint.yaml"),
    ("rule-formula", "rules/heat/heat-input-arc.yaml"),
    ("rule-table", "rules/preheat/min-preheat.yaml"),
    ("source", "sources/small-handbook.yaml"),
    ("steels", "steels/plain.yaml"),
    ("steels", "steels/eras.yaml"),
    ("consumables", "consumables/plain.yaml"),
    ("cases", "cases/small.yaml"),
]
ODD: list[Any] = [5, 0.5, 1.0, True, "x", "", "[1, 2]", [], {}, ["x"], [["x"]], {"x": 1}, "absent", -1]


@pytest.mark.parametrize(("kind", "file"), SOUND)
def test_fast_and_explaining_check_agree(kind: str, file: str) -> None:
    """One part of a sound file spoiled at a time: both checks say the same, and what is refused is explained."""
    document = read_yaml(SMALL / file)
    assert schema_problems(document, kind) == []
    rng = random.Random(7)
    for _ in range(150):
        spoiled = spoil(document.data, rng)
        fits = _quick(kind).is_valid(spoiled)
        assert fits == validator(kind).is_valid(spoiled), spoiled
        said = schema_problems(type(document)(document.file, spoiled, document.places, document.lines), kind)
        assert fits == (not said), spoiled
        assert all(len(str(problem)) < 800 for problem in said)


def spoil(data: Any, rng: random.Random) -> Any:
    """A copy with one part replaced, renamed or taken out."""
    spoiled = copy.deepcopy(data)
    places = [
        (part, key) for _, part in containers(spoiled) for key in (part if isinstance(part, dict) else range(len(part)))
    ]
    part, key = rng.choice(places)
    what = rng.choice(["replace", "rename", "remove"])
    if what == "replace":
        part[key] = rng.choice(ODD)
    elif what == "rename" and isinstance(part, dict):
        part[f"{key}x"] = part.pop(key)
    else:
        del part[key]
    return spoiled


def containers(data: Any, path: tuple[str | int, ...] = ()) -> Iterator[tuple[tuple[str | int, ...], Any]]:
    """Every mapping and list of a file with its path."""
    if isinstance(data, dict | list):
        yield path, data
        for key, inner in data.items() if isinstance(data, dict) else enumerate(data):
            yield from containers(inner, (*path, key))
