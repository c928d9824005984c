"""The pages beside those of joints: home, projects, rules, steels, sources, vocabulary."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from weldbasis.formula import parse_formula, symbolic
from weldbasis.graph import Node, rule_node
from weldbasis.knowledge import Era, Grade, Knowledge, Quantity, Rule
from weldbasis.project import SteelEntry
from weldbasis.site.content import Content, Decided, file_names
from weldbasis.site.past import signed_joints
from weldbasis.site.pictures import neighbours
from weldbasis.site.render import page
from weldbasis.words import number_text, unit_text

ELEMENTS = ("C", "Si", "Mn", "P", "S", "Cr", "Mo", "Ni", "Cu", "V", "Nb", "Ti", "B", "Al", "N")
_SHORT = {
    "min_preheat": "preheat",
    "max_interpass": "interpass max",
    "hydrogen_class": "hydrogen",
    "pwht": "heat treatment",
    "hydrogen_release": "release",
    "peening": "peening",
    "inspection_delay": "wait",
    "z_quality": "Z",
    "procedure_test": "proof",
}


def home_body(content: Content) -> str:
    """The home page."""
    knowledge = content.knowledge
    return page(
        "home.html",
        projects=content.projects,
        beside=content.beside,
        back=content.back,
        rules=knowledge.rules,
        release=knowledge.release,
        digest=knowledge.digest,
    )


def project_body(content: Content, decided: Decided) -> str:
    """A project's page."""
    columns = [q for q in content.knowledge.decisions if not q.part_of]
    by_name = {trace.joint: trace for trace in decided.traces}
    rows = []
    for entry in decided.project.joints:
        trace = by_name[entry.id]
        decisions = {d.ref.quantity: d for d in trace.decisions}
        states = {decisions[q.id].state for q in columns}
        stopped = "stopped" if entry.id in decided.stopped else ""
        state = stopped or next((s for s in ("uncovered", "open") if s in states), "settled")
        rows.append(
            {"entry": entry, "decisions": decisions, "state": state, "parts": list(dict.fromkeys(entry.members[:-1]))}
        )
    holds = [(t.joint, f) for level in ("stop", "hold") for t in decided.traces for f in t.findings if f.level == level]
    steels = list(decided.project.steels.values())
    signed = signed_joints(decided)
    used = [e for e in ELEMENTS if any(e in steel.composition for steel in steels)]
    return page(
        "project.html",
        project=decided.project,
        columns=columns,
        short={q.id: _SHORT.get(q.id, "") for q in columns},
        rows=rows,
        holds=holds,
        sheets=sheet_files(content.knowledge),
        signed=signed,
        changes=bool(decided.impacts),
        files=decided.files,
        steels=steels,
        elements=used,
        composition=steel_cell,
        sampling=decided.evaluation.knowledge.sampling,
    )


def steel_cell(steel: SteelEntry, element: str) -> str:
    """A steel's content of an element as a range."""
    if element not in steel.composition:
        return ""
    low, high = steel.composition[element]
    places = 4 if element in ("B", "N") else 3
    one, other = number_text(low, places), number_text(high, places)
    return one if one == other else f"{one}–{other}"


def rules_body(content: Content) -> str:
    """The index of rules."""
    knowledge = content.knowledge
    rules = sorted(knowledge.rules.values(), key=lambda rule: (rule.topic, rule.id))
    cites: list[str] = [cite.checked for rule in rules for cite in rule.cites]
    marks = ", ".join(
        f"{cites.count(mark)} {words}"
        for mark, words in (
            ("seen", "seen in the source"),
            ("quoted", "seen quoted"),
            ("from-memory", "from memory"),
            ("derived", "derived"),
            ("common-practice", "common practice"),
        )
    )
    return page(
        "rules.html",
        rules=rules,
        topics=sorted({rule.topic for rule in rules}),
        title=knowledge.title,
        release=knowledge.release,
        digest=knowledge.digest,
        marks=f"Citations: {marks}.",
    )


@dataclass(frozen=True)
class ReadRow:
    """A name of a formula with its quantity and unit."""

    name: str
    quantity: Quantity
    unit: str


def rule_body(content: Content, rule: Rule, governed: Sequence[tuple[str, list[tuple[str, str]]]]) -> str:
    """A rule's page. `governed` lists, project by project, the joints it governs with their addresses."""
    knowledge, graph = content.knowledge, content.graph
    above = [_neighbour(content, node, up=True) for node in graph.reads(rule_node(rule.id))]
    below = [
        _neighbour(content, user, up=False) for given in graph.feeds(rule_node(rule.id)) for user in graph.feeds(given)
    ]
    reads = [
        ReadRow(r.name, knowledge.quantities[r.quantity], unit_text(r.unit or knowledge.quantities[r.quantity].unit))
        for r in rule.reads
    ]
    return page(
        "rule.html",
        rule=rule,
        gives=[knowledge.quantities[name] for name in rule.gives],
        reads=reads,
        formula=symbolic(parse_formula(rule.body["formula"])) if rule.kind == "formula" else "",
        table=_table(rule) if rule.kind == "table" else None,
        words=_words(rule),
        conditions=_conditions(content, rule),
        directions=_directions(content, rule),
        sources=knowledge.sources,
        picture=neighbours(rule.title, above[:14], below[:14]),
        above=above,
        below=list(dict.fromkeys(below)),
        governed=governed,
        cases=[case for case in knowledge.cases if case.rule == rule.id],
    )


def _neighbour(content: Content, node: Node, up: bool) -> tuple[str, str]:
    if node.sort == "rule":
        return content.knowledge.rules[node.id].title, f"{node.id}.html"
    giver = content.graph.giving.get(node.id)
    title = content.knowledge.quantities[node.id].title
    return title, f"{giver}.html" if giver and up else f"../vocabulary/index.html#{node.id}"


def _table(rule: Rule) -> dict[str, Any]:
    columns = [read.name for read in rule.reads]
    rows = []
    for row in rule.body["rows"]:
        give = row["give"]
        given = (
            "; ".join(f"{name} {_cell(v)}" for name, v in give.items()) if isinstance(give, Mapping) else _cell(give)
        )
        rows.append(
            {
                "cells": [_cell(row.get("when", {}).get(name, "any")) for name in columns],
                "give": given,
                "checked": row.get("checked", ""),
                "note": row.get("note", ""),
            }
        )
    return {"columns": columns, "rows": rows, "read_as": str(rule.body["read_as"]).replace("-", " ")}


def _cell(value: Any) -> str:
    return " or ".join(map(str, value)) if isinstance(value, list | tuple) else str(value)


def _words(rule: Rule) -> str:
    body = rule.body
    if rule.kind == "gather":
        where = f" where {_mapping_words(body['where'])}" if "where" in body else ""
        missing = (
            "a member without a value is passed over"
            if body.get("if_missing") == "skip"
            else ("a member without a value withholds the result")
        )
        return f"Takes the {body['take']} {body['of']} of the members{where}; {missing}."
    if rule.kind == "governing":
        names = [
            c if isinstance(c, str) else c["quantity"] + (f" (when {_mapping_words(c['when'])})" if "when" in c else "")
            for c in body["candidates"]
        ]
        return f"Takes the {body['take']} of: {', '.join(names)}."
    if rule.kind == "model":
        constants = ", ".join(f"{name} = {value:g}" for name, value in body.get("constants", {}).items())
        return f"Model {body['model']} with {constants}."
    if rule.kind == "limit":
        demand = f"It must hold that {body['must_hold']}; otherwise" if "must_hold" in body else "Wherever it applies,"
        return f"{demand} a finding of level {body['level']} is raised."
    return ""


def _mapping_words(condition: Mapping[str, Any]) -> str:
    words = []
    for name, wanted in condition.items():
        if name == "any_of":
            words.append("(" + " or ".join(_mapping_words(part) for part in wanted) + ")")
        else:
            words.append(f"{name} is {_cell(wanted)}")
    return " and ".join(words)


def _conditions(content: Content, rule: Rule) -> list[str]:
    found = []
    for head, condition in (("Applies when", rule.applies_when), ("Valid within", rule.valid_within)):
        for name, wanted in condition.items():
            if name == "any_of":
                found.append(f"{head}: any of " + "; ".join(_mapping_words(part) for part in wanted))
            else:
                quantity = content.knowledge.quantities[name]
                found.append(f"{head}: {quantity.title} {_cell(wanted)} {unit_text(quantity.unit)}".rstrip())
    return found


def _directions(content: Content, rule: Rule) -> str:
    words = {"up": "rises", "down": "falls", "either": "may rise or fall"}
    parts = [
        f"{words[way]} with {content.knowledge.quantities[name].title.lower()}" for name, way in rule.direction.items()
    ]
    return f"The result {', '.join(parts)}." if parts else ""


def steels_body(content: Content) -> str:
    """The index of steels."""
    standards = [
        {"title": title, "file": file, "names": [grade.designation for grade in grades]}
        for title, file, grades in standards_of(content)
    ]
    eras = list(content.knowledge.eras.values())
    used = [e for e in ELEMENTS if any(e in era.typical or e in era.ceilings for era in eras)]
    return page(
        "steels.html",
        standards=standards,
        eras=eras,
        elements=used,
        era_cell=era_cell,
        sheets=sheet_files(content.knowledge),
        count=len(content.knowledge.grades),
        sampling=content.knowledge.sampling,
    )


def era_cell(era: Era, element: str) -> str:
    """An era's typical range of an element and, after a bar, its ceiling."""
    typical = f"{era.typical[element].low:g}–{era.typical[element].high:g}" if element in era.typical else ""
    ceiling = f" | {era.ceilings[element]:g}" if element in era.ceilings else ""
    return typical + ceiling


def standards_of(content: Content) -> list[tuple[str, str, list[Grade]]]:
    """Standards with the file of their page and their grades; a file of the knowledge base is one standard."""
    found: dict[str, list[Grade]] = {}
    for grade in content.knowledge.grades.values():
        found.setdefault(grade.cites[0].source, []).append(grade)
    titles = {source: content.knowledge.sources[source].title.split(":")[0] for source in found}
    return [(titles[source], f"{source}.html", grades) for source, grades in sorted(found.items())]


def sheet_files(knowledge: Knowledge) -> dict[str, str]:
    """The file of every steel's sheet by the id of its grade or envelope."""
    ids = [*knowledge.grades, *knowledge.eras]
    return dict(zip(ids, file_names([f"sheet {name}" for name in ids]).values(), strict=True))


def standard_body(title: str, grades: Sequence[Grade], sheets: Mapping[str, str]) -> str:
    """The grades of one standard, each with a link to its sheet."""
    used = [e for e in ELEMENTS if any(e in band.composition for grade in grades for band in grade.bands)]
    return page("standard.html", title=title, grades=grades, elements=used, sheets=sheets)


def sources_body(content: Content) -> str:
    """All sources with the rules that rest on them."""
    knowledge = content.knowledge
    used: dict[str, list[str]] = {name: [] for name in knowledge.sources}
    for rule in knowledge.rules.values():
        for source in dict.fromkeys(cite.source for cite in rule.cites):
            used[source].append(rule.id)
    return page("sources.html", sources=list(knowledge.sources.values()), used=used)


def vocabulary_body(content: Content) -> str:
    """All quantities by topic."""
    topics: dict[str, list[Quantity]] = {}
    for quantity in content.knowledge.quantities.values():
        topics.setdefault(quantity.topic, []).append(quantity)
    return page("vocabulary.html", topics=sorted(topics.items()), giving=content.graph.giving, unit=unit_text)
