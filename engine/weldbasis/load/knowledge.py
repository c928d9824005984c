"""Layers of files into one frozen Knowledge: checked against schemas, made records, stacked, references followed."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from functools import partial
from pathlib import Path

from weldbasis.knowledge import Amendment, Knowledge
from weldbasis.load.layer import AMENDMENTS, Layer, Layers
from weldbasis.load.layers import read_layers
from weldbasis.load.records import (
    BadRange,
    Maker,
    amendments_from,
    case_from,
    consumable_from,
    era_from,
    grade_from,
    quantity_from,
    rule_from,
    sampling_from,
    source_from,
)
from weldbasis.load.references import duplicate_problem, reference_problems
from weldbasis.load.schema import RULE_KINDS, schema_problems
from weldbasis.load.stack import Records, Stacked, put_on, stacking_problems
from weldbasis.load.yaml_text import Document, Path_
from weldbasis.problem import Problem, Refused, nearest

_KINDS = ("quantities", "rules", "sources", "grades", "eras", "sampling", "consumables", "cases")


class _Reading:
    """Records and problems gathered while a layer is read."""

    def __init__(self, layer: Layer) -> None:
        self.layer = layer
        self.problems: list[Problem] = list(layer.problems)
        self.found: Records = {kind: {} for kind in _KINDS}
        self.amendments: list[Amendment] = []

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
            self.problems.append(_with_line([self.layer], problem))
        known.setdefault(record.id, record)


def load_knowledge(folder: Path, with_cases: bool = True, release: str = "working") -> Knowledge:
    """Read a set of rules in a folder, in its working state or as one of its releases.

    Raises Refused with every problem of every file. Cases decide nothing; a command that only decides spares
    reading them, and a release holds none.
    """
    return knowledge_of(read_layers(folder, with_cases, release))


def knowledge_of(stack: Layers) -> Knowledge:
    """Layers as one set of rules. Raises Refused with every problem of every file."""
    stacked = Stacked({})
    problems: list[Problem] = []
    for layer in stack.layers:
        reading = _read(layer)
        problems += reading.problems
        amendments = tuple(reading.amendments)
        if layer is not stack.layers[0]:
            problems += [_with_line(stack.layers, p) for p in stacking_problems(stacked, reading.found, amendments)]
        stacked = put_on(stacked, reading.found, amendments)
    if problems:
        raise Refused(problems)
    knowledge = _assembled(stack, stacked)
    if found := list(reference_problems(knowledge)):
        raise Refused(_with_line(stack.layers, problem) for problem in found)
    return knowledge


def _read(layer: Layer) -> _Reading:
    """Every record of one layer; what is wrong is noted."""
    reading = _Reading(layer)
    for document in layer.part("quantities"):
        topic = Path(document.file).stem
        _list(reading, document, "quantities", "quantities", partial(quantity_from, topic=topic))
    for document in layer.part("rules"):
        _rules(reading, document, layer.name)
    for document in layer.part("sources"):
        if reading.fits(document, "source"):
            reading.add("sources", source_from, document, ())
            _named_as_file(reading, document, "source")
    for document in layer.part("steels"):
        _steels(reading, document)
    for document in layer.part("consumables"):
        _list(reading, document, "consumables", "consumables", consumable_from)
    for document in layer.part("cases"):
        _list(reading, document, "cases", "cases", case_from)
    for document in layer.part(AMENDMENTS):
        if reading.fits(document, "amendments"):
            reading.amendments += amendments_from(document, layer.name)
    return reading


def _with_line(layers: Iterable[Layer], problem: Problem) -> Problem:
    """A problem found in the records, with the line it stands in."""
    if problem.line_text:
        return problem
    documents = (document for layer in layers for document in layer.files.values())
    document = next((found for found in documents if found.file == problem.place.file), None)
    return replace(problem, line_text=document.problem_at(problem.place, "").line_text) if document else problem


def _list(reading: _Reading, document: Document, kind: str, schema: str, make: Maker) -> None:
    if reading.fits(document, schema):
        for place in range(len(document.data[kind])):
            reading.add(kind, make, document, (kind, place))


def _steels(reading: _Reading, document: Document) -> None:
    """Grades and eras, or the method that makes sets of samples."""
    if isinstance(document.data, dict) and "sampling" in document.data:
        if reading.fits(document, "sampling"):
            reading.add("sampling", sampling_from, document, ("sampling",))
    elif reading.fits(document, "steels"):
        for kind, make in (("grades", grade_from), ("eras", era_from)):
            for place in range(len(document.data.get(kind, ()))):
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


def _assembled(stack: Layers, stacked: Stacked) -> Knowledge:
    ordered = {kind: dict(sorted(records.items())) for kind, records in stacked.records.items()}
    head = stack.head
    return Knowledge(
        title=head["title"],
        custodian=head["custodian"],
        release=str(head["release"]) if stack.release == "working" else stack.release,
        quantities=ordered["quantities"],
        rules=ordered["rules"],
        sources=ordered["sources"],
        grades=ordered["grades"],
        eras=ordered["eras"],
        consumables=ordered["consumables"],
        cases=tuple(ordered["cases"].values()),
        layers=tuple(layer.name for layer in stack.layers),
        amendments=stacked.amendments,
        beneath=stacked.beneath,
        frozen=stack.frozen,
        sampling=next(iter(ordered["sampling"].values()), None),
    )
