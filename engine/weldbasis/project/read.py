"""Read a project: its file, its CSV tables, its steels; every mistake with its place, all at once."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from weldbasis.facts import Origin
from weldbasis.knowledge import Consumable, Knowledge, Quantity
from weldbasis.load.schema import schema_problems
from weldbasis.load.yaml_text import Document, read_yaml
from weldbasis.problem import Place, Problem, Refused, nearest
from weldbasis.project.columns import JointRow, MemberRow, facts_from_rows, plain_facts
from weldbasis.project.csv_tables import certificate_from, joint_from, read_rows
from weldbasis.project.entries import JointEntry, Project
from weldbasis.project.grades import NoSuchGrade, find_grade
from weldbasis.project.steels import Fact, Steel, member_facts, steel_entry, weld_metal_facts
from weldbasis.ranges import Range
from weldbasis.units import read_number

_JOINT_WORDS = frozenset({"joint", "title", "members", "note", "assumptions", "consumable", "weld_metal", "form"})


@dataclass
class _Reading:
    """A project file being read."""

    knowledge: Knowledge
    document: Document
    shown: str
    folder: Path
    problems: list[Problem] = field(default_factory=list)
    steels: dict[str, Steel] = field(default_factory=dict)

    def fault(self, place: Place, what: str, why: str = "", do: str = "") -> None:
        """Note a problem; its line is shown where it stands in the project file."""
        inside = place.file == self.document.file
        self.problems.append(
            self.document.problem_at(place, what, why, do) if inside else Problem(place, what, why, do)
        )


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
    reading = _Reading(knowledge, document, shown, file.parent)
    data = document.data
    contract = _contract(reading, data.get("contract", []))
    certificates = _certificates(reading, data)
    _steels(reading, data.get("steels", {}), certificates)
    written = _joint_list(reading, data)
    rows = [
        row for place, joint in written if (row := _joint(reading, joint, place, data.get("defaults", {}), contract))
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


def _project(reading: _Reading, rows: list[JointRow], contract: tuple[str, ...]) -> Project:
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


def _contract(reading: _Reading, names: list[str]) -> tuple[str, ...]:
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


def _certificates(reading: _Reading, data: Mapping[str, Any]) -> dict[str, dict[str, Any]]:
    if "certificates" not in data:
        return {}
    name = data["certificates"]["csv"]
    try:
        return dict(certificate_from(row) for row in read_rows(reading.folder / name, _shown(reading.folder / name)))
    except Refused as refused:
        reading.problems += refused.problems
        return {}


def _steels(reading: _Reading, written: Mapping[str, Any], certificates: Mapping[str, dict[str, Any]]) -> None:
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


def _joint_list(reading: _Reading, data: Mapping[str, Any]) -> list[tuple[Place, dict[str, Any]]]:
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


def _joint(
    reading: _Reading, written: Mapping[str, Any], place: Place, defaults: Mapping[str, Any], contract: tuple[str, ...]
) -> JointRow | None:
    name = str(written.get("joint", ""))
    if not name:
        reading.fault(place, "a joint has no name", do="add joint: J1")
        return None
    fields = {**defaults, **written}
    facts = _joint_facts(reading, name, written, fields, place)
    for quantity in reading.knowledge.quantities:
        if quantity.startswith("contract_") and quantity not in facts:
            bound = quantity.removeprefix("contract_").replace("_", "-") in contract
            facts[quantity] = Fact(
                ("yes",) if bound else ("no",), Origin("project", "the project's contract list", str(place))
            )
    consumable = _consumable(reading, fields, place)
    if consumable:
        origin = Origin("consumable", f"classification {consumable.id}", str(place))
        if consumable.hydrogen_max is not None:
            facts.setdefault(
                "consumable_hydrogen_max", Fact(Range(consumable.hydrogen_max, consumable.hydrogen_max), origin)
            )
        facts.setdefault("covering", Fact((consumable.covering,), origin))
    members = _members(reading, name, fields.get("members", []), place, consumable, fields.get("weld_metal", {}))
    form = str(fields.get("form", ""))
    return JointRow(name, str(fields.get("title", "")), form, str(fields.get("note", "")), place, facts, members)


def _consumable(reading: _Reading, fields: Mapping[str, Any], place: Place) -> Consumable | None:
    name = fields.get("consumable")
    if name is None:
        return None
    found = reading.knowledge.consumables.get(str(name))
    if found is None:
        reading.fault(
            place,
            f"{name!r} is no consumable classification known here",
            do=nearest(str(name), reading.knowledge.consumables),
        )
    return found


def _joint_facts(
    reading: _Reading, name: str, written: Mapping[str, Any], fields: Mapping[str, Any], place: Place
) -> dict[str, Fact]:
    reasons = {**fields.get("assumptions", {})}
    found: dict[str, Fact] = {}
    for key, said in fields.items():
        value = said
        if key in _JOINT_WORDS and key != "form":
            continue
        at = place if key not in written or place.file != reading.document.file else _inner(reading, place, key)
        quantity = reading.knowledge.quantities.get(key)
        if quantity is None or quantity.of != "joint" or quantity.given == "never":
            known = [q.id for q in reading.knowledge.quantities.values() if q.of == "joint" and q.given != "never"]
            why = "each member has it, not the joint" if quantity and quantity.of == "member" else ""
            why = "it is worked out, never given" if quantity and quantity.given == "never" else why
            reading.fault(
                at, f"joint {name}: {key!r} is no field of a joint", why, nearest(key, [*known, *sorted(_JOINT_WORDS)])
            )
            continue
        origin = (
            Origin("project", f"project, joint {name}", str(at))
            if key in written
            else Origin("default", "default of the project", reading.shown)
        )
        if isinstance(value, dict):
            reasons[key] = value.get("because", "")
            value = value.get("value")
        if reasons.get(key):
            origin = Origin("assumption", f"assumed: {reasons[key]}", str(at))
        fact = _fact(reading, quantity, value, origin, at, f"joint {name}", key in reasons)
        if fact:
            found[key] = fact
    for quantity in reading.knowledge.quantities.values():
        if quantity.of == "joint" and quantity.given == "must" and quantity.id not in fields:
            reading.fault(place, f"joint {name} says nothing of {quantity.id}", quantity.says, f"add {quantity.id}: …")
    return found


def _inner(reading: _Reading, place: Place, key: str) -> Place:
    for path, at in reading.document.places.items():
        if len(path) == 3 and path[0] == "joints" and path[2] == key and reading.document.place(*path[:2]) == place:
            return at
    return place


def _fact(
    reading: _Reading, quantity: Quantity, value: Any, origin: Origin, place: Place, whose: str, assumed: bool
) -> Fact | None:
    """A written value as a fact, or None with the problem noted."""
    try:
        if quantity.is_number:
            if isinstance(value, list):
                raise ValueError("a number or a range 'a to b' is wanted, not a list")
            number = read_number(value, quantity.unit)
            if number.low < quantity.range.low or number.high > quantity.range.high:
                raise ValueError(
                    f"{value!r} lies outside what {quantity.id} can be, {quantity.range} {quantity.unit}".rstrip()
                )
            return Fact(number, origin, assumed)
        levels = [str(level) for level in value] if isinstance(value, list) else [str(value)]
        for level in levels:
            if level not in quantity.order:
                raise ValueError(f"{level!r} is no level of {quantity.id}. {nearest(level, quantity.order)}")
        return Fact(tuple(levels), origin, assumed)
    except ValueError as fault:
        reading.fault(place, f"{whose}, {quantity.id}: {fault}")
        return None


def _members(
    reading: _Reading,
    joint: str,
    written: Any,
    place: Place,
    consumable: Consumable | None,
    weld_metal: Mapping[str, Any],
) -> tuple[MemberRow, ...]:
    if not isinstance(written, list) or not written:
        reading.fault(
            place,
            f"joint {joint} has no members",
            "a joint is made of two or more parts",
            "add members: [{steel: …, thickness: …}, …]",
        )
        return ()
    rows = [
        row for number, part in enumerate(written, start=1) if (row := _member(reading, joint, number, part, place))
    ]
    project = Origin("project", f"project, joint {joint}", str(place))
    try:
        facts = weld_metal_facts(weld_metal, consumable, str(place))
    except ValueError as fault:
        reading.fault(place, f"joint {joint}, weld metal: {fault}")
        facts = {}
    facts["member_role"] = Fact(("weld-metal",), project)
    facts["member_number"] = Fact(Range(len(written) + 1.0, len(written) + 1.0), project)
    return (*rows, MemberRow("weld metal", facts, weld_metal=True))


def _member(reading: _Reading, joint: str, number: int, part: Any, place: Place) -> MemberRow | None:
    whose = f"joint {joint}, member {number}"
    if not isinstance(part, dict) or "steel" not in part or "thickness" not in part:
        reading.fault(place, f"{whose} needs a steel and a thickness", do="write {steel: plate, thickness: 20 mm}")
        return None
    name = str(part["steel"])
    if name not in reading.steels:
        reading.fault(place, f"{whose}: {name!r} is no steel of this project", do=nearest(name, reading.steels))
        return None
    origin = Origin("project", f"project, {whose}", str(place))
    own: dict[str, Fact] = {}
    for key, value in part.items():
        if key == "steel":
            continue
        quantity = reading.knowledge.quantities.get("member_thickness" if key == "thickness" else str(key))
        if quantity is None or quantity.of != "member":
            known = [q.id for q in reading.knowledge.quantities.values() if q.of == "member" and q.given != "never"]
            reading.fault(
                place, f"{whose}: {key!r} is no field of a member", do=nearest(key, ["steel", "thickness", *known])
            )
            continue
        fact = _fact(reading, quantity, value, origin, place, whose, False)
        if fact:
            own[quantity.id] = fact
    thickness = own.get("member_thickness")
    if thickness is None or not isinstance(thickness.value, Range):
        return None
    try:
        facts = member_facts(reading.steels[name], thickness.value) | own
    except ValueError:  # what cannot be read in the steel's own entry was noted there
        return None
    facts["member_role"] = Fact(("parent",), origin)
    facts["member_number"] = Fact(Range(float(number), float(number)), origin)
    return MemberRow(name, facts)
