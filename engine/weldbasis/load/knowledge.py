"""A folder of knowledge into one frozen Knowledge: read, check against schemas, make records, check every reference."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import Any

from weldbasis.knowledge import Knowledge
from weldbasis.load.records import (
    BadRange,
    Maker,
    case_from,
    consumable_from,
    era_from,
    grade_from,
    quantity_from,
    rule_from,
    source_from,
)
from weldbasis.load.references import duplicate_problem, reference_problems
from weldbasis.load.schema import RULE_KINDS, schema_problems
from weldbasis.load.yaml_text import Document, Path_, read_yaml
from weldbasis.problem import Place, Problem, Refused, nearest


class _Reading:
    """Records and problems gathered while a folder is read."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.problems: list[Problem] = []
        self.read: dict[str, Document] = {}
        self.found: dict[str, dict[str, Any]] = {
            kind: {} for kind in ("quantities", "rules", "sources", "grades", "eras", "consumables", "cases")
        }

    def documents(self, part: str) -> Iterator[Document]:
        """Every file below a part of the folder, in order of name."""
        for path in sorted((self.folder / part).rglob("*.yaml")):
            try:
                document = read_yaml(path, _shown(path))
            except Refused as refused:
                self.problems += refused.problems
            else:
                self.read[document.file] = document
                yield document

    def with_line(self, problem: Problem) -> Problem:
        """A problem found in the records, with the line it stands in."""
        document = self.read.get(problem.place.file)
        shown = document.problem_at(problem.place, "").line_text if document else ""
        return replace(problem, line_text=problem.line_text or shown)

    def fits(self, document: Document, kind: str, path: Path_ = ()) -> bool:
        """Whether a part of a document fits its schema; what does not is noted."""
        problems = schema_problems(document, kind, path)
        self.problems += problems
        return not problems

    def add(self, kind: str, make: Maker, document: Document, path: Path_) -> None:
        """Make one record and keep it under its id."""
        data = document.data
        for step in path:
            data = data[step]
        try:
            record = make(data, document, path)
        except BadRange as fault:
            self.problems.append(document.problem(fault.path, str(fault)))
            return
        known = self.found[kind]
        if record.id in known:
            problem = duplicate_problem(kind, record.id, record.place, known[record.id].place)
            self.problems.append(self.with_line(problem))
        known.setdefault(record.id, record)


def load_knowledge(folder: Path, with_cases: bool = True) -> Knowledge:
    """Read a knowledge base. Raises Refused with every problem of every file.

    Cases decide nothing; a command that only decides spares reading them.
    """
    reading = _Reading(folder)
    head = _head(reading, folder / "kb.yaml")
    for document in reading.documents("quantities"):
        topic = Path(document.file).stem
        _list(reading, document, "quantities", "quantities", partial(quantity_from, topic=topic))
    for document in reading.documents("rules"):
        _rules(reading, document, head.get("layers", ["published"])[-1])
    for document in reading.documents("sources"):
        if reading.fits(document, "source"):
            reading.add("sources", source_from, document, ())
            _named_as_file(reading, document, "source")
    for document in reading.documents("steels"):
        if reading.fits(document, "steels"):
            for kind, make in (("grades", grade_from), ("eras", era_from)):
                for place in range(len(document.data.get(kind, ()))):
                    reading.add(kind, make, document, (kind, place))
    for document in reading.documents("consumables"):
        _list(reading, document, "consumables", "consumables", consumable_from)
    for document in reading.documents("cases") if with_cases else ():
        _list(reading, document, "cases", "cases", case_from)
    if reading.problems:
        raise Refused(reading.problems)
    knowledge = _assembled(head, reading.found)
    if problems := list(reference_problems(knowledge)):
        raise Refused(map(reading.with_line, problems))
    return knowledge


def _shown(path: Path) -> str:
    """A file's name in messages: from the working folder where it lies below it."""
    try:
        return str(path.resolve().relative_to(Path.cwd()))
    except ValueError:
        return str(path)


def _head(reading: _Reading, path: Path) -> dict[str, Any]:
    if not path.exists():
        raise Refused(
            [
                Problem(
                    Place(str(path)),
                    "there is no such file",
                    "a folder of knowledge starts with kb.yaml",
                    "name a folder that holds one",
                )
            ]
        )
    document = read_yaml(path, _shown(path))
    return document.data if reading.fits(document, "kb") else {}


def _list(reading: _Reading, document: Document, kind: str, schema: str, make: Maker) -> None:
    if reading.fits(document, schema):
        for place in range(len(document.data[kind])):
            reading.add(kind, make, document, (kind, place))


def _rules(reading: _Reading, document: Document, layer: str) -> None:
    """One rule, or a small family under `rules:`; each is checked against the schema of its own kind."""
    data = document.data
    family = "rules" in data and "id" not in data
    if family:
        paths = _family(reading, document)
    else:
        paths = [()]
        _named_as_file(reading, document, "rule")
    topic = Path(document.file).parent.name
    for path in paths:
        part = data["rules"][path[1]] if path else data
        kind = part.get("kind") if isinstance(part, dict) else None
        if not isinstance(part, dict) or "kind" not in part:
            what = "'kind' is missing here" if isinstance(part, dict) else "a rule is a mapping (key: value)"
            reading.problems.append(
                document.problem(path, what, f"a rule is one of these kinds: {', '.join(RULE_KINDS)}", "add 'kind: …'")
            )
        elif kind not in RULE_KINDS:
            reading.problems.append(
                document.problem((*path, "kind"), f"{kind!r} is no kind of rule", do=nearest(str(kind), RULE_KINDS))
            )
        elif reading.fits(document, f"rule-{kind}", path):
            reading.add("rules", partial(rule_from, topic=topic, layer=layer), document, path)


def _family(reading: _Reading, document: Document) -> list[Path_]:
    """The paths of the rules of a small family; what else stands in its file is noted."""
    rules = document.data["rules"]
    for extra in sorted(set(document.data) - {"rules"}):
        what = f"{extra!r} cannot stand beside rules"
        reading.problems.append(document.problem((extra,), what, do="a family of rules holds only the list rules"))
    if not isinstance(rules, list) or not rules:
        reading.problems.append(
            document.problem(("rules",), "rules holds no list of rules", do="write one rule behind each '-'")
        )
        return []
    return [("rules", place) for place in range(len(rules))]


def _named_as_file(reading: _Reading, document: Document, what: str) -> None:
    """One record in a file: its id is the file's name."""
    file, name = Path(document.file), document.data.get("id")
    if isinstance(name, str) and file.stem != name:
        reading.problems.append(
            document.problem(
                ("id",),
                f"the file is called {file.name}, its {what} {name}",
                f"a {what} is found by its file's name",
                f"call the file {name}.yaml",
            )
        )


def _assembled(head: dict[str, Any], found: dict[str, dict[str, Any]]) -> Knowledge:
    ordered = {kind: dict(sorted(records.items())) for kind, records in found.items()}
    return Knowledge(
        head["title"],
        head["custodian"],
        str(head["release"]),
        ordered["quantities"],
        ordered["rules"],
        ordered["sources"],
        ordered["grades"],
        ordered["eras"],
        ordered["consumables"],
        tuple(ordered["cases"].values()),
    )
