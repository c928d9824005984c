"""The layers of a set of rules, from the lowest to the highest: every file read, none of it checked yet."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from weldbasis.load.layer import AMENDMENTS, PARTS, Layer, Layers
from weldbasis.load.release import read_release, release_path
from weldbasis.load.schema import schema_problems
from weldbasis.load.yaml_text import Document, read_yaml
from weldbasis.places import kb_folder
from weldbasis.problem import Place, Problem, Refused

PUBLISHED = "published"


def read_layers(folder: Path, with_cases: bool = True, release: str = "working") -> Layers:
    """The layers of the set of rules in a folder, in its working state or as one of its releases.

    Raises Refused where a head or a release cannot be read; what is wrong in other files is kept with their layer.
    """
    if release != "working":
        head = read_head(folder)
        key = head.data.get("public_key")
        found = read_release(release_path(folder, release), release, folder / key if key else None)
        return Layers(found.layers, release, found.digest)
    return Layers(tuple(_working(folder.resolve(), with_cases, ())))


def _working(folder: Path, with_cases: bool, above: tuple[Path, ...]) -> Iterator[Layer]:
    head = read_head(folder)
    names = head.data["layers"]
    lower: tuple[Layer, ...] = ()
    if "stands_on" in head.data:
        lower = _beneath(folder, head, with_cases, above)
    if names[:-1] != [layer.name for layer in lower]:
        stack = ", ".join([*(layer.name for layer in lower), names[-1]])
        why = "the list names every layer, the lowest first" if lower else "a layer beneath is named by stands_on"
        raise Refused([head.problem(("layers",), f"the layers here are {stack}", why, f"write layers: [{stack}]")])
    yield from lower
    yield _layer(folder, head, with_cases)


def _beneath(folder: Path, head: Document, with_cases: bool, above: tuple[Path, ...]) -> tuple[Layer, ...]:
    word = head.data["stands_on"]
    base = kb_folder() if word == PUBLISHED else (folder / word).resolve()
    if base in (folder, *above):
        raise Refused([head.problem(("stands_on",), f"{word!r} leads back to this set", do="name the set beneath it")])
    if not (base / "kb.yaml").is_file():
        do = f"write {PUBLISHED}, or a folder that holds a kb.yaml, counted from this one"
        raise Refused([head.problem(("stands_on",), f"{word!r} is no set of rules", do=do)])
    release = head.data.get("stands_on_release")
    if release:
        return read_layers(base, with_cases, release).layers
    return tuple(_working(base, with_cases, (folder, *above)))


def read_head(folder: Path) -> Document:
    """The checked head of a set of rules. Raises Refused where there is none or it does not fit."""
    path = folder / "kb.yaml"
    if not path.exists():
        why, do = "a folder of knowledge starts with kb.yaml", "name a folder that holds one"
        raise Refused([Problem(Place(str(path)), "there is no such file", why, do)])
    head = read_yaml(path, shown(path))
    if problems := schema_problems(head, "kb"):
        raise Refused(problems)
    return head


def _layer(folder: Path, head: Document, with_cases: bool) -> Layer:
    files: dict[str, Document] = {}
    problems: list[Problem] = []
    parts = [part for part in PARTS if with_cases or part != "cases"]
    paths = [path for part in parts for path in sorted((folder / part).rglob("*.yaml"))]
    for path in [folder / AMENDMENTS, *paths] if (folder / AMENDMENTS).exists() else paths:
        try:
            files[path.relative_to(folder).as_posix()] = read_yaml(path, shown(path))
        except Refused as refused:
            problems += refused.problems
    return Layer(head.data["layers"][-1], head.data, files, tuple(problems))


def shown(path: Path) -> str:
    """A file's name in messages: from the working folder where it lies below it."""
    try:
        return str(path.resolve().relative_to(Path.cwd()))
    except ValueError:
        return str(path)
