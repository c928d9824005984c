"""Read a project: its file, its CSV tables, its steels; every mistake with its place, all at once."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from weldbasis.knowledge import Knowledge
from weldbasis.problem import Place, Refused, nearest
from weldbasis.project.columns import JointRow, facts_from_rows, plain_facts
from weldbasis.project.concessions import plain_concessions, set_aside, with_concessions
from weldbasis.project.entries import Concession, JointEntry, Project
from weldbasis.project.joints import joint_fields, joint_row, read_defaults
from weldbasis.project.lists import certificate_list, weld_list
from weldbasis.project.members import member_fields
from weldbasis.project.pinned import project_document
from weldbasis.project.reading import Reading, Written
from weldbasis.project.steel_list import read_steels
from weldbasis.project.steels import steel_entry


def read_project(path: Path, knowledge: Knowledge) -> Project:
    """Read the project in a folder (or its project.yaml). Raises Refused with every problem."""
    document = project_document(path)
    folder = path if path.is_dir() else path.parent
    reading = Reading(knowledge, document, document.file, folder)
    data = document.data
    contract = _contract(reading, data.get("contract", []))
    certificates = certificate_list(reading, data["certificates"]["csv"]) if "certificates" in data else {}
    read_steels(reading, data.get("steels", {}), certificates)
    defaults = read_defaults(reading, reading.written("defaults", data=data.get("defaults", {})))
    rows = [row for joint in _joints(reading) if (row := joint_row(reading, joint, defaults, contract))]
    _refuse_twice(reading, rows)
    rows, concessions = with_concessions(reading, rows)
    if reading.problems:
        raise Refused(dict.fromkeys(reading.problems))
    return _project(reading, rows, contract, concessions)


def _refuse_twice(reading: Reading, rows: list[JointRow]) -> None:
    first: dict[str, Place] = {}
    for row in rows:
        if row.id in first:
            what = f"joint {row.id!r} stands here twice"
            reading.fault(row.place, what, f"first in {first[row.id]}", "give it another name")
        first.setdefault(row.id, row.place)


def _project(
    reading: Reading, rows: list[JointRow], contract: tuple[str, ...], concessions: tuple[Concession, ...]
) -> Project:
    data = reading.document.data
    entries = tuple(
        JointEntry(row.id, row.title, row.form, tuple(m.name for m in row.members), str(row.place), row.note)
        for row in rows
    )
    facts = replace(
        facts_from_rows(reading.knowledge, rows), set_aside=set_aside(concessions, [row.id for row in rows])
    )
    steels = {name: steel_entry(steel, reading.knowledge.quantities) for name, steel in reading.steels.items()}
    return Project(
        data["project"],
        data["title"],
        str(data["rules"]),
        contract,
        reading.folder,
        entries,
        steels,
        facts,
        lambda: _meaning(data, contract, rows, concessions),
        data.get("description", ""),
        concessions,
    )


def _meaning(
    data: Mapping[str, Any], contract: tuple[str, ...], rows: list[JointRow], concessions: tuple[Concession, ...]
) -> dict[str, Any]:
    """All inputs as plain data; a project that sets no finding aside says nothing of it."""
    aside = plain_concessions(concessions)
    return {
        "project": data["project"],
        "title": data["title"],
        "contract": list(contract),
        "rules": str(data["rules"]),
        "joints": plain_facts(rows),
        **({"set_aside": aside} if aside else {}),
    }


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


def _joints(reading: Reading) -> list[Written]:
    """Every joint with the places of its parts, from the file itself and from weld lists."""
    joints = reading.document.data["joints"]
    found: list[Written] = []
    for number, item in enumerate([joints] if isinstance(joints, dict) else joints):
        if set(item) == {"csv"}:
            fields = joint_fields(reading.knowledge), member_fields(reading.knowledge)
            found += weld_list(reading, str(item["csv"]), *fields)
        else:
            found.append(reading.written("joints", number, data=item))
    if not found and not reading.problems:
        reading.fault(reading.document.place("joints"), "there is no joint here", do="list at least one joint")
    return found
