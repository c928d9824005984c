"""A frozen set of rules as one file: its layers read back, its digest and its signature proved."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import rfc8785

from weldbasis.load.layer import Layer
from weldbasis.load.schema import schema_problems
from weldbasis.load.signature import BadKey, read_public_key, signature_fault
from weldbasis.load.yaml_text import Document
from weldbasis.problem import Place, Problem, Refused

FORMAT = "weldbasis-release/1"
# What the digest of a release is taken of.
_SEALED = ("format", "release", "date", "engine", "follows", "layers")


@dataclass(frozen=True)
class Release:
    """A release as read: its layers, the release it follows, and the public key it is signed with, if any."""

    name: str
    layers: tuple[Layer, ...]
    digest: str
    follows: str = ""
    public_key: str = ""
    data: Mapping[str, Any] = field(default_factory=dict, repr=False)


def release_path(folder: Path, name: str) -> Path:
    """The file of a release of the set in a folder. Raises Refused, naming those there are, where there is none."""
    path = folder / "releases" / f"{name}.json"
    if path.is_file() and path.parent == folder / "releases":
        return path
    known = release_names(folder)
    do = f"there are {', '.join(known)}" if known else "there is none yet; make one with: weldbasis freeze NAME"
    raise Refused(
        [Problem(Place(str(path)), f"there is no release {name!r}", "a project pins a release by its name", do)]
    )


def release_names(folder: Path) -> tuple[str, ...]:
    """The releases that lie beside a set of rules, in the order of their names."""
    return tuple(sorted(path.stem for path in (folder / "releases").glob("*.json")))


def release_digest(data: Mapping[str, Any]) -> str:
    """The digest over all of a release that is sealed."""
    sealed = {key: data[key] for key in _SEALED}
    return "sha256:" + hashlib.sha256(rfc8785.dumps(sealed)).hexdigest()


def read_release(path: Path, name: str = "", key: Path | None = None) -> Release:
    """A release, proved. Raises Refused where it was edited, is not the one named, or not signed with `key`."""
    place = Place(str(path))
    data = _data(path)
    problems = schema_problems(Document(str(path), data, {}, ()), "release")
    if problems:
        raise Refused(problems)
    if name and data["release"] != name:
        what = f"this is release {data['release']!r}, not {name!r}"
        raise Refused([Problem(place, what, "a release keeps its name", "give the file its own name back")])
    if release_digest(data) != data["digest"]:
        why = f"its digest is not the {data['digest'][:19]}… that is written in it"
        do = "restore it as freeze wrote it; what changes goes into a new release"
        raise Refused([Problem(place, "this release was edited after it was frozen", why, do)])
    signed = data.get("signature", {})
    if key is not None:
        _prove(place, data, key)
    layers = tuple(_layer(path, layer) for layer in data["layers"])
    follows = (data["follows"] or {}).get("release", "")
    return Release(data["release"], layers, data["digest"], follows, signed.get("public_key", ""), data)


def _data(path: Path) -> Any:
    try:
        return json.loads(path.read_bytes())
    except OSError as fault:
        do = "check the name and the rights"
        raise Refused([Problem(Place(str(path)), f"cannot be read: {fault.strerror}", do=do)]) from fault
    except ValueError as fault:
        place = Place(str(path), getattr(fault, "lineno", 1), getattr(fault, "colno", 1))
        why = "a release is one line of canonical JSON, written by freeze"
        raise Refused([Problem(place, "this is no JSON", why, "restore it as it was written")]) from fault


def _prove(place: Place, data: Mapping[str, Any], key: Path) -> None:
    try:
        wanted = read_public_key(key)
    except BadKey as fault:
        raise Refused([Problem(Place(str(key)), str(fault), do="name the PEM file of the public key")]) from fault
    fault_text = signature_fault(data.get("signature"), data["digest"], wanted)
    if fault_text:
        what, do = f"release {data['release']!r} {fault_text}", "take the release from its custodian again"
        raise Refused([Problem(place, what, f"{key} is the key that its releases must be signed with", do)])


def _layer(path: Path, layer: Mapping[str, Any]) -> Layer:
    files = {name: Document(f"{path}#{name}", data, {}, ()) for name, data in layer["files"].items()}
    return Layer(layer["name"], layer["head"], files)
