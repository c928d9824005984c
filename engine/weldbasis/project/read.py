"""Read a project: its file, its CSV tables, its steels; every mistake with its place, all at once."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from weldbasis.knowledge import Knowledge
from weldbasis.load.schema import schema_problems
from weldbasis.load.yaml_text import read_yaml
from weldbasis.problem import Place, Problem, Refused, nearest
from weldbasis.project.columns import JointRow, facts_from_rows, plain_facts
from weldbasis.project.csv_tables import certificate_from, joint_from, read_rows
from weldbasis.project.entries import JointEntry, Project
from weldbasis.project.grades import NoSuchGrade, find_grade
from weldbasis.project.joints import joint_row
from weldbasis.project.reading import Reading
from weldbasis.project.steels import Steel, member_facts, steel_entry
from weldbasis.ranges import Range


def read_project(path: Path, knowledge: Knowledge) -> Project:
    """Read the project in a folder (or its project.yaml). Raises Refused with every problem."""
    file = path / "project.yaml" if path.is_dir() else path
    if not file.exists():
        raise Refused(
            [
                Problem(
                    Place(str(file)),
                    "there is no such file",
                    "a project is a folder with a project.yaml",
                    f"make one with: weldbasis start {path}",
                )
            ]
        )
    shown = _shown(file)
    document = read_yaml(file, shown)
    if problems := schema_problems(document, "project"):
        raise Refused(problems)
    reading = Reading(knowledge, document, shown, file.parent)
    data = document.data
    contract = _contract(reading, data.get("contract", []))
    certificates = _certificates(reading, data)
    _steels(reading, data.get("steels", {}), certificates)
    written = _joint_list(reading, data)
    rows = [
        row for place, joint in written if (row := joint_row(reading, joint, place, data.get("defaults", {}), contract))
    ]
    names: dict[str, Place] = {}
    for row in rows:
        if row.id in names:
            reading.fault(
                row.place, f"joint {row.id!r} stands here twice", f"first in {names[row.id]}", "give it another name"
            )
        names.setdefault(row.id, row.place)
    if reading.problems:
        raise Refused(reading.problems)
    return _project(reading, rows, contract)


def _shown(path: Path) -> str:
    try:
        return str(path.resolve().relative_to(Path.cwd()))
    except ValueError:
        return str(path)


def _project(reading: Reading, rows: list[JointRow], contract: tuple[str, ...]) -> Project:
    data = reading.document.data
    entries = tuple(
        JointEntry(row.id, row.title, row.form, tuple(m.name for m in row.members), str(row.place), row.note)
        for row in rows
    )
    facts = facts_from_rows(reading.knowledge, rows)
    meaning = {
        "project": data["project"],
        "title": data["title"],
        "contract": list(contract),
        "rules": str(data["rules"]),
        "joints": plain_facts(rows),
    }
    steels = {name: steel_entry(steel) for name, steel in reading.steels.items()}
    return Project(
        data["project"],
        data["title"],
        str(data["rules"]),
        contract,
        reading.folder,
        entries,
        steels,
        facts,
        meaning,
        data.get("description", ""),
    )


def _contract(reading: Reading, names: list[str]) -> tuple[str, ...]:
    known = [
        q.removeprefix("contract_").replace("_", "-") for q in reading.knowledge.quantities if q.startswith("contract_")
    ]
    for place, name in enumerate(names):
        if name not in known:
            reading.fault(
                reading.document.place("contract", place),
                f"{name!r} is no requirement set known here",
                do=nearest(name, known),
            )
    return tuple(name for name in names if name in known)


def _certificates(reading: Reading, data: Mapping[str, Any]) -> dict[str, dict[str, Any]]:
    if "certificates" not in data:
        return {}
    name = data["certificates"]["csv"]
    try:
        return dict(certificate_from(row) for row in read_rows(reading.folder / name, _shown(reading.folder / name)))
    except Refused as refused:
        reading.problems += refused.problems
        return {}


def _steels(reading: Reading, written: Mapping[str, Any], certificates: Mapping[str, dict[str, Any]]) -> None:
    for name, said in written.items():
        entry = said
        place = reading.document.place("steels", name)
        if "certificate" in entry:
            number = str(entry["certificate"])
            if number not in certificates:
                reading.fault(
                    reading.document.place("steels", name, "certificate"),
                    f"certificate {number!r} is not in the list",
                    do=nearest(number, certificates),
                )
            paper = certificates.get(number, {})
            entry = _with_paper(entry, paper)
        if not any(key in entry for key in ("composition", "samples", "grade", "era")):
            reading.fault(
                place,
                f"nothing is said of steel {name!r}",
                "a steel needs a composition, samples, a grade or an era",
                "say what is known; for undocumented steel name its era",
            )
        grade = era = None
        if "grade" in entry:
            try:
                grade = find_grade(str(entry["grade"]), reading.knowledge)
            except NoSuchGrade as fault:
                reading.fault(reading.document.place("steels", name, "grade"), str(fault))
        if "era" in entry:
            era = reading.knowledge.eras.get(str(entry["era"]))
            if era is None:
                reading.fault(
                    reading.document.place("steels", name, "era"),
                    f"{entry['era']!r} is no era known here",
                    do=nearest(str(entry["era"]), reading.knowledge.eras),
                )
        reading.steels[name] = Steel(name, entry, grade, era, f"{place.file}:{place.line}")
        try:
            member_facts(reading.steels[name], Range(0.0, float("inf")))
        except ValueError as fault:
            reading.fault(place, f"steel {name!r}: {fault}")


def _with_paper(entry: Mapping[str, Any], paper: Mapping[str, Any]) -> dict[str, Any]:
    """What a project says of a steel on top of what its certificate says."""
    return {
        **paper,
        **entry,
        "origin": {**paper.get("origin", {}), **entry.get("origin", {})},
        "composition": {**paper.get("composition", {}), **entry.get("composition", {})},
    }


def _joint_list(reading: Reading, data: Mapping[str, Any]) -> list[tuple[Place, dict[str, Any]]]:
    """Every joint with its place, from the file itself and from weld lists."""
    joints = data["joints"]
    items: list[Any] = [joints] if isinstance(joints, dict) else joints
    found: list[tuple[Place, dict[str, Any]]] = []
    for number, item in enumerate(items):
        place = (
            reading.document.place("joints") if isinstance(joints, dict) else reading.document.place("joints", number)
        )
        if set(item) == {"csv"}:
            try:
                rows = read_rows(reading.folder / item["csv"], _shown(reading.folder / item["csv"]))
            except Refused as refused:
                reading.problems += refused.problems
                continue
            found += [(row.place(), joint_from(row)) for row in rows]
        else:
            found.append((place, item))
    if not found and not reading.problems:
        reading.fault(reading.document.place("joints"), "there is no joint here", do="list at least one joint")
    return found
